//! Laws on an interval: uniform, beta, triangular. Distances are taken from both ends, so that neither loses digits.

use super::law::Law;
use crate::numeric::special::LogTails;
use crate::numeric::special::log_one_minus_exp;
use crate::numeric::special::{beta_log_tails, beta_quantile, ln_beta, log_beta_front};
use crate::numeric::{exp, ln};
use std::f64::consts::LN_2;

/// The interval that such a law lives on.
#[derive(Debug, Clone, PartialEq)]
struct Interval {
    low: f64,
    high: f64,
    width: f64,
    log_width: f64,
}

impl Interval {
    fn new(low: f64, high: f64) -> Self {
        Self { low, high, width: high - low, log_width: ln(high - low) }
    }

    /// Shares of the width below and above `x`, each exact near its own end; negative outside.
    #[inline(always)]
    fn shares(&self, x: f64) -> (f64, f64) {
        ((x - self.low) / self.width, (self.high - x) / self.width)
    }

    /// The point with these shares, measured from the nearer end.
    fn point(&self, (below, above): (f64, f64)) -> f64 {
        if below <= 0.5 { self.low + self.width * below } else { self.high - self.width * above }
    }
}

/// Flat between its ends.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Uniform(Interval);

impl Uniform {
    pub(super) fn new(low: f64, high: f64) -> Self {
        Self(Interval::new(low, high))
    }
}

impl Law for Uniform {
    #[inline]
    fn log_density(&self, x: f64) -> f64 {
        if x < self.0.low || x > self.0.high { f64::NEG_INFINITY } else { -self.0.log_width }
    }

    fn log_density_slope(&self, _: f64) -> f64 {
        0.0
    }

    fn log_tails(&self, x: f64) -> LogTails {
        let (below, above) = self.0.shares(x.clamp(self.0.low, self.0.high));
        LogTails { lower: ln(below), upper: ln(above) }
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        let tail = exp(log_tail);
        self.0.point(if upper { (1.0 - tail, tail) } else { (tail, -libm::expm1(log_tail)) })
    }

    fn support(&self) -> (f64, f64) {
        (self.0.low, self.0.high)
    }

    fn mean(&self) -> Option<f64> {
        Some(0.5 * (self.0.low + self.0.high))
    }

    fn sd(&self) -> Option<f64> {
        Some(self.0.width / 12.0_f64.sqrt())
    }

    fn log_interval(&self, a: f64, b: f64) -> f64 {
        ln(b.min(self.0.high) - a.max(self.0.low)) - self.0.log_width
    }
}

/// Beyond this `a + b` logarithms times the parameters would lose more than the last two digits.
const LARGE: f64 = 100.0;

/// Beta with parameters `a` and `b`.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Beta {
    a: f64,
    b: f64,
    interval: Interval,
    constant: f64,
}

impl Beta {
    pub(super) fn new(a: f64, b: f64, low: f64, high: f64) -> Self {
        let interval = Interval::new(low, high);
        let constant = -ln_beta(a, b) - interval.log_width;
        Self { a, b, interval, constant }
    }
}

/// `power ln x`, where nothing times `-inf` is nothing.
#[inline(always)]
fn log_power(power: f64, x: f64) -> f64 {
    if power == 0.0 { 0.0 } else { power * ln(x) }
}

impl Law for Beta {
    #[inline]
    fn log_density(&self, x: f64) -> f64 {
        let (below, above) = self.interval.shares(x);
        if below < 0.0 || above < 0.0 {
            return f64::NEG_INFINITY;
        }
        if self.a + self.b > LARGE && below > 0.0 && above > 0.0 {
            return log_beta_front(self.a, self.b, below, above) - ln(below) - ln(above) - self.interval.log_width;
        }
        self.constant + log_power(self.a - 1.0, below) + log_power(self.b - 1.0, above)
    }

    fn log_density_slope(&self, x: f64) -> f64 {
        let (below, above) = self.interval.shares(x);
        ((self.a - 1.0) / below - (self.b - 1.0) / above) / self.interval.width
    }

