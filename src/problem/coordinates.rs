//! The maps between a variable and its coordinate, one number at a time, exact far out.
//!
//! With `z` the coordinate and `x` the variable: line `x = z`; half-line `x = end ± e^z`; interval
//! `x = low + (high - low) / (1 + e^-z)`. The logarithm of the Jacobian `|dx/dz|` is computed from `z`, so it stays
//! right where `x` has long rounded to its end. Standard normal scores need the distribution and live in `space`.

use super::variable::Coordinate;
use crate::numeric::exp;
use crate::numeric::ln;

/// Widest start on an interval, in logits: a normal of this scale already covers it nearly evenly.
pub(crate) const WIDEST_LOGIT: f64 = 2.5;

impl Coordinate {
    /// The coordinate of a support: line, half-line or interval.
    pub(crate) fn of_support(low: f64, high: f64) -> Self {
        match (low.is_finite(), high.is_finite()) {
            (false, false) => Self::Natural,
            (true, false) => Self::Log { end: low, upward: true },
            (false, true) => Self::Log { end: high, upward: false },
            (true, true) => Self::Logit { low, high },
        }
    }

    /// `x` of `z`. A finite coordinate never lands on an end of the support, however far out it is.
    #[inline]
    pub(crate) fn natural(self, z: f64) -> f64 {
        match self {
            Self::Natural | Self::StandardNormal => z,
            Self::Log { end, upward: true } => inside(end + exp(z), end, f64::INFINITY),
            Self::Log { end, upward: false } => inside(end - exp(z), f64::NEG_INFINITY, end),
            Self::Logit { low, high } => {
                // From the nearer end, so that digits are kept on both sides.
                let share = exp(-z.abs());
                let part = (high - low) * (share / (1.0 + share));
                inside(if z <= 0.0 { low + part } else { high - part }, low, high)
            }
        }
    }

    /// `z` of `x`; NaN outside the support, infinite on an end.
    #[inline]
    pub(crate) fn of_natural(self, x: f64) -> f64 {
        match self {
            Self::Natural | Self::StandardNormal => x,
            Self::Log { end, upward: true } => ln(x - end),
            Self::Log { end, upward: false } => ln(end - x),
            Self::Logit { low, high } => ln(x - low) - ln(high - x),
        }
    }

    /// `ln |dx/dz|`.
    #[inline]
    pub(crate) fn log_jacobian(self, z: f64) -> f64 {
        match self {
            Self::Natural | Self::StandardNormal => 0.0,
            Self::Log { .. } => z,
            Self::Logit { low, high } => {
                let a = z.abs();
                ln(high - low) - a - 2.0 * libm::log1p(exp(-a))
            }
        }
    }

    /// `d ln |dx/dz| / dz`.
    #[inline]
    pub(crate) fn log_jacobian_slope(self, z: f64) -> f64 {
        match self {
            Self::Natural | Self::StandardNormal => 0.0,
            Self::Log { .. } => 1.0,
            Self::Logit { .. } => {
                // 1 - 2 s(z) = -tanh(z/2)
                let share = exp(-z.abs());
                let size = (1.0 - share) / (1.0 + share);
                if z > 0.0 { -size } else { size }
            }
        }
    }

    /// `dx/dz`, with its sign.
    #[inline]
    pub(crate) fn slope(self, z: f64) -> f64 {
        match self {
            Self::Natural | Self::StandardNormal => 1.0,
            Self::Log { upward, .. } => {
                if upward {
                    exp(z)
                } else {
                    -exp(z)
                }
            }
            Self::Logit { low, high } => {
                let share = exp(-z.abs());
                let sum = 1.0 + share;
                (high - low) * (share / (sum * sum))
            }
        }
    }

