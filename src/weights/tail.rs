//! Tail shape: how heavy the top of a set of weights is.
//!
//! The variance of the weights is finite when the shape is below one half, their mean when it is below one. The
//! effective sample size cannot show this: it is computed from the same weights that have not yet met the tail.

use super::LogWeights;
use crate::numeric::{exp, ln};
use serde::Serialize;

/// Fewer points than this in the tail say nothing about its shape.
const MIN_TAIL: usize = 5;
/// Weight of the prior on the shape, in tail points, and its centre (Vehtari et al. 2024, appendix).
const PRIOR_POINTS: f64 = 10.0;
const PRIOR_SHAPE: f64 = 0.5;
/// Normal quantile of a one-sided 90 % bound.
const ONE_SIDED_90: f64 = 1.28;

/// Whether a shape could be fitted, and if not, why.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum TailReason {
    /// The shape was fitted.
    Fitted,
    /// The largest weights are all equal: the weights are bounded, and no tail is seen.
    Bounded,
    /// Fewer than five weights stand above the threshold: nothing can be said about the tail.
    TooFew,
}

/// Shape of the generalised Pareto distribution that fits the largest weights.
///
/// Its survival function above the threshold `u` is `(1 + k (w - u) / s)^(-1/k)`, `k` the shape and `s` the scale.
/// `NaN` (written as `null` in JSON) stands where nothing was fitted: a check "passes if shape <= limit" then fails,
/// and asks [`reason`](Self::reason) whether the tail is bounded or unknown.
///
/// ```
/// use evenpoise::weights::{LogWeights, TailShape};
/// // Weights 1/0.5, 1/1.5, ..., 1/999.5: a Pareto tail of shape one.
/// let log: Vec<f64> = (0..1000).map(|i| -evenpoise::numeric::ln(f64::from(i) + 0.5)).collect();
/// let tail = TailShape::of_weights(&LogWeights::new(log)?);
/// assert!((tail.shape - 1.0).abs() < 0.1 && tail.points == 95);
/// # Ok::<(), evenpoise::weights::WeightError>(())
/// ```
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct TailShape {
    /// Shape `k`, the weak prior included; NaN when not fitted, `-inf` when the top is bounded.
    pub shape: f64,
    /// Upper bound `k + 1.28 (1 + k) / sqrt(M)` (one-sided, about 90 %).
    pub upper: f64,
    /// Limit `min(1 - 1/log10 S, 0.7)` that goes with the number of draws.
    pub limit: f64,
    /// Draws that a shape like this asks for, `10^(1 / (1 - max(0, k)))`; `inf` from `k = 1` on.
    pub draws_needed: f64,
    /// Number `S` of draws whose weight is not zero.
    pub draws: usize,
    /// Number `M` of tail points the fit used (excesses above zero).
    pub points: usize,
    /// `ln` of the threshold, in the units of the weights.
    pub log_threshold: f64,
    /// `ln` of the fitted scale, in the units of the weights; NaN when not fitted.
    pub log_scale: f64,
    /// Shape before the prior: with the scale, the line through the tail points.
    pub fitted_shape: f64,
    /// Whether the shape was fitted, and if not, why.
    pub reason: TailReason,
}

impl TailShape {
    /// Tail shape of a set of weights.
    #[must_use]
    pub fn of_weights(weights: &LogWeights) -> Self {
        Self::of(weights.relative(), weights.largest())
    }

    /// Tail shape of non-negative numbers in units of `exp(log_unit)`, such as `|f - mean| w`. Zeros and NaN never
    /// enter; infinite numbers are the caller's to rule out.
    ///
    /// # Source
    /// Tail size, limit and prior: Vehtari, Simpson, Gelman, Yao & Gabry, JMLR 25 (2024) no. 72. Fit: Zhang & Stephens,
    /// Technometrics 51 (2009) 316-325.
    #[must_use]
    pub fn of(magnitudes: &[f64], log_unit: f64) -> Self {
        let kept: Vec<f64> = magnitudes.iter().copied().filter(|&x| x > 0.0).collect();
        let draws = kept.len();
        Self::of_largest(kept, draws, log_unit)
    }

