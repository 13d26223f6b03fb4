//! The probability beyond a quadratic surface in standard normal scores, by one integral in the complex plane.

use crate::numeric::{exp, ln};
use std::f64::consts::PI;

/// One independent term `slope y + curvature y^2 / 2` of a quadratic, `y` standard normal; `times` such terms.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Term {
    pub(crate) slope: f64,
    pub(crate) curvature: f64,
    pub(crate) times: f64,
}

/// How far the path of integration bends away from the vertical.
const BEND: f64 = 0.25;
/// Step of the trapezoidal rule along it, and steps at most.
const STEP: f64 = 0.04;
const STEPS: usize = 400;
/// The integral ends where its integrand has fallen to this share of the first.
const NEGLIGIBLE: f64 = 1e-13;
/// Two sizes of step must agree to this.
const AGREE: f64 = 1e-6;
/// Halvings and doublings of the search for the saddle.
const HALVINGS: usize = 80;
const DOUBLINGS: usize = 60;

/// `P(constant + sum of the terms <= 0)`; none where the integral does not settle or the probability is nought.
///
/// With `Y = -sum` and its cumulant function `K(s) = sum -ln(1 - s b)/2 + s^2 a^2 / (2 (1 - s b))` (slope `a`, `b = -curvature`),
/// `P(Y >= c)` is the integral of `exp(K(s) - s c) / (2 pi i s)` upwards to the right of zero. The path starts at the saddle of the
/// integrand on the real axis and is a hyperbola bent to the side on which the integrand falls off: the trapezoidal rule then
/// converges geometrically, and the result has a small *relative* error however small it is.
///
/// # Source
/// Inversion at the saddle: Rice, SIAM J. Sci. Stat. Comput. 1 (1980) 438-448; hyperbolic paths: Weideman & Trefethen, Math.
/// Comput. 76 (2007) 1341-1356.
pub(crate) fn probability_below(constant: f64, terms: &[Term]) -> Option<f64> {
    let unit =
        terms.iter().map(|t| t.times * (t.slope * t.slope + 0.5 * t.curvature * t.curvature)).sum::<f64>().sqrt();
    if !(unit > 0.0 && unit.is_finite() && constant.is_finite()) {
        return None;
    }
    // In units of the quadratic's own standard deviation.
    let scaled: Vec<Term> =
        terms.iter().map(|t| Term { slope: t.slope / unit, curvature: t.curvature / unit, times: t.times }).collect();
    let sum = Inversion { c: constant / unit, terms: &scaled };
    let saddle = sum.saddle()?;
    // The side on which the integrand falls off is not always the better one of the two: the one that settles is taken.
    let first = sum.side();
    [first, -first].into_iter().find_map(|side| {
        let fine = sum.integral(saddle, side, STEP)?;
        let coarse = sum.integral(saddle, side, 2.0 * STEP)?;
        ((fine - coarse).abs() <= AGREE * fine && fine > 0.0).then_some(fine.min(1.0))
    })
}

struct Inversion<'a> {
    c: f64,
    terms: &'a [Term],
}

impl Inversion<'_> {
    /// Where `K(s) - s c - ln s` is least: its slope rises from `-inf` and is followed to zero.
    fn saddle(&self) -> Option<f64> {
        let most = self.terms.iter().map(|t| -t.curvature).fold(0.0, f64::max);
        let slope = |s: f64| -> f64 {
            let of = |t: &Term| {
                let (b, left) = (-t.curvature, 1.0 + s * t.curvature);
                t.times * (0.5 * b / left + t.slope * t.slope * (s / left + 0.5 * s * s * b / (left * left)))
            };
            self.terms.iter().map(of).sum::<f64>() - self.c - 1.0 / s
        };
        let (mut low, mut high) = (0.0, 1.0_f64);
        if most > 0.0 {
            high = 1.0 / most;
        } else {
            let mut doublings = 0;
            while slope(high) < 0.0 {
                high *= 2.0;
                doublings += 1;
                if doublings > DOUBLINGS {
                    return None;
                }
            }
        }
        for _ in 0..HALVINGS {
            let middle = 0.5 * (low + high);
            // Written so that NaN, next to a pole, counts as beyond the saddle.
            if slope(middle) < 0.0 { low = middle } else { high = middle }
        }
        (low > 0.0).then_some(low)
    }

    /// `ln |F|` and the phase of the integrand `F = exp(K(s) - s c) / s`.
    fn log_integrand(&self, s: [f64; 2]) -> [f64; 2] {
        let log = log_of(s);
        let mut out = [-self.c * s[0] - log[0], -self.c * s[1] - log[1]];
        let square = times(s, s);
        for t in self.terms {
            let left = [1.0 + s[0] * t.curvature, s[1] * t.curvature];
            let log = log_of(left);
            let size = left[0] * left[0] + left[1] * left[1];
            let ratio = times(square, [left[0] / size, -left[1] / size]);
            for i in 0..2 {
                out[i] += t.times * (0.5 * t.slope * t.slope * ratio[i] - 0.5 * log[i]);
            }
        }
        out
    }

    /// The bend towards the side on which the integrand falls off in the end.
    fn side(&self) -> f64 {
        let bent = |t: &&Term| t.curvature.abs() > 1e-9;
        let of = |t: &Term| t.times * t.slope * t.slope / (2.0 * t.curvature);
        let end = self.c - self.terms.iter().filter(bent).map(of).sum::<f64>();
        if end >= 0.0 { BEND } else { -BEND }
    }

    fn integral(&self, saddle: f64, side: f64, step: f64) -> Option<f64> {
        let second = |t: &Term| {
            let (b, left) = (-t.curvature, 1.0 + saddle * t.curvature);
            t.times * (0.5 * b * b / (left * left) + t.slope * t.slope / (left * left * left))
        };
        let width = 1.0 / (self.terms.iter().map(second).sum::<f64>() + 1.0 / (saddle * saddle)).sqrt();
        let top = self.log_integrand([saddle, 0.0])[0];
        let mut sum = 0.0;
        for i in 0..STEPS {
            let v = step * i as f64;
            let (up, down) = (exp(v), exp(-v));
            let (sinh, cosh) = (0.5 * (up - down), 0.5 * (up + down));
            let s = [saddle + width * side * (cosh - 1.0), width * sinh];
            let [log_size, phase] = self.log_integrand(s);
            let size = exp(log_size - top);
            let way = [side * sinh, cosh];
            // The imaginary part of F ds.
            let part = size * (libm::cos(phase) * way[1] + libm::sin(phase) * way[0]);
            sum += if i == 0 { 0.5 * part } else { part };
            if size * (way[0].abs() + way[1]) < NEGLIGIBLE {
                return Some(exp(top) * width * step * sum / PI);
            }
        }
        None
    }
}

