//! Log weights and their plain statistics: mean, effective sample size, variance, perplexity, largest share.

use crate::numeric::{exp, ln};
use thiserror::Error;

/// Why a list of numbers cannot be a list of log weights.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum WeightError {
    /// A log weight is NaN or `+inf`: target or proposal is broken at that draw (from 0).
    #[error("log weight of draw {0} is {1}; expected a finite number or -inf")]
    NotFinite(usize, f64),
    /// The proposal never landed, in that many draws, where the target has mass.
    #[error("all {0} weights are zero: the proposal misses the target; widen the start")]
    NoMass(usize),
}

/// Log weights `ln p(x_i) - ln q(x_i)` of `n` draws, in nats.
///
/// Invariant: no entry is NaN or `+inf`, and at least one is above `-inf`.
///
/// Everything below is computed from `v_i = exp(log w_i - max log w)`, the weights relative to the largest one, so
/// that shifting all log weights by a constant changes nothing but [`log_mean`](Self::log_mean).
///
/// ```
/// use evenpoise::weights::LogWeights;
/// let weights = LogWeights::new(vec![0.0, 0.0, 0.0, f64::NEG_INFINITY])?;
/// assert_eq!(weights.ess(), 3.0);
/// assert_eq!(weights.ess_fraction(), 0.75);
/// # Ok::<(), evenpoise::weights::WeightError>(())
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct LogWeights {
    log: Vec<f64>,
    largest: f64,
    relative: Vec<f64>,
    sum: f64,
}

impl LogWeights {
    /// Checks the invariant once; the rest of the crate assumes it.
    ///
    /// # Errors
    /// [`WeightError::NotFinite`] with the first offender; [`WeightError::NoMass`] when every weight is zero, and for
    /// an empty list.
    pub fn new(log: Vec<f64>) -> Result<Self, WeightError> {
        let mut largest = f64::NEG_INFINITY;
        for (i, &value) in log.iter().enumerate() {
            if value.is_nan() || value == f64::INFINITY {
                return Err(WeightError::NotFinite(i, value));
            }
            largest = largest.max(value);
        }
        if largest == f64::NEG_INFINITY {
            return Err(WeightError::NoMass(log.len()));
        }
        let relative: Vec<f64> = log.iter().map(|&value| exp(value - largest)).collect();
        let sum = relative.iter().sum();
        Ok(Self { log, largest, relative, sum })
    }

    /// Number of draws, those of weight zero included.
    #[must_use]
    pub fn len(&self) -> usize {
        self.log.len()
    }

