//! Places in natural units, with as many digits as tell them apart within a variable's start.

use crate::figures::numbers::exponent_of;
use crate::figures::numbers::significant;
use crate::numeric::Points;
use crate::problem::Problem;

/// Half the width of the central 95 % of a standard normal distribution.
const CENTRAL_95: f64 = 1.959_963_984_540_054;
/// Digits at least and at most.
const DIGITS: (i32, i32) = (3, 9);

/// The centre of every variable's start and the ends of its central 95 %, natural units, the other variables at their centres.
pub(crate) fn starts(problem: &Problem) -> Vec<[f64; 3]> {
    let start = problem.start();
    let at = |j: usize, shift: f64| {
        let mut z = start.near.clone();
        z[j] += shift * start.spread[j];
        problem.to_natural(&Points::from_rows(z.len(), &z)).point(0)[j]
    };
    let of = |j: usize| {
        let ends = [at(j, -CENTRAL_95), at(j, CENTRAL_95)];
        [at(j, 0.0), ends[0].min(ends[1]), ends[0].max(ends[1])]
    };
    (0..problem.dim()).map(of).collect()
}

/// A value of every variable, `name = value`, each to about a hundredth of its start.
///
/// ```
/// use evenpoise::problem::Problem;
/// use evenpoise::report::places;
/// let text = "title = \"Crest\"\n[variables]\ncrest = { distribution = \"normal\", mean = 213.2, sd = 0.08 }\n\
///             [target]\naim = \"probability\"\nevent = \"crest < 213\"\n";
/// let problem = Problem::parse(text, "crest.toml", std::path::Path::new(".")).unwrap();
/// assert_eq!(places(&problem, &[212.987_6]), ["212.99"]);
/// ```
#[must_use]
pub fn places(problem: &Problem, point: &[f64]) -> Vec<String> {
    starts(problem).iter().zip(point).map(|(start, &x)| resolved(x, start[2] - start[1])).collect()
}

/// A number to about a hundredth of `width`.
pub(crate) fn resolved(x: f64, width: f64) -> String {
    let known = x != 0.0 && x.is_finite() && width > 0.0 && width.is_finite();
    let digits = if known { exponent_of(x) - exponent_of(width) + 2 } else { DIGITS.0 };
    let text = significant(x, digits.clamp(DIGITS.0, DIGITS.1) as usize);
    let plain = text.contains('.') && !text.contains('×');
    if plain { text.trim_end_matches('0').trim_end_matches('.').to_owned() } else { text }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn digits_tell_places_apart() {
        for (x, width, want) in [
            (213.187_3, 0.31, "213.19"),
            (210.443, 1.37, "210.4"),
            (142.3, 81.0, "142"),
            (1.0, 1.0, "1"),
            (0.0, 1.0, "0"),
            (-0.012_345, 3.0, "−0.0123"),
            (5.0, f64::INFINITY, "5"),
            (f64::INFINITY, 1.0, "∞"),
        ] {
            assert_eq!(resolved(x, width), want);
        }
    }
}
