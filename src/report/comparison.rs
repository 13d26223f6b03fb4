//! A comparison as it is written down: `comparison.json`.

use super::Provenance;
use crate::adapt::compare::Comparison;
use crate::adapt::compare::Contestant;
use crate::adapt::compare::Difference;
use crate::adapt::compare::Interval;
use crate::adapt::compare::Kind;
use crate::adapt::compare::Recommendation;
use crate::problem::Aim;
use crate::problem::Problem;
use crate::store::finite;
use crate::weights::TailReason;
use serde::Serialize;

/// Format of `comparison.json`.
pub const COMPARISON_FORMAT: &str = "evenpoise-comparison/1";

/// What a comparison found. `null` stands for numbers that are not known.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct ComparisonSummary {
    /// [`COMPARISON_FORMAT`].
    pub format: &'static str,
    /// Title of the problem.
    pub title: String,
    /// `density`, `expectation` or `probability`.
    pub aim: &'static str,
    /// Which tails, and why.
    pub recommendation: Recommendation,
    /// The proposals.
    pub contestants: Vec<ContestantSummary>,
    /// Plain draws from the distributions of the variables.
    pub yardstick: Option<YardstickSummary>,
    /// ESS fractions less that of the Gaussian mixture.
    pub differences: Vec<Difference>,
    /// What the contestants have in common.
    pub shared: String,
    /// How intervals were made.
    pub intervals: &'static str,
    /// All evaluations.
    pub evaluations: u64,
    /// Those that made the contestants.
    pub tuning_evaluations: u64,
    /// Of these, the survey that all tunings had part in.
    pub survey_evaluations: u64,
    /// Failed evaluations among the fresh draws.
    pub failed: u64,
    /// Seed, versions and digests.
    #[serde(flatten)]
    pub provenance: Provenance,
}

/// One proposal.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct ContestantSummary {
    /// Its name.
    pub name: String,
    /// What it is.
    pub kind: Kind,
    /// Degrees of freedom of its fitted components; `null` for Gaussian ones.
    pub df: Option<f64>,
    /// Components, layers included.
    pub components: usize,
    /// Evaluations of its tuning, shared ones included.
    pub tuning_evaluations: u64,
    /// Fresh draws.
    pub draws: usize,
    /// Failed evaluations among them.
    pub failed: usize,
    /// Effective sample size over draws.
    pub ess_fraction: Interval,
    /// Variance of the weights scaled to mean one.
    pub weight_variance: Interval,
    /// Tail shape.
    pub tail_shape: Interval,
    /// Its upper bound, one-sided, nine chances in ten: what the limit is held against.
    pub tail_shape_upper: Option<f64>,
    /// Whether a shape was fitted.
    pub tail_reason: Option<TailReason>,
    /// Largest share of one draw.
    pub largest_share: Interval,
    /// Relative error of the answer from its fresh draws.
    pub relative_error: Interval,
    /// Draws for a relative error of 1 %.
    pub draws_for_one_percent: Interval,
}

/// Plain draws.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct YardstickSummary {
    /// The contestant whose draws it was computed from.
    pub from: String,
    /// ESS fraction.
    pub ess_fraction: Interval,
    /// Draws for a relative error of 1 %.
    pub draws_for_one_percent: Interval,
}

/// How intervals were made.
pub const INTERVALS: &str = "95 %: ESS fraction and weight variance by the delta method on the logit scale (resampled where the tail shape is above 0.5); \
                             tail shape k ± 1.96 (1 + k)/sqrt(tail points); largest share, relative error and draws for 1 % by 400 resamples of the \
                             draws within components, which can show no larger share than was drawn";

impl ComparisonSummary {
    /// The summary of a comparison.
    #[must_use]
    pub fn of(problem: &Problem, comparison: &Comparison, provenance: Provenance) -> Self {
        let yardstick = comparison.yardstick.as_ref().map(|y| YardstickSummary {
            from: y.from.clone(),
            ess_fraction: y.ess_fraction,
            draws_for_one_percent: y.draws_for_one_percent,
        });
        Self {
            format: COMPARISON_FORMAT,
            title: problem.title().to_owned(),
            aim: problem.aim().word(),
            recommendation: comparison.recommendation.clone(),
            contestants: comparison.contestants.iter().map(ContestantSummary::of).collect(),
            yardstick,
            differences: comparison.differences.clone(),
            shared: shared(problem.aim(), comparison),
            intervals: INTERVALS,
            evaluations: comparison.evaluations,
            tuning_evaluations: comparison.tuning_evaluations,
            survey_evaluations: comparison.survey_evaluations,
            failed: comparison.failed,
            provenance,
        }
    }
}

impl ContestantSummary {
    fn of(contestant: &Contestant) -> Self {
        let (score, merits) = (contestant.score.as_ref(), &contestant.merits);
        Self {
            name: contestant.name.clone(),
            kind: contestant.kind,
            df: finite(contestant.df),
            components: contestant.proposal.len(),
            tuning_evaluations: contestant.tuning_evaluations,
            draws: contestant.draws.labels.len(),
            failed: contestant.draws.failed,
            ess_fraction: merits.ess_fraction,
            weight_variance: merits.weight_variance,
            tail_shape: merits.tail_shape,
            tail_shape_upper: score.and_then(|s| finite(s.tail.upper)),
            tail_reason: score.map(|s| s.tail.reason),
            largest_share: merits.largest_share,
            relative_error: merits.relative_error,
            draws_for_one_percent: merits.draws_for_one_percent,
        }
    }
}

/// What the contestants have in common, in sentences.
#[must_use]
pub fn shared(aim: Aim, comparison: &Comparison) -> String {
    let count = |n: u64| crate::figures::numbers::count(usize::try_from(n).unwrap_or(usize::MAX));
    let draws = comparison.contestants.first().map_or(0, |c| c.draws.labels.len() as u64);
    let made = match aim {
        Aim::Density => {
            let each = comparison.contestants.first().map_or(0, |c| c.tuning_evaluations);
            let survey = if comparison.survey_evaluations > 0 {
                format!(
                    "; the {} of the survey are the same for all and were paid once",
                    count(comparison.survey_evaluations)
                )
            } else {
                String::new()
            };
            format!("Every contestant was tuned by itself with {} evaluations and the same seed{survey}", count(each))
        }
        Aim::Expectation | Aim::Probability => format!(
            "One tuning of {} evaluations served all: the contestants are fits of different tails to its draws",
            count(comparison.tuning_evaluations)
        ),
    };
    format!(
        "{made}. Each was then scored on {} fresh draws from the same streams of random numbers. {} evaluations in all.",
        count(draws),
        count(comparison.evaluations)
    )
}
