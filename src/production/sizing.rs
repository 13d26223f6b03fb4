//! How many draws a relative error asks for, from the weighted draws that a tuning leaves.

use crate::numeric::BLOCK;
use crate::numeric::Points;
use crate::numeric::exp;
use crate::proposal::BlockTerms;
use crate::proposal::Mixture;

/// Normal quantile of a one-sided 90 % bound.
const ONE_SIDED_90: f64 = 1.281_551_565_544_600_5;

/// Weighted draws of a target, from whatever proposals.
#[derive(Debug)]
pub struct WeightedDraws<'a> {
    /// The points, in the proposal's coordinates.
    pub points: &'a Points,
    /// Weights, summing to one: the draws as a sample of the target.
    pub weights: &'a [f64],
    /// `ln` of target over proposal at each: of the proposal that production will draw from.
    pub log_ratio: &'a [f64],
    /// `ln` of the target's normalising constant.
    pub log_mean: f64,
}

/// What production will have as variance, and the draws that it asks for.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sized {
    /// Predicted relative variance of a draw, stratified.
    pub variance: f64,
    /// Its upper 90 % bound.
    pub upper: f64,
}

impl Sized {
    /// Draws for a relative error: as predicted, and by the upper bound.
    #[must_use]
    pub fn draws(&self, relative_error: f64) -> [f64; 2] {
        [self.variance, self.upper].map(|v| (v / relative_error / relative_error).ceil().max(1.0))
    }

    /// The relative error that so many draws are predicted to have.
    #[must_use]
    pub fn relative_error(&self, draws: f64) -> f64 {
        (self.variance / draws).sqrt()
    }
}

/// Predicts the relative variance of production draws of `mixture`: of the normalising constant (or the answer) without `values`,
/// else of the mean of `values`, relative to that mean.
///
/// With the draws as a sample of the target, `t/q` of the new proposal `q` relative to its mean is `W`, and a draw of production has
/// the relative variance `E_t[W g^2] - sum_k share_k E_k^2`: `g = 1`, or `(f - m)/m`, and `E_k` the mean of the term within
/// component `k`, `E_t[g r_k]/share_k` (`r_k` its responsibility). For `g = 1` the second part starts at one.
///
/// # Source
/// Hesterberg, Technometrics 37 (1995) 185-194, for the variance; the stratified part is Cochran's (Sampling Techniques, 1977,
/// section 5.4), put in terms of the target.
#[must_use]
pub fn size(mixture: &Mixture, draws: &WeightedDraws, values: Option<&[f64]>) -> Sized {
    let n = draws.weights.len();
    let log_q = mixture.log_density(draws.points);
    let live: Vec<usize> = (0..n).filter(|&i| draws.weights[i] > 0.0).collect();
    let relative = |i: usize| exp(draws.log_ratio[i] - draws.log_mean);
    let mean: f64 = values.map_or(1.0, |f| live.iter().map(|&i| draws.weights[i] * f[i]).sum());
    let g = |i: usize| values.map_or(1.0, |f| (f[i] - mean) / mean);
    let terms: Vec<f64> = live.iter().map(|&i| draws.weights[i] * relative(i) * g(i) * g(i)).collect();
    let second: f64 = terms.iter().sum();
    let between = between(mixture, draws, &log_q, &g);
    let variance = (second - between).max(0.0);
    // The weights are those of n draws: each term's part of the mean, taken as independent.
    let average = second / live.len() as f64;
    let error = terms.iter().map(|t| (t - average) * (t - average)).sum::<f64>().sqrt();
    let upper = if variance > 0.0 { variance * exp(ONE_SIDED_90 * (error / variance).min(20.0)) } else { 0.0 };
    Sized { variance, upper }
}

