//! Marginal densities of a proposal, variable by variable, in natural units.

use crate::figures::axis::Scale;
use crate::figures::columns::VariableColumn;
use crate::figures::columns::quantiles;
use crate::figures::columns::range;
use crate::numeric::exp;
use crate::numeric::ln;
use crate::numeric::normal;
use crate::numeric::special::student_t_log_constant;
use crate::numeric::special::student_t_log_upper_tail;
use crate::problem::Coordinate;
use crate::problem::Nature;
use crate::problem::Variable;
use crate::proposal::Component;
use crate::proposal::Mixture;

/// Places at which a density is given.
const PLACES: usize = 240;
/// Most whole numbers at which a mass is given.
const MOST_WHOLE: f64 = 2000.0;

/// Places (rising) and densities there: per natural unit, masses at the whole numbers for a discrete variable.
pub(super) type Curve = (Vec<f64>, Vec<f64>);

/// The direction whose scalar product with the coordinates is the variable's own score: a unit vector, or a row of the
/// factor of its correlated group.
pub(super) type Direction = Vec<f64>;

/// The marginal of a variable whose value depends on its own score alone, over the range of its figure.
pub(super) fn closed(
    variable: &Variable,
    mixture: &Mixture,
    direction: &Direction,
    column: &VariableColumn,
    weights: &[f64],
) -> Curve {
    let along: Vec<(f64, Line)> =
        mixture.shares().iter().zip(mixture.components()).map(|(&s, c)| (s, Line::of(c, direction))).collect();
    let (low, high, scale) = range(column, weights);
    if scale == Scale::Whole {
        let first = low.ceil();
        let places: Vec<f64> = (0..(high - first).min(MOST_WHOLE) as usize + 1).map(|k| first + k as f64).collect();
        let masses = places.iter().map(|&k| mass(variable, &along, k)).collect();
        return (places, masses);
    }
    let places = grid(low, high, scale);
    let densities = places.iter().map(|&x| density(variable, &along, x)).collect();
    (places, densities)
}

/// The marginal of a variable that depends on others, from the draws themselves, which come from the proposal: a
/// kernel density with Silverman's width (Density Estimation, 1986, equation 3.31).
pub(super) fn smoothed(column: &VariableColumn, weights: &[f64]) -> Curve {
    let (low, high, scale) = range(column, weights);
    let even = vec![1.0; column.values.len()];
    let finite: Vec<f64> = column.values.iter().copied().filter(|x| x.is_finite()).collect();
    if scale == Scale::Whole {
        let first = low.ceil();
        let places: Vec<f64> = (0..(high - first).min(MOST_WHOLE) as usize + 1).map(|k| first + k as f64).collect();
        let share = |&k: &f64| finite.iter().filter(|&&x| x == k).count() as f64 / finite.len().max(1) as f64;
        let masses = places.iter().map(share).collect();
        return (places, masses);
    }
    let log = scale == Scale::Log;
    let image = |x: f64| if log { ln(x) } else { x };
    let places = grid(low, high, scale);
    let values: Vec<f64> = finite.iter().map(|&x| image(x)).filter(|x| x.is_finite()).collect();
    let images: Vec<f64> = column.values.iter().map(|&x| image(x)).collect();
    let Some([q1, q3]) = quantiles(&images, &even, [0.25, 0.75]) else { return (Vec::new(), Vec::new()) };
    let width = 0.9 * ((q3 - q1) / 1.34).max(1e-300) * libm::pow(values.len() as f64, -0.2);
    let at = |&x: &f64| {
        let centre = image(x);
        let sum: f64 = values.iter().map(|v| exp(normal::log_density((v - centre) / width))).sum();
        sum / (values.len() as f64 * width) / if log { x } else { 1.0 }
    };
    let densities = places.iter().map(at).collect();
    (places, densities)
}

fn grid(low: f64, high: f64, scale: Scale) -> Vec<f64> {
    let part = |k: usize| (k as f64 + 0.5) / PLACES as f64;
    if scale == Scale::Log {
        return (0..PLACES).map(|k| exp(ln(low) + part(k) * ln(high / low))).collect();
    }
    (0..PLACES).map(|k| low + part(k) * (high - low)).collect()
}

/// A component seen along one direction.
#[derive(Debug, Clone, Copy)]
pub(super) struct Line {
    location: f64,
    scale: f64,
    df: f64,
}

impl Line {
    /// Location `a'm` and scale `|L'a|` of `a'z`, with the same degrees of freedom: exact for both families.
    pub(super) fn of(component: &Component, direction: &Direction) -> Self {
        let d = component.dim();
        let factor = component.factor();
        let location = component.location().iter().zip(direction).map(|(m, a)| m * a).sum();
        let squares = (0..d).map(|k| {
            let entry: f64 = (k..d).map(|i| factor[i * d + k] * direction[i]).sum();
            entry * entry
        });
        Self { location, scale: squares.sum::<f64>().sqrt(), df: component.df() }
    }

    fn density(self, u: f64) -> f64 {
        let t = (u - self.location) / self.scale;
        let log = if self.df == f64::INFINITY {
            normal::log_density(t)
        } else {
            student_t_log_constant(self.df) - 0.5 * (self.df + 1.0) * libm::log1p(t * t / self.df)
        };
        exp(log) / self.scale
    }

    /// `P(score > u)`.
    fn upper_tail(self, u: f64) -> f64 {
        let t = (u - self.location) / self.scale;
        if self.df == f64::INFINITY { normal::upper_tail(t) } else { exp(student_t_log_upper_tail(self.df, t)) }
    }
}

