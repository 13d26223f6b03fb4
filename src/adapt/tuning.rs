//! What a tuning gives back: plain values, in the order in which they came to be.

use crate::numeric::Points;
use crate::proposal::Mixture;
use crate::refit::Step;
use crate::weights::verdict::Verdict;
use crate::weights::{Estimate, Score};
use serde::Serialize;

/// A mode that the survey found, in the proposal's coordinates.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Mode {
    /// Where.
    pub location: Vec<f64>,
    /// Log density there, nats.
    pub log_density: f64,
    /// Logarithm of the mass that the curvature there implies (Laplace's approximation).
    pub log_mass: f64,
    /// Climbs that ended here.
    pub hits: u32,
}

/// The survey: climbs from spread starts.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Survey {
    /// Climbs started.
    pub starts: u32,
    /// Climbs that ended in a mode.
    pub finished: u32,
    /// Climbs that ran away from the start without end.
    pub runaways: u32,
    /// Climbs that ended at a wall, where the support ends.
    pub walls: u32,
    /// Climbs that got stuck on a ridge or a kink, or ran out of steps.
    pub stuck: u32,
    /// Climbs whose start had no density or whose target failed.
    pub void: u32,
    /// The modes, in the order found.
    pub modes: Vec<Mode>,
    /// Components added by probing along the soft axes of the modes.
    pub probed: u32,
    /// Evaluations spent before the first round.
    pub evaluations: u64,
    /// Evaluations spent when the budget was raised and the survey went on.
    pub later_evaluations: u64,
    /// Basins of attraction smaller than this share of the start could have been missed with chance above 5 %: `1 - 0.05^(1/starts)`.
    pub basin_share: f64,
}

/// One round: draws from the present proposal, their fresh score, and what the refit made of it.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Round {
    /// From 1.
    pub index: u32,
    /// Draws of this round.
    pub draws: u32,
    /// All evaluations up to and with it.
    pub evaluations: u64,
    /// Failed evaluations among the draws.
    pub failed: u32,
    /// Components of the proposal that was drawn from (fitted ones; halo and wide start not counted).
    pub components: usize,
    /// Its degrees of freedom; infinite (`null`) for Gaussian components.
    pub df: f64,
    /// Share of the halo.
    pub halo_share: f64,
    /// Share of the wide start.
    pub wide_share: f64,
    /// ESS fraction that the pool predicted for it; none in the first round and while the target is tempered.
    pub predicted_ess_fraction: Option<f64>,
    /// Its score on its own fresh draws; none where no draw met the target.
    pub score: Option<Score>,
    /// Tempering exponent of the refit that followed: 1 is the target itself.
    pub exponent: f64,
    /// Kind of refit that won.
    pub step: Step,
    /// All candidates with their held-out scores.
    pub candidates: Vec<CandidateScore>,
    /// Components added from the curvature at heavy points.
    pub births: u32,
}

/// A candidate's standing among the others.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct CandidateScore {
    /// The kind of refit.
    pub step: Step,
    /// Components.
    pub components: usize,
    /// Held-out weighted log density less that of the present proposal, nats: positive is better.
    pub gain: f64,
}

/// A budget that was raised: what was spent under it is kept, and its report draws count as a round.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
pub struct Extension {
    /// The budget before.
    pub budget: u64,
    /// Rounds until then, those that its confirm and report draws became included.
    pub rounds: u32,
    /// Its confirm draws: the last round but one of these. None for a probability or an expectation.
    pub confirm_draws: u64,
    /// The draws that its answer rested on. For a density they are the last of these rounds now and no part of the new answer;
    /// for a probability or an expectation they are the counted rounds until then, which go on counting.
    pub report_draws: u64,
}

/// Why the rounds ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum StopReason {
    /// The budget was spent as planned.
    Budget,
    /// As many rounds as were asked for.
    Rounds,
    /// Two rounds brought no significant gain.
    NoGain,
}

/// A finalist and its score on confirm draws.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Finalist {
    /// Where it comes from: `ensemble`, or `round 7`.
    pub name: String,
    /// ESS fraction that the pool predicted.
    pub predicted_ess_fraction: Option<f64>,
    /// Score on fresh draws.
    pub score: Option<Score>,
    /// Whether it was chosen.
    pub chosen: bool,
}

/// The report draws: they neither trained nor chose the proposal they come from.
#[derive(Debug, Clone, PartialEq)]
pub struct ReportDraws {
    /// The points, in the proposal's coordinates.
    pub points: Points,
    /// Component of each.
    pub labels: Vec<u32>,
    /// Log target density in the proposal's coordinates, `-inf` outside, NaN where the model failed.
    pub log_target: Vec<f64>,
    /// Log proposal density in the proposal's coordinates.
    pub log_proposal: Vec<f64>,
}

impl ReportDraws {
    /// `ln (target / proposal)`; failed evaluations carry no weight.
    #[must_use]
    pub fn log_weights(&self) -> Vec<f64> {
        self.log_target
            .iter()
            .zip(&self.log_proposal)
            .map(|(t, q)| if t.is_nan() { f64::NEG_INFINITY } else { t - q })
            .collect()
    }

    /// Evaluations that failed.
    #[must_use]
    pub fn failed(&self) -> usize {
        self.log_target.iter().filter(|t| t.is_nan()).count()
    }
}

/// The whole of a tuning.
#[derive(Debug, Clone)]
pub struct Tuning {
    /// Earlier budgets, where the budget was raised.
    pub extended_from: Vec<Extension>,
    /// What the survey found.
    pub survey: Survey,
    /// The rounds.
    pub rounds: Vec<Round>,
    /// Who stood for choice at the end.
    pub finalists: Vec<Finalist>,
    /// Why the rounds ended.
    pub stop: StopReason,
    /// The chosen proposal, in the proposal's coordinates.
    pub chosen: Mixture,
    /// Degrees of freedom of its fitted components; infinite for Gaussian ones.
    pub df: f64,
    /// Draws for the report.
    pub report: ReportDraws,
    /// Their score; none where no draw met the target.
    pub score: Option<Score>,
    /// The problem's estimates from the report draws, by name.
    pub estimates: Vec<(String, Estimate)>,
    /// Values of the estimates at every report draw, a column an estimate.
    pub estimate_values: Vec<Vec<f64>>,
    /// What may be said.
    pub verdict: Verdict,
    /// All evaluations.
    pub evaluations: u64,
    /// Those that failed.
    pub failed: u64,
}
