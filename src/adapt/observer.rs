//! What a tuning tells while it runs, and what it asks before it pays: progress, journal and interruption in one trait.

use super::tuning::Round;
use crate::numeric::Points;
use serde::{Deserialize, Serialize};
use std::fmt;

/// Parts of a tuning, in order.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Stage {
    /// Climbs to the modes and probes around them.
    Survey,
    /// Draws of a round, from 1.
    Round(u32),
    /// Curvature at the heaviest points after a round.
    Births(u32),
    /// Draws that decide between finalists.
    Confirm,
    /// Draws that are reported.
    Report,
    /// Fresh draws of a contestant.
    Compare,
}

impl fmt::Display for Stage {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Survey => f.write_str("survey"),
            Self::Round(r) => write!(f, "round {r}"),
            Self::Births(r) => write!(f, "births after round {r}"),
            Self::Confirm => f.write_str("confirm draws"),
            Self::Report => f.write_str("report draws"),
            Self::Compare => f.write_str("fresh draws"),
        }
    }
}

/// Points about to be evaluated, in the proposal's coordinates.
#[derive(Debug, Clone, Copy)]
pub struct Batch<'a> {
    /// The part of the tuning that asks.
    pub stage: Stage,
    /// Evaluations paid for before this batch.
    pub first: u64,
    /// The points.
    pub points: &'a Points,
    /// Whether gradients are wanted too.
    pub gradient: bool,
}

/// Answers to a batch.
#[derive(Debug, Clone, PartialEq)]
pub struct Answers {
    /// Log density of every point; `-inf` outside, NaN where the model failed. For a probability or an expectation: the log nominal density.
    pub log_density: Vec<f64>,
    /// Gradients, a row a point; no rows where none were asked for.
    pub gradients: Points,
    /// Margin or integrand of every point, NaN where the model failed; empty for the aim density.
    pub value: Vec<f64>,
    /// Whether the point is in the event; empty for the other aims.
    pub hit: Vec<bool>,
}

/// Watches a tuning. The numeric rooms print nothing, read no clock and touch no file: all of that happens here.
pub trait Observer {
    /// Answers to this very batch recorded before an interruption, so that nothing is paid for twice.
    fn recorded(&mut self, _batch: &Batch) -> Option<Answers> {
        None
    }

    /// Answers just received, before they are used.
    ///
    /// # Errors
    /// What kept them from being recorded; the tuning stops.
    fn evaluated(&mut self, _batch: &Batch, _answers: &Answers) -> Result<(), crate::BoxError> {
        Ok(())
    }

    /// A part of the tuning begins.
    fn stage(&mut self, _stage: Stage) {}

    /// The survey is over.
    fn surveyed(&mut self, _survey: &super::tuning::Survey) {}

    /// A round is over.
    fn round(&mut self, _round: &Round) {}

    /// The survey of a probability or an expectation is over.
    fn rare_surveyed(&mut self, _survey: &super::rare::RareSurvey) {}

    /// A round of a probability or an expectation is over.
    fn rare_round(&mut self, _round: &super::rare::RareRound) {}

    /// In a comparison: the turn of a contestant begins, first to be made and later to be scored.
    fn contestant(&mut self, _name: &str) {}

    /// Whether to stop before the next batch.
    fn interrupted(&self) -> bool {
        false
    }
}

/// Watches nothing.
#[derive(Debug, Clone, Copy, Default)]
pub struct Silent;

impl Observer for Silent {}