fn density(variable: &Variable, along: &[(f64, Line)], x: f64) -> f64 {
    let (z, slope) = match (&variable.nature, variable.coordinate) {
        (Nature::Random(distribution), Coordinate::StandardNormal) => {
            let u = distribution.score(x);
            (u, distribution.score_slope(u, x))
        }
        (_, coordinate) => {
            let z = coordinate.of_natural(x);
            (z, coordinate.slope(z).abs())
        }
    };
    if !(z.is_finite() && slope > 0.0) {
        return 0.0;
    }
    along.iter().map(|(share, line)| share * line.density(z)).sum::<f64>() / slope
}

/// Mass of the scores that become the whole number `k`.
fn mass(variable: &Variable, along: &[(f64, Line)], k: f64) -> f64 {
    let Nature::Random(distribution) = &variable.nature else { return f64::NAN };
    let bound = |x: f64| {
        let (lower, upper) = (distribution.lower_tail(x), distribution.upper_tail(x));
        if lower <= 0.5 { normal::quantile_of_tail(lower, false) } else { normal::quantile_of_tail(upper, true) }
    };
    let above = |x: f64| -> f64 {
        let (lower, upper) = (distribution.lower_tail(x), distribution.upper_tail(x));
        if lower == 0.0 {
            return 1.0;
        }
        if upper == 0.0 {
            return 0.0;
        }
        along.iter().map(|(share, line)| share * line.upper_tail(bound(x))).sum()
    };
    (above(k - 1.0) - above(k)).max(0.0)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::distribution::Distribution;

    fn mixture() -> Mixture {
        let a = Component::new(vec![0.3, -0.2], &[0.5, 0.2, 0.2, 0.9], 7.0).unwrap();
        let b = Component::new(vec![-1.0, 0.6], &[1.1, -0.4, -0.4, 0.7], f64::INFINITY).unwrap();
        Mixture::new(&[0.4, 0.6], vec![a, b]).unwrap()
    }

    fn column(values: Vec<f64>, discrete: bool) -> VariableColumn {
        VariableColumn { name: "x".into(), label: None, unit: None, values, discrete }
    }

    /// A density integrates, by the trapezoidal rule, to the mass of the scores between the ends of its places, whatever the
    /// coordinate and the direction; the rule's error on 240 places is below 3e-3 here (the rise next to the end of the half-line is a few places wide).
    #[test]
    fn densities_integrate_to_the_mass_between_their_ends() {
        let half_line = Variable::range("x", 2.0, f64::INFINITY, 3.0, 1.0);
        let line = Variable::range("x", f64::NEG_INFINITY, f64::INFINITY, 0.0, 1.0);
        let mut logged = half_line.clone();
        logged.coordinate = Coordinate::Log { end: 2.0, upward: true };
        let gumbel = Distribution::new("gumbel", &[("location", 1.0), ("scale", 2.0)]).unwrap();
        let mut scored = Variable::random("x", gumbel.clone());
        scored.coordinate = Coordinate::StandardNormal;
        let log: fn(f64) -> f64 = |x| ln(x - 2.0);
        let of_gumbel = |x: f64| gumbel.score(x);
        type Case<'a> = (Variable, [f64; 2], &'a dyn Fn(f64) -> f64);
        let cases: [Case; 3] =
            [(line, [-5.0, 5.0], &|x| x), (logged, [2.1, 12.0], &log), (scored, [-6.0, 30.0], &of_gumbel)];
        for (variable, ends, score) in cases {
            for direction in [vec![1.0, 0.0], vec![0.6, 0.8]] {
                let values = column(ends.to_vec(), false);
                let (x, f) = closed(&variable, &mixture(), &direction, &values, &[1.0, 1.0]);
                // An axis may reach beyond the end of the support.
                let from = x.iter().position(|&x| score(x).is_finite()).unwrap();
                let integral: f64 = (from + 1..x.len()).map(|i| 0.5 * (f[i] + f[i - 1]) * (x[i] - x[i - 1])).sum();
                let above = |u: f64| -> f64 {
                    let mixture = mixture();
                    let parts = mixture.shares().iter().zip(mixture.components());
                    parts.map(|(share, c)| share * Line::of(c, &direction).upper_tail(u)).sum()
                };
                let mass = above(score(x[from])) - above(score(x[x.len() - 1]));
                assert!(mass > 0.8, "the range holds most of the mass: {mass}");
                assert!((integral - mass).abs() < 3e-3, "{:?} {direction:?}: {integral} {mass}", variable.coordinate);
            }
        }
    }

    #[test]
    fn masses_sum_to_one() {
        let mut count = Variable::random("x", Distribution::new("poisson", &[("mean", 4.0)]).unwrap());
        count.coordinate = Coordinate::StandardNormal;
        let (x, f) = closed(&count, &mixture(), &vec![1.0, 0.0], &column(vec![0.0, 40.0], true), &[1.0, 1.0]);
        assert!(x.iter().zip(&f).all(|(&x, &f)| (x < 0.0) == (f == 0.0) || x > 20.0), "mass on whole numbers from 0");
        assert!((f.iter().sum::<f64>() - 1.0).abs() < 1e-6, "{}", f.iter().sum::<f64>());
    }

    #[test]
    fn smoothed_draws_integrate_to_one() {
        let values: Vec<f64> = (0..2000).map(|i| normal::quantile((f64::from(i) + 0.5) / 2000.0)).collect();
        let (x, f) = smoothed(&column(values, false), &[1.0; 2000]);
        let integral: f64 = f.iter().map(|f| f * (x[1] - x[0])).sum();
        assert!((integral - 1.0).abs() < 0.02, "{integral}");
    }
}
