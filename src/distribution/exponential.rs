//! The exponential distribution and the laws that are an exponential variable `E` in disguise: Weibull `E^(1/shape)`,
//! Pareto `exp(E/shape)`, the extreme values `-ln E` (Gumbel) and `(E^-shape - 1)/shape`.

use super::law::Law;
use crate::numeric::special::LogTails;
use crate::numeric::special::log_one_minus_exp;
use crate::numeric::special::{ln_gamma_1p, ln_gamma_spread};
use crate::numeric::{exp, ln};
use std::f64::consts::PI;

/// Tails of `E` at `e`: `P(E > e) = exp(-e)`.
fn exponential_tails(e: f64) -> LogTails {
    if e <= 0.0 {
        return LogTails { lower: f64::NEG_INFINITY, upper: 0.0 };
    }
    LogTails { lower: log_one_minus_exp(-e), upper: -e }
}

/// Quantile of `E`.
fn exponential_quantile(log_tail: f64, upper: bool) -> f64 {
    if upper { -log_tail } else { -log_one_minus_exp(log_tail) }
}

/// Rate one.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Exponential;

impl Law for Exponential {
    #[inline]
    fn log_density(&self, x: f64) -> f64 {
        if x < 0.0 { f64::NEG_INFINITY } else { -x }
    }

    fn log_density_slope(&self, _: f64) -> f64 {
        -1.0
    }

    fn log_tails(&self, x: f64) -> LogTails {
        exponential_tails(x)
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        exponential_quantile(log_tail, upper)
    }

    fn support(&self) -> (f64, f64) {
        (0.0, f64::INFINITY)
    }

    fn mean(&self) -> Option<f64> {
        Some(1.0)
    }

    fn sd(&self) -> Option<f64> {
        Some(1.0)
    }
}

/// `E^(1/shape)`.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Weibull {
    shape: f64,
    log_shape: f64,
}

impl Weibull {
    pub(super) fn new(shape: f64) -> Self {
        Self { shape, log_shape: ln(shape) }
    }

    /// The shape with that coefficient of variation: `ln(1 + cv^2) = ln Gamma(1 + 2h) - 2 ln Gamma(1 + h)`, `h = 1/shape`.
    ///
    /// The right side grows with `h`, from `1.64 h^2` near zero to about `1.39 h`: the interval of `h` is halved, in
    /// logarithms, down to neighbouring doubles. Returns `1/h`.
    pub(super) fn shape_of_cv(cv: f64) -> f64 {
        let target = libm::log1p(cv * cv);
        let (mut low, mut high) = (1e-12_f64, 1e6_f64);
        for _ in 0..200 {
            let middle = (low * high).sqrt();
            if middle <= low || middle >= high {
                break;
            }
            if ln_gamma_spread(middle) < target { low = middle } else { high = middle }
        }
        1.0 / (low * high).sqrt()
    }
}

impl Law for Weibull {
    #[inline]
    fn log_density(&self, x: f64) -> f64 {
        if x < 0.0 {
            return f64::NEG_INFINITY;
        }
        if self.shape == 1.0 {
            return -x; // at x = 0 the general form is 0 times -inf
        }
        let log_x = ln(x);
        self.log_shape + (self.shape - 1.0) * log_x - exp(self.shape * log_x)
    }

    fn log_density_slope(&self, x: f64) -> f64 {
        (self.shape - 1.0 - self.shape * libm::pow(x, self.shape)) / x
    }

    fn log_tails(&self, x: f64) -> LogTails {
        exponential_tails(libm::pow(x.max(0.0), self.shape))
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        libm::pow(exponential_quantile(log_tail, upper), 1.0 / self.shape).max(f64::MIN_POSITIVE)
    }

    fn support(&self) -> (f64, f64) {
        (0.0, f64::INFINITY)
    }

    fn mean(&self) -> Option<f64> {
        Some(exp(ln_gamma_1p(1.0 / self.shape)))
    }

    fn sd(&self) -> Option<f64> {
        let h = 1.0 / self.shape;
        Some(exp(ln_gamma_1p(h)) * libm::expm1(ln_gamma_spread(h)).sqrt())
    }
}

/// `exp(E/shape)`: from one upwards.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Pareto {
    shape: f64,
    log_shape: f64,
}

impl Pareto {
    pub(super) fn new(shape: f64) -> Self {
        Self { shape, log_shape: ln(shape) }
    }
}

