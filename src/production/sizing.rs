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
    /// `ln` of target over proposal at each, up to one constant: of the proposal that production will draw from.
    pub log_ratio: &'a [f64],
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
    // t/q relative to its mean under q: E_t[q/t] is one over that mean.
    let log_ratio = |i: usize| draws.log_ratio[i];
    let largest = live.iter().map(|&i| log_ratio(i)).fold(f64::NEG_INFINITY, f64::max);
    let inverse: f64 = live.iter().map(|&i| draws.weights[i] * exp(largest - log_ratio(i))).sum();
    let relative = |i: usize| exp(log_ratio(i) - largest) * inverse;
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
