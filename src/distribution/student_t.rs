//! Student's t, Cauchy and half-Cauchy, and the logistic distribution: symmetric laws with heavy or exponential tails.

use super::law::Law;
use crate::numeric::special::LogTails;
use crate::numeric::special::log_one_minus_exp;
use crate::numeric::special::{student_t_log_constant, student_t_log_upper_tail, student_t_quantile};
use crate::numeric::{exp, ln};
use std::f64::consts::{FRAC_1_PI, FRAC_PI_2, LN_2, PI};

const LN_PI: f64 = 1.144_729_885_849_400_174_1;

/// Location zero, scale one.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct StudentT {
    df: f64,
    constant: f64,
}

impl StudentT {
    pub(super) fn new(df: f64) -> Self {
        Self { df, constant: student_t_log_constant(df) }
    }
}

impl Law for StudentT {
    #[inline]
    fn log_density(&self, t: f64) -> f64 {
        let square = t * t / self.df;
        if square < 1e300 {
            return self.constant - 0.5 * (self.df + 1.0) * libm::log1p(square);
        }
        self.constant - (self.df + 1.0) * (ln(t.abs()) - 0.5 * ln(self.df)) // t^2 leaves the doubles
    }

    fn log_density_slope(&self, t: f64) -> f64 {
        -(self.df + 1.0) / (self.df / t + t)
    }

    fn log_tails(&self, t: f64) -> LogTails {
        let tails = LogTails::from_upper(student_t_log_upper_tail(self.df, t.abs()));
        if t < 0.0 { tails.swapped() } else { tails }
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        student_t_quantile(self.df, log_tail, upper)
    }

    fn support(&self) -> (f64, f64) {
        (f64::NEG_INFINITY, f64::INFINITY)
    }

    fn mean(&self) -> Option<f64> {
        (self.df > 1.0).then_some(0.0)
    }

    fn sd(&self) -> Option<f64> {
        (self.df > 2.0).then(|| (self.df / (self.df - 2.0)).sqrt())
    }
}

/// Student's t with one degree of freedom.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Cauchy;

impl Law for Cauchy {
    #[inline]
    fn log_density(&self, t: f64) -> f64 {
        -LN_PI - log1p_square(t)
    }

    fn log_density_slope(&self, t: f64) -> f64 {
        -2.0 / (1.0 / t + t)
    }

    fn log_tails(&self, t: f64) -> LogTails {
        let tails = LogTails::from_upper(ln(FRAC_1_PI * libm::atan(1.0 / t.abs())));
        if t < 0.0 { tails.swapped() } else { tails }
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        if log_tail > -LN_2 {
            return self.quantile(log_one_minus_exp(log_tail), !upper);
        }
        let t = cotangent(PI, log_tail);
        if upper { t } else { -t }
    }

    fn support(&self) -> (f64, f64) {
        (f64::NEG_INFINITY, f64::INFINITY)
    }

    fn mean(&self) -> Option<f64> {
        None
    }

    fn sd(&self) -> Option<f64> {
        None
    }
}

/// The absolute value of a Cauchy variable.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct HalfCauchy;

impl Law for HalfCauchy {
    #[inline]
    fn log_density(&self, t: f64) -> f64 {
        if t < 0.0 { f64::NEG_INFINITY } else { LN_2 - LN_PI - log1p_square(t) }
    }

    fn log_density_slope(&self, t: f64) -> f64 {
        Cauchy.log_density_slope(t)
    }

    fn log_tails(&self, t: f64) -> LogTails {
        if t <= 0.0 {
            LogTails { lower: f64::NEG_INFINITY, upper: 0.0 }
        } else if t < 1.0 {
            LogTails::from_lower(ln(2.0 * FRAC_1_PI * libm::atan(t)))
        } else {
            LogTails::from_upper(ln(2.0 * FRAC_1_PI * libm::atan(1.0 / t)))
        }
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        if log_tail > -LN_2 {
            return self.quantile(log_one_minus_exp(log_tail), !upper);
        }
        if upper { cotangent(FRAC_PI_2, log_tail) } else { libm::tan(FRAC_PI_2 * exp(log_tail)) }
    }

    fn support(&self) -> (f64, f64) {
        (0.0, f64::INFINITY)
    }

    fn mean(&self) -> Option<f64> {
        None
    }

    fn sd(&self) -> Option<f64> {
        None
    }
}

/// `ln(1 + t^2)` where `t^2` may leave the doubles.
#[inline(always)]
fn log1p_square(t: f64) -> f64 {
    if t.abs() < 1e150 { libm::log1p(t * t) } else { 2.0 * ln(t.abs()) }
}

/// `1/tan(angle e^log_tail)`, for a tail of at most one half; a quantile beyond the largest double is infinite.
fn cotangent(angle: f64, log_tail: f64) -> f64 {
    if log_tail < -40.0 { exp(-log_tail) / angle } else { 1.0 / libm::tan(angle * exp(log_tail)) }
}

/// `ln(p/(1-p))` of a uniform `p`.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Logistic;

impl Logistic {
    /// Standard deviation `pi/sqrt 3`.
    pub(super) const SD: f64 = 1.813_799_364_234_217_850_6;

    /// `ln(1 + e^t)`.
    fn softplus(t: f64) -> f64 {
        t.max(0.0) + libm::log1p(exp(-t.abs()))
    }
}

impl Law for Logistic {
    #[inline]
    fn log_density(&self, t: f64) -> f64 {
        -t.abs() - 2.0 * libm::log1p(exp(-t.abs()))
    }

    fn log_density_slope(&self, t: f64) -> f64 {
        -libm::tanh(0.5 * t)
    }

    fn log_tails(&self, t: f64) -> LogTails {
        LogTails { lower: -Self::softplus(-t), upper: -Self::softplus(t) }
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        let t = log_tail - log_one_minus_exp(log_tail);
        if upper { -t } else { t }
    }

    fn support(&self) -> (f64, f64) {
        (f64::NEG_INFINITY, f64::INFINITY)
    }

    fn mean(&self) -> Option<f64> {
        Some(0.0)
    }

    fn sd(&self) -> Option<f64> {
        Some(Self::SD)
    }
}
