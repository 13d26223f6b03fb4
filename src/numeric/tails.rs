//! Two tails in logs, and the step towards a quantile on a log tail.

use super::{exp, ln};

/// `ln P(X <= x)` and `ln P(X > x)`, each with its own full accuracy.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct LogTails {
    /// `ln P(X <= x)`.
    pub lower: f64,
    /// `ln P(X > x)`.
    pub upper: f64,
}

impl LogTails {
    /// Both tails when the lower is known and the upper not much smaller than it.
    #[must_use]
    pub fn from_lower(lower: f64) -> Self {
        Self { lower: lower.min(0.0), upper: log_one_minus_exp(lower.min(0.0)) }
    }

    /// Both tails when the upper is known and the lower not much smaller than it.
    #[must_use]
    pub fn from_upper(upper: f64) -> Self {
        Self::from_lower(upper).swapped()
    }

    /// The tails of `-X`, up to the point mass at `x`.
    #[must_use]
    pub fn swapped(self) -> Self {
        Self { lower: self.upper, upper: self.lower }
    }
}

/// `ln(1 - e^x)` for `x <= 0`, with full accuracy at both ends.
///
/// # Source
/// Maechler, "Accurately computing log(1 - exp(-|a|))" (2012): `expm1` above `-ln 2`, `log1p` below.
///
/// ```
/// use evenpoise::numeric::special::log_one_minus_exp;
/// assert!((log_one_minus_exp(-1e-300) - (1e-300_f64).ln()).abs() < 1e-12);
/// ```
#[inline]
#[must_use]
pub fn log_one_minus_exp(x: f64) -> f64 {
    if x > -std::f64::consts::LN_2 { ln(-libm::expm1(x)) } else { libm::log1p(-exp(x)) }
}

/// One step of [`newton_step`].
#[derive(Debug, Clone, Copy)]
pub(super) struct Step {
    /// What to add to the coordinate.
    pub(super) change: f64,
    /// After this step the coordinate is good to the last bits.
    pub(super) is_last: bool,
}

/// Halley's step towards `log_tail(h) = target` in a coordinate `h` in which the density is log-concave.
///
/// `log_density` is the log density of `h`, `slope` its derivative. A log-concave density has log-concave tails
/// (Prekopa 1973), so Newton's step from anywhere lands on the far side of the root and proceeds from there without
/// overshooting; the correction of Halley is bounded so that this stays true in effect.
pub(super) fn newton_step(log_tail: f64, target: f64, log_density: f64, slope: f64, upper: bool) -> Step {
    let hazard = exp(log_density - log_tail);
    let derivative = if upper { -hazard } else { hazard };
    let newton = -(log_tail - target) / derivative;
    let bend = 1.0 + 0.5 * newton * (slope - derivative);
    let change = newton / bend.clamp(0.5, 3.0);
    if !change.is_finite() {
        // The tail has left the doubles: come back by a factor of e^2.
        return Step { change: if upper { -2.0 } else { 2.0 }, is_last: false };
    }
    // Cubic convergence: within 1e-5 widths of the root the next step would be below 1e-15 of them.
    Step { change, is_last: change.abs() * hazard.max(1.0) < 1e-5 }
}
