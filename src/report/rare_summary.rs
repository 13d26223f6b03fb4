//! The summary of a probability or an expectation: `summary.json`, format `evenpoise-summary/1`.

use super::rounds::rare_step;
use super::summary::Provenance;
use super::summary_head::SummaryHead;
use crate::adapt::rare::FailuresCounted;
use crate::adapt::rare::RareAnswer;
use crate::adapt::rare::RareRound;
use crate::adapt::rare::RareSurvey;
use crate::adapt::rare::RareTuning;
use crate::adapt::rare::RareValue;
use crate::adapt::rare::ValueWithError;
use crate::numeric::ln;
use crate::problem::Aim;
use crate::problem::Problem;
use crate::store::ScoresEntry;
use crate::store::finite;
use crate::weights::verdict::checks::TAIL_SOUND;
use serde::Serialize;

/// What every report of a probability says.
pub const PROBABILITY_NOTE: &str = "A computed probability depends on the model and on the distributions put into it. It is no \
    substitute for the applicable code of practice or for review by a licensed professional, and must not be the only ground for a \
    decision that can hurt people.";

/// The summary of a tuning whose aim is a probability or an expectation.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct RareSummary {
    /// What the summaries of all aims share.
    #[serde(flatten)]
    pub head: SummaryHead,
    /// [`PROBABILITY_NOTE`], for a probability.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub note: Option<&'static str>,
    /// Effective draws of the answer over those.
    pub ess_fraction: Option<f64>,
    /// Variance of the parts of the answer scaled to mean one.
    pub weight_variance: Option<f64>,
    /// Tail shape of the parts of the answer.
    pub tail_shape: Option<f64>,
    /// Share of the draw that carries most.
    pub largest_share: Option<f64>,
    /// The probability, where that is the aim; `null` where the event was never met.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub probability: Option<Option<RareValue>>,
    /// The expectation, where that is the aim.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub expectation: Option<Option<RareValue>>,
    /// What is known where the event was never met.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub no_hit: Option<NoHit>,
    /// The answer with failures counted both ways, where there were any.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub failures_counted: Option<FailuresCounted>,
    /// Probability that the model fails, where it did.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub failing: Option<ValueWithError>,
    /// All draws pooled. Adapted: the proposals were fitted to the same draws, so it is usually low and its bias has no
    /// bound; `value` is the answer.
    pub pooled: Option<Pooled>,
    /// Claimed relative variance times all evaluations.
    pub kappa_claimed: Option<f64>,
    /// What the survey found.
    pub survey: RareSurveySummary,
    /// What was tried after every round, and who won.
    pub candidates: Vec<RareRoundCandidates>,
    /// Components of the chosen proposal, wide ones included.
    pub components: usize,
    /// Seed, versions and digests.
    #[serde(flatten)]
    pub provenance: Provenance,
}

/// An event that was never met.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct NoHit {
    /// One-sided 95 % upper bound of the probability of meeting it.
    pub upper_bound: f64,
    /// Draws of the nominal density that the bound rests on.
    pub nominal_draws: usize,
}

/// The pooled value.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Pooled {
    /// `adapted`.
    pub label: &'static str,
    /// The value.
    pub value: Option<f64>,
    /// Its standard error.
    pub se: Option<f64>,
}

/// The survey.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct RareSurveySummary {
    /// Searches started.
    pub starts: usize,
    /// Points found.
    pub modes: usize,
    /// The survey itself.
    #[serde(flatten)]
    pub survey: RareSurvey,
}

/// Refits tried after a round, with the relative variance per draw that the held-out draws predict.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct RareRoundCandidates {
    /// The round, from 1.
    pub round: u32,
    /// The refit that the round's own proposal came from.
    pub step: &'static str,
    /// ESS fraction that was predicted for this round.
    pub predicted_ess_fraction: Option<f64>,
    /// All that were tried for the next round.
    pub tried: Vec<RareCandidateSummary>,
}

/// A refit and its predicted variance.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct RareCandidateSummary {
    /// The kind of refit.
    pub step: &'static str,
    /// Components.
    pub components: usize,
    /// Relative variance per draw.
    pub predicted_variance: Option<f64>,
}

impl RareSummary {
    /// The summary of a tuning.
    #[must_use]
    pub fn of(problem: &Problem, tuning: &RareTuning, provenance: Provenance) -> Self {
        let value = tuning.answer.value();
        let draws = tuning.draws.log_nominal.len();
        let event = problem.aim() == Aim::Probability;
        let ess_fraction = value.and_then(|v| finite(v.answer.effective_draws / draws as f64));
        let counts = [tuning.evaluations, tuning.failed, draws as u64];
        Self {
            head: SummaryHead::of(problem, &tuning.verdict, counts, &tuning.extended_from),
            note: event.then_some(PROBABILITY_NOTE),
            ess_fraction,
            weight_variance: ess_fraction.and_then(|fraction| finite(1.0 / fraction - 1.0)),
            tail_shape: value.and_then(|v| finite(v.answer.tail.shape)),
            largest_share: value.and_then(|v| finite(v.answer.largest_share)),
            probability: event.then(|| value.cloned()),
            expectation: (!event).then(|| value.cloned()),
            no_hit: match &tuning.answer {
                RareAnswer::NoHit { upper_bound, nominal_draws } => {
                    Some(NoHit { upper_bound: *upper_bound, nominal_draws: *nominal_draws })
                }
                RareAnswer::Value(_) => None,
            },
            failures_counted: tuning.failures_counted,
            failing: tuning.failing,
            pooled: tuning.pooled.map(|p| Pooled { label: "adapted", value: finite(p.value), se: finite(p.se) }),
            kappa_claimed: tuning.kappa_claimed.and_then(finite),
            survey: RareSurveySummary {
                starts: tuning.survey.searches,
                modes: tuning.survey.points.len(),
                survey: tuning.survey.clone(),
            },
            candidates: tuning.rounds.iter().map(RareRoundCandidates::of).collect(),
            components: tuning.chosen.len(),
            provenance,
        }
    }
}

impl RareSummary {
    /// The scores that the proposal's file carries: of the draws that the answer rests on. The normalising constant of the
    /// target is the answer.
    #[must_use]
    pub fn scores(&self, tuning: &RareTuning) -> ScoresEntry {
        let value = tuning.answer.value();
        ScoresEntry {
            draws: self.head.draws,
            ess_fraction: self.ess_fraction,
            ess_fraction_interval: None,
            weight_variance: self.weight_variance,
            perplexity: None,
            tail_shape: self.tail_shape,
            tail_shape_limit: TAIL_SOUND,
            largest_share: self.largest_share,
            log_normaliser: value.and_then(|v| finite(ln(v.value.abs()))),
            log_normaliser_se: value.and_then(|v| finite(v.cv)),
        }
    }
}

impl RareRoundCandidates {
    fn of(round: &RareRound) -> Self {
        let tried = round.candidates.iter().map(|candidate| RareCandidateSummary {
            step: rare_step(candidate.step),
            components: candidate.components,
            predicted_variance: finite(candidate.predicted_variance),
        });
        Self {
            round: round.index,
            step: rare_step(round.step),
            predicted_ess_fraction: round.predicted_ess_fraction.and_then(finite),
            tried: tried.collect(),
        }
    }
}
