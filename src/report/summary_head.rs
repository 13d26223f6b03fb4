//! What every summary says, whatever the aim.

use super::summary::SUMMARY_FORMAT;
use super::summary::SummaryCheck;
use crate::adapt::Extension;
use crate::problem::Problem;
use crate::weights::verdict::Verdict;
use crate::weights::verdict::Word;
use serde::Serialize;

/// The part that the summaries of all aims share.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct SummaryHead {
    /// [`SUMMARY_FORMAT`].
    pub format: &'static str,
    /// Title of the problem.
    pub title: String,
    /// `density`, `expectation` or `probability`.
    pub aim: &'static str,
    /// What the reader may do with the numbers.
    pub verdict: Word,
    /// Why it is not "sound"; the worst reason first.
    pub reasons: Vec<String>,
    /// What no check can see.
    pub caution: String,
    /// Every check.
    pub checks: Vec<SummaryCheck>,
    /// All evaluations.
    pub evaluations: u64,
    /// Those that failed.
    pub failed: u64,
    /// The draws that the answer rests on: report draws, or those of the counted rounds.
    pub draws: u64,
    /// Earlier budgets, where the budget was raised: what was spent under each counts as rounds.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub extended_from: Vec<Extension>,
}

impl SummaryHead {
    /// The head of a tuning's summary; `counts` are evaluations, failed ones, and draws.
    pub(super) fn of(
        problem: &Problem,
        verdict: &Verdict,
        [evaluations, failed, draws]: [u64; 3],
        extended_from: &[Extension],
    ) -> Self {
        Self {
            format: SUMMARY_FORMAT,
            title: problem.title().to_owned(),
            aim: problem.aim().word(),
            verdict: verdict.word,
            reasons: verdict.reasons.clone(),
            caution: verdict.caution.clone(),
            checks: verdict.checks.iter().map(SummaryCheck::of).collect(),
            evaluations,
            failed,
            draws,
            extended_from: extended_from.to_vec(),
        }
    }
}
