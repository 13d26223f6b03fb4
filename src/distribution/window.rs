//! Truncation to an interval, by logarithms of tails, so that it works far out in a tail as well.

use super::law::Law;
use crate::numeric::quadrature::gauss_legendre;
use crate::numeric::special::LogTails;
use crate::numeric::special::log_one_minus_exp;
use crate::numeric::{exp, ln, log_add_exp, log_sum_exp};
use std::f64::consts::LN_2;

/// The part of a law in `(low, high]`: in `[low, high]` for a continuous one, while for a discrete one `low` is the whole
/// number before the first and `high` the last.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Window {
    low: f64,
    high: f64,
    log_mass: f64,
}

impl Window {
    /// `None` when there is no probability in `[low, high]`.
    pub(super) fn new(law: &dyn Law, low: f64, high: f64) -> Option<Self> {
        let (least, greatest) = law.support();
        let (mut low, mut high) = (low.max(least), high.min(greatest));
        if law.is_discrete() {
            (low, high) = (low.ceil() - 1.0, high.floor());
        }
        if low >= high {
            return None;
        }
        let log_mass = law.log_interval(low, high);
        (log_mass > f64::NEG_INFINITY).then_some(Self { low, high, log_mass })
    }

    /// `ln` of the probability that the whole law has in the window.
    pub(super) fn log_mass(&self) -> f64 {
        self.log_mass
    }

    /// The ends.
    pub(super) fn ends(&self, law: &dyn Law) -> (f64, f64) {
        (if law.is_discrete() { self.low + 1.0 } else { self.low }, self.high)
    }

    /// Whether the density at `x` is that of the law, renormalised.
    pub(super) fn contains(&self, law: &dyn Law, x: f64) -> bool {
        x <= self.high && (x > self.low || (x == self.low && !law.is_discrete()))
    }

    pub(super) fn log_tails(&self, law: &dyn Law, x: f64) -> LogTails {
        if x <= self.low {
            return LogTails { lower: f64::NEG_INFINITY, upper: 0.0 };
        }
        let x = if law.is_discrete() { x.floor() } else { x };
        if x >= self.high {
            return LogTails { lower: 0.0, upper: f64::NEG_INFINITY };
        }
        let lower = law.log_interval(self.low, x) - self.log_mass;
        if lower < -LN_2 {
            LogTails::from_lower(lower)
        } else {
            LogTails::from_upper(law.log_interval(x, self.high) - self.log_mass)
        }
    }

    /// Quantile within the window, given the smaller of its log tails or any other.
    pub(super) fn quantile(&self, law: &dyn Law, log_tail: f64, upper: bool) -> f64 {
        if log_tail > -LN_2 {
            return self.quantile(law, log_one_minus_exp(log_tail), !upper);
        }
        if log_tail == f64::NEG_INFINITY {
            let (low, high) = self.ends(law);
            return if upper { high } else { low };
        }
        let end = if upper { self.high } else { self.low };
        let beyond = outer_tail(law, end, upper);
        let inside = log_tail + self.log_mass;
        if law.is_discrete() {
            return self.whole_quantile(law, log_tail, upper, self.start(law, log_tail, upper, beyond));
        }
        if beyond > inside + 3.0 && end.is_finite() {
            return self.near_end(law, inside, end, upper);
        }
        self.start(law, log_tail, upper, beyond)
    }

    /// From the tail of the whole law: `F(low) + tail mass`, or through the other side where that passes the median.
    fn start(&self, law: &dyn Law, log_tail: f64, upper: bool, beyond: f64) -> f64 {
        let whole = log_add_exp(beyond, log_tail + self.log_mass);
        let x = if whole <= -LN_2 {
            law.quantile(whole, upper)
        } else {
            let other = outer_tail(law, if upper { self.low } else { self.high }, !upper);
            law.quantile(log_add_exp(other, log_one_minus_exp(log_tail) + self.log_mass), !upper)
        };
        x.clamp(self.low, self.high)
    }

