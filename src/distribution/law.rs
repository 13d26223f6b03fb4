//! What every family of distributions can do, and what a location and a scale make of it.

use super::window;
use crate::numeric::normal;
use crate::numeric::special::LogTails;
use std::f64::consts::LN_2;

/// A distribution on the line, without truncation or shift.
///
/// Contract: immutable; `log_density` is normalised and `-inf` off the support; each tail is accurate where it is small
/// and where it is near one, and `quantile` inverts it, for log tails far below the logarithm of the smallest double too.
pub(super) trait Law {
    /// `ln f(x)`, of a discrete law `ln P(X = x)`, in nats.
    fn log_density(&self, x: f64) -> f64;

    /// `d ln f(x) / dx` inside the support; zero for discrete laws.
    fn log_density_slope(&self, x: f64) -> f64;

    /// `ln P(X <= x)` and `ln P(X > x)`.
    fn log_tails(&self, x: f64) -> LogTails;

    /// `x` with that log tail; for a discrete law the least `k` with `P(X <= k) >= e^log_tail`, or, for the upper tail,
    /// with `P(X > k) <= e^log_tail`.
    fn quantile(&self, log_tail: f64, upper: bool) -> f64;

    /// Least and greatest value.
    fn support(&self) -> (f64, f64);

    /// Expectation, where it exists.
    fn mean(&self) -> Option<f64>;

    /// Standard deviation, where it exists.
    fn sd(&self) -> Option<f64>;

    /// Whether the values are whole numbers with a mass each.
    fn is_discrete(&self) -> bool {
        false
    }

    /// `F^-1(Phi(u))`, by way of the smaller tail.
    fn value_at_score(&self, u: f64) -> f64 {
        self.quantile(normal::log_upper_tail(u.abs()), u > 0.0)
    }

    /// `Phi^-1(F(x))`, by way of the smaller tail; for a discrete law in the middle of the mass of `x`.
    fn score(&self, x: f64) -> f64 {
        score_of_tails(self.log_tails(x))
    }

    /// `ln P(a < X <= b)`, for `a < b`.
    fn log_interval(&self, a: f64, b: f64) -> f64 {
        window::log_interval(self, a, b)
    }

    /// `ln f` of a column of values; `out` is as long as `xs`.
    fn log_density_column(&self, xs: &[f64], out: &mut [f64]) {
        for (value, &x) in out.iter_mut().zip(xs) {
            *value = self.log_density(x);
        }
    }
}

/// The standard normal score with these tails.
pub(super) fn score_of_tails(tails: LogTails) -> f64 {
    if tails.lower < -LN_2 {
        normal::quantile_of_log_tail(tails.lower, false)
    } else {
        normal::quantile_of_log_tail(tails.upper, true)
    }
}

/// `X = origin + scale T`, where `T` has the law `standard`; a negative scale is a mirror image.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Affine<L> {
    origin: f64,
    scale: f64,
    log_scale: f64,
    standard: L,
}

impl<L: Law> Affine<L> {
    /// `scale` is finite and not zero, `origin` finite: the catalogue has checked that.
    pub(super) fn new(origin: f64, scale: f64, standard: L) -> Self {
        Self { origin, scale, log_scale: crate::numeric::ln(scale.abs()), standard }
    }

    #[inline(always)]
    fn standardised(&self, x: f64) -> f64 {
        (x - self.origin) / self.scale
    }
}

impl<L: Law> Law for Affine<L> {
    #[inline]
    fn log_density(&self, x: f64) -> f64 {
        self.standard.log_density(self.standardised(x)) - self.log_scale
    }

    fn log_density_slope(&self, x: f64) -> f64 {
        self.standard.log_density_slope(self.standardised(x)) / self.scale
    }

    fn log_tails(&self, x: f64) -> LogTails {
        let tails = self.standard.log_tails(self.standardised(x));
        if self.scale < 0.0 { tails.swapped() } else { tails }
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        self.origin + self.scale * self.standard.quantile(log_tail, upper != (self.scale < 0.0))
    }

    fn support(&self) -> (f64, f64) {
        let (low, high) = self.standard.support();
        let (low, high) = (self.origin + self.scale * low, self.origin + self.scale * high);
        if self.scale < 0.0 { (high, low) } else { (low, high) }
    }

    fn mean(&self) -> Option<f64> {
        self.standard.mean().map(|mean| self.origin + self.scale * mean)
    }

    fn sd(&self) -> Option<f64> {
        self.standard.sd().map(|sd| self.scale.abs() * sd)
    }

    fn value_at_score(&self, u: f64) -> f64 {
        self.origin + self.scale * self.standard.value_at_score(if self.scale < 0.0 { -u } else { u })
    }

    fn score(&self, x: f64) -> f64 {
        let u = self.standard.score(self.standardised(x));
        if self.scale < 0.0 { -u } else { u }
    }
}
