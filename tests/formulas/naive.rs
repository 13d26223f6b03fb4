//! A second, simple-minded evaluator: a tree, one point, one row at a time, the system's functions. It shares no
//! line with the library, and it carries a bound of its own rounding errors along.

use crate::world::{FLOW, LEVEL, MEMBERS};

/// A formula. Columns run over the five rows of readings.csv.
#[derive(Debug, Clone)]
pub(crate) enum Tree {
    Number(f64),
    /// Input `i`: x, y, or a member of effect.
    Input(usize),
    Flow,
    Level,
    EffectOfStation,
    One(&'static str, Box<Tree>),
    Two(&'static str, Box<Tree>, Box<Tree>),
    /// `if(a < b, c, d)`, with `<` as named.
    If(&'static str, [Box<Tree>; 4]),
    /// A reduction of a column.
    All(&'static str, Box<Tree>),
    Lag(Box<Tree>, Box<Tree>),
}

/// A value with a bound of its error, in units of the rounding error 2^-53.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Bounded {
    pub(crate) value: f64,
    pub(crate) error: f64,
}

/// No comparison: an argument is too close to an edge, or a number too large, to say what should come out.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Unsure;

/// What was decided on the way: signs, whole parts, branches, extremes. Between two points that decide alike the
/// value is smooth.
pub(crate) type Decisions = Vec<i64>;

const UNIT: f64 = f64::EPSILON / 2.0;

/// The function, its derivative, and its own error in roundings (those of the library and of the system together).
fn one(name: &str, x: f64) -> (f64, f64, f64) {
    match name {
        "-" => (-x, 1.0, 0.0),
        "exp" => (x.exp(), x.exp(), 6.0),
        "log" => (x.ln(), 1.0 / x, 6.0),
        "sqrt" => (x.sqrt(), 0.5 / x.sqrt(), 1.0),
        "abs" => (x.abs(), 1.0, 0.0),
        "sin" => (x.sin(), x.cos(), 4.0),
        "cos" => (x.cos(), x.sin(), 4.0),
        "tanh" => (x.tanh(), 1.0 - x.tanh().powi(2), 6.0),
        "atan" => (x.atan(), 1.0 / (1.0 + x * x), 4.0),
        "log1p" => (x.ln_1p(), 1.0 / (1.0 + x), 6.0),
        "expm1" => (x.exp_m1(), x.exp(), 6.0),
        "logistic" => (1.0 / (1.0 + (-x).exp()), 0.25, 10.0),
        "^2" => (x * x, 2.0 * x, 2.0),
        "^3" => (x * x * x, 3.0 * x * x, 4.0),
        "^-2" => (1.0 / (x * x), 2.0 / (x * x * x), 6.0),
        "floor" => (x.floor(), 0.0, 0.0),
        other => panic!("no function {other}"),
    }
}

impl Tree {
    /// Whether it is a number for every row.
    pub(crate) fn is_column(&self) -> bool {
        match self {
            Tree::Number(_) | Tree::Input(_) | Tree::All(..) => false,
            Tree::Flow | Tree::Level | Tree::EffectOfStation | Tree::Lag(..) => true,
            Tree::One(_, a) => a.is_column(),
            Tree::Two(_, a, b) => a.is_column() || b.is_column(),
            Tree::If(_, parts) => parts.iter().any(|part| part.is_column()),
        }
    }

    /// As one writes it, with brackets wherever they could matter.
    pub(crate) fn text(&self) -> String {
        match self {
            Tree::Number(value) => format!("{value:?}"),
            Tree::Input(i) => ["x", "y", "effect['Alder']", "effect[2]", "effect['Cedar']"][*i].to_string(),
            Tree::Flow => "flow".into(),
            Tree::Level => "level".into(),
            Tree::EffectOfStation => "effect[station]".into(),
            Tree::One("-", a) => format!("(-{})", a.text()),
            Tree::One(name, a) if name.starts_with('^') => format!("(({}){name})", a.text()),
            Tree::One(name, a) => format!("{name}({})", a.text()),
            Tree::Two(name, a, b) if name.chars().all(char::is_alphanumeric) => {
                format!("{name}({}, {})", a.text(), b.text())
            }
            Tree::Two(name, a, b) => format!("({} {name} {})", a.text(), b.text()),
            Tree::If(compare, [a, b, c, d]) => {
                format!("if({} {compare} {}, {}, {})", a.text(), b.text(), c.text(), d.text())
            }
            Tree::All(name, a) => format!("{name}({})", a.text()),
            Tree::Lag(a, first) => format!("lag({}, {})", a.text(), first.text()),
        }
    }

    /// The value at `inputs` in row `row`, with a running error bound (Wilkinson's manner: errors of the arguments
    /// times slopes, plus the operation's own).
    pub(crate) fn value(&self, inputs: &[f64], row: usize, made: &mut Decisions) -> Result<Bounded, Unsure> {
        let exact = |value: f64| Bounded { value, error: 0.0 };
        let bounded = match self {
            Tree::Number(value) => exact(*value),
            Tree::Input(i) => exact(inputs[*i]),
            Tree::Flow => exact(FLOW[row]),
            Tree::Level => exact(LEVEL[row]),
            Tree::EffectOfStation => exact(inputs[2 + MEMBERS[row]]),
            Tree::One(name, a) => {
                let a = a.value(inputs, row, made)?;
                let (value, slope, own) = one(name, a.value);
                let edge = match *name {
                    "floor" => (a.value - a.value.round()).abs(),
                    "abs" | "sqrt" | "log" | "^-2" => a.value.abs(),
                    "log1p" => (1.0 + a.value).abs(),
                    _ => f64::INFINITY,
                };
                far(edge, a.error)?;
                match *name {
                    "floor" => made.push(value as i64),
                    "abs" => made.push(i64::from(a.value > 0.0)),
                    _ => {}
                }
                Bounded { value, error: a.error * slope.abs() + own * value.abs() }
            }
            Tree::Two(name, a, b) => two(name, a.value(inputs, row, made)?, b.value(inputs, row, made)?, made)?,
            Tree::If(compare, [a, b, c, d]) => {
                let (a, b) = (a.value(inputs, row, made)?, b.value(inputs, row, made)?);
                far((a.value - b.value).abs(), a.error + b.error)?;
                let holds = match *compare {
                    "<" => a.value < b.value,
                    "<=" => a.value <= b.value,
                    ">" => a.value > b.value,
                    _ => a.value >= b.value,
                };
                made.push(i64::from(holds));
                // The other branch is not even looked at.
                if holds { c.value(inputs, row, made)? } else { d.value(inputs, row, made)? }
            }
            Tree::All(name, a) => all(name, inputs, a, made)?,
            Tree::Lag(a, first) => {
                if row == 0 {
                    first.value(inputs, 0, made)?
                } else {
                    a.value(inputs, row - 1, made)?
                }
            }
        };
        if bounded.value.abs() < 1e8 && bounded.error < 1e10 { Ok(bounded) } else { Err(Unsure) }
    }
}

/// An edge must be well beyond the error.
fn far(distance: f64, error: f64) -> Result<(), Unsure> {
    if distance > 1e-3 + 4.0 * error * UNIT { Ok(()) } else { Err(Unsure) }
}

fn two(name: &str, a: Bounded, b: Bounded, made: &mut Decisions) -> Result<Bounded, Unsure> {
    let (x, y) = (a.value, b.value);
    let bound = |value: f64, by_x: f64, by_y: f64, own: f64| Bounded {
        value,
        error: a.error * by_x.abs() + b.error * by_y.abs() + own * value.abs(),
    };
    Ok(match name {
        "+" => bound(x + y, 1.0, 1.0, 1.0),
        "-" => bound(x - y, 1.0, 1.0, 1.0),
        "*" => bound(x * y, y, x, 1.0),
        "/" => {
            far(y.abs(), b.error)?;
            bound(x / y, 1.0 / y, x / (y * y), 1.0)
        }
        "^" => {
            // Below zero only whole exponents are defined, and no slope in the exponent is.
            far(x, a.error)?;
            bound(x.powf(y), y * x.powf(y - 1.0), x.powf(y) * x.abs().ln(), 4.0)
        }
        "min" | "max" => {
            far((x - y).abs(), a.error + b.error)?;
            made.push(i64::from(x < y));
            bound(if name == "min" { x.min(y) } else { x.max(y) }, 1.0, 1.0, 0.0)
        }
        "hypot" => bound(x.hypot(y), 1.0, 1.0, 4.0),
        "logsumexp" => {
            let high = x.max(y);
            let sum = high + ((x - high).exp() + (y - high).exp()).ln();
            Bounded { error: a.error + b.error + 8.0 * (1.0 + high.abs()), ..bound(sum, 1.0, 1.0, 0.0) }
        }
        other => panic!("no operator {other}"),
    })
}

fn all(name: &str, inputs: &[f64], of: &Tree, made: &mut Decisions) -> Result<Bounded, Unsure> {
    let rows: Vec<Bounded> = (0..FLOW.len()).map(|row| of.value(inputs, row, made)).collect::<Result<_, _>>()?;
    let n = rows.len() as f64;
    let errors: f64 = rows.iter().map(|row| row.error).sum();
    let sizes: f64 = rows.iter().map(|row| row.value.abs()).sum();
    let sum: f64 = rows.iter().map(|row| row.value).sum();
    let values = || rows.iter().map(|row| row.value);
    Ok(match name {
        "sum" => Bounded { value: sum, error: errors + 2.0 * n * sizes },
        "mean" => Bounded { value: sum / n, error: (errors + 2.0 * n * sizes) / n },
        "min" | "max" => {
            let extreme = if name == "min" {
                values().fold(f64::INFINITY, f64::min)
            } else {
                values().fold(f64::NEG_INFINITY, f64::max)
            };
            // The second best must be clearly second, unless both are the very same number.
            for value in values().filter(|&value| value != extreme) {
                far((value - extreme).abs(), errors)?;
            }
            if values().filter(|&value| value == extreme).count() > 1 {
                return Err(Unsure);
            }
            made.extend(values().position(|value| value == extreme).map(|row| row as i64));
            Bounded { value: extreme, error: errors }
        }
        "logsumexp" => {
            let high = values().fold(f64::NEG_INFINITY, f64::max);
            let sum: f64 = values().map(|value| (value - high).exp()).sum();
            Bounded { value: high + sum.ln(), error: errors + 10.0 * n * (1.0 + high.abs()) }
        }
        other => panic!("no reduction {other}"),
    })
}
