//! All points of all rounds, weighted by the balance heuristic, kept incrementally.

use crate::numeric::{Points, Purpose, Stream, exp, ln, log_add_exp, stream, uniform};
use crate::proposal::Mixture;
use argmin::core::{CostFunction, Error, Executor, State};
use argmin::solver::brent::BrentRoot;

/// The pool: points, their log target density, and `ln sum_r n_r q_r(x)` over the rounds so far.
///
/// A new round costs the new points under the old proposals and the old points under the new one, never everything again. Source of
/// the weights: Veach & Guibas 1995 (balance heuristic); Owen & Zhou, JASA 95 (2000) 135-143; Cornuet et al., Scand. J. Stat. 39 (2012) 798-812.
#[derive(Debug)]
pub(crate) struct Pool {
    pub(crate) points: Points,
    /// Log target density; `-inf` outside the support and where the model failed.
    pub(crate) log_target: Vec<f64>,
    log_sums: Vec<f64>,
    proposals: Vec<(f64, Mixture)>,
    /// Held out for good: never trained on.
    pub(crate) held_out: Vec<bool>,
    /// Gradients of the log target, where the target gives them.
    pub(crate) gradients: Option<Points>,
}

/// One point in so many of every round is held out.
const HOLD_OUT: usize = 3;

impl Pool {
    pub(crate) fn new(dim: usize) -> Self {
        Self {
            points: Points::new(dim),
            log_target: Vec::new(),
            log_sums: Vec::new(),
            proposals: Vec::new(),
            held_out: Vec::new(),
            gradients: Some(Points::new(dim)),
        }
    }

    pub(crate) fn len(&self) -> usize {
        self.log_target.len()
    }

    /// Adds the draws of a round from `proposal`; `log_proposal` are its log densities at them.
    pub(crate) fn add(
        &mut self,
        points: &Points,
        log_target: &[f64],
        log_proposal: &[f64],
        gradients: Option<&Points>,
        proposal: Mixture,
        seed: u64,
    ) {
        let round = self.proposals.len() as u32;
        let log_n = ln(points.len() as f64);
        if !self.points.is_empty() {
            for (sum, q) in self.log_sums.iter_mut().zip(proposal.log_density(&self.points)) {
                *sum = log_add_exp(*sum, log_n + q);
            }
        }
        let mut sums: Vec<f64> = log_proposal.iter().map(|q| log_n + q).collect();
        for (log_m, earlier) in &self.proposals {
            for (sum, q) in sums.iter_mut().zip(earlier.log_density(points)) {
                *sum = log_add_exp(*sum, log_m + q);
            }
        }
        self.points.extend(points);
        match (self.gradients.as_mut(), gradients) {
            (Some(held), Some(more)) => held.extend(more),
            _ => self.gradients = None,
        }
        self.log_target.extend(log_target.iter().map(|&l| if l.is_nan() { f64::NEG_INFINITY } else { l }));
        self.log_sums.extend(sums);
        self.proposals.push((log_n, proposal));
        self.held_out.extend(hold_out(points.len(), &mut stream(seed, Purpose::Refit, round, 0)));
    }

    /// `ln` of the mixture density that all points together were drawn from.
    pub(crate) fn log_mixture(&self) -> Vec<f64> {
        let log_n = ln(self.len() as f64);
        self.log_sums.iter().map(|s| s - log_n).collect()
    }

    /// `ln (target / mixture)` of every point.
    pub(crate) fn log_weights(&self) -> Vec<f64> {
        self.log_target
            .iter()
            .zip(self.log_mixture())
            .map(|(&l, m)| if l == f64::NEG_INFINITY { l } else { l - m })
            .collect()
    }
}

/// A third of the draws, chosen at random.
fn hold_out(n: usize, rng: &mut Stream) -> Vec<bool> {
    let mut order: Vec<usize> = (0..n).collect();
    for i in (1..n).rev() {
        let j = ((uniform(rng) * (i + 1) as f64) as usize).min(i);
        order.swap(i, j);
    }
    let mut held = vec![false; n];
    for &i in &order[..n / HOLD_OUT] {
        held[i] = true;
    }
    held
}

/// `exp(g (l - max l))`, the tempered weights relative to the largest.
pub(crate) fn tempered(log_weights: &[f64], exponent: f64) -> Vec<f64> {
    let top = log_weights.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    log_weights.iter().map(|&l| if l == f64::NEG_INFINITY { 0.0 } else { exp(exponent * (l - top)) }).collect()
}

/// The largest exponent in (0, 1] whose tempered weights have at least `wanted` effective points.
pub(crate) fn temper(log_weights: &[f64], wanted: f64) -> f64 {
    let ess = |g: f64| crate::refit::effective(&tempered(log_weights, g));
    if ess(1.0) >= wanted {
        return 1.0;
    }
    let least = 1e-6;
    if ess(least) <= wanted {
        return least;
    }
    let root = BrentRoot::new(least, 1.0, 1e-4);
    let search = Executor::new(Effective { log_weights, wanted }, root).configure(|s| s.max_iters(60)).timer(false);
    search.run().ok().and_then(|r| r.state().get_best_param().copied()).unwrap_or(least).clamp(least, 1.0)
}

struct Effective<'a> {
    log_weights: &'a [f64],
    wanted: f64,
}

impl CostFunction for Effective<'_> {
    type Param = f64;
    type Output = f64;

    fn cost(&self, g: &f64) -> Result<f64, Error> {
        Ok(ln(crate::refit::effective(&tempered(self.log_weights, *g)).max(1e-300) / self.wanted))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::proposal::Component;

    #[test]
    fn incremental_sums_equal_the_whole() {
        let a = Mixture::single(Component::new(vec![0.0], &[1.0], f64::INFINITY).unwrap());
        let b = Mixture::single(Component::new(vec![1.0], &[4.0], 5.0).unwrap());
        let mut pool = Pool::new(1);
        for (round, (n, q)) in [(300, &a), (500, &b), (200, &a)].into_iter().enumerate() {
            let drawn = q.draw(n, 1, Purpose::Trial, round as u32);
            let lq = q.log_density(&drawn.points);
            pool.add(&drawn.points, &vec![0.0; n], &lq, None, q.clone(), 1);
        }
        for (i, m) in pool.log_mixture().iter().enumerate().step_by(37) {
            let x = pool.points.point(i);
            let want = ln(0.5 * exp(a.log_density_at(&x)) + 0.5 * exp(b.log_density_at(&x)));
            assert!((m - want).abs() < 1e-12);
        }
        assert_eq!(pool.held_out.iter().filter(|&&h| h).count(), 100 + 166 + 66);
    }

    #[test]
    fn tempering_reaches_the_effective_points_asked_for() {
        let log_weights: Vec<f64> = (0..1000).map(|i| -0.05 * f64::from(i)).collect();
        for shift in [0.0, 5000.0, -5000.0] {
            let shifted: Vec<f64> = log_weights.iter().map(|l| l + shift).collect();
            let g = temper(&shifted, 200.0);
            assert!((crate::refit::effective(&tempered(&shifted, g)) - 200.0).abs() < 1.0, "{g}");
        }
        assert_eq!(temper(&log_weights, 10.0), 1.0);
    }
}
