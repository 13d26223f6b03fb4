//! Everything that the weights alone say about a proposal.

use super::LogWeights;
use super::Strata;
use super::TailReason;
use super::TailShape;
use super::interval::TWO_SIDED_95;
use super::stratified::StratifiedMean;
use crate::numeric::exp;
use serde::Serialize;

/// Above this tail shape the fourth moment that the error of the ESS fraction needs does not settle.
const MAX_SHAPE_FOR_SE: f64 = 0.5;

/// What a set of weights says about the proposal it was drawn from. NaN (`null` in JSON) stands for "not known".
///
/// It knows of the weights drawn and of nothing else: a mode that no draw met is not in it.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Score {
    /// Number of draws, those of weight zero included.
    pub draws: usize,
    /// Effective sample size, in draws.
    pub ess: f64,
    /// Effective sample size divided by the draws.
    pub ess_fraction: f64,
    /// Standard error of the fraction; not given when the tail shape is above 0.5 or unknown.
    pub ess_fraction_se: Option<f64>,
    /// 95 % interval of the fraction, on the logit scale (the log scale of the weight variance); given with the error.
    pub ess_fraction_interval: Option<[f64; 2]>,
    /// Variance of the weights scaled to mean one.
    pub weight_variance: f64,
    /// `exp(entropy of the shares) / draws`.
    pub perplexity: f64,
    /// How heavy the top of the weights is.
    pub tail: TailShape,
    /// Share of the heaviest draw.
    pub largest_share: f64,
    /// `ln` of the mean weight, nats.
    pub log_normaliser: f64,
    /// Its standard error, nats: stratified, by the delta method.
    pub log_normaliser_se: f64,
}

/// Scores weights whose draws came from the components named by `labels` (empty: independent draws).
///
/// Source of each number: its method in [`LogWeights`], [`TailShape`] and [`Strata`].
///
/// # Panics
/// When there are labels, but not one a draw.
///
/// ```
/// use evenpoise::weights::{LogWeights, score};
/// let score = score(&LogWeights::new(vec![-1.0; 100])?, &[]);
/// assert_eq!((score.ess_fraction, score.log_normaliser, score.log_normaliser_se), (1.0, -1.0, 0.0));
/// # Ok::<(), evenpoise::weights::WeightError>(())
/// ```
#[must_use]
pub fn score(weights: &LogWeights, labels: &[u32]) -> Score {
    let StratifiedMean { mean, se } = Strata::for_draws(labels, weights.len()).mean(weights.relative());
    let tail = TailShape::of_weights(weights);
    let ess = weights.ess();
    let ess_fraction = weights.ess_fraction();
    let weight_variance = weights.weight_variance();
    let known = tail.reason != TailReason::TooFew && tail.shape <= MAX_SHAPE_FOR_SE;
    let ess_fraction_se = known.then(|| weights.ess_fraction_se());
    Score {
        draws: weights.len(),
        ess,
        ess_fraction,
        ess_fraction_se,
        ess_fraction_interval: ess_fraction_se.map(|se| fraction_interval(weight_variance, se)),
        weight_variance,
        perplexity: weights.perplexity(),
        tail,
        largest_share: weights.largest_share(),
        log_normaliser: weights.log_mean(),
        log_normaliser_se: se / mean,
    }
}