impl Law for Pareto {
    #[inline]
    fn log_density(&self, x: f64) -> f64 {
        if x < 1.0 { f64::NEG_INFINITY } else { self.log_shape - (self.shape + 1.0) * ln(x) }
    }

    fn log_density_slope(&self, x: f64) -> f64 {
        -(self.shape + 1.0) / x
    }

    fn log_tails(&self, x: f64) -> LogTails {
        exponential_tails(self.shape * ln(x.max(1.0)))
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        exp(exponential_quantile(log_tail, upper) / self.shape)
    }

    fn support(&self) -> (f64, f64) {
        (1.0, f64::INFINITY)
    }

    fn mean(&self) -> Option<f64> {
        (self.shape > 1.0).then(|| self.shape / (self.shape - 1.0))
    }

    fn sd(&self) -> Option<f64> {
        (self.shape > 2.0).then(|| (self.shape / (self.shape - 2.0)).sqrt() / (self.shape - 1.0))
    }
}

/// The generalised extreme value law of largest values: `s = -ln E`, `T = (e^(shape s) - 1)/shape`; Gumbel's `T = s` when
/// `shape = 0`. A shape above zero has the heavy upper tail.
///
/// # Source
/// Jenkinson, Q. J. R. Meteorol. Soc. 81 (1955) 158-171; moments: Hosking, Wallis & Wood, Technometrics 27 (1985) 251-261.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Extreme {
    shape: f64,
}

impl Extreme {
    /// Standard deviation of Gumbel's law: `pi/sqrt 6`.
    pub(super) const GUMBEL_SD: f64 = 1.282_549_830_161_864_095_5;
    /// Mean of Gumbel's law: Euler's constant.
    pub(super) const GUMBEL_MEAN: f64 = 0.577_215_664_901_532_860_61;

    pub(super) fn gumbel() -> Self {
        Self { shape: 0.0 }
    }

    pub(super) fn new(shape: f64) -> Self {
        Self { shape }
    }

    /// `s` with `P(T <= t) = exp(-e^-s)`; infinite beyond an end of the support.
    #[inline(always)]
    fn reduced(&self, t: f64) -> f64 {
        if self.shape == 0.0 {
            return t;
        }
        let grown = self.shape * t;
        if grown <= -1.0 { f64::NEG_INFINITY * self.shape } else { libm::log1p(grown) / self.shape }
    }

    #[inline(always)]
    fn expanded(&self, s: f64) -> f64 {
        if self.shape == 0.0 { s } else { libm::expm1(self.shape * s) / self.shape }
    }
}

impl Law for Extreme {
    #[inline]
    fn log_density(&self, t: f64) -> f64 {
        let s = self.reduced(t);
        if s.is_infinite() { f64::NEG_INFINITY } else { -(1.0 + self.shape) * s - exp(-s) }
    }

    fn log_density_slope(&self, t: f64) -> f64 {
        let s = self.reduced(t);
        (exp(-s) - (1.0 + self.shape)) * exp(-self.shape * s)
    }

    fn log_tails(&self, t: f64) -> LogTails {
        let s = self.reduced(t);
        if s > 700.0 {
            return LogTails { lower: -exp(-s), upper: -s }; // where e^-s is no normal double, 1 - exp(-e^-s) = e^-s
        }
        exponential_tails(exp(-s)).swapped()
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        if upper && log_tail < -40.0 {
            return self.expanded(-log_tail);
        }
        self.expanded(-ln(exponential_quantile(log_tail, !upper)))
    }

    fn support(&self) -> (f64, f64) {
        let end = -1.0 / self.shape;
        if self.shape > 0.0 {
            (end, f64::INFINITY)
        } else if self.shape < 0.0 {
            (f64::NEG_INFINITY, end)
        } else {
            (f64::NEG_INFINITY, f64::INFINITY)
        }
    }

    fn mean(&self) -> Option<f64> {
        if self.shape == 0.0 {
            return Some(Self::GUMBEL_MEAN);
        }
        (self.shape < 1.0).then(|| libm::expm1(ln_gamma_1p(-self.shape)) / self.shape)
    }

    fn sd(&self) -> Option<f64> {
        if self.shape == 0.0 {
            return Some(PI / 6.0_f64.sqrt());
        }
        let variance = || libm::expm1(ln_gamma_spread(-self.shape));
        (self.shape < 0.5).then(|| exp(ln_gamma_1p(-self.shape)) * variance().sqrt() / self.shape.abs())
    }
}
