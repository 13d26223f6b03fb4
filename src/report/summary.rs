//! Scores, verdict, choices and provenance of a tuning: `summary.json`, format `evenpoise-summary/1`.
//!
//! `null` stands for a number that is not known, or not finite (the tail shape of weights whose largest are all equal).

use super::summary_head::SummaryHead;
use crate::adapt::Finalist;
use crate::adapt::Round;
use crate::adapt::StopReason;
use crate::adapt::Tuning;
use crate::problem::Problem;
use crate::store::StoreError;
use crate::store::finite;
use crate::weights::Estimate;
use crate::weights::verdict::Check;
use crate::weights::verdict::Word;
use serde::Serialize;
use serde::Serializer;
use serde::ser::SerializeMap;
use std::collections::BTreeMap;
use std::path::Path;

/// The version that is written.
pub const SUMMARY_FORMAT: &str = "evenpoise-summary/1";

/// Where numbers come from.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Provenance {
    /// The seed.
    pub seed: u64,
    /// Programs and their versions.
    pub versions: BTreeMap<String, String>,
    /// Digests of what went in, by what it is.
    pub digests: BTreeMap<String, String>,
}

/// The summary of a tuning.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Summary {
    /// What the summaries of all aims share.
    #[serde(flatten)]
    pub head: SummaryHead,
    /// Effective sample size over report draws.
    pub ess_fraction: Option<f64>,
    /// Its 95 % interval.
    pub ess_fraction_interval: Option<[f64; 2]>,
    /// Variance of the weights scaled to mean one.
    pub weight_variance: Option<f64>,
    /// `exp(entropy) / draws`.
    pub perplexity: Option<f64>,
    /// Tail shape of the weights.
    pub tail_shape: Option<f64>,
    /// Whether a shape was fitted: `fitted`, `bounded` or `too-few`.
    pub tail_reason: Option<crate::weights::TailReason>,
    /// Share of the heaviest draw.
    pub largest_share: Option<f64>,
    /// Log of the normalising constant, nats.
    pub log_normaliser: ValueWithError,
    /// The problem's estimates, in its order.
    pub estimates: NamedValues<Estimate>,
    /// Claimed relative variance of the normalising constant times all evaluations: what one evaluation is worth.
    pub kappa_claimed: Option<f64>,
    /// What the survey found.
    pub survey: SurveySummary,
    /// What was tried after every round, and who won.
    pub candidates: Vec<RoundCandidates>,
    /// Who stood for choice at the end.
    pub finalists: Vec<FinalistSummary>,
    /// Why the rounds ended.
    pub stop: StopReason,
    /// The chosen proposal in short.
    pub proposal: ProposalSummary,
    /// Seed, versions and digests.
    #[serde(flatten)]
    pub provenance: Provenance,
}

/// A number and its standard error.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct ValueWithError {
    /// The number.
    pub value: Option<f64>,
    /// Its standard error.
    pub se: Option<f64>,
}

/// One check.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct SummaryCheck {
    /// What was checked.
    pub name: &'static str,
    /// The number.
    pub value: Option<f64>,
    /// Its limits in words.
    pub limit: String,
    /// The word it earns.
    pub word: Word,
    /// What it means, and what to try.
    pub detail: String,
}

/// The survey in numbers.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct SurveySummary {
    /// Climbs started.
    pub starts: u32,
    /// Climbs that ended in a mode.
    pub finished: u32,
    /// Modes found.
    pub modes: usize,
    /// Climbs that ended in each mode, in the order found.
    pub hits: Vec<u32>,
    /// Evaluations spent before the first round.
    pub evaluations: u64,
    /// Evaluations spent when the budget was raised and the survey went on.
    #[serde(skip_serializing_if = "none")]
    pub later_evaluations: u64,
    /// Share of the start whose basin could have been missed with a chance of 5 %.
    pub basin_share: f64,
}

/// Refits tried after a round, ranked on evaluations already paid for.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct RoundCandidates {
    /// The round, from 1.
    pub round: u32,
    /// The refit that won.
    pub chosen: String,
    /// ESS fraction of this round's proposal as the earlier rounds predicted it.
    pub predicted_ess_fraction: Option<f64>,
    /// All that were tried.
    pub tried: Vec<CandidateSummary>,
}

/// A refit and its predicted score.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct CandidateSummary {
    /// The kind of refit.
    pub step: String,
    /// Components.
    pub components: usize,
    /// Held-out weighted log density less that of the present proposal, nats.
    pub gain: Option<f64>,
}

/// A finalist and its confirm draws.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct FinalistSummary {
    /// Where it comes from.
    pub name: String,
    /// ESS fraction that was predicted.
    pub predicted_ess_fraction: Option<f64>,
    /// ESS fraction of fresh draws.
    pub ess_fraction: Option<f64>,
    /// Whether it was chosen.
    pub chosen: bool,
}

/// The chosen proposal in short.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct ProposalSummary {
    /// Components, wide ones included.
    pub components: usize,
    /// Degrees of freedom of the fitted ones; `null` for Gaussian ones.
    pub df: Option<f64>,
}

