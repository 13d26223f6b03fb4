//! What functions make of their arguments.

use std::ops::Range;

use super::errors::nearest;
use super::functions::{Body, FOREIGN_FUNCTIONS, FUNCTIONS, Function, Reduce, function, written};
use super::kinds::{Binary, Id, Reduction, Unary};
use super::lexer::Fault;
use super::lower::{Checked, Lowering, Nature, Value, condition, number};
use super::operations::Operations;
use super::parser::{Place, Syntax};
use super::scope::Entity;

impl Lowering<'_> {
    pub(super) fn call(
        &mut self,
        syntax: &Syntax,
        name: &str,
        name_span: &Range<usize>,
        arguments: &[Place],
        span: &Range<usize>,
    ) -> Option<Value> {
        let Some(function) = function(name) else {
            let meant = self.unknown_function(name, name_span)?;
            return self.shape(arguments, meant);
        };
        let n = function.arguments.len();
        let fits = match function.body {
            Body::Chain(..) => !arguments.is_empty(),
            _ => arguments.len() == n,
        };
        if !fits {
            let wants =
                if matches!(function.body, Body::Chain(..)) { "at least one".to_string() } else { n.to_string() };
            let noun = if wants == "1" || wants == "at least one" { "argument" } else { "arguments" };
            let message = format!("`{name}` takes {wants} {noun}, not {}", arguments.len());
            let help = match (name, arguments) {
                ("log", [_, base]) => {
                    let base = self.slice(&syntax.nodes[*base].1);
                    format!(
                        "write log(x)/log({base}) for the base {base}; log(x) is the natural one, log10(x) that of base 10"
                    )
                }
                _ => format!("write {}", written(function)),
            };
            self.faults.push(Fault::new(span.clone(), message).help(help));
            return self.shape(arguments, function.body);
        }
        match function.body {
            Body::If => self.choose(syntax, arguments),
            Body::Lag => self.lag(syntax, arguments),
            Body::Present => self.present(syntax, arguments[0]),
            Body::Reduce(reduce) => self.reduce(syntax, name, reduce, arguments[0]),
            Body::Chain(_, reduce) if arguments.len() == 1 => self.reduce(syntax, name, reduce, arguments[0]),
            Body::Unary(_) | Body::Binary(_) | Body::Build(_) | Body::Chain(..) => {
                // All arguments are looked at before the first mistake ends it.
                let checked: Vec<_> = arguments.iter().map(|&place| self.number_at(syntax, place)).collect();
                if checked.iter().any(Option::is_none) {
                    return self.shape(arguments, function.body);
                }
                let checked: Vec<Checked> = checked.into_iter().flatten().collect();
                let parts: Vec<_> = arguments.iter().zip(&checked).map(|(&place, &(_, rows))| (place, rows)).collect();
                let rows = self.common_rows(syntax, &parts)?;
                let ids: Vec<Id> = checked.iter().map(|&(id, _)| id).collect();
                Some(number(apply(function.body, &mut self.operations, &ids), rows))
            }
        }
    }

    /// A stand-in for what a call would give: a column over what its arguments run over, or a number.
    ///
    /// With it what is wrong around a wrong call is told as well.
    fn shape(&mut self, arguments: &[Place], body: Body) -> Option<Value> {
        let one = self.operations.constant(1.0);
        let mut whole = (one, None);
        let mut unknown = false;
        for &place in arguments {
            match self.values[place] {
                Value::Plain { id, rows, .. } if whole.1.is_none() => whole = (id, rows),
                Value::Plain { rows, .. } if rows.is_none() || rows == whole.1 => {}
                Value::Plain { .. } => return None,
                _ => unknown = true,
            }
        }
        // Together with a column anything makes a column; else it is not known what this is.
        if unknown && whole.1.is_none() {
            return None;
        }
        let reduces = matches!(body, Body::Reduce(_)) || (matches!(body, Body::Chain(..)) && arguments.len() < 2);
        Some(if reduces { number(one, None) } else { number(whole.0, whole.1) })
    }

    /// Tells that there is no such function; gives the body of one like that which was meant.
    fn unknown_function(&mut self, name: &str, span: &Range<usize>) -> Option<Body> {
        if let Some(at) = self.scope.find(name) {
            if matches!(self.scope.entities[at], Entity::Faulty) {
                return None;
            }
            let fault = Fault::new(span.clone(), format!("`{name}` is no function"));
            let column = match self.scope.entities[at] {
                Entity::Group { .. } => self.columns_of_group(name).first().copied(),
                _ => None,
            };
            self.faults.push(match (column, &self.scope.entities[at]) {
                (Some(column), _) => fault.help(format!("write {name}[{column}] for the one of each row")),
                (None, Entity::Group { .. }) => fault.help(format!("write {name}[1], with square brackets")),
                _ => fault.help(format!("write {name}*(...) for a product")),
            });
            return None;
        }
        if self.scope.may_be_elsewhere(name) && name.contains('.') {
            return None;
        }
        let fault = Fault::new(span.clone(), format!("no function is called `{name}`"));
        if let Some((_, help)) = FOREIGN_FUNCTIONS.iter().find(|(other, _)| *other == name) {
            self.faults.push(fault.help(*help));
            let reduces = ["write mean(", "write sum(", "write count(", "write exp(sum("];
            let one_number = reduces.iter().any(|begin| help.starts_with(begin));
            return Some(if one_number { Body::Reduce(Reduce::Sum) } else { Body::Unary(Unary::Abs) });
        }
        if ["P", "Pr", "Prob", "prob", "probability", "E", "expectation"].contains(&name) {
            let what = if name.starts_with('E') || name == "expectation" { "mean" } else { "probability" };
            let help = format!("leave it out: the aim says that a {what} is asked, the formula says of what");
            self.faults.push(fault.help(help));
            return None;
        }
        // The nearest name by its letters would be another function, and a wrong model without a word.
        let density = ["pdf", "pmf", "density", "mass", "logp", "likelihood"].iter().any(|part| name.contains(part));
        let like = density.then(|| density_like(name)).flatten();
        let near = like.or_else(|| {
            let known = FUNCTIONS.iter().map(|function| function.name);
            nearest(name, known).filter(|_| !density || name.starts_with("log_")).and_then(function)
        });
        self.faults.push(match near {
            Some(near) if like.is_some() => fault.help(format!("write {}", written(near))),
            Some(near) => fault.help(format!("did you mean `{}`? It is written {}", near.name, written(near))),
            None if density => fault.help(
                "log densities are called log_density_NAME(x, ...), log masses log_mass_NAME(k, ...): \
                 log_density_lognormal(x, log_mean, log_sd)",
            ),
            None => fault.help(
                "functions are exp, log, sqrt, abs, min, max, sum, mean, normal_cdf, log_density_normal and others; \
                 for a product write * before the bracket",
            ),
        });
        near.map(|near| near.body)
    }

    fn choose(&mut self, syntax: &Syntax, arguments: &[Place]) -> Option<Value> {
        let &[which, yes, no] = arguments else { return None };
        let conditions = |value: &Value| matches!(value, Value::Plain { nature: Nature::Condition, .. });
        let of_conditions = conditions(&self.values[yes]) && conditions(&self.values[no]);
        let check = if of_conditions { Self::condition_at } else { Self::number_at };
        let parts = (self.condition_at(syntax, which), check(self, syntax, yes), check(self, syntax, no));
        let ((c, c_rows), (a, a_rows), (b, b_rows)) = (parts.0?, parts.1?, parts.2?);
        let rows = self.common_rows(syntax, &[(which, c_rows), (yes, a_rows), (no, b_rows)])?;
        let id = self.operations.select(c, a, b);
        Some(if of_conditions { condition(id, rows) } else { number(id, rows) })
    }

    fn lag(&mut self, syntax: &Syntax, arguments: &[Place]) -> Option<Value> {
        let &[of, first] = arguments else { return None };
        let (checked, before) = (self.number_at(syntax, of), self.number_at(syntax, first));
        let ((id, rows), (first_id, first_rows)) = (checked?, before?);
        let Some(rows) = rows else {
            self.wants_column("lag", &syntax.nodes[of].1);
            return None;
        };
        if first_rows.is_some() {
            let span = syntax.nodes[first].1.clone();
            let message = format!("`{}` is a column; the value before the first row is one number", self.slice(&span));
            self.faults.push(Fault::new(span, message).help("write lag(x, 0), or a variable for what came before"));
            return None;
        }
        Some(number(self.operations.lag(id, first_id, rows), Some(rows)))
    }

    fn wants_column(&mut self, name: &str, span: &Range<usize>) {
        let message = format!("`{name}` works on a column, and `{}` is one number", self.slice(span));
        let help = match name {
            "mean" => {
                "leave it out: an estimate is averaged over the draws; a mean of rows wants a data column or a group"
            }
            _ => "a data column or a group makes an expression a column",
        };
        self.faults.push(Fault::new(span.clone(), message).help(help));
    }

    fn present(&mut self, syntax: &Syntax, of: Place) -> Option<Value> {
        let span = &syntax.nodes[of].1;
        let (id, rows) = match self.values[of].clone() {
            Value::Texts(at) => {
                let Entity::Texts { rows, texts } = &self.scope.entities[at] else { return None };
                let filled = texts.iter().map(|text| if text.is_empty() { 0.0 } else { 1.0 }).collect();
                (self.operations.data(*rows, filled), *rows)
            }
            value => {
                let (id, rows) = self.number(&value, span)?;
                let Some(rows) = rows.filter(|_| !self.operations.entry(id).varies) else {
                    let message = format!("`{}` is no column of data", self.slice(span));
                    let help = "present(x) tells in which rows a data column has a value";
                    self.faults.push(Fault::new(span.clone(), message).help(help));
                    return None;
                };
                (self.operations.unary(Unary::Present, id), rows)
            }
        };
        Some(Value::Plain { id, rows: Some(rows), nature: Nature::Either })
    }

    fn reduce(&mut self, syntax: &Syntax, name: &str, reduce: Reduce, of: Place) -> Option<Value> {
        let span = &syntax.nodes[of].1;
        let value = self.values[of].clone();
        let (id, rows, is_condition) = match (&value, reduce) {
            (Value::Texts(at), Reduce::Count) => {
                let Entity::Texts { rows, .. } = &self.scope.entities[*at] else { return None };
                (self.operations.constant(1.0), Some(*rows), false)
            }
            (Value::Plain { id, rows, nature }, Reduce::Count) => (*id, *rows, *nature != Nature::Number),
            _ => {
                let (id, rows) = self.number(&value, span)?;
                (id, rows, false)
            }
        };
        if value == Value::Broken {
            return None;
        }
        let Some(rows) = rows else {
            self.wants_column(name, span);
            return None;
        };
        let list = &mut self.operations;
        let n = list.row_count(rows) as f64;
        Some(number(
            match reduce {
                Reduce::Count if !is_condition => list.constant(n),
                Reduce::Sum | Reduce::Count => list.reduce(Reduction::Sum, id, rows),
                Reduce::Mean => {
                    let sum = list.reduce(Reduction::Sum, id, rows);
                    let n = list.constant(n);
                    list.binary(Binary::Divide, sum, n)
                }
                Reduce::Minimum => list.reduce(Reduction::Minimum, id, rows),
                Reduce::Maximum => list.reduce(Reduction::Maximum, id, rows),
                Reduce::LogSumExp => list.reduce(Reduction::LogSumExp, id, rows),
            },
            None,
        ))
    }
}

/// A function of numbers, row by row.
fn apply(body: Body, list: &mut Operations, of: &[Id]) -> Id {
    match body {
        Body::Unary(function) => list.unary(function, of[0]),
        Body::Binary(function) => list.binary(function, of[0], of[1]),
        Body::Build(build) => build(list, of),
        Body::Chain(function, _) => of[1..].iter().fold(of[0], |so_far, &next| list.binary(function, so_far, next)),
        Body::Reduce(_) | Body::If | Body::Lag | Body::Present => unreachable!("handled by their own functions"),
    }
}

/// The log density or log mass whose distribution a foreign name speaks of: `normal_lpdf` of the normal one.
fn density_like(name: &str) -> Option<&'static Function> {
    let of = |function: &&Function| {
        let own = ["log_density_", "log_mass_"].iter().find_map(|begin| function.name.strip_prefix(begin));
        own.is_some_and(|own| name.contains(own))
    };
    FUNCTIONS.iter().filter(of).max_by_key(|function| function.name.len())
}
