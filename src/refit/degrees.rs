//! Degrees of freedom of a mixture, shared by its components, by a golden-section search on the weighted log density.

use super::GAUSSIAN_DF;
use crate::numeric::{BLOCK, Points, exp, ln};
use crate::proposal::{BlockTerms, Mixture};
use argmin::core::{CostFunction, Error, Executor, State};
use argmin::solver::goldensectionsearch::GoldenSectionSearch;

/// Fewest degrees of freedom that are fitted: below, draws go further than any target of use.
const MIN_DF: f64 = 1.2;
/// The search ends here; everything above [`GAUSSIAN_DF`] counts as Gaussian.
const MAX_DF: f64 = 400.0;
/// Points looked at: the log density in df is smooth, some thousands fix it.
const SAMPLE: usize = 2500;

/// The degrees of freedom (infinite: Gaussian) that maximise `sum w ln q` with locations, scales and shares as they are.
pub(crate) fn best_df(mixture: &Mixture, points: &Points, weights: &[f64]) -> f64 {
    let search = Search::new(mixture, points, weights);
    let (low, high) = (ln(MIN_DF), ln(MAX_DF));
    let Ok(solver) = GoldenSectionSearch::new(low, high).and_then(|s| s.with_tolerance(0.02)) else {
        return f64::INFINITY;
    };
    let middle = 0.5 * (low + high);
    let found = Executor::new(search, solver).configure(|s| s.param(middle).max_iters(14)).timer(false).run();
    let best = found.ok().and_then(|r| r.state().get_best_param().copied()).unwrap_or(high);
    let df = exp(best);
    if df > GAUSSIAN_DF { f64::INFINITY } else { df }
}

/// Squared distances of the sample to every component: all that the search needs.
struct Search {
    mixture: Mixture,
    /// Distances of a block of points, a column a component, and the points' weights.
    blocks: Vec<(Vec<f64>, Vec<f64>)>,
}

impl Search {
    fn new(mixture: &Mixture, points: &Points, weights: &[f64]) -> Self {
        let n = points.len();
        let stride = n.div_ceil(SAMPLE).max(1);
        let rows: Vec<usize> = (0..n).step_by(stride).filter(|&i| weights[i] > 0.0).collect();
        let sample = points.select(&rows);
        let mut terms = BlockTerms::default();
        let blocks = (0..sample.n_blocks())
            .map(|b| {
                terms.fill(mixture, sample.block(b));
                let mut own = vec![0.0; BLOCK];
                for (t, w) in own.iter_mut().enumerate().take(sample.block_len(b)) {
                    *w = weights[rows[b * BLOCK + t]];
                }
                (terms.distances.clone(), own)
            })
            .collect();
        Self { mixture: mixture.clone(), blocks }
    }
}

impl CostFunction for Search {
    type Param = f64;
    type Output = f64;

    fn cost(&self, log_df: &f64) -> Result<f64, Error> {
        let df = exp(*log_df);
        let mut terms = BlockTerms::default();
        let mut log_sums = [0.0; BLOCK];
        let mut sum = 0.0;
        for (distances, weights) in &self.blocks {
            terms.with_tails(&self.mixture, df, distances);
            terms.log_sum(self.mixture.log_shares(), &mut log_sums);
            for (w, l) in weights.iter().zip(&log_sums) {
                if *w > 0.0 {
                    sum -= w * l;
                }
            }
        }
        Ok(sum)
    }
}
