//! Degrees of freedom of a mixture, shared by its components, by a golden-section search on the weighted log density.

use super::GAUSSIAN_DF;
use crate::numeric::{Points, exp, ln, log_sum_exp};
use crate::proposal::Mixture;
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
    d: usize,
    log_shares: Vec<f64>,
    log_dets: Vec<f64>,
    distances: Vec<Vec<f64>>,
    weights: Vec<f64>,
}

impl Search {
    fn new(mixture: &Mixture, points: &Points, weights: &[f64]) -> Self {
        let n = points.len();
        let stride = n.div_ceil(SAMPLE).max(1);
        let rows: Vec<usize> = (0..n).step_by(stride).filter(|&i| weights[i] > 0.0).collect();
        let mut x = vec![0.0; mixture.dim()];
        let distances = rows
            .iter()
            .map(|&i| {
                points.copy_point(i, &mut x);
                mixture.components().iter().map(|c| c.distance(&x)).collect()
            })
            .collect();
        Self {
            d: mixture.dim(),
            log_shares: mixture.log_shares().to_vec(),
            log_dets: mixture.components().iter().map(crate::proposal::Component::log_det_factor).collect(),
            distances,
            weights: rows.iter().map(|&i| weights[i]).collect(),
        }
    }
}

impl CostFunction for Search {
    type Param = f64;
    type Output = f64;

    fn cost(&self, log_df: &f64) -> Result<f64, Error> {
        let df = exp(*log_df);
        let half = 0.5 * self.d as f64;
        let constant = libm::lgamma(0.5 * df + half) - libm::lgamma(0.5 * df) - half * ln(df * std::f64::consts::PI);
        let mut terms = vec![0.0; self.log_shares.len()];
        let mut sum = 0.0;
        for (distances, w) in self.distances.iter().zip(&self.weights) {
            for (k, term) in terms.iter_mut().enumerate() {
                *term =
                    self.log_shares[k] + constant - self.log_dets[k] - (0.5 * df + half) * ln(1.0 + distances[k] / df);
            }
            sum -= w * log_sum_exp(&terms);
        }
        Ok(sum)
    }
}
