//! Contestants on fresh draws.

use super::contestants::{Kind, Made};
use super::intervals::{Interval, bootstrap, relative_error};
use super::ledger::Ledger;
use crate::adapt::TuneError;
use crate::adapt::layers::{HALO_DF, WIDE_DF};
use crate::numeric::{Points, Purpose, exp, ln};
use crate::problem::{Aim, Failed, Problem};
use crate::proposal::{Drawn, Mixture, ProposalError};
use crate::weights::{LogWeights, Score, Strata, TailReason, score};

/// A contestant, its fresh draws and what they say.
#[derive(Debug, Clone)]
pub struct Contestant {
    /// What it is.
    pub kind: Kind,
    /// What it is called.
    pub name: String,
    /// Degrees of freedom of its fitted components; infinite for Gaussian ones.
    pub df: f64,
    /// The proposal.
    pub proposal: Mixture,
    /// Evaluations of its tuning, those it shared included.
    pub tuning_evaluations: u64,
    /// Fresh draws: none of them made or chose a proposal.
    pub draws: FreshDraws,
    /// Score of their weights; none where no draw met the target.
    pub score: Option<Score>,
    /// What is compared.
    pub merits: Merits,
}

impl Contestant {
    /// The proposal with other degrees of freedom of its fitted components; the heavy-tailed layers stay what they are.
    ///
    /// # Errors
    /// As [`Mixture::map`].
    pub fn with_fitted_df(&self, df: f64) -> Result<Mixture, ProposalError> {
        let layer = |own: f64| own == WIDE_DF || (own == HALO_DF && self.df > HALO_DF);
        self.proposal.map(|c| if layer(c.df()) { c.clone() } else { c.with_df(df) })
    }
}

/// Draws of a contestant.
#[derive(Debug, Clone)]
pub struct FreshDraws {
    /// The points, in the proposal's coordinates.
    pub points: Points,
    /// Component of each.
    pub labels: Vec<u32>,
    /// Logarithms of the weights: target over proposal; for a probability or an expectation the size of each draw's part of the answer.
    pub log_weights: Vec<f64>,
    /// Sign of each draw's part.
    pub signs: Vec<f64>,
    /// Log nominal densities, for a probability or an expectation.
    pub log_nominal: Vec<f64>,
    /// Evaluations that failed.
    pub failed: usize,
}

/// What a contestant is compared by, each with its 95 % interval.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Merits {
    /// ESS fraction: on the logit scale by the delta method; resampled where the tail shape is above 0.5.
    pub ess_fraction: Interval,
    /// Weight variance: that of the ESS fraction, carried over.
    pub weight_variance: Interval,
    /// Tail shape `k`: `k ± 1.96 (1 + k)/sqrt(M)`, `M` tail points.
    pub tail_shape: Interval,
    /// Largest share of one draw, resampled.
    pub largest_share: Interval,
    /// Relative error of the answer (the normalising constant for a density) from these draws, resampled.
    pub relative_error: Interval,
    /// Production draws for a relative error of 1 %, from the relative error.
    pub draws_for_one_percent: Interval,
}

/// Plain draws from the distributions of the variables, as far as the contestants' draws tell.
#[derive(Debug, Clone, PartialEq)]
pub struct Yardstick {
    /// The contestant whose draws it was computed from; nothing was evaluated for it.
    pub from: String,
    /// `(E f)^2 / E f^2`: for a probability, the probability itself.
    pub ess_fraction: Interval,
    /// Draws for a relative error of 1 %.
    pub draws_for_one_percent: Interval,
}

/// Normal quantile of a two-sided 95 % interval.
const TWO_SIDED_95: f64 = 1.959_963_984_540_054;
/// A relative error of 1 %.
const ONE_PERCENT: f64 = 0.01;

/// Draws, evaluates and scores.
pub(super) fn on_fresh_draws(
    problem: &Problem,
    made: Made,
    n: usize,
    seed: u64,
    ledger: &mut Ledger,
) -> Result<Contestant, TuneError> {
    let Drawn { points, labels } = made.proposal.draw(n, seed, Purpose::Compare, 0);
    let log_proposal = made.proposal.log_density(&points);
    let answers = ledger.evaluate(&points)?;
    let failures_are_inside = problem.failed() == Some(Failed::Inside);
    let (mut log_weights, mut signs, mut failed) = (Vec::with_capacity(n), Vec::with_capacity(n), 0);
    for i in 0..n {
        let log_density = answers.log_density[i];
        let value = answers.value.get(i).copied().unwrap_or(1.0);
        let fails = log_density.is_nan() || value.is_nan();
        failed += usize::from(fails);
        let inside = match problem.aim() {
            Aim::Density => !fails,
            Aim::Expectation => !fails && value != 0.0,
            Aim::Probability => (fails && failures_are_inside) || (!fails && answers.hit[i]),
        };
        let size = if problem.aim() == Aim::Expectation { ln(value.abs()) } else { 0.0 };
        log_weights.push(if inside && !log_density.is_nan() {
            log_density + size - log_proposal[i]
        } else {
            f64::NEG_INFINITY
        });
        signs.push(if problem.aim() == Aim::Expectation && value < 0.0 { -1.0 } else { 1.0 });
    }
    let weights = LogWeights::new(log_weights.clone()).ok();
    let score = weights.as_ref().map(|w| score(w, &labels));
    let merits = match (&weights, &score) {
        (Some(weights), Some(score)) => merits(weights, score, &labels, &signs, seed),
        _ => Merits::UNKNOWN,
    };
    let log_nominal = if problem.aim() == Aim::Density { Vec::new() } else { answers.log_density };
    Ok(Contestant {
        kind: made.kind,
        name: made.name,
        df: made.df,
        proposal: made.proposal,
        tuning_evaluations: made.evaluations,
        draws: FreshDraws { points, labels, log_weights, signs, log_nominal, failed },
        score,
        merits,
    })
}

