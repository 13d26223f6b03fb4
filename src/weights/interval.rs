//! 95 % intervals, and bounds where nothing was seen.

use crate::numeric::{exp, ln};

/// Normal quantile of a two-sided 95 % interval.
pub(super) const TWO_SIDED_95: f64 = 1.959_963_984_540_054;

/// The name of [`normal_interval`] in results.
pub(super) const NORMAL: &str = "normal";
/// The name of [`log_interval`] in results.
pub(super) const LOG_NORMAL: &str = "log-normal";

/// `value -+ 1.96 se`.
#[must_use]
pub fn normal_interval(value: f64, se: f64) -> [f64; 2] {
    [value - TWO_SIDED_95 * se, value + TWO_SIDED_95 * se]
}

/// `value exp(-+ 1.96 se / value)` for a positive value: normal on the log scale, by the delta method.
#[must_use]
pub fn log_interval(value: f64, se: f64) -> [f64; 2] {
    let factor = exp(TWO_SIDED_95 * (se / value));
    [value / factor, value * factor]
}

/// What `trials` independent trials without a hit leave open: `1 - 0.05^(1/trials)`, a one-sided 95 % bound of the
/// probability of a hit. With no trials the bound is one.
///
/// For a survey of so many climbs it is the share of the start distribution that a basin must have to be found with
/// 95 %; for an event that was never met it bounds the probability, and rests on the draws from the nominal
/// component alone.
///
/// ```
/// use evenpoise::weights::no_hit_bound;
/// assert!((no_hit_bound(60) - 0.0487).abs() < 1e-4);
/// ```
#[must_use]
pub fn no_hit_bound(trials: usize) -> f64 {
    -libm::expm1(ln(0.05) / trials as f64)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn intervals_are_their_formulas() {
        let [low, high] = normal_interval(1.0, 0.5);
        assert!((low - 0.020_018_007_729_973).abs() < 1e-14 && (high - 1.979_981_992_270_027).abs() < 1e-14);
        let [low, high] = log_interval(2.0, 0.2);
        assert!((low * high - 4.0).abs() < 1e-14);
        // Source: mpmath 1.3.0 at 30 digits, 2*exp(0.1959963984540054).
        assert!((high - 2.433_045_047_929_205_7).abs() < 1e-14, "{high}");
        assert!(log_interval(0.0, 0.0)[1].is_nan());
    }

    #[test]
    fn bound_without_hits() {
        assert_eq!(no_hit_bound(0), 1.0);
        assert!((no_hit_bound(1) - 0.95).abs() < 1e-15);
        // The rule of three.
        assert!((no_hit_bound(1_000_000) * 1e6 - 2.9957).abs() < 1e-4);
    }
}
