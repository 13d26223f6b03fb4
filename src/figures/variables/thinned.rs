//! Weighted draws as dots of equal weight.

use crate::figures::columns::clean;

/// Dots that stand for the whole weight in a panel.
pub(super) const DOTS: usize = 500;

/// Dots of equal weight: how many each draw gets.
pub(super) struct Thinned {
    /// Weights that can be summed.
    pub(super) weights: Vec<f64>,
    /// Dots of each draw.
    pub(super) dots: Vec<usize>,
}

impl Thinned {
    /// Systematic resampling with its steps starting half a step in, so that nothing is left to chance.
    pub(super) fn new(weights: &[f64]) -> Self {
        let weights = clean(weights);
        let total: f64 = weights.iter().sum();
        let mut dots = vec![0; weights.len()];
        if total > 0.0 {
            let (mut sum, mut next) = (0.0, 0.5);
            for (dot, weight) in dots.iter_mut().zip(&weights) {
                sum += weight / total * DOTS as f64;
                while next < sum && next < DOTS as f64 {
                    *dot += 1;
                    next += 1.0;
                }
            }
        }
        Self { weights, dots }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A draw with half of the weight gets half of the dots; the dots are all there.
    #[test]
    fn dots_stand_for_equal_weight() {
        let thinned = Thinned::new(&[vec![1.0; 1499], vec![1499.0]].concat());
        assert_eq!(thinned.dots.iter().sum::<usize>(), DOTS);
        assert_eq!(thinned.dots[1499], DOTS / 2);
    }

    #[test]
    fn nothing_is_shown_of_no_weight() {
        assert!(Thinned::new(&[0.0, f64::NAN]).dots.iter().all(|&dots| dots == 0));
    }
}
