//! Probabilities of rare events and means of integrands: one loop for both.
//!
//! Everything lives in standard normal scores `u`, where the nominal density is `N(0, I)`. In reading order: `scores` (the
//! problem there), `plan` (budget and constants), `directed`, `subspace` (mixtures that know a few directions), `survey` with
//! `design_point`, `least_distance` and `mode` (where the event lies), `layers` (what bounds the weights), `pool`, `smoothing`,
//! `aim`, `em`, `refit` (the next proposal), `planes`, `quadric`, `surrogate`, `control` (variance won back), `rounds` (the loop), `answer`
//! (the value), `judgement` (the verdict).
//!
//! The answer combines the rounds drawn after the event was first reached, each with a weight that was fixed before it was drawn: no
//! draw is chosen, dropped or reweighted for what it showed, so the combination is unbiased. The pool of all draws fits the
//! proposals and never makes the answer.

mod aim;
mod answer;
mod control;
mod design_point;
mod directed;
mod em;
mod judgement;
mod layers;
mod least_distance;
mod mode;
mod plan;
mod planes;
mod pool;
mod quadric;
mod refit;
mod rounds;
mod scores;
mod smoothing;
mod subspace;
mod surrogate;
mod survey;
mod tuning;

pub use tuning::{
    DesignPoint, FailuresCounted, RareAnswer, RareCandidate, RareDraws, RareRound, RareStep, RareSurvey, RareTuning,
    RareValue, ValueWithError,
};

use super::observer::{Observer, Stage};
use super::{Settings, TuneError};
use crate::numeric::linear::dot;
use crate::numeric::{Points, normal};
use crate::problem::{Aim, Problem};
use plan::Plan;
use scores::Scores;
use survey::{Explored, Found, Scouts};

/// As [`super::check_budget`].
pub(crate) fn check_budget(dim: usize, settings: &Settings) -> Result<(), TuneError> {
    Plan::parts(settings, dim).map(|_| ())
}

/// Tunes a proposal for a problem whose aim is a probability or an expectation, and answers it: the one loop, top to bottom.
///
/// Same problem, settings and seed give the same bits, whatever the number of threads.
///
/// # Errors
/// [`TuneError`]; what was evaluated until then went through the observer.
///
/// ```
/// use evenpoise::adapt::{Settings, Silent, rare::tune_rare};
/// use evenpoise::distribution::Distribution;
/// use evenpoise::model::Closure;
/// use evenpoise::problem::{Aim, Problem, Variable};
/// // Two standard normal variables whose sum exceeds 4 sqrt(2): beyond a line at distance 4, P = 3.167e-5.
/// let standard = Distribution::new("normal", &[("mean", 0.0), ("sd", 1.0)]).unwrap();
/// let variables = vec![Variable::random("a", standard.clone()), Variable::random("b", standard)];
/// let margin = Closure::new(2, |x| 4.0 * 2.0_f64.sqrt() - x[0] - x[1]);
/// let problem = Problem::from_model("A line", variables, Aim::Probability, Box::new(margin)).unwrap();
/// let tuning = tune_rare(&problem, &Settings::new(2000, 1), &mut Silent).unwrap();
/// let answer = tuning.answer.value().unwrap();
/// assert!((answer.value / 3.167_124_183_311_998e-5 - 1.0).abs() < 0.1 && answer.cv < 0.03);
/// ```
pub fn tune_rare(problem: &Problem, settings: &Settings, observer: &mut dyn Observer) -> Result<RareTuning, TuneError> {
    if problem.aim() == Aim::Density {
        return Err(TuneError::Aim { aim: problem.aim().word() });
    }
    Plan::refuse(settings, problem.aim().word())?;
    let plans = Plan::parts(settings, problem.dim())?;
    let plan = &plans[0];
    let target = Scores::new(problem, observer);

    target.enter(Stage::Survey);
    let scouts = survey::scouts(&target, plan)?;
    let explored = survey::explore(&target, plan, &scouts)?;
    let survey = surveyed(&target, &scouts, &explored);
    target.tell(|o| o.rare_surveyed(&survey));

    let mut course = rounds::run(&target, &plans, &scouts, &explored)?;
    let answering = answer::of(&mut course, &scouts, target.is_event(), target.failures_are_inside());
    let (evaluations, failed) = (target.spent(), target.failed());
    let failures = judgement::Failures {
        share: failed as f64 / evaluations.max(1) as f64,
        declared: problem.failed().is_some(),
        inside_is_value: target.failures_are_inside(),
    };
    let verdict = judgement::judge(&course, &scouts, &explored, &answering, &survey, &failures);
    let chosen = explored.space.expand(&course.layers.whole(&course.twin.full)?)?;
    let pooled = answer::pooled(&course);
    let kappa_claimed = answering.answer.value().map(|v| v.cv * v.cv * evaluations as f64);
    Ok(RareTuning {
        extended_from: course.extended_from,
        survey,
        rounds: course.rounds,
        chosen,
        draws: answering.draws,
        answer: answering.answer,
        pooled,
        failures_counted: answering.failures,
        failing: answering.failing,
        kappa_claimed,
        verdict,
        evaluations,
        failed,
    })
}

/// Cosine between a point and the gradient there above which the gradient is that of a smooth design point.
const ALONG: f64 = 0.95;

fn surveyed(target: &Scores, scouts: &Scouts, explored: &Explored) -> RareSurvey {
    RareSurvey {
        scouts: scouts.points.len(),
        scouts_that_met: scouts.answered.hit.iter().filter(|&&h| h).count(),
        searches: explored.searches,
        points: explored.found.iter().map(|p| design_point_of(target, p)).collect(),
        directions: explored.space.k(),
        evaluations: target.spent(),
    }
}

fn design_point_of(target: &Scores, found: &Found) -> DesignPoint {
    let at = &found.at;
    let length = dot(at, at).sqrt();
    // Into the event: against the gradient of the margin. Where it is not known, or belongs to one side of a kink, along the point.
    let along = |normal: &Vec<f64>| dot(normal, at).abs() >= ALONG * length;
    let inward: Vec<f64> = match found.normal.as_ref().filter(|n| along(n)) {
        Some(normal) => normal.iter().map(|n| -n).collect(),
        None => at.iter().map(|v| v / length.max(1e-300)).collect(),
    };
    let distance = dot(&inward, at);
    DesignPoint {
        natural: target.problem().to_natural(&Points::from_rows(at.len(), at)).point(0),
        scores: at.clone(),
        distance,
        importance: inward.iter().map(|a| a * a.abs()).collect(),
        first_order_probability: target.is_event().then(|| normal::upper_tail(distance)),
        converged: found.converged,
    }
}
