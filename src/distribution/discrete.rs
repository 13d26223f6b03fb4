//! Laws of whole numbers: binomial (Bernoulli among them), Poisson, geometric, and equally likely integers.

use super::law::Law;
use crate::numeric::normal;
use crate::numeric::special::LogTails;
use crate::numeric::special::log_one_minus_exp;
use crate::numeric::special::{beta_log_tails, gamma_log_tails, log_beta_front, log_gamma_front};
use crate::numeric::{ln, log_sum_exp};

/// Up to so many masses are summed rather than two tails subtracted.
const SUMMED: f64 = 64.0;

/// What such a law has of its own; the rest of [`Law`] follows.
pub(super) trait WholeLaw {
    /// `ln P(X = k)` for a whole `k` in the support.
    fn log_mass(&self, k: f64) -> f64;

    /// `ln P(X <= k)` and `ln P(X > k)` for a whole `k` in the support, its greatest value excepted.
    fn tails(&self, k: f64) -> LogTails;

    /// Least and greatest value.
    fn range(&self) -> (f64, f64);

    /// Mean and standard deviation.
    fn moments(&self) -> (f64, f64);
}

impl<W: WholeLaw> Law for W {
    fn log_density(&self, x: f64) -> f64 {
        let (least, greatest) = self.range();
        if x < least || x > greatest || x != x.floor() || x.is_infinite() {
            f64::NEG_INFINITY
        } else {
            self.log_mass(x)
        }
    }

    fn log_density_slope(&self, _: f64) -> f64 {
        0.0
    }

    fn log_tails(&self, x: f64) -> LogTails {
        let (least, greatest) = self.range();
        if x < least {
            LogTails { lower: f64::NEG_INFINITY, upper: 0.0 }
        } else if x >= greatest {
            LogTails { lower: 0.0, upper: f64::NEG_INFINITY }
        } else {
            self.tails(x.floor())
        }
    }

    /// Bracketing by doubled steps from the normal approximation, then bisection.
    fn quantile(&self, log_tail: f64, upper: bool) -> f64 {
        let (least, greatest) = self.range();
        if log_tail == f64::NEG_INFINITY || log_tail >= 0.0 {
            return if upper == (log_tail >= 0.0) { least } else { greatest };
        }
        let reached = |k: f64| {
            let tails = self.log_tails(k);
            if upper { tails.upper <= log_tail } else { tails.lower >= log_tail }
        };
        let (mean, sd) = self.moments();
        let start = (mean + sd * normal::quantile_of_log_tail(log_tail, upper)).round().clamp(least, greatest);
        let mut step = 1.0_f64.max((0.1 * sd).floor());
        // `below` is not reached, `at` is.
        let (mut below, mut at) = (start, start);
        if reached(start) {
            below = start - step;
            while below >= least && reached(below) {
                (at, step) = (below, 2.0 * step);
                below = at - step;
            }
            below = below.max(least - 1.0);
        } else {
            at = start + step;
            while at < greatest && !reached(at) {
                (below, step) = (at, 2.0 * step);
                at = below + step;
            }
            at = at.min(greatest);
        }
        while at - below > 1.0 {
            let middle = (0.5 * (below + at)).floor();
            if reached(middle) { at = middle } else { below = middle }
        }
        at
    }

    fn support(&self) -> (f64, f64) {
        self.range()
    }

    fn mean(&self) -> Option<f64> {
        Some(self.moments().0)
    }

    fn sd(&self) -> Option<f64> {
        Some(self.moments().1)
    }

    fn is_discrete(&self) -> bool {
        true
    }

    /// The middle of the mass of `x`: halfway between `P(X < x)` and `P(X <= x)`, on the side of the smaller tail.
    fn score(&self, x: f64) -> f64 {
        let k = x.floor();
        let (before, after) = (self.log_tails(k - 1.0), self.log_tails(k));
        let half = std::f64::consts::LN_2;
        super::law::score_of_tails(LogTails {
            lower: crate::numeric::log_add_exp(before.lower, after.lower) - half,
            upper: crate::numeric::log_add_exp(before.upper, after.upper) - half,
        })
    }