    /// Tail shape of `draws` positive numbers of which only the `largest` are known, in any order. Where fewer are known than
    /// `min(S/5, 3 sqrt S)`, the tail is what is known of it.
    #[must_use]
    pub fn of_largest(largest: Vec<f64>, draws: usize, log_unit: f64) -> Self {
        let mut kept = largest;
        let known = kept.len();
        let limit = tail_limit(draws);
        let wanted = tail_size(draws).min(known.saturating_sub(1));
        if wanted < MIN_TAIL {
            return Self::unknown(TailReason::TooFew, draws, wanted, limit, f64::NAN);
        }
        // wanted < the number known, so the threshold is the next weight below the tail.
        let (_, &mut threshold, above) = kept.select_nth_unstable_by(known - wanted - 1, f64::total_cmp);
        above.sort_unstable_by(f64::total_cmp);
        let excesses: Vec<f64> = above.iter().map(|x| x - threshold).filter(|&x| x > 0.0).collect();
        let log_threshold = log_unit + ln(threshold);
        let points = excesses.len();
        let spread = excesses.last().copied().unwrap_or(0.0) > excesses.first().copied().unwrap_or(0.0);
        if points == 0 || (points >= MIN_TAIL && !spread) {
            return Self::unknown(TailReason::Bounded, draws, points, limit, log_threshold);
        }
        if points < MIN_TAIL {
            return Self::unknown(TailReason::TooFew, draws, points, limit, log_threshold);
        }
        let (fitted_shape, scale) = fit(&excesses);
        let shape = with_prior(fitted_shape, points);
        Self {
            shape,
            upper: shape + ONE_SIDED_90 * (1.0 + shape).max(0.0) / (points as f64).sqrt(),
            limit,
            draws_needed: draws_needed(shape),
            draws,
            points,
            log_threshold,
            log_scale: log_unit + ln(scale),
            fitted_shape,
            reason: TailReason::Fitted,
        }
    }

    /// No fit: a bounded top is as light as a tail can be, anything else is unknown.
    fn unknown(reason: TailReason, draws: usize, points: usize, limit: f64, log_threshold: f64) -> Self {
        let shape = if reason == TailReason::Bounded { f64::NEG_INFINITY } else { f64::NAN };
        Self {
            shape,
            upper: shape,
            limit,
            draws_needed: draws_needed(shape),
            draws,
            points,
            log_threshold,
            log_scale: f64::NAN,
            fitted_shape: f64::NAN,
            reason,
        }
    }

    /// Fitted size of the weight of tail rank `p`, the share of tail points above it, in nats: for the line in a figure.
    #[must_use]
    pub fn log_quantile(&self, p: f64) -> f64 {
        let excess = quantile_over_scale(p, self.fitted_shape);
        crate::numeric::log_add_exp(self.log_threshold, self.log_scale + ln(excess))
    }
}

/// Limit of the tail shape for `draws` weights: `min(1 - 1/log10 S, 0.7)`.
///
/// # Source
/// Vehtari et al. 2024, equation 13. It is a limit for tail-smoothed weights; plain means lose coverage before it
/// (.92 at 0.5, .73 at 0.7 with nominal .95).
#[must_use]
pub fn tail_limit(draws: usize) -> f64 {
    (1.0 - 1.0 / libm::log10(draws as f64)).min(0.7)
}

/// Tail points among `draws` weights: `ceil(min(S/5, 3 sqrt S))`.
fn tail_size(draws: usize) -> usize {
    let s = draws as f64;
    (s / 5.0).min(3.0 * s.sqrt()).ceil() as usize
}

/// `10^(1 / (1 - max(0, k)))`, the sample size at which a mean with tail shape `k` settles; NaN stays NaN.
fn draws_needed(shape: f64) -> f64 {
    if shape >= 1.0 {
        return f64::INFINITY;
    }
    if shape.is_nan() {
        return shape;
    }
    libm::pow(10.0, 1.0 / (1.0 - shape.max(0.0)))
}

/// The weak prior: `(n k + 5) / (n + 10)`.
fn with_prior(shape: f64, points: usize) -> f64 {
    let n = points as f64;
    (n * shape + PRIOR_POINTS * PRIOR_SHAPE) / (n + PRIOR_POINTS)
}

/// `((p)^(-k) - 1) / k`: the excess, in scales, that a share `p` of the tail exceeds.
fn quantile_over_scale(p: f64, shape: f64) -> f64 {
    let log_p = ln(p);
    if shape.abs() < 1e-12 { -log_p } else { libm::expm1(-shape * log_p) / shape }
}

