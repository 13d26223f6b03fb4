//! Production itself: draw, evaluate, add, in any number of steps.

use super::job::Job;
use super::sequence::Sequence;
use super::sums::Sums;
use super::sums::Terms;
use crate::numeric::Points;
use crate::numeric::exp;
use crate::problem::Aim;
use crate::problem::EvaluateError;
use crate::problem::Evaluation;
use crate::problem::Problem;
use crate::proposal::Component;
use crate::proposal::Mixture;
use rayon::prelude::*;
use std::ops::Range;
use thiserror::Error;

/// Fewest draws that are worth a thread of their own.
const PIECE: usize = 2048;

/// Why production cannot go on.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum ProductionError {
    /// The target cannot be evaluated.
    #[error("the target could not be evaluated")]
    Evaluation(#[from] EvaluateError),
    /// The density or the integrand is infinite at a draw.
    #[error(
        "the {what} is infinite at draw {draw} (from 0): it is unbounded there; bound it, or cut the point out with `require`"
    )]
    Unbounded {
        /// Log density or integrand.
        what: &'static str,
        /// Number of the draw in the sequence.
        draw: u64,
    },
}

/// The draws of one step, for those who want to keep them: all in the proposal's coordinates.
#[derive(Debug, Clone)]
pub struct Step {
    /// The points.
    pub points: Points,
    /// Log proposal density.
    pub log_proposal: Vec<f64>,
    /// What the problem says of them.
    pub evaluation: Evaluation,
    /// Values of the estimates, a column an estimate.
    pub estimates: Vec<Vec<f64>>,
}

/// A production run under way: what it is, and the sums so far.
#[derive(Debug)]
pub struct Production<'a> {
    problem: &'a Problem,
    job: &'a Job,
    sequence: Sequence<'a>,
    strata: Vec<u32>,
    nominal: Option<u32>,
    sums: Sums,
}

impl<'a> Production<'a> {
    /// A run of `job` over draws of `mixture`, going on from `sums`.
    #[must_use]
    pub fn new(problem: &'a Problem, mixture: &'a Mixture, job: &'a Job, sums: Sums) -> Self {
        let sequence = Sequence::new(mixture, job.seed, job.stage, job.draws);
        let strata = sequence.strata();
        let nominal = if problem.aim() == Aim::Density { None } else { nominal_component(mixture) };
        Self { problem, job, sequence, strata, nominal, sums }
    }

    /// The sums so far.
    #[must_use]
    pub fn sums(&self) -> &Sums {
        &self.sums
    }

    /// Draws, evaluates and adds a part of the sequence.
    ///
    /// # Errors
    /// [`ProductionError`]; nothing of the part is then added.
    pub fn advance(&mut self, part: Range<u64>) -> Result<Step, ProductionError> {
        let points = self.sequence.draw(part.clone());
        let log_proposal = self.sequence.mixture().log_density(&points);
        let evaluation = self.problem.evaluate(&points)?;
        let estimates = if self.job.estimates.is_empty() { Vec::new() } else { self.problem.estimates(&points) };
        let step = Step { points, log_proposal, evaluation, estimates };
        let terms = self.terms(&step, part)?;
        self.add(&terms);
        let Terms { estimates, .. } = terms;
        Ok(Step { estimates, ..step })
    }

    fn terms(&self, step: &Step, part: Range<u64>) -> Result<Terms, ProductionError> {
        let (aim, evaluation) = (self.problem.aim(), &step.evaluation);
        let labels = self.sequence.labels(part.clone());
        let inside = self.job.failures_are_inside();
        let mut terms = Terms {
            stratum: labels.iter().map(|&k| self.strata[k as usize]).collect(),
            nominal: labels.iter().map(|&k| Some(k) == self.nominal).collect(),
            estimates: step.estimates.clone(),
            first: part.start,
            ..Terms::default()
        };
        for (i, (&log, &q)) in evaluation.log_density.iter().zip(&step.log_proposal).enumerate() {
            let unbounded = |what| ProductionError::Unbounded { what, draw: part.start + i as u64 };
            if log == f64::INFINITY {
                return Err(unbounded("log density"));
            }
            // No weight where the density is nothing, however far out the point is.
            let weight = |log: f64| if log == f64::NEG_INFINITY { 0.0 } else { exp(log - q - self.job.log_scale) };
            let failed = if aim == Aim::Density { log.is_nan() } else { evaluation.value[i].is_nan() };
            let term = match aim {
                _ if failed && !(aim == Aim::Probability && inside) => 0.0,
                Aim::Density => weight(log),
                Aim::Probability if failed || evaluation.hit[i] => weight(log),
                Aim::Probability => 0.0,
                Aim::Expectation if evaluation.value[i].is_infinite() => return Err(unbounded("integrand")),
                Aim::Expectation => evaluation.value[i] * weight(log),
            };
            terms.term.push(term);
            terms.failed.push(failed);
            if aim != Aim::Density {
                terms.failed_weight.push(if failed { weight(log) } else { 0.0 });
            }
        }
        Ok(terms)
    }

    fn add(&mut self, terms: &Terms) {
        let n = terms.term.len();
        // A piece for each thread: how the draws are cut up cannot be seen in the sums, but each piece takes memory.
        let each = n.div_ceil(rayon::current_num_threads()).max(PIECE);
        let pieces: Vec<Range<usize>> = (0..n).step_by(each).map(|from| from..(from + each).min(n)).collect();
        let job = self.job;
        // Bins are many: they are counted estimate by estimate instead, and only once.
        let mut empty = Sums::new(job);
        empty.estimates.iter_mut().for_each(|e| e.bins = None);
        let parts: Vec<Sums> = pieces
            .into_par_iter()
            .map(|rows| {
                let mut sums = empty.clone();
                sums.add(job, terms, rows);
                sums
            })
            .collect();
        let bins: Vec<_> = self.sums.estimates.iter_mut().map(|e| e.bins.take()).collect();
        for part in &parts {
            let alike = self.sums.merge(part);
            debug_assert!(alike, "both were laid out by the same job");
        }
        let counted: Vec<_> = bins
            .into_par_iter()
            .enumerate()
            .map(|(k, bins)| {
                bins.map(|mut bins| {
                    Sums::count(&mut bins, &job.estimates[k].borders, terms, k);
                    bins
                })
            })
            .collect();
        self.sums.estimates.iter_mut().zip(counted).for_each(|(e, bins)| e.bins = bins);
    }
}

/// The component that is the nominal density itself in standard normal scores, where there is one.
fn nominal_component(mixture: &Mixture) -> Option<u32> {
    let is_standard = |component: &Component| {
        let d = component.dim();
        component.df() == f64::INFINITY
            && component.location().iter().all(|&x| x == 0.0)
            && component.scale().iter().enumerate().all(|(at, &s)| s == f64::from(u8::from(at / d == at % d)))
    };
    mixture.components().iter().position(is_standard).map(|k| k as u32)
}
