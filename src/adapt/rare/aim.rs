//! What a refit fits to: the event itself (or `|f|`), or a smoothed stand-in while too few draws meet it.

use super::pool::Pool;
use super::smoothing::{effective, log_indicator, smallest};
use crate::numeric::exp;

/// The log target of every pooled draw.
#[derive(Debug)]
pub(crate) struct FitTarget {
    pub(crate) log_target: Vec<f64>,
    /// `ln (target / pool)`.
    pub(crate) log_weights: Vec<f64>,
    /// Whether it is the event itself.
    pub(crate) at_event: bool,
    /// Smoothing in units of the margin; none at the event itself.
    pub(crate) smoothing: Option<f64>,
}

/// Halvings of the search for an exponent.
const HALVINGS: usize = 20;

impl FitTarget {
    /// The event itself when its draws have `wanted` effective ones; else the event smoothed as little as that allows. An integrand
    /// that is zero almost everywhere has no margin to smooth by: its few weights are evened out by an exponent. `None` where nothing
    /// was met and nothing can be smoothed.
    pub(crate) fn of(pool: &Pool, event: bool, wanted: f64) -> Option<Self> {
        let base: Vec<f64> = pool.log_nominal.iter().zip(pool.log_mixture()).map(|(p, m)| p - m).collect();
        let log_target: Vec<f64> = pool.log_nominal.iter().zip(&pool.log_size).map(|(p, s)| p + s).collect();
        let log_weights: Vec<f64> = base.iter().zip(&pool.log_size).map(|(b, s)| b + s).collect();
        let met = log_weights.iter().any(|l| l.is_finite());
        if met && effective(&log_weights) >= wanted {
            return Some(Self { log_target, log_weights, at_event: true, smoothing: None });
        }
        if event {
            let s = smallest(&base, &pool.margin, wanted);
            let smooth: Vec<f64> = pool.margin.iter().map(|&m| log_indicator(m, s)).collect();
            return Some(Self {
                log_target: pool.log_nominal.iter().zip(&smooth).map(|(p, s)| p + s).collect(),
                log_weights: base.iter().zip(&smooth).map(|(b, s)| b + s).collect(),
                at_event: false,
                smoothing: Some(s),
            });
        }
        met.then(|| evened(&log_target, &log_weights, wanted))
    }
}

/// Weights to the largest power at which `wanted` of them are effective (the smallest power tried, where none is).
fn evened(log_target: &[f64], log_weights: &[f64], wanted: f64) -> FitTarget {
    let powered =
        |g: f64| -> Vec<f64> { log_weights.iter().map(|&l| if l == f64::NEG_INFINITY { l } else { g * l }).collect() };
    let (mut low, mut high) = (0.0, 1.0);
    for _ in 0..HALVINGS {
        let middle = 0.5 * (low + high);
        if effective(&powered(middle)) >= wanted {
            low = middle;
        } else {
            high = middle;
        }
    }
    let power = low.max(1e-3);
    let log_target = log_target
        .iter()
        .zip(log_weights)
        .map(|(&t, &l)| if l == f64::NEG_INFINITY { l } else { t - (1.0 - power) * l })
        .collect();
    FitTarget { log_target, log_weights: powered(power), at_event: false, smoothing: None }
}

/// Weights relative to the largest.
pub(crate) fn relative(log_weights: &[f64]) -> Vec<f64> {
    let top = log_weights.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    log_weights.iter().map(|&l| if l == f64::NEG_INFINITY { 0.0 } else { exp(l - top) }).collect()
}