fn times(a: [f64; 2], b: [f64; 2]) -> [f64; 2] {
    [a[0] * b[0] - a[1] * b[1], a[0] * b[1] + a[1] * b[0]]
}

fn log_of(z: [f64; 2]) -> [f64; 2] {
    [0.5 * ln(z[0] * z[0] + z[1] * z[1]), libm::atan2(z[1], z[0])]
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::normal::upper_tail;

    fn term(slope: f64, curvature: f64) -> Term {
        Term { slope, curvature, times: 1.0 }
    }

    fn check(constant: f64, terms: &[Term], want: f64) {
        let got = probability_below(constant, terms).unwrap();
        assert!((got / want - 1.0).abs() < 1e-8, "{got:e} instead of {want:e}");
    }

    /// Half-spaces: the normal table.
    #[test]
    fn planes_have_normal_tails() {
        for beta in [-2.0, 0.0, 1.0, 3.0, 5.0, 12.0] {
            check(beta, &[term(-1.0, 0.0)], upper_tail(beta));
            check(5.0 * beta, &[term(3.0, 0.0), term(4.0, 0.0)], upper_tail(beta));
        }
    }

    /// Source: SciPy 1.17.1: `chi2.cdf(4, 10)`, `chi2.sf(60, 10)`, `ncx2.sf(40, 3, 2)`: sums of squares; and limit states that are
    /// quadratics, by quadrature over one variable (mpmath 1.3.0): `.1 (a-b)^2 - (a+b)/sqrt(2) + 2.5` (along the diagonals),
    /// `3 - a b`, `5 - b - .5 (a - .1)^2`, `.1 r^2 - a - 4.5` with 99 squares.
    #[test]
    fn quadrics_have_their_known_probabilities() {
        let ten = |curvature| [Term { slope: 0.0, curvature, times: 10.0 }];
        check(-4.0, &ten(2.0), 0.052_653_017_343_711_125);
        check(60.0, &ten(-2.0), 3.624_300_952_061_492_4e-9);
        // (y - sqrt 2)^2 and two squares beyond 40.
        check(38.0, &[term(8.0_f64.sqrt(), -2.0), term(0.0, -2.0), term(0.0, -2.0)], 2.093_890_648_608_822_7e-6);
        check(2.5, &[term(-1.0, 0.0), term(0.0, 0.4)], 4.207_305_511_3e-3);
        check(3.0, &[term(0.0, 1.0), term(0.0, -1.0)], 9.819_298_7e-3);
        // Nearly flat one way: the other side is the better one.
        for flat in [0.0, 1e-11, -1e-11] {
            check(4.995, &[term(0.1, -1.0), term(-1.0, flat)], 3.016_311_901_3e-3);
        }
        check(-4.5, &[term(-1.0, 0.0), Term { slope: 0.0, curvature: 0.2, times: 99.0 }], 3.769_436_1e-4);
    }

    #[test]
    fn what_cannot_be_is_not_given() {
        assert_eq!(probability_below(1.0, &[]), None);
        assert_eq!(probability_below(f64::NAN, &[term(1.0, 0.0)]), None);
        // A square above zero is never below it.
        assert_eq!(probability_below(1.0, &[term(0.0, 2.0)]), None);
    }
}
