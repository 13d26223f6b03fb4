//! How a budget is divided before anything is spent.

use super::TuneError;
use super::settings::Settings;

/// Shares and caps of the budget, in evaluations.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Plan {
    /// Which part of a tuning this is: 0, or the number of times that the budget was raised before.
    pub(crate) part: u32,
    /// The budget before; 0 in the first part.
    pub(crate) from: u64,
    /// All evaluations, those of earlier parts included.
    pub(crate) budget: u64,
    /// The survey ends at this count, whatever it found.
    pub(crate) survey_cap: u64,
    /// The survey looks for thin basins up to this count even when nothing new turns up.
    pub(crate) survey_least: u64,
    /// It may go on up to this count as long as it made fewer climbs than it takes to speak of other modes.
    pub(crate) survey_enough: u64,
    /// As long as no mode was found and every gradient costs differences, it may go on up to this count: a fit without a mode to
    /// begin with is worth less than the draws saved.
    pub(crate) first_mode_cap: u64,
    /// One call of probing may spend this much.
    pub(crate) probe: u64,
    /// Curvature and probes after rounds may spend this much in all.
    pub(crate) births: u64,
    /// Of these, kept for the births after the last round.
    pub(crate) last_births: u64,
    /// Confirm draws.
    pub(crate) confirm: u64,
    /// Report draws, at least.
    pub(crate) report: u64,
    /// Rounds at most.
    pub(crate) most_rounds: u32,
    /// Draws of a round, at least.
    pub(crate) least_round: u64,
    /// Draws of every round, where the user set them.
    pub(crate) round_draws: Option<u64>,
}

/// Shares of the budget. Report: so that the reported error rests on as many draws as a third of the tuning; survey: 15 % found every
/// mode of the trial problems; the others are what the loop needs on them (`docs/experiments.md`).
const SURVEY: f64 = 0.15;
const SURVEY_LEAST: f64 = 0.06;
const SURVEY_ENOUGH: f64 = 0.30;
const FIRST_MODE_BY_DIFFERENCES: f64 = 0.4;
const PROBE: f64 = 0.04;
const BIRTHS: f64 = 0.15;
const LAST_BIRTHS: f64 = 0.02;
const CONFIRM: f64 = 0.05;
const REPORT: f64 = 0.25;
/// Of the evaluations that a raise adds, the report may have so much: some rounds must learn from what came before.
const REPORT_OF_RAISE: f64 = 0.75;
/// Rounds when the user does not say: more bring noise, fewer too little adaptation.
const ROUNDS: u32 = 10;

/// The least budget, and the least that a raise must add, in `dim` dimensions.
pub(crate) fn least_raise(dim: usize) -> u64 {
    300 + 60 * dim as u64
}

impl Plan {
    pub(crate) fn new(settings: &Settings, dim: usize) -> Result<Self, TuneError> {
        let d = dim as u64;
        let budget = settings.budget;
        let least = least_raise(dim);
        if budget < least {
            return Err(TuneError::Budget { budget, dim, least });
        }
        let of = |share: f64| (share * budget as f64) as u64;
        Ok(Self {
            part: 0,
            from: 0,
            budget,
            survey_cap: of(SURVEY),
            survey_least: of(SURVEY_LEAST),
            survey_enough: of(SURVEY_ENOUGH),
            first_mode_cap: of(FIRST_MODE_BY_DIFFERENCES),
            probe: of(PROBE),
            births: of(BIRTHS),
            last_births: of(LAST_BIRTHS),
            confirm: of(CONFIRM).max(of(0.1).min(200)),
            report: of(settings.report_share.unwrap_or(REPORT)).max(of(0.2).min(400)),
            most_rounds: settings.rounds.min(ROUNDS.max(if settings.round_draws.is_some() {
                settings.rounds
            } else {
                0
            })),
            least_round: (150 + 25 * d).min(budget / 6),
            round_draws: settings.round_draws.map(|n| n.max(10 * (d + 1))),
        })
    }

    /// The plans of all parts: one for the first budget, and one for every raise.
    ///
    /// A raise goes on with a survey that had not seen enough. Its report draws are a share of the new budget, a quarter unless set, as far as what it
    /// adds reaches: they alone carry the answer.
    pub(crate) fn parts(settings: &Settings, dim: usize) -> Result<Vec<Self>, TuneError> {
        let mut plans: Vec<Self> = Vec::new();
        for part in settings.parts() {
            let plan = match plans.last() {
                None => Self::new(&part, dim)?,
                Some(before) => before.raised(&part, dim)?,
            };
            plans.push(plan);
        }
        Ok(plans)
    }

    fn raised(&self, settings: &Settings, dim: usize) -> Result<Self, TuneError> {
        let least = least_raise(dim);
        let added = settings.budget.saturating_sub(self.budget);
        if added < least {
            return Err(TuneError::Raise { budget: settings.budget, from: self.budget, least: self.budget + least });
        }
        let of = |share: f64| (share * added as f64) as u64;
        let whole = Self::new(settings, dim)?;
        Ok(Self {
            part: self.part + 1,
            from: self.budget,
            survey_cap: of(SURVEY),
            survey_enough: of(SURVEY_ENOUGH),
            probe: of(PROBE),
            births: of(BIRTHS),
            confirm: of(CONFIRM).max(of(0.1).min(200)),
            report: whole.report.min(of(REPORT_OF_RAISE)),
            least_round: whole.least_round.min(added / 6),
            ..whole
        })
    }

    /// Evaluations left for rounds when `spent` are gone.
    pub(crate) fn left_for_rounds(&self, spent: u64) -> u64 {
        self.budget.saturating_sub(spent + self.confirm + self.report)
    }

    /// Number of rounds that what is left after the survey allows.
    pub(crate) fn rounds(&self, spent: u64) -> u32 {
        let left = self.left_for_rounds(spent);
        let fitting = match self.round_draws {
            Some(n) => left.div_ceil(n),
            None => left / self.least_round,
        };
        (fitting.min(u64::from(self.most_rounds)) as u32).max(2.min(self.most_rounds)).max(1)
    }

    /// Draws of round `r` (from 0) of `rounds`: sizes grow from half their mean to it at mid-run; the last one takes what is left.
    pub(crate) fn draws(&self, r: u32, rounds: u32, spent: u64) -> u64 {
        let left = self.left_for_rounds(spent);
        if let Some(n) = self.round_draws {
            return n.min(left);
        }
        let to_come = u64::from(rounds - r);
        if to_come <= 1 {
            return left;
        }
        let grown = 0.5 + 0.5 * (2.0 * f64::from(r) / f64::from(rounds)).min(1.0);
        (left as f64 / to_come as f64 * grown) as u64
    }
}