/// Values by name in their own order: an object in JSON.
#[derive(Debug, Clone, PartialEq)]
pub struct NamedValues<T>(pub Vec<(String, T)>);

impl<T: Serialize> Serialize for NamedValues<T> {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        let mut map = serializer.serialize_map(Some(self.0.len()))?;
        for (name, value) in &self.0 {
            map.serialize_entry(name, value)?;
        }
        map.end()
    }
}

#[expect(clippy::trivially_copy_pass_by_ref, reason = "the form that serde asks for")]
fn none(count: &u64) -> bool {
    *count == 0
}

impl Summary {
    /// The summary of a tuning.
    #[must_use]
    pub fn of(problem: &Problem, tuning: &Tuning, provenance: Provenance) -> Self {
        let score = tuning.score.as_ref();
        let known = |read: &dyn Fn(&crate::weights::Score) -> f64| score.and_then(|s| finite(read(s)));
        let se = known(&|s| s.log_normaliser_se);
        let counts = [tuning.evaluations, tuning.failed, tuning.report.labels.len() as u64];
        Self {
            head: SummaryHead::of(problem, &tuning.verdict, counts, &tuning.extended_from),
            ess_fraction: known(&|s| s.ess_fraction),
            ess_fraction_interval: score.and_then(|s| s.ess_fraction_interval),
            weight_variance: known(&|s| s.weight_variance),
            perplexity: known(&|s| s.perplexity),
            tail_shape: known(&|s| s.tail.shape),
            tail_reason: score.map(|s| s.tail.reason),
            largest_share: known(&|s| s.largest_share),
            log_normaliser: ValueWithError { value: known(&|s| s.log_normaliser), se },
            estimates: NamedValues(tuning.estimates.clone()),
            kappa_claimed: se.map(|se| se * se * tuning.evaluations as f64),
            survey: SurveySummary {
                starts: tuning.survey.starts,
                finished: tuning.survey.finished,
                modes: tuning.survey.modes.len(),
                hits: tuning.survey.modes.iter().map(|mode| mode.hits).collect(),
                evaluations: tuning.survey.evaluations,
                later_evaluations: tuning.survey.later_evaluations,
                basin_share: tuning.survey.basin_share,
            },
            candidates: tuning.rounds.iter().map(RoundCandidates::of).collect(),
            finalists: tuning.finalists.iter().map(FinalistSummary::of).collect(),
            stop: tuning.stop,
            proposal: ProposalSummary { components: tuning.chosen.len(), df: finite(tuning.df) },
            provenance,
        }
    }
}

impl SummaryCheck {
    pub(super) fn of(check: &Check) -> Self {
        Self {
            name: check.name,
            value: finite(check.value),
            limit: check.limit.clone(),
            word: check.word,
            detail: check.detail.clone(),
        }
    }
}

impl RoundCandidates {
    fn of(round: &Round) -> Self {
        let tried = round.candidates.iter().map(|candidate| CandidateSummary {
            step: candidate.step.to_string(),
            components: candidate.components,
            gain: finite(candidate.gain),
        });
        Self {
            round: round.index,
            chosen: round.step.to_string(),
            predicted_ess_fraction: round.predicted_ess_fraction.and_then(finite),
            tried: tried.collect(),
        }
    }
}

impl FinalistSummary {
    fn of(finalist: &Finalist) -> Self {
        Self {
            name: finalist.name.clone(),
            predicted_ess_fraction: finalist.predicted_ess_fraction.and_then(finite),
            ess_fraction: finalist.score.as_ref().and_then(|score| finite(score.ess_fraction)),
            chosen: finalist.chosen,
        }
    }
}

/// Evaluations that a summary tells of.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Evaluations {
    /// All of them.
    pub all: u64,
    /// Those of the survey.
    pub survey: u64,
}

/// Reads the numbers of evaluations from a summary.
///
/// # Errors
/// [`StoreError::Io`], [`StoreError::Json`].
pub fn read_evaluations(path: &Path) -> Result<Evaluations, StoreError> {
    let value = read_summary(path)?;
    let count = |at: &str, value: &serde_json::Value| {
        value.as_u64().ok_or_else(|| wrong(path, at, format!("is {value}; expected a whole number")))
    };
    Ok(Evaluations {
        all: count("evaluations", &value["evaluations"])?,
        survey: count("survey.evaluations", &value["survey"]["evaluations"])?,
    })
}

/// Reads a summary of this format.
pub(super) fn read_summary(path: &Path) -> Result<serde_json::Value, StoreError> {
    let text = std::fs::read_to_string(path).map_err(|source| StoreError::Io {
        action: "read",
        path: path.to_path_buf(),
        source,
    })?;
    let value: serde_json::Value =
        serde_json::from_str(&text).map_err(|error| wrong(path, "the whole", error.to_string()))?;
    if value["format"] != SUMMARY_FORMAT {
        return Err(wrong(path, "format", format!("is {}; this program reads {SUMMARY_FORMAT:?}", value["format"])));
    }
    Ok(value)
}

fn wrong(path: &Path, at: &str, reason: String) -> StoreError {
    StoreError::Json { path: path.to_path_buf(), at: at.to_owned(), reason }
}
