//! The end: an ensemble of the last fits, confirm draws that decide, report draws that nothing else touches.

use super::TuneError;
use super::course::Course;
use super::observer::Stage;
use super::plan::Plan;
use super::refine::ensemble;
use super::settings::Settings;
use super::standard::Standard;
use super::tuning::{Finalist, ReportDraws};
use crate::numeric::{Points, Purpose};
use crate::proposal::{Drawn, Mixture};
use crate::weights::{LogWeights, Score, score};

/// Fits that the ensemble joins.
const LAST_FITS: usize = 4;
/// An earlier round is chosen only if its fresh ESS fraction is above the ensemble's by this and two standard errors.
const MARGIN: f64 = 0.05;
/// A round in which one draw held more than this is not trusted with the choice.
const TRUSTED_SHARE: f64 = 0.05;

/// The proposal chosen, in the start's units, who stood beside it, and the draws that decided.
pub(crate) struct Choice {
    pub(crate) chosen: Mixture,
    pub(crate) finalists: Vec<Finalist>,
    /// The last fits joined, and the confirm draws from them.
    pub(crate) joined: Mixture,
    pub(crate) confirm: Reported,
}

/// Fresh draws from a frozen proposal, with what they say.
#[derive(Clone)]
pub(crate) struct Reported {
    pub(crate) draws: ReportDraws,
    /// Gradients in the start's units, where the target gives them.
    pub(crate) slopes: Option<Points>,
    pub(crate) score: Option<Score>,
}

/// Chooses between the last fits joined and the best round.
pub(crate) fn choose(
    target: &Standard,
    settings: &Settings,
    plan: &Plan,
    wide: &Mixture,
    course: &Course,
) -> Result<Choice, TuneError> {
    target.enter(Stage::Confirm);
    let from = course.fits.len().saturating_sub(LAST_FITS);
    let (joined, predicted) =
        ensemble(&course.pool, &course.fits[from..], &course.born, wide, settings, course.last_draws)?;
    let n = plan.confirm.min(plan.budget - target.spent()) as usize;
    let confirm = fresh(target, settings, &joined, n, (Purpose::Confirm, plan.part))?;
    let confirmed = confirm.score.clone();
    let mut finalists = vec![Finalist {
        name: "ensemble".into(),
        predicted_ess_fraction: predicted,
        score: confirmed.clone(),
        chosen: false,
    }];
    let best = best_round(course);
    let mut chosen = joined.clone();
    let mut winner = 0;
    if let Some(best) = best {
        let round = &course.rounds[best];
        finalists.push(Finalist {
            name: format!("round {}", round.index),
            predicted_ess_fraction: round.predicted_ess_fraction,
            score: round.score.clone(),
            chosen: false,
        });
        if clearly_better(round.score.as_ref(), confirmed.as_ref()) {
            chosen = course.proposals[best].clone();
            winner = 1;
        }
    }
    finalists[winner].chosen = true;
    Ok(Choice { chosen, finalists, joined, confirm })
}

/// The round with the largest fresh ESS fraction among those whose score can be trusted.
fn best_round(course: &Course) -> Option<usize> {
    let mut best: Option<(f64, usize)> = None;
    for (i, round) in course.rounds.iter().enumerate() {
        if let Some(s) = &round.score
            && s.largest_share < TRUSTED_SHARE
            && best.is_none_or(|(ess, _)| s.ess_fraction > ess)
        {
            best = Some((s.ess_fraction, i));
        }
    }
    best.map(|(_, i)| i)
}

fn clearly_better(round: Option<&Score>, ensemble: Option<&Score>) -> bool {
    match (round, ensemble) {
        (Some(_), None) => true,
        (Some(a), Some(b)) => {
            let error = 2.0 * b.ess_fraction_se.unwrap_or(0.1);
            a.ess_fraction - MARGIN > b.ess_fraction + error
        }
        _ => false,
    }
}

/// Draws `n` points, evaluates and scores them.
fn fresh(
    target: &Standard,
    settings: &Settings,
    proposal: &Mixture,
    n: usize,
    (purpose, part): (Purpose, u32),
) -> Result<Reported, TuneError> {
    let Drawn { points, labels } = proposal.draw(n, settings.seed, purpose, part);
    let log_proposal = proposal.log_density(&points);
    let (log_target, slopes) = target.values_and_slopes(&points)?;
    let draws = ReportDraws { points, labels, log_target, log_proposal };
    let score = LogWeights::new(draws.log_weights()).ok().map(|w| score(&w, &draws.labels));
    Ok(Reported { draws, slopes, score })
}

/// All that is left of the budget, drawn from the frozen proposal: the number was fixed before any of them was seen. Points and log
/// densities come back in the proposal's coordinates.
pub(crate) fn report(
    target: &Standard,
    settings: &Settings,
    plan: &Plan,
    chosen: &Mixture,
) -> Result<Reported, TuneError> {
    target.enter(Stage::Report);
    let n = plan.budget.saturating_sub(target.spent()) as usize;
    let mut reported = fresh(target, settings, chosen, n, (Purpose::Report, plan.part))?;
    let draws = &mut reported.draws;
    draws.points = target.coordinates(&draws.points);
    let shift = target.log_spread();
    for l in draws.log_target.iter_mut().chain(&mut draws.log_proposal) {
        *l -= shift;
    }
    Ok(reported)
}