    /// Centre and scale, in this coordinate, of a start about `near` and `spread` wide in the variable's unit.
    ///
    /// Half-line: scale `ln(1 + spread/distance)`, with the distance of `near` to the end. Interval: the slope of the
    /// logit times `spread`, at most [`WIDEST_LOGIT`].
    pub(crate) fn start(self, near: f64, spread: f64) -> (f64, f64) {
        let centre = self.of_natural(near);
        let scale = match self {
            Self::Natural | Self::StandardNormal => spread,
            Self::Log { end, .. } => libm::log1p(spread / (near - end).abs()),
            Self::Logit { low, high } => (spread * (high - low) / ((near - low) * (high - near))).min(WIDEST_LOGIT),
        };
        (centre, scale)
    }
}

/// `x` kept strictly between the ends: rounding must not put a point where the density has no value.
#[inline]
fn inside(x: f64, low: f64, high: f64) -> f64 {
    if x <= low {
        low.next_up()
    } else if x >= high && high.is_finite() {
        high.next_down()
    } else {
        x
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const ALL: [Coordinate; 5] = [
        Coordinate::Natural,
        Coordinate::Log { end: 2.0, upward: true },
        Coordinate::Log { end: -1.0, upward: false },
        Coordinate::Logit { low: -3.0, high: 5.0 },
        Coordinate::Logit { low: 0.0, high: 1.0 },
    ];

    #[test]
    fn maps_are_inverse_to_each_other() {
        for coordinate in ALL {
            for z in [-12.0, -3.3, -0.5, 0.0, 0.7, 4.0, 11.0] {
                let back = coordinate.of_natural(coordinate.natural(z));
                // A relative error of one rounding in x is e^|z| of them in the distance to the end.
                let allowed = 16.0 * f64::EPSILON * (1.0 + exp(f64::abs(z)));
                assert!((back - z).abs() <= allowed, "{coordinate:?} at {z}: {back}");
            }
        }
    }

    /// Central differences of step 1e-5 have an error near 1e-10 of the value.
    #[test]
    fn jacobians_match_differences() {
        for coordinate in ALL {
            for z in [-4.0, -0.5, 0.0, 0.7, 4.0] {
                let h = 1e-5;
                let slope = (coordinate.natural(z + h) - coordinate.natural(z - h)) / (2.0 * h);
                assert!((coordinate.slope(z) - slope).abs() <= 1e-8 * slope.abs(), "{coordinate:?} at {z}");
                assert!((coordinate.log_jacobian(z) - ln(slope.abs())).abs() <= 1e-8, "{coordinate:?} at {z}");
                let second = (coordinate.log_jacobian(z + h) - coordinate.log_jacobian(z - h)) / (2.0 * h);
                assert!((coordinate.log_jacobian_slope(z) - second).abs() <= 1e-8, "{coordinate:?} at {z}");
            }
        }
    }

    #[test]
    fn far_out_stays_inside_and_finite() {
        let logit = Coordinate::Logit { low: 1.0, high: 2.0 };
        assert!(logit.natural(60.0) < 2.0 && logit.natural(-60.0) > 1.0);
        // ln(s (1 - s)) at z = 700 is -700 to within e^-700.
        assert_eq!(logit.log_jacobian(700.0), -700.0);
        let half = Coordinate::Log { end: 5.0, upward: true };
        assert!(half.natural(-60.0) > 5.0);
        assert_eq!(half.log_jacobian(-60.0), -60.0);
        assert!(half.of_natural(4.0).is_nan());
    }

    /// Worked by hand from the rule: ln(4 - 0) = 1.386294361119890..., ln(1 + 2/4) = 0.405465108108164...
    #[test]
    fn starts_are_carried_over() {
        let (centre, scale) = Coordinate::Log { end: 0.0, upward: true }.start(4.0, 2.0);
        assert!((centre - 1.386_294_361_119_890_6).abs() < 1e-15 && (scale - 0.405_465_108_108_164_4).abs() < 1e-15);
        let (centre, scale) = Coordinate::Logit { low: 0.0, high: 1.0 }.start(0.5, 0.1);
        assert!(centre == 0.0 && (scale - 0.4).abs() < 1e-15);
        assert_eq!(Coordinate::Logit { low: 0.0, high: 1.0 }.start(0.5, 10.0).1, WIDEST_LOGIT);
        assert_eq!(Coordinate::Natural.start(-3.0, 0.5), (-3.0, 0.5));
    }
}
