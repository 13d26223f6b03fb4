//! What a production run is: everything that its numbers depend on, the same in every shard.

use super::numbers;
use super::sequence::CHUNK;
use crate::problem::Aim;
use crate::problem::Failed;
use crate::problem::Problem;
use serde::Deserialize;
use serde::Serialize;

/// Most values of a tail that are kept; the shape of a tail uses `3 sqrt S` of `S`.
const TAIL: usize = 10_000;
/// Most values that the tails of all estimates keep together.
const TAILS: usize = 400_000;
/// ... and the fewest that each keeps.
const LEAST_TAIL: usize = 200;

/// A production run, but for its draws.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Job {
    /// Program and version.
    pub program: String,
    /// Title of the problem.
    pub title: String,
    /// `density`, `probability` or `expectation`.
    pub aim: String,
    /// Digest of the problem.
    pub problem: String,
    /// Digest of the proposal's file.
    pub proposal: String,
    /// Seed of every draw.
    pub seed: u64,
    /// Stage: other stages have other draws.
    pub stage: u32,
    /// Number of draws, where it is fixed beforehand.
    pub draws: Option<u64>,
    /// How failed evaluations count in a probability, where the problem says.
    pub failed: Option<String>,
    /// The terms are scaled by `exp` of the negative of this: the proposal's own log normaliser.
    pub log_scale: f64,
    /// ESS fraction that the proposal's report draws had.
    pub predicted_ess_fraction: Option<f64>,
    /// Word of the tuning that made the proposal.
    pub proposal_verdict: Option<String>,
    /// Strata of the draws.
    pub strata: u32,
    /// Quantiles wanted of every estimate.
    pub quantiles: Vec<f64>,
    /// The estimates.
    pub estimates: Vec<EstimateJob>,
}

/// An estimate, and what its sums are laid out by.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct EstimateJob {
    /// Its name.
    pub name: String,
    /// A number near its value: sums are of what is over or under it.
    pub centre: f64,
    /// Inner borders of its bins; none without quantiles.
    #[serde(with = "numbers")]
    pub borders: Vec<f64>,
}

impl Job {
    /// Whether the terms have signs: an integrand may be negative.
    #[must_use]
    pub fn signed(&self) -> bool {
        self.aim == Aim::Expectation.word()
    }

    /// Whether the aim is a probability.
    #[must_use]
    pub fn is_event(&self) -> bool {
        self.aim == Aim::Probability.word()
    }

    /// Values that the tail of the answer keeps.
    #[must_use]
    pub fn tail(&self) -> usize {
        self.draws.map_or(TAIL, |draws| tail_of(draws).min(TAIL))
    }

    /// Values that the tail of an estimate keeps.
    #[must_use]
    pub fn estimate_tail(&self) -> usize {
        self.tail().min((TAILS / self.estimates.len().max(1)).max(LEAST_TAIL))
    }

    /// The word for failures that a problem declares.
    #[must_use]
    pub fn failed_word(problem: &Problem) -> Option<String> {
        problem.failed().map(|failed| if failed == Failed::Inside { "inside" } else { "outside" }.to_owned())
    }

    /// Whether failures are counted as inside the event.
    #[must_use]
    pub fn failures_are_inside(&self) -> bool {
        self.failed.as_deref() == Some("inside")
    }
}

/// Tail points of so many draws, and the one below them.
fn tail_of(draws: u64) -> usize {
    let s = draws.max(CHUNK) as f64;
    (3.0 * s.sqrt()).ceil() as usize + 1
}
