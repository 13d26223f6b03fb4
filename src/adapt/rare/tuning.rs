//! What the loop gives back: plain values, in the order in which they came to be.

use crate::adapt::tuning::Extension;
use crate::numeric::Points;
use crate::proposal::Mixture;
use crate::weights::Answer;
use crate::weights::verdict::Verdict;
use serde::Deserialize;
use serde::Serialize;

/// A point of the event that lies nearest to the origin of the scores in its neighbourhood; for an expectation, a mode of the integrand
/// times the nominal density.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct DesignPoint {
    /// In natural units.
    pub natural: Vec<f64>,
    /// In standard normal scores.
    pub scores: Vec<f64>,
    /// Distance `beta` from the origin of the scores, in standard deviations; negative where the origin itself is in the event.
    pub distance: f64,
    /// Signed squared direction cosines, a variable each, whose sizes sum to one: which variables carry the event, and which way. Positive:
    /// large values lead into the event. For an expectation those of the point's direction.
    pub importance: Vec<f64>,
    /// First-order probability `Phi(-beta)` of the half-space beyond the tangent plane; none for an expectation. A by-product, not an
    /// estimate: a bent boundary or a second branch is not in it.
    pub first_order_probability: Option<f64>,
    /// Whether the search converged (else it is the nearest point met).
    pub converged: bool,
}

/// The survey: wide scouts, and searches from them.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct RareSurvey {
    /// Scouts drawn.
    pub scouts: usize,
    /// Scouts that met the event (a non-zero integrand).
    pub scouts_that_met: usize,
    /// Searches started.
    pub searches: usize,
    /// What they found, in the order found.
    pub points: Vec<DesignPoint>,
    /// Directions in which proposals have full covariances; the number of variables where all of them do.
    pub directions: usize,
    /// Evaluations spent.
    pub evaluations: u64,
}

/// Kinds of refit.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum RareStep {
    /// The first proposal, from the survey.
    Survey,
    /// The proposal as it was.
    Kept,
    /// The proposal of the round before.
    Earlier,
    /// Weighted EM.
    CrossEntropy,
    /// Weighted EM of the means alone, covariances those of the nominal density.
    Shift,
    /// Weighted EM on the terms of the second moment.
    Variance,
    /// A new component where the proposal lacks mass.
    Seeded,
    /// Components split.
    Split,
}

/// A candidate and what the held-out draws say about it.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct RareCandidate {
    /// The kind of refit.
    pub step: RareStep,
    /// Its components.
    pub components: usize,
    /// Relative variance per draw that the held-out draws predict for the whole proposal.
    pub predicted_variance: f64,
}

/// One round.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct RareRound {
    /// From 1.
    pub index: u32,
    /// Draws of this round.
    pub draws: u32,
    /// All evaluations up to and with it.
    pub evaluations: u64,
    /// Failed evaluations among the draws.
    pub failed: u32,
    /// Draws that met the event (a non-zero integrand).
    pub hits: u32,
    /// Whether it counts in the answer: drawn after the event was reached.
    pub counted: bool,
    /// Its weight in the answer; zero where it does not count.
    pub share: f64,
    /// Its own estimate of the probability, or of the mean.
    pub value: f64,
    /// Standard error of that estimate.
    pub se: f64,
    /// Coefficient of variation `se / |value|`.
    pub cv: f64,
    /// Fitted components of the proposal that was drawn from.
    pub components: usize,
    /// The refit it came from.
    pub step: RareStep,
    /// ESS fraction of `|f| w` that the held-out draws predicted; none for the first proposal and while the event is smoothed.
    pub predicted_ess_fraction: Option<f64>,
    /// The one that the draws have.
    pub ess_fraction: f64,
    /// Largest share of the round's estimate that one draw carries.
    pub largest_share: f64,
    /// Share of the round's estimate carried by draws that no fitted component explains.
    pub outside_share: f64,
    /// Smoothing of the event in the refit that followed, in units of the margin; none at the event itself.
    pub smoothing: Option<f64>,
    /// Candidates of the refit that followed.
    pub candidates: Vec<RareCandidate>,
}

/// The draws of the counted rounds: what the answer rests on.
#[derive(Debug, Clone, PartialEq)]
pub struct RareDraws {
    /// The points, in standard normal scores.
    pub points: Points,
    /// Log nominal density there.
    pub log_nominal: Vec<f64>,
    /// Log density of the proposal that each was drawn from.
    pub log_proposal: Vec<f64>,
    /// Margin or integrand; NaN where the model failed.
    pub value: Vec<f64>,
    /// Whether the point is in the event; an integrand that is not zero.
    pub hit: Vec<bool>,
    /// Round of each, from 1.
    pub round: Vec<u32>,
    /// Component of its round's proposal.
    pub labels: Vec<u32>,
    /// What each adds to the answer: they sum to it.
    pub contributions: Vec<f64>,
}

/// A probability or a mean with its error.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct RareValue {
    /// The value.
    pub value: f64,
    /// Its standard error.
    pub se: f64,
    /// Coefficient of variation `se / |value|`.
    pub cv: f64,
    /// 95 % interval; with failed evaluations it spans both ways of counting them.
    pub interval_95: [f64; 2],
    /// How the interval was made.
    pub interval_method: &'static str,
    /// How evenly the draws carry it.
    pub answer: Answer,
}

/// What came out.
#[derive(Debug, Clone, PartialEq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum RareAnswer {
    /// A value.
    Value(RareValue),
    /// The event was never met (the integrand was zero everywhere): no number.
    NoHit {
        /// One-sided 95 % upper bound of the probability of meeting it, from the draws of the nominal density alone.
        upper_bound: f64,
        /// Those draws.
        nominal_draws: usize,
    },
}

impl RareAnswer {
    /// The value, where there is one.
    #[must_use]
    pub fn value(&self) -> Option<&RareValue> {
        match self {
            Self::Value(value) => Some(value),
            Self::NoHit { .. } => None,
        }
    }
}

/// A value and its error.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct ValueWithError {
    /// The value.
    pub value: f64,
    /// Its standard error.
    pub se: f64,
}

/// The answer with failed evaluations counted either way.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct FailuresCounted {
    /// All failures outside the event.
    pub outside: ValueWithError,
    /// All failures inside it.
    pub inside: ValueWithError,
}

/// The whole of a tuning whose aim is a probability or an expectation.
#[derive(Debug, Clone)]
pub struct RareTuning {
    /// Earlier budgets, where the budget was raised: the rounds simply went on.
    pub extended_from: Vec<Extension>,
    /// What the survey found.
    pub survey: RareSurvey,
    /// The rounds.
    pub rounds: Vec<RareRound>,
    /// The chosen proposal: that of the last refit, with all its layers, in standard normal scores.
    pub chosen: Mixture,
    /// The draws that the answer rests on.
    pub draws: RareDraws,
    /// The answer.
    pub answer: RareAnswer,
    /// The pooled value over all rounds (balance heuristic), labelled as adapted: usually low, its bias has no bound.
    pub pooled: Option<ValueWithError>,
    /// The answer with failures counted both ways; none where nothing failed, or for an expectation.
    pub failures_counted: Option<FailuresCounted>,
    /// Probability that the model fails, where it did (an expectation is over its success).
    pub failing: Option<ValueWithError>,
    /// Claimed relative variance times all evaluations.
    pub kappa_claimed: Option<f64>,
    /// What may be said.
    pub verdict: Verdict,
    /// All evaluations.
    pub evaluations: u64,
    /// Those that failed.
    pub failed: u64,
}
