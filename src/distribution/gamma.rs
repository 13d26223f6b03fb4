//! The gamma distribution and its reciprocal; chi-squared is a gamma distribution.

use super::law::Law;
use crate::numeric::ln;
use crate::numeric::special::LogTails;
use crate::numeric::special::{gamma_deviance, gamma_log_tails, gamma_quantile, log_gamma_front};

/// From this shape on a logarithm times the shape would lose more than the last two digits.
const LARGE: f64 = 50.0;

/// Gamma with rate one.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Gamma {
    shape: f64,
    /// Log density at `shape`: what the deviance is taken from when the shape is at least one, else `-ln Gamma(shape)`.
    constant: f64,
}

impl Gamma {
    pub(super) fn new(shape: f64) -> Self {
        let constant = if shape < 1.0 { -libm::lgamma(shape) } else { log_gamma_front(shape, shape) - ln(shape) };
        Self { shape, constant }
    }
}

impl Law for Gamma {
    /// For shapes from one on `constant + (shape - 1) ln(x/shape) - (x - shape)`, for large ones with the deviance.
    #[inline]
    fn log_density(&self, x: f64) -> f64 {
        if x < 0.0 {
            return f64::NEG_INFINITY;
        }
        if self.shape == 1.0 {
            return -x; // at x = 0 the general form is 0 times -inf
        }
        if self.shape < 1.0 {
            return self.constant + (self.shape - 1.0) * ln(x) - x;
        }
        if self.shape > LARGE {
            return self.constant + gamma_deviance(self.shape, x) - ln(x / self.shape);
        }
        self.constant + (self.shape - 1.0) * ln(x / self.shape) - (x - self.shape)
    }

    fn log_density_slope(&self, x: f64) -> f64 {
        (self.shape - 1.0) / x - 1.0
    }

    fn log_tails(&self, x: f64) -> LogTails {
        gamma_log_tails(self.shape, x)
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        gamma_quantile(self.shape, log_tail, upper)
    }

    fn support(&self) -> (f64, f64) {
        (0.0, f64::INFINITY)
    }

    fn mean(&self) -> Option<f64> {
        Some(self.shape)
    }

    fn sd(&self) -> Option<f64> {
        Some(self.shape.sqrt())
    }
}

/// `1/T` with `T` gamma.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct InverseGamma {
    gamma: Gamma,
}

impl InverseGamma {
    pub(super) fn new(shape: f64) -> Self {
        Self { gamma: Gamma::new(shape) }
    }
}

impl Law for InverseGamma {
    #[inline]
    fn log_density(&self, x: f64) -> f64 {
        if x <= 0.0 { f64::NEG_INFINITY } else { self.gamma.log_density(1.0 / x) - 2.0 * ln(x) }
    }

    fn log_density_slope(&self, x: f64) -> f64 {
        (1.0 / x - self.gamma.shape - 1.0) / x
    }

    fn log_tails(&self, x: f64) -> LogTails {
        if x <= 0.0 {
            return LogTails { lower: f64::NEG_INFINITY, upper: 0.0 };
        }
        self.gamma.log_tails(1.0 / x).swapped()
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        1.0 / self.gamma.quantile(log_tail, !upper)
    }

    fn support(&self) -> (f64, f64) {
        (0.0, f64::INFINITY)
    }

    fn mean(&self) -> Option<f64> {
        let shape = self.gamma.shape;
        (shape > 1.0).then(|| 1.0 / (shape - 1.0))
    }

    fn sd(&self) -> Option<f64> {
        let shape = self.gamma.shape;
        (shape > 2.0).then(|| 1.0 / ((shape - 1.0) * (shape - 2.0).sqrt()))
    }
}