/// Generalised Pareto fit to sorted positive excesses, at least one pair of which differs: `(shape, scale)`.
///
/// With `n` excesses `x_(1) <= ... <= x_(n)` and `theta = -k / s`: a grid of `m = 30 + floor(sqrt n)` points
/// `theta_j = 1/x_(n) + (1 - sqrt(m / (j - 1/2))) / (3 x_(floor(n/4 + 1/2)))`, the profile log likelihood
/// `l_j = n (ln(-theta_j / k_j) - k_j - 1)` with `k_j = mean ln(1 - theta_j x)`, the mean `theta` under weights
/// `exp(l_j)`, and `k = mean ln(1 - theta x)` there.
///
/// # Source
/// Zhang & Stephens, Technometrics 51 (2009) 316-325 (their `k` is the negative of ours).
fn fit(excesses: &[f64]) -> (f64, f64) {
    let n = excesses.len() as f64;
    let largest = excesses[excesses.len() - 1];
    let quarter = excesses[(n / 4.0 + 0.5).floor() as usize - 1];
    let m = 30.0 + n.sqrt().floor();
    let grid: Vec<f64> =
        (1..=m as usize).map(|j| 1.0 / largest + (1.0 - (m / (j as f64 - 0.5)).sqrt()) / (3.0 * quarter)).collect();
    let log_likelihoods: Vec<f64> = grid
        .iter()
        .map(|&theta| {
            let k = shape_at(theta, excesses);
            n * (ln(1.0 / scale_at(theta, k, excesses)) - k - 1.0)
        })
        .collect();
    let best = log_likelihoods.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    let (mut mass, mut theta) = (0.0, 0.0);
    for (&l, &t) in log_likelihoods.iter().zip(&grid) {
        let weight = exp(l - best);
        mass += weight;
        theta += weight * t;
    }
    theta /= mass;
    let k = shape_at(theta, excesses);
    (k, scale_at(theta, k, excesses))
}

/// `mean ln(1 - theta x)`; the grid keeps `theta` below `1 / max x`.
fn shape_at(theta: f64, excesses: &[f64]) -> f64 {
    excesses.iter().map(|&x| libm::log1p(-theta * x)).sum::<f64>() / excesses.len() as f64
}

/// The scale `-k / theta`; at `theta = 0`, the exponential distribution, its limit: the mean excess.
fn scale_at(theta: f64, shape: f64, excesses: &[f64]) -> f64 {
    if theta == 0.0 || shape == 0.0 { excesses.iter().sum::<f64>() / excesses.len() as f64 } else { -shape / theta }
}