    fn log_interval(&self, a: f64, b: f64) -> f64 {
        let (least, greatest) = self.range();
        let (a, b) = (a.floor().max(least - 1.0), b.floor().min(greatest));
        if b - a <= SUMMED {
            let count = (b - a).max(0.0) as u32;
            let masses: Vec<f64> = (1..=count).map(|j| self.log_mass(a + f64::from(j))).collect();
            return log_sum_exp(&masses);
        }
        let (at_a, at_b) = (self.log_tails(a), self.log_tails(b));
        if at_b.lower < -std::f64::consts::LN_2 {
            at_b.lower + log_one_minus_exp(at_a.lower - at_b.lower)
        } else if at_a.upper < -std::f64::consts::LN_2 {
            at_a.upper + log_one_minus_exp(at_b.upper - at_a.upper)
        } else {
            libm::log1p(-(crate::numeric::exp(at_a.lower) + crate::numeric::exp(at_b.upper)))
        }
    }
}

/// Successes in `n` trials.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Binomial {
    n: f64,
    p: f64,
    q: f64,
    /// `ln((n + 1) p q)`.
    log_front: f64,
}

impl Binomial {
    pub(super) fn new(n: f64, p: f64) -> Self {
        let q = 1.0 - p;
        Self { n, p, q, log_front: ln(n + 1.0) + ln(p) + libm::log1p(-p) }
    }
}

impl WholeLaw for Binomial {
    /// By the beta density with `k + 1` and `n - k + 1`, except at the ends, where a power is all.
    fn log_mass(&self, k: f64) -> f64 {
        if k == 0.0 {
            self.n * libm::log1p(-self.p)
        } else if k == self.n {
            self.n * ln(self.p)
        } else {
            log_beta_front(k + 1.0, self.n - k + 1.0, self.p, self.q) - self.log_front
        }
    }

    fn tails(&self, k: f64) -> LogTails {
        beta_log_tails(self.n - k, k + 1.0, self.q, self.p)
    }

    fn range(&self) -> (f64, f64) {
        (0.0, self.n)
    }

    fn moments(&self) -> (f64, f64) {
        (self.n * self.p, (self.n * self.p * self.q).sqrt())
    }
}

/// Events at a rate.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Poisson {
    mean: f64,
    log_mean: f64,
}

impl Poisson {
    pub(super) fn new(mean: f64) -> Self {
        Self { mean, log_mean: ln(mean) }
    }
}

impl WholeLaw for Poisson {
    fn log_mass(&self, k: f64) -> f64 {
        if k == 0.0 { -self.mean } else { log_gamma_front(k + 1.0, self.mean) - self.log_mean }
    }

    fn tails(&self, k: f64) -> LogTails {
        gamma_log_tails(k + 1.0, self.mean).swapped()
    }

    fn range(&self) -> (f64, f64) {
        (0.0, f64::INFINITY)
    }

    fn moments(&self) -> (f64, f64) {
        (self.mean, self.mean.sqrt())
    }
}

/// Trials up to and with the first success.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Geometric {
    p: f64,
    log_failure: f64,
}

impl Geometric {
    pub(super) fn new(p: f64) -> Self {
        Self { p, log_failure: libm::log1p(-p) }
    }
}

impl WholeLaw for Geometric {
    fn log_mass(&self, k: f64) -> f64 {
        // With p = 1 the logarithm of a failure is -inf, and there is none before the first trial.
        ln(self.p) + if k == 1.0 { 0.0 } else { (k - 1.0) * self.log_failure }
    }

    fn tails(&self, k: f64) -> LogTails {
        LogTails::from_upper(k * self.log_failure)
    }

    fn range(&self) -> (f64, f64) {
        (1.0, f64::INFINITY)
    }

    fn moments(&self) -> (f64, f64) {
        (1.0 / self.p, (1.0 - self.p).sqrt() / self.p)
    }
}

/// The whole numbers from `low` to `high`, equally likely.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Integers {
    low: f64,
    high: f64,
    log_count: f64,
}

impl Integers {
    pub(super) fn new(low: f64, high: f64) -> Self {
        Self { low, high, log_count: ln(high - low + 1.0) }
    }
}

impl WholeLaw for Integers {
    fn log_mass(&self, _: f64) -> f64 {
        -self.log_count
    }

    fn tails(&self, k: f64) -> LogTails {
        LogTails { lower: ln(k - self.low + 1.0) - self.log_count, upper: ln(self.high - k) - self.log_count }
    }

    fn range(&self) -> (f64, f64) {
        (self.low, self.high)
    }

    fn moments(&self) -> (f64, f64) {
        let count = self.high - self.low + 1.0;
        (0.5 * (self.low + self.high), ((count * count - 1.0) / 12.0).sqrt())
    }
}