    /// Newton's method for the distance from `end`, in its logarithm, where the tail of the whole law beyond that end
    /// would swallow what is asked for.
    fn near_end(&self, law: &dyn Law, inside: f64, end: f64, upper: bool) -> f64 {
        let width = self.high - self.low;
        let mut distance = exp(inside - law.log_density(end));
        if !(distance > 0.0 && distance < width) {
            distance = if width.is_finite() { 0.5 * width } else { 1.0 };
        }
        for _ in 0..60 {
            let x = if upper { end - distance } else { end + distance };
            if x == end || !(self.low..=self.high).contains(&x) {
                return x.clamp(self.low, self.high);
            }
            let have = if upper { law.log_interval(x, end) } else { law.log_interval(end, x) };
            let elasticity = exp(law.log_density(x) + ln(distance) - have);
            let step = ((inside - have) / elasticity).clamp(-3.0, 3.0);
            distance = (distance * exp(step)).min(width);
            if step.abs() < 1e-14 {
                break;
            }
        }
        if upper { end - distance } else { end + distance }
    }

    /// The whole number next to the start that fulfils the definition of a discrete quantile within the window.
    fn whole_quantile(&self, law: &dyn Law, log_tail: f64, upper: bool, start: f64) -> f64 {
        let reached = |k: f64| {
            let tails = self.log_tails(law, k);
            if upper { tails.upper <= log_tail } else { tails.lower >= log_tail }
        };
        let mut k = start.clamp(self.low + 1.0, self.high);
        while k > self.low + 1.0 && reached(k - 1.0) {
            k -= 1.0;
        }
        while k < self.high && !reached(k) {
            k += 1.0;
        }
        k
    }
}

/// The log tail of the whole law beyond an end of the window.
fn outer_tail(law: &dyn Law, end: f64, upper: bool) -> f64 {
    if end.is_infinite() {
        return f64::NEG_INFINITY;
    }
    let tails = law.log_tails(end);
    if upper { tails.upper } else { tails.lower }
}

/// `ln P(a < X <= b)` of a continuous law, for `a < b`.
///
/// The difference of the tails on the nearer side; where these are so close that the difference would lose more than a
/// digit, the integral of the density by the Gauss-Legendre rule of 20 points (the density is then smooth on the scale of
/// the interval, unless the support ends nearby: then the difference stays).
pub(super) fn log_interval<L: Law + ?Sized>(law: &L, a: f64, b: f64) -> f64 {
    let (least, greatest) = law.support();
    match (a <= least, b >= greatest) {
        (true, true) => return 0.0,
        (true, false) => return law.log_tails(b).lower,
        (false, true) => return law.log_tails(a).upper,
        (false, false) => {}
    }
    let (at_a, at_b) = (law.log_tails(a), law.log_tails(b));
    let (difference, loss) = if at_b.lower < -LN_2 {
        (at_b.lower + log_one_minus_exp(at_a.lower - at_b.lower), at_b.lower - at_a.lower)
    } else if at_a.upper < -LN_2 {
        (at_a.upper + log_one_minus_exp(at_b.upper - at_a.upper), at_a.upper - at_b.upper)
    } else {
        let outside = exp(at_a.lower) + exp(at_b.upper);
        (libm::log1p(-outside), 1.0 - outside)
    };
    // Written so that NaN (both tails -inf) takes the integral too.
    let is_kept = loss >= 0.1 || b - a > 2.0 * (a - least).min(greatest - b);
    if is_kept { difference } else { log_integral(law, a, b) }
}

fn log_integral<L: Law + ?Sized>(law: &L, a: f64, b: f64) -> f64 {
    let parts: Vec<f64> = gauss_legendre(a, b).map(|(x, weight)| law.log_density(x) + ln(weight)).collect();
    log_sum_exp(&parts)
}
