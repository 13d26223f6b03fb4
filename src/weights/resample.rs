//! Evenly weighted draws out of weighted ones.

use crate::numeric::Purpose;
use crate::numeric::stream;
use crate::numeric::uniform;

/// Numbers of `n` draws, rising, such that each draw comes as often as its weight asks for: `floor(n w)` or one more
/// time, `n w` times on average.
///
/// The whole parts of `n w` are taken as they are; the remainders share what is left by one systematic sweep with a
/// random start, which adds less noise than independent choices. Weights are made to sum to one; none is negative.
/// Nothing comes back where none is positive.
///
/// # Source
/// Liu & Chen, J. Amer. Statist. Assoc. 93 (1998) 1032-1044, section 3.2, for the residuals; Kitagawa, J. Comput. Graph.
/// Statist. 5 (1996) 1-25, appendix, for the systematic sweep.
///
/// ```
/// use evenpoise::weights::resample;
/// assert_eq!(resample(&[0.5, 0.0, 0.25, 0.25], 4, 1), [0, 0, 2, 3]);
/// ```
#[must_use]
pub fn resample(weights: &[f64], n: usize, seed: u64) -> Vec<usize> {
    let total: f64 = weights.iter().sum();
    if !(total > 0.0 && total.is_finite()) {
        return Vec::new();
    }
    let wanted: Vec<f64> = weights.iter().map(|w| w / total * n as f64).collect();
    let mut copies: Vec<usize> = wanted.iter().map(|w| w.floor() as usize).collect();
    let left = n.saturating_sub(copies.iter().sum());
    let remainders: Vec<f64> = wanted.iter().map(|w| w - w.floor()).collect();
    let sum: f64 = remainders.iter().sum();
    if left > 0 && sum > 0.0 {
        // Marks at (start + k) / left of the remainders, laid end to end.
        let start = uniform(&mut stream(seed, Purpose::Resample, 0, 0));
        let (mut passed, mut marks) = (0.0, 0);
        for (i, remainder) in remainders.iter().enumerate() {
            passed += remainder / sum * left as f64;
            // Rounding must not lose the last mark.
            let last = i + 1 == remainders.len();
            while marks < left && (last || start + (marks as f64) < passed) {
                copies[i] += 1;
                marks += 1;
            }
        }
    }
    copies.iter().enumerate().flat_map(|(i, &count)| std::iter::repeat_n(i, count)).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_draw_comes_as_often_as_its_weight_asks() {
        let weights: Vec<f64> = (0..500).map(|i| f64::from((i * 37) % 101)).collect();
        let total: f64 = weights.iter().sum();
        for n in [1, 10, 499, 4000] {
            let chosen = resample(&weights, n, 5);
            assert_eq!(chosen.len(), n);
            assert!(chosen.is_sorted());
            for (i, weight) in weights.iter().enumerate() {
                let count = chosen.iter().filter(|&&k| k == i).count() as f64;
                assert!((count - weight / total * n as f64).abs() < 1.0 + 1e-9, "draw {i}: {count}");
            }
        }
        assert_eq!(resample(&weights, 100, 5), resample(&weights, 100, 5));
    }

    /// Over 4,000 seeds the mean number of copies is n w: within 4.5 standard errors of a difference below one, whose
    /// standard deviation is at most 1/2 (false alarm 7e-6 each, 7 of them).
    #[test]
    fn copies_are_right_on_average() {
        let weights = [0.05, 0.3, 0.0, 0.21, 0.17, 0.09, 0.18];
        let mut counts = [0.0; 7];
        for seed in 0..4000 {
            resample(&weights, 5, seed).into_iter().for_each(|i| counts[i] += 1.0);
        }
        for (count, weight) in counts.iter().zip(weights) {
            assert!((count / 4000.0 - 5.0 * weight).abs() < 4.5 * 0.5 / 4000.0_f64.sqrt(), "{count} {weight}");
        }
        assert_eq!(counts[2], 0.0);
    }

    #[test]
    fn without_weight_nothing_comes() {
        assert!(resample(&[0.0, 0.0], 5, 1).is_empty() && resample(&[], 5, 1).is_empty());
        assert!(resample(&[f64::NAN, 1.0], 5, 1).is_empty());
    }
}
