//! A raised budget: everything that was spent before becomes rounds, and the tuning goes on.
//!
//! The confirm draws and the report draws of the smaller budget are independent draws from known proposals, as those of any round
//! are. They join the pool and teach the next fits, and so they may no longer carry the answer: the raise makes report draws of its
//! own, from another stream.

use super::TuneError;
use super::course::{Course, Next, go_on as go_on_with_rounds, learn, survey_on};
use super::finish::{Choice, Reported};
use super::plan::Plan;
use super::refine::{Fit, join};
use super::settings::Settings;
use super::standard::Standard;
use super::survey::Found;
use super::tuning::{Extension, ReportDraws, Round, Survey};
use crate::proposal::Mixture;
use crate::refit::Step;

/// Makes rounds of the confirm and report draws of the part that ends, goes on with the survey where it had not seen enough, and then
/// with the rounds of the next part.
pub(crate) fn go_on(
    target: &Standard,
    settings: &Settings,
    plan: &Plan,
    wide: &Mixture,
    course: &mut Course,
    (choice, report): (&Choice, &Reported),
    known: (&mut Found, &mut Survey),
) -> Result<Extension, TuneError> {
    let (n_confirm, n_report) = (choice.confirm.draws.labels.len() as u64, report.draws.labels.len() as u64);
    let spent = target.spent();
    let ensemble = choice.finalists.iter().find(|f| f.name == "ensemble");
    let chosen = choice.finalists.iter().find(|f| f.chosen);

    let mut confirmed = as_round(course, &choice.joined, &choice.confirm.draws, spent - n_report);
    confirmed.predicted_ess_fraction = ensemble.and_then(|f| f.predicted_ess_fraction);
    confirmed.score = ensemble.and_then(|f| f.score.clone());
    pool(course, settings, &choice.joined, &choice.confirm);
    // No fit is made of so few draws alone: the fit before stands for this round as well.
    course.fits.push(last_fit(course));
    target.tell(|o| o.round(&confirmed));
    course.rounds.push(confirmed);

    let mut reported = as_round(course, &choice.chosen, &report.draws, spent);
    reported.predicted_ess_fraction = chosen.and_then(|f| f.predicted_ess_fraction);
    reported.score = report.score.clone();
    let draws = in_start_units(target, &report.draws);
    pool(course, settings, &choice.chosen, &Reported { draws, ..report.clone() });
    let df = last_fit(course).full.components()[0].df();
    let new_modes = survey_on(target, settings, plan, known, df)?;
    let next = Next { fit: last_fit(course), predicted: None };
    let mut births_left = plan.births;
    let before = target.spent();
    let cap = births_left.min(plan.left_for_rounds(before) / 2);
    let mut next = learn(target, settings, wide, course, &mut reported, next, cap)?;
    births_left -= target.spent() - before;
    if let Some(modes) = new_modes {
        next.fit = join(&next.fit, &modes)?;
        reported.births += modes.len() as u32;
        course.born.push((reported.index, modes));
    }
    reported.evaluations = target.spent();
    target.tell(|o| o.round(&reported));
    course.rounds.push(reported);

    let rounds = course.rounds.len() as u32;
    go_on_with_rounds(target, settings, plan, wide, course, next, &mut births_left)?;
    Ok(Extension { budget: plan.from, rounds, confirm_draws: n_confirm, report_draws: n_report })
}

fn last_fit(course: &Course) -> Fit {
    course.fits[course.fits.len() - 1].clone()
}

/// The record of draws that were made for another end.
fn as_round(course: &Course, proposal: &Mixture, draws: &ReportDraws, evaluations: u64) -> Round {
    Round {
        index: course.rounds.len() as u32 + 1,
        draws: draws.labels.len() as u32,
        evaluations,
        failed: draws.failed() as u32,
        components: proposal.len(),
        df: proposal.components()[0].df(),
        // Halo and wide start are among the components here.
        halo_share: 0.0,
        wide_share: 0.0,
        predicted_ess_fraction: None,
        score: None,
        exponent: course.rounds.last().map_or(1.0, |round| round.exponent),
        step: Step::Kept,
        candidates: Vec::new(),
        births: 0,
    }
}

/// Puts draws in the start's units into the pool.
fn pool(course: &mut Course, settings: &Settings, proposal: &Mixture, reported: &Reported) {
    let Reported { draws, slopes, .. } = reported;
    let slopes = slopes.as_ref();
    course.pool.add(&draws.points, &draws.log_target, &draws.log_proposal, slopes, proposal.clone(), settings.seed);
    course.proposals.push(proposal.clone());
}

/// Report draws come in the proposal's coordinates.
fn in_start_units(target: &Standard, report: &ReportDraws) -> ReportDraws {
    let shifted = |logs: &[f64]| logs.iter().map(|l| l + target.log_spread()).collect();
    ReportDraws {
        points: target.standardised(&report.points),
        labels: report.labels.clone(),
        log_target: shifted(&report.log_target),
        log_proposal: shifted(&report.log_proposal),
    }
}