/// `sum_k share_k E_k^2`.
fn between(mixture: &Mixture, draws: &WeightedDraws, log_q: &[f64], g: &dyn Fn(usize) -> f64) -> f64 {
    let mut means = vec![0.0; mixture.len()];
    let (mut terms, mut shares, mut sums) = (BlockTerms::default(), Vec::new(), [0.0; BLOCK]);
    for b in 0..draws.points.n_blocks() {
        let live = draws.points.block_len(b);
        terms.fill(mixture, draws.points.block(b));
        sums[..live].copy_from_slice(&log_q[b * BLOCK..b * BLOCK + live]);
        terms.responsibilities(mixture.log_shares(), &sums, &mut shares);
        for (k, mean) in means.iter_mut().enumerate() {
            for t in 0..live {
                let i = b * BLOCK + t;
                if draws.weights[i] > 0.0 {
                    *mean += draws.weights[i] * shares[k * BLOCK + t] * g(i);
                }
            }
        }
    }
    means.iter().zip(mixture.shares()).map(|(sum, share)| sum * sum / share).sum()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::Purpose;
    use crate::proposal::Component;

    /// Target N(0, 1), proposal N(0, 1.3^2): `E[W^2] - 1 = s^2/sqrt(2 s^2 - 1) - 1` in closed form, one component, so nothing lies
    /// between. The relative variance of the mean of `x + 4` is `E_q[W^2 x^2]/16`, with `E_q[W^2 x^2] = E_q[W^2] s^2/(2 s^2 - 1)`.
    /// Within 5 % from 200,000 draws; the bound lies above and not far.
    #[test]
    fn variances_are_their_closed_forms() {
        let s2 = 1.69_f64;
        let mixture = Mixture::single(Component::new(vec![0.0], &[s2], f64::INFINITY).unwrap());
        let points = mixture.draw(200_000, 3, Purpose::Trial, 0).points;
        let log_q = mixture.log_density(&points);
        // Scaled by e^7: constants play no part.
        let log_ratio: Vec<f64> =
            (0..points.len()).map(|i| crate::numeric::normal::log_density(points.get(i, 0)) - log_q[i] + 7.0).collect();
        let raw: Vec<f64> = log_ratio.iter().map(|l| exp(*l)).collect();
        let total: f64 = raw.iter().sum();
        let weights: Vec<f64> = raw.iter().map(|w| w / total).collect();
        let draws = WeightedDraws { points: &points, weights: &weights, log_ratio: &log_ratio, log_mean: 7.0 };
        let second = s2 / (2.0 * s2 - 1.0).sqrt();
        let values: Vec<f64> = points.coordinate(0).iter().map(|x| x + 4.0).collect();
        for (sized, want) in [
            (size(&mixture, &draws, None), second - 1.0),
            (size(&mixture, &draws, Some(&values)), second * s2 / (2.0 * s2 - 1.0) / 16.0),
        ] {
            assert!((sized.variance / want - 1.0).abs() < 0.05, "{} {want}", sized.variance);
            assert!(sized.upper > sized.variance && sized.upper < 1.1 * sized.variance, "{sized:?}");
            assert_eq!(sized.draws(0.01)[0], (1e4 * sized.variance).ceil());
            assert!((sized.relative_error(sized.variance * 1e4) - 0.01).abs() < 1e-12);
        }
    }

    /// Two components that are each exact: nothing varies within them, however different they are.
    #[test]
    fn what_lies_between_components_costs_nothing() {
        let far = |x: f64| Component::new(vec![x], &[1.0], f64::INFINITY).unwrap();
        let mixture = Mixture::new(&[0.2, 0.8], vec![far(-50.0), far(50.0)]).unwrap();
        let points = mixture.draw(4000, 3, Purpose::Trial, 0).points;
        // The target has the components the other way round: weights 4 and 1/4.
        let raw: Vec<f64> = points.coordinate(0).iter().map(|x| if *x < 0.0 { 4.0 } else { 0.25 }).collect();
        let total: f64 = raw.iter().sum();
        let weights: Vec<f64> = raw.iter().map(|w| w / total).collect();
        let log_ratio: Vec<f64> = raw.iter().map(|w| crate::numeric::ln(*w)).collect();
        let draws = WeightedDraws { points: &points, weights: &weights, log_ratio: &log_ratio, log_mean: 0.0 };
        assert!(size(&mixture, &draws, None).variance < 1e-12);
    }
}