/// Tail-smoothed weights: the tail points replaced by quantiles of the fitted distribution at ranks
/// `(z - 1/2) / M`, none above the largest raw weight. Without a fitted tail, a copy.
///
/// A mean of smoothed weights is biased downwards and far less noisy when the shape is between 0.5 and 0.7. It is
/// never made silently: who uses it says so.
///
/// # Source
/// Vehtari, Simpson, Gelman, Yao & Gabry, JMLR 25 (2024) no. 72, section 3.
#[must_use]
pub fn smoothed_weights(weights: &LogWeights) -> LogWeights {
    let tail = TailShape::of_weights(weights);
    let mut log = weights.as_slice().to_vec();
    if tail.reason == TailReason::Fitted {
        let mut order: Vec<usize> = (0..log.len()).collect();
        // Heaviest last; equal weights in the order they were drawn.
        order.sort_by(|&a, &b| log[a].total_cmp(&log[b]));
        let m = tail.points as f64;
        for (rank, &draw) in order[log.len() - tail.points..].iter().enumerate() {
            let above = 1.0 - (rank as f64 + 0.5) / m;
            let excess = quantile_over_scale(above, tail.shape);
            let smooth = crate::numeric::log_add_exp(tail.log_threshold, tail.log_scale + ln(excess));
            log[draw] = smooth.min(weights.largest());
        }
    }
    LogWeights::new(log).expect("finite weights were replaced by finite ones")
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::{Purpose, stream, uniform};

    /// Excesses of a generalised Pareto distribution with unit scale by inversion, sorted.
    fn excesses(shape: f64, n: usize, round: u32) -> Vec<f64> {
        let mut rng = stream(5, Purpose::Trial, round, 0);
        let mut x: Vec<f64> = (0..n).map(|_| quantile_over_scale(uniform(&mut rng), shape)).collect();
        x.sort_unstable_by(f64::total_cmp);
        x
    }

    /// Mean over 400 samples of 300 exact excesses: within .01 (the method's own bias) plus 4 standard errors of the
    /// truth, before the prior (false alarm below 6e-5 each).
    #[test]
    fn shape_is_found_on_exact_samples() {
        for (i, shape) in [0.0, 0.3, 0.5, 0.7, 1.0].into_iter().enumerate() {
            let fits: Vec<f64> = (0..400).map(|s| fit(&excesses(shape, 300, 1000 * i as u32 + s)).0).collect();
            let mean = fits.iter().sum::<f64>() / 400.0;
            let variance = fits.iter().map(|k| (k - mean) * (k - mean)).sum::<f64>() / 399.0;
            let bound = 0.01 + 4.0 * (variance / 400.0).sqrt();
            assert!((mean - shape).abs() <= bound, "shape {shape}: mean {mean}, bound {bound}");
        }
    }

    /// Source: NumPy 2.4.6, the formula of `fit` written out independently (recipe: x sorted; m = 30 + int(sqrt(n));
    /// th = 1/x[-1] + (1 - sqrt(m/(arange(1,m+1) - .5)))/(3*x[int(n/4+.5)-1]); k = log1p(-th[:,None]*x).mean(1);
    /// l = n*(log(-th/k) - k - 1); p = exp(l - l.max()); th = p @ th / p.sum(); log1p(-th*x).mean()), on excesses
    /// i^2/100, i = 1..60, and exp(i/10) - 1, i = 1..40.
    #[test]
    fn fit_matches_numpy() {
        let squares: Vec<f64> = (1..=60).map(|i| f64::from(i * i) / 100.0).collect();
        let grown: Vec<f64> = (1..=40).map(|i| libm::expm1(f64::from(i) / 10.0)).collect();
        for (x, shape, scale) in [
            (squares, -0.231_166_123_989_284_66, 15.188_177_585_025_896),
            (grown, 0.432_068_977_434_756_1, 8.364_726_101_637_581),
        ] {
            let (k, s) = fit(&x);
            assert!((k - shape).abs() <= 1e-12, "shape {k:e}, want {shape:e}");
            assert!((s / scale - 1.0).abs() <= 1e-12, "scale {s:e}, want {scale:e}");
        }
    }

    #[test]
    fn prior_tail_size_limit_and_draws_needed_are_the_published_formulas() {
        assert_eq!(with_prior(0.9, 20), (20.0 * 0.9 + 5.0) / 30.0);
        for (draws, size) in [(20, 4), (21, 5), (100, 20), (225, 45), (226, 46), (1000, 95), (1_000_000, 3000)] {
            assert_eq!(tail_size(draws), size, "S = {draws}");
        }
        // Source: the table in Vehtari et al. 2024 (0.5, 0.63, 0.67, 0.70).
        for (draws, limit) in [(100, 0.5), (500, 0.6295), (1000, 2.0 / 3.0), (2155, 0.7), (1_000_000, 0.7)] {
            assert!((tail_limit(draws) - limit).abs() < 1e-4, "S = {draws}: {}", tail_limit(draws));
        }
        assert!((draws_needed(0.5) - 100.0).abs() < 1e-10);
        assert!((draws_needed(0.7) - 2_154.434_690_031_884).abs() < 1e-8);
        assert_eq!(draws_needed(-3.0), 10.0);
        assert_eq!(draws_needed(1.0), f64::INFINITY);
        assert!(draws_needed(f64::NAN).is_nan());
    }

    #[test]
    fn zeros_and_order_do_not_matter_and_shifts_only_move_the_threshold() {
        let log: Vec<f64> = (1..=2000).map(|i| -0.75 * ln(f64::from(i))).collect();
        let plain = TailShape::of_weights(&LogWeights::new(log.clone()).unwrap());
        let mut mixed: Vec<f64> = log.iter().rev().copied().collect();
        mixed.extend(vec![f64::NEG_INFINITY; 700]);
        assert_eq!(TailShape::of_weights(&LogWeights::new(mixed).unwrap()), plain);
        assert!((plain.shape - 0.75).abs() < 0.1, "{plain:?}");
        let moved = LogWeights::new(log.iter().map(|x| x - 5000.0).collect()).unwrap();
        let moved = TailShape::of_weights(&moved);
        assert!((moved.shape - plain.shape).abs() < 1e-8);
        assert!((moved.log_threshold + 5000.0 - plain.log_threshold).abs() < 1e-8);
        assert!((moved.log_scale + 5000.0 - plain.log_scale).abs() < 1e-8);
    }

    #[test]
    fn the_line_goes_through_the_tail() {
        let log: Vec<f64> = (1..=2000).map(|i| -0.5 * ln(f64::from(i))).collect();
        let tail = TailShape::of_weights(&LogWeights::new(log.clone()).unwrap());
        assert_eq!(tail.points, 135);
        for rank in [10, 40, 100] {
            let line = tail.log_quantile((rank as f64 - 0.5) / 135.0);
            assert!((line - log[rank - 1]).abs() < 0.05, "rank {rank}: {line} against {}", log[rank - 1]);
        }
    }

    #[test]
    fn no_tail_is_told_from_an_unknown_one() {
        let even = TailShape::of(&[0.3; 400], 0.0);
        assert_eq!((even.reason, even.shape, even.points), (TailReason::Bounded, f64::NEG_INFINITY, 0));
        assert_eq!(even.draws_needed, 10.0);
        // Two sizes only, as for a counted event: the top is bounded.
        let mut two = vec![0.01; 990];
        two.extend([0.99; 10]);
        assert_eq!(TailShape::of(&two, 0.0).reason, TailReason::Bounded);
        // Three outliers over even weights: the tail is not known, and must not read as light.
        let mut few = vec![1e-3; 997];
        few.extend([0.5, 0.8, 1.0]);
        let few = TailShape::of(&few, 0.0);
        assert_eq!((few.reason, few.points), (TailReason::TooFew, 3));
        assert!(few.shape.is_nan() && few.upper.is_nan());
        assert_eq!(TailShape::of(&[1.0; 20], 0.0).reason, TailReason::TooFew);
        assert_eq!(TailShape::of(&[], 0.0).reason, TailReason::TooFew);
        // Half of the tail ties with the threshold: those drop out, the rest are fitted.
        let mut tied: Vec<f64> = vec![0.5; 900];
        tied.extend((1..=40).map(|i| 0.5 + f64::from(i) / 100.0));
        let tied = TailShape::of(&tied, 0.0);
        assert_eq!((tied.reason, tied.points), (TailReason::Fitted, 40));
        assert!(tied.shape < 0.0, "evenly spaced excesses are bounded: {}", tied.shape);
    }

    /// Source: closed forms. Weights of N(0, s^2) for a N(0, 1) target have shape `1 - s^2` for `s < 1`.
    #[test]
    fn light_proposal_shows_its_closed_form_shape() {
        let s = 0.6_f64; // shape .64
        let mut rng = stream(8, Purpose::Trial, 0, 0);
        let log = (0..200_000)
            .map(|_| {
                let z = crate::numeric::normal::draw(&mut rng);
                0.5 * z * z * (1.0 - s * s)
            })
            .collect();
        let tail = TailShape::of_weights(&LogWeights::new(log).unwrap());
        // 1 342 tail points: standard error about (1 + k)/sqrt(M) = .045; four of them, and a slowly varying
        // factor of the tail on top.
        assert!((tail.shape - 0.64).abs() < 0.18, "{tail:?}");
        assert!(tail.shape > 0.5 && tail.upper > tail.shape);
    }

    #[test]
    fn smoothing_keeps_the_order_of_magnitude_and_the_cap() {
        let x = excesses(0.6, 3000, 77);
        let weights = LogWeights::new(x.iter().map(|x| ln(1.0 + x)).collect()).unwrap();
        let smooth = smoothed_weights(&weights);
        assert!(smooth.largest() <= weights.largest());
        let change = smooth.log_mean() - weights.log_mean();
        assert!(change.abs() < 0.1 && change != 0.0, "{change}");
        let even = LogWeights::new(vec![2.0; 50]).unwrap();
        assert_eq!(smoothed_weights(&even), even);
    }
}