    fn log_tails(&self, x: f64) -> LogTails {
        let (below, above) = self.interval.shares(x);
        beta_log_tails(self.a, self.b, below, above)
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        self.interval.point(beta_quantile(self.a, self.b, log_tail, upper))
    }

    fn support(&self) -> (f64, f64) {
        (self.interval.low, self.interval.high)
    }

    fn mean(&self) -> Option<f64> {
        let sum = self.a + self.b;
        Some(self.interval.low + self.interval.width * (self.a / sum))
    }

    fn sd(&self) -> Option<f64> {
        let sum = self.a + self.b;
        Some(self.interval.width * (self.a / sum * (self.b / sum) / (sum + 1.0)).sqrt())
    }
}

/// Rises in a straight line from `low` to `mode` and falls to `high`.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Triangular {
    interval: Interval,
    mode: f64,
    /// `(mode - low)/(high - low)`: the probability below the mode.
    below_mode: f64,
}

impl Triangular {
    pub(super) fn new(low: f64, mode: f64, high: f64) -> Self {
        let interval = Interval::new(low, high);
        let below_mode = (mode - low) / interval.width;
        Self { interval, mode, below_mode }
    }

    /// `ln` of the probability between `x` and the end on its own side of the mode.
    fn log_outer(&self, x: f64) -> f64 {
        let (below, above) = self.interval.shares(x);
        if x <= self.mode {
            2.0 * ln(below) - ln(self.below_mode)
        } else {
            2.0 * ln(above) - ln((self.interval.high - self.mode) / self.interval.width)
        }
    }
}

impl Law for Triangular {
    #[inline]
    fn log_density(&self, x: f64) -> f64 {
        let Interval { low, high, log_width, .. } = self.interval;
        if x < low || x > high {
            return f64::NEG_INFINITY;
        }
        let height = if x < self.mode {
            (x - low) / (self.mode - low)
        } else if x > self.mode {
            (high - x) / (high - self.mode)
        } else {
            1.0
        };
        LN_2 - log_width + ln(height)
    }

    fn log_density_slope(&self, x: f64) -> f64 {
        if x < self.mode { 1.0 / (x - self.interval.low) } else { -1.0 / (self.interval.high - x) }
    }

    fn log_tails(&self, x: f64) -> LogTails {
        if x <= self.interval.low {
            LogTails { lower: f64::NEG_INFINITY, upper: 0.0 }
        } else if x >= self.interval.high {
            LogTails { lower: 0.0, upper: f64::NEG_INFINITY }
        } else if x <= self.mode {
            LogTails::from_lower(self.log_outer(x))
        } else {
            LogTails::from_upper(self.log_outer(x))
        }
    }

    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        let side = |upper: bool| {
            ln(if upper { (self.interval.high - self.mode) / self.interval.width } else { self.below_mode })
        };
        let (log_tail, upper) =
            if log_tail > side(upper) { (log_one_minus_exp(log_tail), !upper) } else { (log_tail, upper) };
        let distance = exp(0.5 * (log_tail + side(upper)));
        self.interval.point(if upper { (1.0 - distance, distance) } else { (distance, 1.0 - distance) })
    }

    fn support(&self) -> (f64, f64) {
        (self.interval.low, self.interval.high)
    }

    fn mean(&self) -> Option<f64> {
        Some((self.interval.low + self.mode + self.interval.high) / 3.0)
    }

    fn sd(&self) -> Option<f64> {
        let c = self.below_mode;
        Some(self.interval.width * ((1.0 - c * (1.0 - c)) / 18.0).sqrt())
    }

    /// Areas of trapezia: `(b - a)` times the density at the middle, on either side of the mode.
    fn log_interval(&self, a: f64, b: f64) -> f64 {
        let (a, b) = (a.max(self.interval.low), b.min(self.interval.high));
        let piece = |a: f64, b: f64| ln((b - a).max(0.0)) + self.log_density(0.5 * (a + b));
        if a < self.mode && self.mode < b {
            return crate::numeric::log_add_exp(piece(a, self.mode), piece(self.mode, b));
        }
        piece(a, b)
    }
}
