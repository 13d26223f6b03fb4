//! Intervals of what is said of weights: by formula where one holds, by resampling elsewhere.

use crate::numeric::{Purpose, stream, uniform};
use crate::weights::Strata;
use serde::Serialize;

/// A number with its 95 % interval. `NaN` (`null` in JSON): not known.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Interval {
    /// The number.
    pub value: f64,
    /// Lower end.
    pub low: f64,
    /// Upper end.
    pub high: f64,
}

impl Interval {
    /// Nothing is known.
    pub(super) const UNKNOWN: Self = Self { value: f64::NAN, low: f64::NAN, high: f64::NAN };

    /// The same through a function that rises or falls throughout.
    pub(super) fn through(self, function: impl Fn(f64) -> f64) -> Self {
        let (a, b) = (function(self.low), function(self.high));
        Self { value: function(self.value), low: a.min(b), high: a.max(b) }
    }
}

/// Resamples: percentiles at 2.5 and 97.5 % then have ten samples beyond them.
const REPLICATES: usize = 400;
/// Both tails.
const OUTSIDE: f64 = 0.025;

/// Percentile intervals of several statistics of draws, resampled with replacement among the draws of each component.
///
/// `statistics` is given the places of a resample, which keeps every draw's stratum. A statistic that is not known in a resample does
/// not count there.
///
/// # Source
/// Efron, The Jackknife, the Bootstrap and Other Resampling Plans (1982), section 10.4.
pub(super) fn bootstrap<const N: usize>(
    labels: &[u32],
    seed: u64,
    statistics: impl Fn(&[usize]) -> [f64; N],
) -> [[f64; 2]; N] {
    let n = labels.len();
    let mut order: Vec<usize> = (0..n).collect();
    order.sort_by_key(|&i| labels[i]);
    let mut rng = stream(seed, Purpose::Compare, 1, 0);
    let mut found: [Vec<f64>; N] = std::array::from_fn(|_| Vec::with_capacity(REPLICATES));
    let mut chosen = vec![0; n];
    for _ in 0..REPLICATES {
        for group in order.chunk_by(|&a, &b| labels[a] == labels[b]) {
            for &i in group {
                let k = (uniform(&mut rng) * group.len() as f64) as usize;
                chosen[i] = group[k.min(group.len() - 1)];
            }
        }
        for (values, value) in found.iter_mut().zip(statistics(&chosen)) {
            if value.is_finite() {
                values.push(value);
            }
        }
    }
    found.map(|mut values| {
        if values.len() < REPLICATES / 2 {
            return [f64::NAN; 2];
        }
        values.sort_by(f64::total_cmp);
        let at = |p: f64| values[(p * (values.len() - 1) as f64).round() as usize];
        [at(OUTSIDE), at(1.0 - OUTSIDE)]
    })
}

/// Relative error of the mean of `terms` at `chosen`: its stratified standard error over its size.
pub(super) fn relative_error(strata: &Strata, terms: &[f64], chosen: &[usize]) -> f64 {
    let values: Vec<f64> = chosen.iter().map(|&i| terms[i]).collect();
    let mean = strata.mean(&values);
    mean.se / mean.mean.abs()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::normal;

    /// The mean of 400 normal draws with deviation 1: its interval has half-width 1.96/20 = 0.098, known from 400 resamples to
    /// about 10 %; 35 % is three and a half such errors (false alarm below 1e-3), and the seed is fixed.
    #[test]
    fn the_interval_of_a_mean_has_the_known_width() {
        let mut rng = stream(5, Purpose::Trial, 0, 0);
        let draws: Vec<f64> = (0..400).map(|_| normal::draw(&mut rng)).collect();
        let mean = |chosen: &[usize]| [chosen.iter().map(|&i| draws[i]).sum::<f64>() / 400.0, f64::NAN];
        let [[low, high], unknown] = bootstrap(&[0; 400], 1, mean);
        assert!((0.5 * (high - low) / 0.098 - 1.0).abs() < 0.35, "{low} to {high}");
        assert!(unknown[0].is_nan());
    }

    /// Strata that are each constant leave nothing to chance.
    #[test]
    fn strata_are_kept() {
        let labels: Vec<u32> = (0..40).map(|i| i / 20).collect();
        let [interval] = bootstrap(&labels, 1, |chosen| [chosen.iter().map(|&i| f64::from(labels[i])).sum()]);
        assert_eq!(interval, [20.0, 20.0]);
    }
}
