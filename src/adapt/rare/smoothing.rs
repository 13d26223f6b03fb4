//! Smoothed events: weights that reach an event too rare to be met at once.

use crate::numeric::{exp, ln, normal};

/// The smoothed indicator `ln Phi(-margin / s)`; `-inf` where the margin is unknown.
///
/// # Source
/// Papaioannou, Geyer & Straub, Reliab. Eng. Syst. Saf. 191 (2019) 106564.
pub(crate) fn log_indicator(margin: f64, s: f64) -> f64 {
    if margin.is_nan() || margin == f64::INFINITY { f64::NEG_INFINITY } else { normal::log_upper_tail(margin / s) }
}

/// Effective number of weights given by their logarithms.
pub(crate) fn effective(log_weights: &[f64]) -> f64 {
    let top = log_weights.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    if top == f64::NEG_INFINITY {
        return 0.0;
    }
    let (mut sum, mut squares) = (0.0, 0.0);
    for &l in log_weights {
        let w = exp(l - top);
        sum += w;
        squares += w * w;
    }
    sum * sum / squares
}

/// Halvings of the search for a smoothing, over seven orders of magnitude.
const HALVINGS: usize = 12;
/// Range of smoothings, in units of the largest margin met.
const FINEST: f64 = 1e-6;
const COARSEST: f64 = 10.0;

/// The smallest smoothing under which weights `base + ln Phi(-margin/s)` have `wanted` effective points (the coarsest one where none
/// has).
pub(crate) fn smallest(base: &[f64], margins: &[f64], wanted: f64) -> f64 {
    let scale = margins.iter().filter(|m| m.is_finite()).fold(0.0_f64, |a, m| a.max(m.abs()));
    if scale == 0.0 {
        return 1.0;
    }
    let enough = |log_s: f64| {
        let s = exp(log_s);
        let weights: Vec<f64> = base.iter().zip(margins).map(|(b, &m)| b + log_indicator(m, s)).collect();
        effective(&weights) >= wanted
    };
    let (mut fine, mut coarse) = (ln(scale * FINEST), ln(scale * COARSEST));
    if enough(fine) {
        return exp(fine);
    }
    for _ in 0..HALVINGS {
        let middle = 0.5 * (fine + coarse);
        if enough(middle) {
            coarse = middle;
        } else {
            fine = middle;
        }
    }
    exp(coarse)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_smoothing_leaves_the_points_asked_for() {
        let margins: Vec<f64> = (0..1000).map(|i| 1.0 + 0.01 * f64::from(i)).collect();
        let base = vec![-3.0; 1000];
        let s = smallest(&base, &margins, 100.0);
        let count =
            |s: f64| effective(&base.iter().zip(&margins).map(|(b, &m)| b + log_indicator(m, s)).collect::<Vec<_>>());
        assert!(count(s) >= 100.0 && count(0.98 * s) < 100.0, "{}", count(s));
        assert_eq!(log_indicator(f64::NAN, 1.0), f64::NEG_INFINITY);
        assert_eq!(effective(&[f64::NEG_INFINITY]), 0.0);
        // A margin known by its sign alone: the coarsest smoothing takes all points alike.
        assert!(smallest(&[0.0; 10], &[1.0; 10], 5.0) <= 1e-5);
    }
}