/// 95 % interval of the ESS fraction `E = 1/(1 + v)`: normal on `ln v = -logit E`, so it stays inside (0, 1) and
/// follows the skewness of a variance estimate.
fn fraction_interval(variance: f64, fraction_se: f64) -> [f64; 2] {
    if variance == 0.0 {
        return [1.0, 1.0];
    }
    // d ln v = -(1 + v)^2 / v dE.
    let log_se = fraction_se * (1.0 + variance) * (1.0 + variance) / variance;
    let factor = exp(TWO_SIDED_95 * log_se);
    [1.0 / (1.0 + variance * factor), 1.0 / (1.0 + variance / factor)]
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::normal;
    use crate::numeric::{Purpose, stream};

    /// Weights of the target N(0, I) under the proposal N(0, s^2 I), normalised: mean 1.
    fn gaussian_pair(d: usize, s: f64, n: usize, round: u32) -> LogWeights {
        let mut rng = stream(21, Purpose::Trial, round, 0);
        let log = (0..n)
            .map(|_| {
                let mut log = d as f64 * crate::numeric::ln(s);
                for _ in 0..d {
                    let z = normal::draw(&mut rng);
                    log += 0.5 * z * z * (1.0 - s * s);
                }
                log
            })
            .collect();
        LogWeights::new(log).unwrap()
    }

    /// Exact: ESS fraction `(sqrt(2 s^2 - 1) / s^2)^d`, `KL = d (ln s + (1/s^2 - 1)/2)`, log Z = 0.
    /// Each is within 4 standard errors (false alarm 6e-5 each, 9 of them); the perplexity's error is taken as the
    /// fraction's, which is larger here.
    #[test]
    fn gaussian_pairs_have_their_known_scores() {
        for (i, (d, s)) in [(1, 1.3_f64), (5, 1.1), (10, 1.2)].into_iter().enumerate() {
            let score = score(&gaussian_pair(d, s, 40_000, i as u32), &[]);
            let fraction = libm::pow((2.0 * s * s - 1.0).sqrt() / (s * s), d as f64);
            let se = score.ess_fraction_se.expect("a bounded weight has a light tail");
            assert!(
                (score.ess_fraction - fraction).abs() < 4.0 * se,
                "d {d}: {} against {fraction}",
                score.ess_fraction
            );
            assert!((score.weight_variance - (1.0 / fraction - 1.0)).abs() < 4.0 * se / (fraction * fraction));
            let perplexity = libm::exp(-(d as f64) * (libm::log(s) + 0.5 * (1.0 / (s * s) - 1.0)));
            assert!(
                (score.perplexity - perplexity).abs() < 4.0 * se,
                "d {d}: {} against {perplexity}",
                score.perplexity
            );
            assert!(score.log_normaliser.abs() < 4.0 * score.log_normaliser_se, "d {d}: {}", score.log_normaliser);
            assert!(score.tail.shape < 0.5);
        }
    }

    /// 1,000 repetitions at n = 2,000: intervals of the ESS fraction and of log Z cover between 92.5 and 97.1 %
    /// (3.2 binomial standard errors around 95 %, false alarm 1.4e-3, plus nothing for their own approximation).
    #[test]
    fn intervals_cover() {
        let (d, s) = (3, 1.25_f64);
        let truth = libm::pow((2.0 * s * s - 1.0).sqrt() / (s * s), 3.0);
        let (mut fraction, mut normaliser) = (0, 0);
        for repetition in 0..1000 {
            let score = score(&gaussian_pair(d, s, 2000, 100 + repetition), &[]);
            let [low, high] = score.ess_fraction_interval.expect("light tail");
            fraction += i32::from(low <= truth && truth <= high);
            normaliser += i32::from(score.log_normaliser.abs() <= TWO_SIDED_95 * score.log_normaliser_se);
        }
        assert!((925..=971).contains(&fraction), "fraction: {fraction} of 1000");
        assert!((925..=971).contains(&normaliser), "log Z: {normaliser} of 1000");
    }

    #[test]
    fn heavy_tail_gives_no_error_of_the_fraction() {
        let score = score(&gaussian_pair(1, 0.6, 20_000, 7), &[]);
        assert!(score.tail.shape > 0.5);
        assert_eq!((score.ess_fraction_se, score.ess_fraction_interval), (None, None));
    }

    #[test]
    fn shifts_of_the_target_change_only_the_normaliser() {
        let log: Vec<f64> = (0..3000).map(|i| f64::from((i * 131) % 257) / 64.0).collect();
        let labels: Vec<u32> = (0..3000).map(|i| i / 1000).collect();
        let plain = score(&LogWeights::new(log.clone()).unwrap(), &labels);
        for shift in [5000.0, -5000.0] {
            let moved = score(&LogWeights::new(log.iter().map(|x| x + shift).collect()).unwrap(), &labels);
            assert!((moved.log_normaliser - shift - plain.log_normaliser).abs() < 1e-11);
            assert_eq!(moved.log_normaliser_se, plain.log_normaliser_se);
            assert_eq!((moved.ess, moved.perplexity), (plain.ess, plain.perplexity));
            assert_eq!(moved.tail.shape, plain.tail.shape);
        }
    }

    #[test]
    fn one_draw_knows_nothing_of_its_error() {
        let score = score(&LogWeights::new(vec![0.3]).unwrap(), &[]);
        assert!(score.log_normaliser_se.is_nan());
        assert_eq!(score.ess_fraction_se, None);
        assert!(serde_json::to_string(&score).unwrap().contains("\"log_normaliser_se\":null"));
    }
}