impl Merits {
    const UNKNOWN: Self = Self {
        ess_fraction: Interval::UNKNOWN,
        weight_variance: Interval::UNKNOWN,
        tail_shape: Interval::UNKNOWN,
        largest_share: Interval::UNKNOWN,
        relative_error: Interval::UNKNOWN,
        draws_for_one_percent: Interval::UNKNOWN,
    };
}

fn merits(weights: &LogWeights, score: &Score, labels: &[u32], signs: &[f64], seed: u64) -> Merits {
    let n = weights.len();
    let relative = weights.relative();
    let terms: Vec<f64> = relative.iter().zip(signs).map(|(w, s)| w * s).collect();
    let strata = Strata::for_draws(labels, n);
    let [ess, largest, error] = bootstrap(labels, seed, |chosen| {
        let (mut sum, mut squares, mut top) = (0.0, 0.0, 0.0_f64);
        for &i in chosen {
            sum += relative[i];
            squares += relative[i] * relative[i];
            top = top.max(relative[i]);
        }
        [sum * sum / squares / n as f64, top / sum, relative_error(&strata, &terms, chosen)]
    });
    let all: Vec<usize> = (0..n).collect();
    let [low, high] = score.ess_fraction_interval.unwrap_or(ess);
    let ess_fraction = Interval { value: score.ess_fraction, low, high };
    let relative_error = Interval { value: relative_error(&strata, &terms, &all), low: error[0], high: error[1] };
    let tail = &score.tail;
    let half = TWO_SIDED_95 * (1.0 + tail.shape) / (tail.points as f64).sqrt();
    Merits {
        ess_fraction,
        weight_variance: ess_fraction.through(|e| 1.0 / e - 1.0),
        tail_shape: match tail.reason {
            TailReason::Fitted => Interval { value: tail.shape, low: tail.shape - half, high: tail.shape + half },
            TailReason::Bounded | TailReason::TooFew => Interval { value: tail.shape, ..Interval::UNKNOWN },
        },
        largest_share: Interval { value: score.largest_share, low: largest[0], high: largest[1] },
        relative_error,
        draws_for_one_percent: relative_error.through(|e| n as f64 * (e / ONE_PERCENT) * (e / ONE_PERCENT)),
    }
}

/// What plain draws would do, from the contestant with the smallest relative error.
pub(super) fn yardstick(contestants: &[Contestant], seed: u64) -> Option<Yardstick> {
    let known = contestants.iter().filter(|c| c.merits.relative_error.value.is_finite());
    let best = known.min_by(|a, b| a.merits.relative_error.value.total_cmp(&b.merits.relative_error.value))?;
    let draws = &best.draws;
    let log_proposal = best.proposal.log_density(&draws.points);
    let terms: Vec<[f64; 2]> = (0..log_proposal.len())
        .map(|i| {
            let part = exp(draws.log_weights[i]);
            // |f| = part / (nominal over proposal), so f^2 times that ratio is part^2 over it.
            let ratio = draws.log_nominal[i] - log_proposal[i];
            let square = if part > 0.0 { exp(2.0 * draws.log_weights[i] - ratio) } else { 0.0 };
            [part * draws.signs[i], square]
        })
        .collect();
    let n = terms.len() as f64;
    let fraction = |chosen: &mut dyn Iterator<Item = usize>| {
        let (mut first, mut second) = (0.0, 0.0);
        for i in chosen {
            first += terms[i][0];
            second += terms[i][1];
        }
        first * first / second / n
    };
    let [[low, high]] = bootstrap(&draws.labels, seed, |chosen| [fraction(&mut chosen.iter().copied())]);
    let ess_fraction = Interval { value: fraction(&mut (0..terms.len())), low, high };
    let needed = |e: f64| (1.0 / e - 1.0) / (ONE_PERCENT * ONE_PERCENT);
    Some(Yardstick { from: best.name.clone(), ess_fraction, draws_for_one_percent: ess_fraction.through(needed) })
}
