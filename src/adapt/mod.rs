//! The loop: survey, then rounds of draw, evaluate, pool, temper, refit, rank; then confirm, choose, report.
//!
//! [`tune`] reads top to bottom as the method does. It prints nothing and touches no file; everything goes through the
//! [`Observer`], so a tuning can be watched, journalled, interrupted and replayed.

mod climb;
mod course;
mod curvature;
mod finish;
mod layers;
mod modes;
mod observer;
mod plan;
mod pool;
mod rank;
mod refine;
mod settings;
mod standard;
mod survey;
mod tuning;

pub use observer::{Answers, Batch, Observer, Silent, Stage};
pub use settings::{Family, Settings, Structure};
pub use standard::LogDensity;
pub use tuning::{CandidateScore, Finalist, Mode, ReportDraws, Round, StopReason, Survey, Tuning};

use crate::BoxError;
use crate::proposal::ProposalError;
use crate::refit::RefitError;
use plan::Plan;
use standard::Standard;
use thiserror::Error;

/// Why a tuning gave nothing.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum TuneError {
    /// The budget does not reach for one round and its report.
    #[error("a budget of {budget} evaluations is too small in {dim} dimensions; give at least {least}")]
    Budget {
        /// The budget given.
        budget: u64,
        /// Dimension.
        dim: usize,
        /// The least that makes sense.
        least: u64,
    },
    /// The target cannot be evaluated.
    #[error("the target could not be evaluated")]
    Evaluation(#[source] BoxError),
    /// The log density is `+inf` at a point.
    #[error(
        "the log density of the target is +inf at a point: it is unbounded there; bound it, or cut the point out with `require`"
    )]
    Unbounded,
    /// The survey's optimiser failed.
    #[error("the survey failed: {0}")]
    Survey(String),
    /// No draw of any round met the target's support.
    #[error(
        "all {draws} draws missed the target: it is zero (or failed) wherever the start looked; move or widen `near` and `spread`"
    )]
    NoMass {
        /// Draws made.
        draws: usize,
    },
    /// The observer could not record or report.
    #[error("the run could not be recorded")]
    Observer(#[source] BoxError),
    /// The observer asked to stop.
    #[error("interrupted after {evaluations} evaluations")]
    Interrupted {
        /// Evaluations so far.
        evaluations: u64,
    },
    /// A fit left the range of numbers.
    #[error("a fit failed")]
    Refit(#[from] RefitError),
    /// A proposal left the range of numbers.
    #[error("a proposal failed")]
    Proposal(#[from] ProposalError),
}

/// Tunes a proposal for `target`: the one loop, top to bottom.
///
/// Same target, settings and seed give the same bits, whatever the number of threads.
///
/// # Errors
/// [`TuneError`]; what was evaluated until then went through the observer.
pub fn tune(target: &dyn LogDensity, settings: &Settings, observer: &mut dyn Observer) -> Result<Tuning, TuneError> {
    let plan = Plan::new(settings, target.dim())?;
    let standard = Standard::new(target, observer);
    let wide = layers::wide(target.dim())?;

    let (first, survey) = course::first_proposal(&standard, settings, &plan)?;
    standard.tell(|o| o.surveyed(&survey));
    let course = course::rounds(&standard, settings, &plan, &wide, first)?;
    let (chosen, finalists) = finish::choose(&standard, settings, &plan, &wide, &course)?;
    let (report, score) = finish::report(&standard, settings, &plan, &chosen)?;

    let df = course.fits[course.fits.len() - 1].full.components()[0].df();
    Ok(Tuning {
        survey,
        rounds: course.rounds,
        finalists,
        stop: course.stop,
        chosen: chosen.rescaled(target.near(), target.spread())?,
        df,
        report,
        score,
        evaluations: standard.spent(),
        failed: standard.failed(),
    })
}