    /// Never true: a list without mass is refused by [`new`](Self::new).
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.log.is_empty()
    }

    /// The log weights as given, nats.
    #[must_use]
    pub fn as_slice(&self) -> &[f64] {
        &self.log
    }

    /// The largest log weight, nats.
    #[must_use]
    pub fn largest(&self) -> f64 {
        self.largest
    }

    /// `exp(log w_i - largest)`: the weights relative to the largest one, between 0 and 1.
    #[must_use]
    pub fn relative(&self) -> &[f64] {
        &self.relative
    }

    /// `ln((1/n) sum_i w_i)`: the estimate of the log normalising constant, nats.
    #[must_use]
    pub fn log_mean(&self) -> f64 {
        self.largest + ln(self.sum / self.n())
    }

    /// The weights divided by their sum: shares that add up to one.
    #[must_use]
    pub fn shares(&self) -> Vec<f64> {
        self.relative.iter().map(|v| v / self.sum).collect()
    }

    /// Share of the heaviest draw.
    #[must_use]
    pub fn largest_share(&self) -> f64 {
        1.0 / self.sum
    }

    /// Effective sample size `(sum w)^2 / sum w^2`, in draws: between 1 and `n`.
    ///
    /// # Source
    /// Kong, Univ. Chicago Stat. Tech. Rep. 348 (1992). It sees only the weights drawn: a proposal that misses a mode
    /// altogether can still score `n`.
    #[must_use]
    pub fn ess(&self) -> f64 {
        self.sum * self.sum / self.relative.iter().map(|v| v * v).sum::<f64>()
    }

    /// Effective sample size divided by the number of draws; estimates `1 / (1 + chi^2(target || proposal))`.
    #[must_use]
    pub fn ess_fraction(&self) -> f64 {
        self.ess() / self.n()
    }

    /// Variance of the weights scaled to mean one: `mean (W - 1)^2 = 1/ess_fraction - 1`.
    ///
    /// Summed as squares of differences: for nearly even weights `1/ess_fraction - 1` would keep no digit.
    #[must_use]
    pub fn weight_variance(&self) -> f64 {
        let mean = self.sum / self.n();
        let squares: f64 = self.relative.iter().map(|v| (v / mean - 1.0) * (v / mean - 1.0)).sum();
        squares / self.n()
    }

    /// Standard error of [`ess_fraction`](Self::ess_fraction) by the delta method, draws taken as independent:
    /// `se^2 = var(2 (W - 1)/m2 - (W^2 - m2)/m2^2) / n` with `W = w / mean w` and `m2 = mean W^2`.
    ///
    /// It rests on the fourth moment of the weights. [`Score`](crate::weights::Score) gives it only when the tail
    /// shape is at most 0.5.
    #[must_use]
    pub fn ess_fraction_se(&self) -> f64 {
        let mean = self.sum / self.n();
        let second = 1.0 + self.weight_variance();
        // The influence terms have mean zero, up to rounding.
        let squares: f64 = self
            .relative
            .iter()
            .map(|v| {
                let w = v / mean;
                let term = 2.0 * (w - 1.0) / second - (w * w - second) / (second * second);
                term * term
            })
            .sum();
        squares.sqrt() / self.n()
    }

    /// Perplexity `exp(-sum_i W_i ln W_i) / n` of the shares `W`: between `1/n` and 1; estimates
    /// `exp(-KL(target || proposal))`.
    ///
    /// # Source
    /// Cappé, Douc, Guillin, Marin & Robert, Stat. Comput. 18 (2008) 447-459.
    #[must_use]
    pub fn perplexity(&self) -> f64 {
        // -sum W ln W = ln sum v - (sum v ln v) / sum v, with ln v = log w - largest; 0 ln 0 = 0.
        let mut weighted = 0.0;
        for (&value, &v) in self.log.iter().zip(&self.relative) {
            if v > 0.0 {
                weighted += v * (value - self.largest);
            }
        }
        let entropy = ln(self.sum) - weighted / self.sum;
        // Rounding may carry even weights a few units in the last place above one.
        (exp(entropy) / self.n()).min(1.0)
    }

    /// Number of draws as a number.
    fn n(&self) -> f64 {
        self.log.len() as f64
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn close(got: f64, want: f64, relative: f64) {
        assert!((got - want).abs() <= relative * want.abs(), "got {got:e}, want {want:e}");
    }

    /// Weights 1, 2, 3, 4 by hand: sum 10, sum of squares 30, mean 2.5.
    /// Perplexity: exp(-(.1 ln .1 + .2 ln .2 + .3 ln .3 + .4 ln .4))/4 by mpmath 1.3.0 at 50 digits.
    #[test]
    fn four_weights_by_hand_and_unmoved_by_shifts() {
        for shift in [0.0, 5000.0, -5000.0] {
            // ln 1..4 added to 5000 is rounded to 2^-40 of a nat; the bound allows for that and no more.
            let bound = if shift == 0.0 { 4.0 * f64::EPSILON } else { 8.0 * f64::EPSILON * 5000.0 };
            let weights = LogWeights::new([1.0_f64, 2.0, 3.0, 4.0].iter().map(|w| ln(*w) + shift).collect()).unwrap();
            close(weights.ess(), 100.0 / 30.0, bound);
            close(weights.ess_fraction(), 100.0 / 120.0, bound);
            close(weights.weight_variance(), 0.2, 4.0 * bound);
            close(weights.largest_share(), 0.4, bound);
            close(weights.perplexity(), 0.899_028_866_656_080_4, bound);
            close(weights.log_mean() - shift, ln(2.5), 2.0 * bound);
            close(weights.shares()[1], 0.2, bound);
        }
    }

    #[test]
    fn whole_shifts_leave_every_bit() {
        // Multiples of 1/8: shifted by 5000 without rounding, so even the bits must agree.
        let base: Vec<f64> = (0..500).map(|i| f64::from((i * 37) % 101) / -8.0).collect();
        let score = |shift: f64| {
            let weights = LogWeights::new(base.iter().map(|x| x + shift).collect()).unwrap();
            (weights.ess(), weights.weight_variance(), weights.perplexity(), weights.ess_fraction_se())
        };
        assert_eq!(score(0.0), score(5000.0));
        assert_eq!(score(0.0), score(-5000.0));
    }

    #[test]
    fn even_weights_are_perfect() {
        let weights = LogWeights::new(vec![-3.25; 1000]).unwrap();
        assert_eq!(weights.ess_fraction(), 1.0);
        assert_eq!(weights.weight_variance(), 0.0);
        assert_eq!(weights.ess_fraction_se(), 0.0);
        close(weights.perplexity(), 1.0, 4.0 * f64::EPSILON);
        assert_eq!(weights.largest_share(), 1e-3);
        assert_eq!(weights.log_mean(), -3.25);
    }

    #[test]
    fn one_weight_carries_all() {
        let mut log = vec![f64::NEG_INFINITY; 10];
        log[3] = -700.0;
        let weights = LogWeights::new(log).unwrap();
        assert_eq!(weights.ess(), 1.0);
        assert_eq!(weights.largest_share(), 1.0);
        close(weights.perplexity(), 0.1, 4.0 * f64::EPSILON);
        close(weights.weight_variance(), 9.0, 4.0 * f64::EPSILON);
    }

    /// Source: NumPy 2.4.6, W = w/w.mean(); m2 = (W*W).mean();
    /// sqrt(((2*(W-1)/m2-(W*W-m2)/m2**2)**2).sum())/len(W) for w = 1, 2, 3, 4.
    #[test]
    fn standard_error_of_the_fraction_matches_numpy() {
        let weights = LogWeights::new([1.0_f64, 2.0, 3.0, 4.0].iter().map(|w| ln(*w)).collect()).unwrap();
        close(weights.ess_fraction_se(), 0.083_333_333_333_333_33, 16.0 * f64::EPSILON);
    }

    #[test]
    fn broken_weights_are_refused() {
        assert!(matches!(LogWeights::new(vec![0.0, f64::NAN]), Err(WeightError::NotFinite(1, x)) if x.is_nan()));
        assert_eq!(LogWeights::new(vec![f64::INFINITY]), Err(WeightError::NotFinite(0, f64::INFINITY)));
        assert_eq!(LogWeights::new(vec![f64::NEG_INFINITY; 2]), Err(WeightError::NoMass(2)));
        assert_eq!(LogWeights::new(Vec::new()), Err(WeightError::NoMass(0)));
        fn send_and_sync<T: Send + Sync>() {}
        send_and_sync::<WeightError>();
    }
}
