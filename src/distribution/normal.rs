//! The normal distribution, its exponential and its absolute value.

use super::law::Law;
use crate::numeric::normal;
use crate::numeric::special::LogTails;
use crate::numeric::special::erf;
use crate::numeric::{exp, ln};
use std::f64::consts::{LN_2, PI};

/// Mean zero, standard deviation one.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct StandardNormal;

impl Law for StandardNormal {
    #[inline]
    fn log_density(&self, z: f64) -> f64 {
        normal::log_density(z)
    }

    fn log_density_slope(&self, z: f64) -> f64 {
        -z
    }

    fn log_tails(&self, z: f64) -> LogTails {
        LogTails { lower: normal::log_lower_tail(z), upper: normal::log_upper_tail(z) }
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        normal::quantile_of_log_tail(log_tail, upper)
    }

    fn support(&self) -> (f64, f64) {
        (f64::NEG_INFINITY, f64::INFINITY)
    }

    fn mean(&self) -> Option<f64> {
        Some(0.0)
    }

    fn sd(&self) -> Option<f64> {
        Some(1.0)
    }

    fn value_at_score(&self, u: f64) -> f64 {
        u
    }

    fn score(&self, z: f64) -> f64 {
        z
    }
}

/// `exp(log_mean + log_sd N)`.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Lognormal {
    log_mean: f64,
    log_sd: f64,
    log_log_sd: f64,
}

impl Lognormal {
    pub(super) fn new(log_mean: f64, log_sd: f64) -> Self {
        Self { log_mean, log_sd, log_log_sd: ln(log_sd) }
    }

    /// `x` above zero.
    fn standardised(&self, x: f64) -> f64 {
        (ln(x.max(0.0)) - self.log_mean) / self.log_sd
    }
}

impl Law for Lognormal {
    #[inline]
    fn log_density(&self, x: f64) -> f64 {
        let log_x = ln(x);
        let log_density = normal::log_density((log_x - self.log_mean) / self.log_sd) - self.log_log_sd - log_x;
        if x <= 0.0 { f64::NEG_INFINITY } else { log_density }
    }

    fn log_density_slope(&self, x: f64) -> f64 {
        -(self.standardised(x) / self.log_sd + 1.0) / x
    }

    fn log_tails(&self, x: f64) -> LogTails {
        StandardNormal.log_tails(self.standardised(x))
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        self.value_at_score(normal::quantile_of_log_tail(log_tail, upper))
    }

    fn support(&self) -> (f64, f64) {
        (0.0, f64::INFINITY)
    }

    fn mean(&self) -> Option<f64> {
        Some(exp(self.log_mean + 0.5 * self.log_sd * self.log_sd))
    }

    fn sd(&self) -> Option<f64> {
        Some(exp(self.log_mean + 0.5 * self.log_sd * self.log_sd) * libm::expm1(self.log_sd * self.log_sd).sqrt())
    }

    fn value_at_score(&self, u: f64) -> f64 {
        exp(self.log_mean + self.log_sd * u)
    }

    fn score(&self, x: f64) -> f64 {
        self.standardised(x)
    }
}

/// `|N|`.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct HalfNormal;

impl Law for HalfNormal {
    #[inline]
    fn log_density(&self, x: f64) -> f64 {
        if x < 0.0 { f64::NEG_INFINITY } else { normal::log_density(x) + LN_2 }
    }

    fn log_density_slope(&self, x: f64) -> f64 {
        -x
    }

    fn log_tails(&self, x: f64) -> LogTails {
        if x <= 0.0 {
            return LogTails { lower: f64::NEG_INFINITY, upper: 0.0 };
        }
        if x < 1.0 {
            return LogTails::from_lower(ln(erf(x * std::f64::consts::FRAC_1_SQRT_2)));
        }
        LogTails::from_upper(normal::log_upper_tail(x) + LN_2)
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        if upper == (log_tail < -LN_2) {
            // The upper tail, or what the lower leaves of it, halved: beyond the median of |N|.
            let log_upper = if upper { log_tail } else { crate::numeric::special::log_one_minus_exp(log_tail) };
            return normal::quantile_of_log_tail(log_upper - LN_2, true);
        }
        let lower = if upper { -libm::expm1(log_tail) } else { exp(log_tail) };
        normal::quantile_about_half(0.5 * lower)
    }

    fn support(&self) -> (f64, f64) {
        (0.0, f64::INFINITY)
    }

    fn mean(&self) -> Option<f64> {
        Some((2.0 / PI).sqrt())
    }

    fn sd(&self) -> Option<f64> {
        Some((1.0 - 2.0 / PI).sqrt())
    }
}
