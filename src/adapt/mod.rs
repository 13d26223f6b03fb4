//! The loop: survey, then rounds of draw, evaluate, pool, temper, refit, rank; then confirm, choose, report.
//!
//! [`tune`] reads top to bottom as the method does. It prints nothing and touches no file; everything goes through the
//! [`Observer`], so a tuning can be watched, journalled, interrupted and replayed.

mod climb;
mod course;
mod curvature;
mod extend;
mod finish;
mod judgement;
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
mod survey_together;
mod together;
mod tuning;

pub mod compare;
pub mod rare;

pub use observer::{Answers, Batch, Observer, Silent, Stage};
pub use settings::Settings;
pub use tuning::{CandidateScore, Extension, Finalist, Mode, ReportDraws, Round, StopReason, Survey, Tuning};

use crate::BoxError;
use crate::problem::{Aim, EvaluateError, Problem};
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
    /// A budget is raised by too little, or not at all.
    #[error(
        "a budget of {from} evaluations, raised to {budget}, leaves too little for new rounds and new report draws; raise it to {least} or more"
    )]
    Raise {
        /// The new budget.
        budget: u64,
        /// The budget before.
        from: u64,
        /// The least that makes sense.
        least: u64,
    },
    /// The target cannot be evaluated.
    #[error("the target could not be evaluated")]
    Evaluation(#[from] EvaluateError),
    /// The log density is `+inf` at a point.
    #[error(
        "the log density of the target is +inf at a point: it is unbounded there; bound it, or cut the point out with `require`"
    )]
    Unbounded,
    /// The integrand is infinite at a point.
    #[error(
        "the integrand is infinite at a point: its mean does not exist unless it is bounded there; cut the point out with `require`"
    )]
    UnboundedIntegrand,
    /// The problem asks for something else.
    #[error("the aim of this problem is {aim}; it is tuned by another loop")]
    Aim {
        /// The problem's aim.
        aim: &'static str,
    },
    /// A setting that this loop has no use for.
    #[error("`{key}` cannot be set where the aim is {aim}: {reason}; leave it out")]
    Setting {
        /// Its key.
        key: &'static str,
        /// The problem's aim.
        aim: &'static str,
        /// Why not.
        reason: &'static str,
    },
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

/// Whether the budget of these settings, and every one that it was raised from, suffices for a problem.
///
/// # Errors
/// [`TuneError::Budget`], [`TuneError::Raise`].
pub fn check_budget(problem: &Problem, settings: &Settings) -> Result<(), TuneError> {
    match problem.aim() {
        Aim::Density => Plan::parts(settings, problem.dim()).map(|_| ()),
        Aim::Expectation | Aim::Probability => rare::check_budget(problem.dim(), settings),
    }
}

/// Tunes a proposal for a problem whose aim is a density: the one loop, top to bottom.
///
/// Same problem, settings and seed give the same bits, whatever the number of threads.
///
/// # Errors
/// [`TuneError`]; what was evaluated until then went through the observer.
///
/// ```
/// use evenpoise::adapt::{Settings, Silent, tune};
/// use evenpoise::model::Closure;
/// use evenpoise::problem::{Aim, Problem, Variable};
/// // A Gaussian with mean 3 and standard deviation 2: its integral is 2 sqrt(2 pi).
/// let target = Closure::new(1, |x| -0.125 * (x[0] - 3.0) * (x[0] - 3.0));
/// let level = Variable::range("level", f64::NEG_INFINITY, f64::INFINITY, 0.0, 10.0);
/// let problem = Problem::from_model("A level", vec![level], Aim::Density, Box::new(target)).unwrap();
/// let tuning = tune(&problem, &Settings::new(3000, 1), &mut Silent).unwrap();
/// let score = tuning.score.unwrap();
/// assert!(score.ess_fraction > 0.9);
/// let exact = (2.0 * (2.0 * std::f64::consts::PI).sqrt()).ln();
/// assert!((score.log_normaliser - exact).abs() < 5.0 * score.log_normaliser_se + 1e-3);
/// ```
pub fn tune(problem: &Problem, settings: &Settings, observer: &mut dyn Observer) -> Result<Tuning, TuneError> {
    let plans = Plan::parts(settings, problem.dim())?;
    let (plan, raises) = plans.split_first().expect("a tuning has one part at least");
    let target = Standard::new(problem, observer);
    let wide = layers::wide(problem.dim())?;

    let (first, mut survey, mut found) = course::first_proposal(&target, settings, plan)?;
    target.tell(|o| o.surveyed(&survey));
    let mut course = course::rounds(&target, settings, plan, &wide, first)?;
    let mut choice = finish::choose(&target, settings, plan, &wide, &course)?;
    let mut reported = finish::report(&target, settings, plan, &choice.chosen)?;
    let mut extended_from = Vec::new();
    for plan in raises {
        let known = (&mut found, &mut survey);
        extended_from.push(extend::go_on(&target, settings, plan, &wide, &mut course, (&choice, &reported), known)?);
        choice = finish::choose(&target, settings, plan, &wide, &course)?;
        reported = finish::report(&target, settings, plan, &choice.chosen)?;
    }
    let finish::Choice { chosen, finalists, .. } = choice;
    let finish::Reported { draws: report, score, .. } = reported;

    let late_modes = judgement::late_modes(&course, &chosen, &report, &target);
    let df = course.fits[course.fits.len() - 1].full.components()[0].df();
    let estimate_values = problem.estimates(&report.points);
    let names = problem.estimate_names();
    let estimates = judgement::estimates(names, &estimate_values, &report);
    let (evaluations, failed) = (target.spent(), target.failed());
    let evidence = judgement::Evidence {
        survey: &survey,
        rounds: &course.rounds,
        finalists: &finalists,
        report: &report,
        score: score.as_ref(),
        estimates: &estimates,
        estimate_values: &estimate_values,
        late_modes: &late_modes,
        failed_share: failed as f64 / evaluations.max(1) as f64,
        unguarded_tails: judgement::unguarded_tails(problem, &chosen),
    };
    let verdict = judgement::judge(&evidence);
    Ok(Tuning {
        extended_from,
        survey,
        rounds: course.rounds,
        finalists,
        stop: course.stop,
        chosen: chosen.rescaled(&problem.start().near, &problem.start().spread)?,
        df,
        report,
        score,
        estimates,
        estimate_values,
        verdict,
        evaluations,
        failed,
    })
}
