//! All draws of all rounds, weighted by the balance heuristic, kept incrementally. For fitting, never for the answer.

use super::directed::Directed;
use super::scores::{Answered, log_size};
use crate::numeric::{Points, Purpose, ln, log_add_exp, stream, uniform};

/// The pool in reduced coordinates.
///
/// An estimate from it would be low: draws that trained a later proposal get that proposal in their denominator.
/// Source of the weights: Veach & Guibas 1995 (balance heuristic); Owen & Zhou, JASA 95 (2000) 135-143.
#[derive(Debug)]
pub(crate) struct Pool {
    pub(crate) points: Points,
    pub(crate) log_nominal: Vec<f64>,
    /// Margins, where an event is asked for.
    pub(crate) margin: Vec<f64>,
    /// `ln` of what counts: 0 in the event, `ln |f|` of an integrand; `-inf` elsewhere.
    pub(crate) log_size: Vec<f64>,
    /// What counts, with its sign.
    pub(crate) size: Vec<f64>,
    /// Held out for good: never trained on, always ranked on.
    pub(crate) held_out: Vec<bool>,
    log_sums: Vec<f64>,
    proposals: Vec<(f64, Directed)>,
    event: bool,
    seed: u64,
}

/// Share of every round that is held out.
const HELD_OUT: f64 = 1.0 / 3.0;

impl Pool {
    pub(crate) fn new(dim: usize, event: bool, seed: u64) -> Self {
        Self {
            points: Points::new(dim),
            log_nominal: Vec::new(),
            margin: Vec::new(),
            log_size: Vec::new(),
            size: Vec::new(),
            held_out: Vec::new(),
            log_sums: Vec::new(),
            proposals: Vec::new(),
            event,
            seed,
        }
    }

    pub(crate) fn len(&self) -> usize {
        self.log_nominal.len()
    }

    /// Adds a round's draws; `log_proposal` are the log densities of `proposal` at them.
    pub(crate) fn add(&mut self, points: &Points, answered: &Answered, log_proposal: &[f64], proposal: Directed) {
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
        self.log_nominal.extend_from_slice(&answered.log_nominal);
        self.margin.extend_from_slice(&answered.value);
        let sizes: Vec<f64> = (0..points.len()).map(|i| counted(answered, i, self.event)).collect();
        self.log_size.extend(sizes.iter().map(|&s| log_size(s)));
        self.size.extend(sizes);
        self.log_sums.extend(sums);
        self.proposals.push((log_n, proposal));
        let mut rng = stream(self.seed, Purpose::Refit, round, 0);
        self.held_out.extend((0..points.len()).map(|_| uniform(&mut rng) < HELD_OUT));
    }

    /// `ln` of the mixture that all points together were drawn from.
    pub(crate) fn log_mixture(&self) -> Vec<f64> {
        let log_n = ln(self.len() as f64);
        self.log_sums.iter().map(|s| s - log_n).collect()
    }
}

/// What a draw counts: one or zero for an event, the integrand for a mean; zero for a failure that does not count.
pub(crate) fn counted(answered: &Answered, i: usize, event: bool) -> f64 {
    if event {
        f64::from(u8::from(answered.hit[i]))
    } else if answered.value[i].is_nan() {
        0.0
    } else {
        answered.value[i]
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::exp;

    #[test]
    fn incremental_sums_equal_the_whole() {
        let a = Directed::central(2, 0, 1.0, 1.0).unwrap();
        let b = Directed::central(2, 0, 4.0, 1.0).unwrap();
        let mut pool = Pool::new(2, true, 1);
        for (round, (n, q)) in [(300, &a), (500, &b), (200, &a)].into_iter().enumerate() {
            let points = q.mixture().draw(n, 1, Purpose::Trial, round as u32).points;
            let answered = Answered { log_nominal: vec![0.0; n], value: vec![1.0; n], hit: vec![false; n] };
            let log_q = q.log_density(&points);
            pool.add(&points, &answered, &log_q, q.clone());
        }
        let (la, lb) = (a.log_density(&pool.points), b.log_density(&pool.points));
        for (i, m) in pool.log_mixture().iter().enumerate() {
            assert!((m - ln(0.5 * exp(la[i]) + 0.5 * exp(lb[i]))).abs() < 1e-12);
        }
        let held = pool.held_out.iter().filter(|&&h| h).count();
        // 1000 draws, a third held out: 5 standard deviations.
        assert!((258..410).contains(&held), "{held}");
    }
}
