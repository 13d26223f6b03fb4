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

/// The way to `log_tail(h) = target` in a coordinate `h` in which the density is log-concave, from a start at `h = 0`.
///
/// A log-concave density has log-concave tails (Prekopa 1973), so Newton's step lands on the far side of the root or
/// before it; Halley's correction speeds that up. What is known to be too far out and too far in bounds each step: where
/// the tail is nearly one its logarithm is flat, and a step from there would leave the doubles.
#[derive(Debug)]
pub(super) struct Search {
    target: f64,
    upper: bool,
    at: f64,
    least: f64,
    greatest: f64,
}

impl Search {
    pub(super) fn new(target: f64, upper: bool) -> Self {
        Self { target, upper, at: 0.0, least: f64::NEG_INFINITY, greatest: f64::INFINITY }
    }

    /// What to add to `h`, and whether it is good to the last bits after that.
    ///
    /// `log_tail` is the tail here, `log_density` the log density of `h`, `slope` its derivative.
    pub(super) fn step(&mut self, log_tail: f64, log_density: f64, slope: f64) -> (f64, bool) {
        if (log_tail < self.target) == self.upper {
            self.greatest = self.at
        } else {
            self.least = self.at
        }
        let hazard = exp(log_density - log_tail);
        let derivative = if self.upper { -hazard } else { hazard };
        let newton = -(log_tail - self.target) / derivative;
        let mut change = newton / (1.0 + 0.5 * newton * (slope - derivative)).clamp(0.5, 3.0);
        let next = self.at + change;
        // NaN, when the tail has left the doubles, is not inside either.
        let is_inside = next >= self.least && next <= self.greatest;
        if !is_inside {
            change = if self.least.is_finite() && self.greatest.is_finite() {
                0.5 * (self.least + self.greatest) - self.at
            } else if self.greatest == self.at {
                -2.0
            } else {
                2.0
            };
        }
        self.at += change;
        // Cubic convergence: within 1e-5 widths of the root the next step would be below 1e-15 of them.
        (change, change.abs() * hazard.max(1.0) < 1e-5)
    }
}
