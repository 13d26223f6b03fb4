//! Ranking of candidates on held-out points: by weighted log density, with a paired standard error in favour of fewer components.

use crate::numeric::{exp, ln};

/// Power of the score: small, so that it is the held-out log density to within its noise, yet bounded where one point is far off.
const POWER: f64 = 0.02;
/// A larger mixture must beat every smaller one by this many paired standard errors.
const STANDARD_ERRORS: f64 = 1.0;

/// The candidates' standing on held-out points.
#[derive(Debug, Clone)]
pub(crate) struct Ranking {
    /// `-ln mean_w (target/q)^POWER / POWER` of every candidate: the held-out log density up to a constant, larger is better.
    pub(crate) scores: Vec<f64>,
    /// The winner.
    pub(crate) best: usize,
}

/// Ranks candidates with `sizes[c]` components and log densities `log_densities[c]` at the held-out points, whose weights and log target
/// densities are given. Candidate 0 is the present proposal and wins ties.
pub(crate) fn rank(log_densities: &[Vec<f64>], sizes: &[usize], weights: &[f64], log_target: &[f64]) -> Ranking {
    let total: f64 = weights.iter().sum();
    let live: Vec<usize> = (0..weights.len()).filter(|&i| weights[i] > 0.0).collect();
    let shares: Vec<f64> = live.iter().map(|&i| weights[i] / total).collect();
    let top = live.iter().map(|&i| log_target[i] - log_densities[0][i]).fold(f64::NEG_INFINITY, f64::max);
    let powers: Vec<Vec<f64>> = log_densities
        .iter()
        .map(|l| live.iter().map(|&i| exp((POWER * (log_target[i] - l[i] - top)).clamp(-300.0, 300.0))).collect())
        .collect();
    let scores: Vec<f64> = powers.iter().map(|v| -ln(mean(&shares, v)) / POWER).collect();
    let mut order: Vec<usize> = (0..sizes.len()).collect();
    order.sort_by(|&a, &b| sizes[a].cmp(&sizes[b]).then(scores[b].total_cmp(&scores[a])).then(a.cmp(&b)));
    let mut best = order[0];
    for &c in &order[1..] {
        let better = if sizes[c] == sizes[best] {
            scores[c] > scores[best]
        } else {
            let gains: Vec<f64> = powers[best].iter().zip(&powers[c]).map(|(a, b)| a - b).collect();
            let gain = mean(&shares, &gains);
            let mut square = 0.0;
            for (s, g) in shares.iter().zip(&gains) {
                square += s * s * (g - gain) * (g - gain);
            }
            gain > STANDARD_ERRORS * square.sqrt()
        };
        if better {
            best = c;
        }
    }
    Ranking { scores, best }
}

fn mean(shares: &[f64], values: &[f64]) -> f64 {
    shares.iter().zip(values).map(|(s, v)| s * v).sum()
}

/// ESS fraction that `N` pooled points predict for a proposal: `(sum w)^2 / (N sum w t/q)`, which estimates `1/(1 + chi^2(t || q))`.
///
/// `weights[i] = exp(ln t_i - ln mixture_i - log_unit)` may be relative to any unit; `log_target` is `ln t`.
///
/// Source: the second moment of the weights under `q` by importance sampling from the pool (Douc, Guillin, Marin & Robert, ESAIM P&S 11 (2007) 427-447).
pub(crate) fn predicted_ess_fraction(weights: &[f64], log_unit: f64, log_target: &[f64], log_proposal: &[f64]) -> f64 {
    let live = || (0..weights.len()).filter(|&i| weights[i] > 0.0);
    let top = live().map(|i| log_target[i] - log_proposal[i]).fold(f64::NEG_INFINITY, f64::max);
    let (mut sum, mut second) = (0.0, 0.0);
    for i in live() {
        sum += weights[i];
        second += weights[i] * exp(log_target[i] - log_proposal[i] - top);
    }
    exp(ln(sum) + log_unit - ln(weights.len() as f64) + ln(sum) - ln(second) - top)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Points drawn from q itself with target q: every weight is one, so the prediction is exactly one, whatever the unit.
    #[test]
    fn a_perfect_proposal_is_predicted_to_be_perfect() {
        let log_q = [-1.0, -2.0, -3.5, -0.2];
        for shift in [0.0, 4000.0, -4000.0] {
            let log_t: Vec<f64> = log_q.iter().map(|l| l + shift).collect();
            let fraction = predicted_ess_fraction(&[1.0; 4], shift, &log_t, &log_q);
            assert!((fraction - 1.0).abs() < 1e-12, "{fraction}");
        }
    }

    #[test]
    fn a_larger_mixture_must_beat_a_smaller_one_clearly() {
        let log_target = vec![0.0; 100];
        let weights = vec![1.0; 100];
        let small: Vec<f64> = (0..100).map(|i| if i % 2 == 0 { -1.0 } else { -2.0 }).collect();
        let noisy: Vec<f64> = (0..100).map(|i| if i % 2 == 0 { -2.9 } else { 0.0 }).collect();
        let clear: Vec<f64> = small.iter().map(|l| l + 0.3).collect();
        assert_eq!(rank(&[small.clone(), noisy], &[1, 2], &weights, &log_target).best, 0);
        assert_eq!(rank(&[small, clear], &[1, 2], &weights, &log_target).best, 1);
    }
}
