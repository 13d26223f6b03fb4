//! The survey's first proposal and the rounds.

use super::TuneError;
use super::curvature::{Probing, probe};
use super::layers::{LayerShares, layered};
use super::observer::Stage;
use super::plan::Plan;
use super::pool::Pool;
use super::refine::{Fit, Refined, births, has_mass, join, refine};
use super::settings::Settings;
use super::standard::Standard;
use super::survey::{Found, Limits, identity, look_on};
use super::survey_together::look_on_together;
use super::tuning::{Mode, Round, StopReason, Survey};
use crate::numeric::{Purpose, exp, log_sum_exp};
use crate::proposal::{Component, Drawn, Mixture};
use crate::refit::{Preference, Step};
use crate::weights::{LogWeights, score};

/// What the rounds left behind.
#[derive(Debug)]
pub(crate) struct Course {
    pub(crate) rounds: Vec<Round>,
    pub(crate) pool: Pool,
    /// The fit made after every round.
    pub(crate) fits: Vec<Fit>,
    /// The proposal that every round drew from.
    pub(crate) proposals: Vec<Mixture>,
    /// Components born from the curvature at heavy points, with the round (from 1) after which.
    pub(crate) born: Vec<(u32, Mixture)>,
    pub(crate) stop: StopReason,
    pub(crate) last_draws: usize,
}

/// Layers while tuning: to begin with, and at least.
const FIRST_LAYERS: LayerShares = LayerShares { halo: 0.25, wide: 0.15 };
const EXPLORE: LayerShares = LayerShares { halo: 0.10, wide: 0.05 };
/// Modes whose Laplace mass is smaller than this share (log) of the largest are left to the wide start.
const LEAST_LOG_MASS: f64 = 14.0;
/// Share of the first proposal that probed components get.
const PROBED: f64 = 0.4;

/// Surveys and makes the first proposal from what was found.
pub(crate) fn first_proposal(
    target: &Standard,
    settings: &Settings,
    plan: &Plan,
) -> Result<(Fit, Survey, Found), TuneError> {
    target.enter(Stage::Survey);
    let exact = target.gradient_cost() == 1;
    let limits = Limits {
        least: plan.survey_least,
        all: plan.survey_cap,
        enough: plan.survey_enough,
        first_mode: if exact { plan.survey_cap } else { plan.first_mode_cap },
    };
    let mut found = Found::default();
    look(target, settings.seed, limits, &mut found)?;
    let df = settings.first_df();
    let mut probed = 0;
    let main = if found.modes.is_empty() {
        at_start(target.dim(), df)?
    } else {
        let main = at_modes(&found, df)?;
        // Probes ask for a point or two at a time: they are left to targets that are asked so.
        if settings.layered() && settings.method != Preference::Moments && !target.in_batches() {
            let (main, count) = with_probes(target, &found, main, plan, df)?;
            probed = count;
            main
        } else {
            main
        }
    };
    let layers = settings.layered().then_some(FIRST_LAYERS);
    let survey = summary(target, &found, probed);
    Ok((Fit { full: main.clone(), trained: main, layers }, survey, found))
}

/// Begins or goes on with a survey, in the way in which the target is best asked.
fn look(target: &Standard, seed: u64, limits: Limits, found: &mut Found) -> Result<(), TuneError> {
    if target.in_batches() {
        return look_on_together(target, seed, limits, found);
    }
    look_on(target, seed, limits, found)
}

/// Goes on with the survey under a raised budget, and gives components at modes that it had not found before.
pub(crate) fn survey_on(
    target: &Standard,
    settings: &Settings,
    plan: &Plan,
    (found, survey): (&mut Found, &mut Survey),
    df: f64,
) -> Result<Option<Mixture>, TuneError> {
    target.enter(Stage::Survey);
    let (before, known) = (target.spent(), found.modes.len());
    let limits = Limits {
        least: before,
        all: before + plan.survey_cap,
        enough: before + plan.survey_enough,
        first_mode: before + plan.survey_cap,
    };
    look(target, settings.seed, limits, found)?;
    let later = target.spent() - before;
    if later == 0 {
        return Ok(None);
    }
    let (evaluations, later_evaluations) = (survey.evaluations, survey.later_evaluations + later);
    *survey = Survey { evaluations, later_evaluations, ..summary(target, found, survey.probed) };
    target.tell(|o| o.surveyed(survey));
    let new = &found.modes[known..];
    let components = new.iter().map(|m| Component::new(m.x.clone(), &m.scale, df)).collect::<Result<Vec<_>, _>>()?;
    Ok(if new.is_empty() { None } else { Some(Mixture::new(&vec![1.0; new.len()], components)?) })
}

fn summary(target: &Standard, found: &Found, probed: u32) -> Survey {
    let modes = found.modes.iter().map(|m| {
        let at = target.coordinates(&crate::numeric::Points::from_rows(m.x.len(), &m.x));
        Mode {
            location: at.point(0),
            log_density: m.log_density - target.log_spread(),
            log_mass: m.log_mass,
            hits: m.hits,
        }
    });
    Survey {
        starts: found.starts,
        finished: found.finished,
        runaways: found.runaways,
        walls: found.walls,
        stuck: found.stuck,
        void: found.void,
        modes: modes.collect(),
        probed,
        evaluations: target.spent(),
        later_evaluations: 0,
        basin_share: if found.finished == 0 { 1.0 } else { 1.0 - libm::pow(0.05, 1.0 / f64::from(found.finished)) },
    }
}

/// Components at the modes: shares go with the square root of the Laplace masses, none below a fifth of its even part.
fn at_modes(found: &Found, df: f64) -> Result<Mixture, TuneError> {
    let largest = found.modes.iter().map(|m| m.log_mass).fold(f64::NEG_INFINITY, f64::max);
    let kept: Vec<_> = found.modes.iter().filter(|m| m.log_mass > largest - LEAST_LOG_MASS).collect();
    let least = 0.2 / found.modes.len() as f64;
    let masses: Vec<f64> = kept.iter().map(|m| exp(0.5 * (m.log_mass - largest)).max(least)).collect();
    let components = kept.iter().map(|m| Component::new(m.x.clone(), &m.scale, df)).collect::<Result<Vec<_>, _>>()?;
    Ok(Mixture::new(&masses, components)?)
}

/// Without a mode: the start itself.
fn at_start(d: usize, df: f64) -> Result<Mixture, TuneError> {
    Ok(Mixture::single(Component::new(vec![0.0; d], &identity(d), df)?))
}

fn with_probes(
    target: &Standard,
    found: &Found,
    main: Mixture,
    plan: &Plan,
    df: f64,
) -> Result<(Mixture, u32), TuneError> {
    let log_masses: Vec<f64> = found.modes.iter().map(|m| m.log_mass).collect();
    let highest = found.modes.iter().map(|m| m.log_density).fold(f64::NEG_INFINITY, f64::max);
    let against = Probing {
        log_proposal: &|x: &[f64]| main.log_density_at(x),
        log_normaliser: log_sum_exp(&log_masses),
        highest,
        cap: target.spent() + plan.probe,
    };
    let from: Vec<Component> =
        found.modes.iter().map(|m| Component::new(m.x.clone(), &m.scale, f64::INFINITY)).collect::<Result<_, _>>()?;
    let born = probe(target, &from, &against)?;
    if born.is_empty() {
        return Ok((main, 0));
    }
    let largest = born.iter().map(|l| l.log_mass).fold(f64::NEG_INFINITY, f64::max);
    let masses: Vec<f64> = born.iter().map(|l| exp(0.5 * (l.log_mass - largest))).collect();
    let count = born.len() as u32;
    let probed = Mixture::new(&masses, born.into_iter().map(|l| l.component.with_df(df)).collect())?;
    Ok((Mixture::union(&[(1.0 - PROBED, &main), (PROBED, &probed)])?, count))
}

/// All rounds: draw, evaluate, pool, refit, give birth.
pub(crate) fn rounds(
    target: &Standard,
    settings: &Settings,
    plan: &Plan,
    wide: &Mixture,
    first: Fit,
) -> Result<Course, TuneError> {
    let mut course = Course {
        rounds: Vec::new(),
        pool: Pool::new(target.dim()),
        fits: Vec::new(),
        proposals: Vec::new(),
        born: Vec::new(),
        stop: StopReason::Budget,
        last_draws: 0,
    };
    let mut births_left = plan.births;
    go_on(target, settings, plan, wide, &mut course, Next { fit: first, predicted: None }, &mut births_left)?;
    if course.fits.is_empty() {
        return Err(TuneError::NoMass { draws: course.pool.len() });
    }
    Ok(course)
}

/// What the next round is drawn from.
pub(crate) struct Next {
    pub(crate) fit: Fit,
    /// Its ESS fraction as the pool predicts it.
    pub(crate) predicted: Option<f64>,
}

/// The rounds that a plan has, after those that there are already. Curvature and probes may spend `births_left`.
pub(crate) fn go_on(
    target: &Standard,
    settings: &Settings,
    plan: &Plan,
    wide: &Mixture,
    course: &mut Course,
    mut next: Next,
    births_left: &mut u64,
) -> Result<(), TuneError> {
    let count = plan.rounds(target.spent());
    let before = course.rounds.len() as u32;
    course.stop = if count < plan.most_rounds { StopReason::Budget } else { StopReason::Rounds };
    for r in 0..count {
        let last = r + 1 == count;
        let reserved =
            if last && gives_birth(target, settings, &next.fit) { plan.last_births.min(*births_left) } else { 0 };
        let draws = plan.draws(r, count, target.spent() + reserved) as usize;
        if draws == 0 {
            course.stop = StopReason::Budget;
            break;
        }
        target.enter(Stage::Round(before + r + 1));
        let proposal = layered(&next.fit.full, wide, next.fit.layers)?;
        let mut round = draw_round(target, settings, course, &proposal, &next.fit, before + r, draws)?;
        round.predicted_ess_fraction = next.predicted;
        // Half of what is left for rounds at most, unless nothing else is to come.
        let cap = if last { reserved } else { (*births_left).min(plan.left_for_rounds(target.spent()) / 2) };
        let before = target.spent();
        next = learn(target, settings, wide, course, &mut round, next, cap)?;
        *births_left -= target.spent() - before;
        round.evaluations = target.spent();
        target.tell(|o| o.round(&round));
        course.rounds.push(round);
        if settled(&course.rounds) {
            course.stop = StopReason::NoGain;
            break;
        }
    }
    Ok(())
}

/// Whether components are born at heavy points: that asks for a point or two at a time.
fn gives_birth(target: &Standard, settings: &Settings, fit: &Fit) -> bool {
    fit.layers.is_some() && settings.method == Preference::Auto && !target.in_batches()
}

/// What a round that is in the pool already teaches: the next fit, and components born where that is too low, which may spend
/// `births_cap` evaluations.
pub(crate) fn learn(
    target: &Standard,
    settings: &Settings,
    wide: &Mixture,
    course: &mut Course,
    round: &mut Round,
    next: Next,
    births_cap: u64,
) -> Result<Next, TuneError> {
    course.last_draws = round.draws as usize;
    if !has_mass(&course.pool) {
        return Ok(next);
    }
    let refined = refine(&course.pool, &next.fit, wide, settings, round.index, round.draws as usize)?;
    let (mut fit, predicted) = absorb(round, refined);
    course.fits.push(fit.clone());
    if births_cap > 0 && gives_birth(target, settings, &fit) {
        target.enter(Stage::Births(round.index));
        let now = layered(&fit.full, wide, fit.layers)?;
        let df = fit.full.components()[0].df();
        if let Some(born) = births(target, &course.pool, &now, df, target.spent() + births_cap)? {
            round.births = born.len() as u32;
            fit = join(&fit, &born)?;
            course.born.push((round.index, born));
        }
    }
    fit.layers = fit.layers.map(|now| explored(now, settings));
    Ok(Next { fit, predicted })
}

/// While tuning, the layers explore: they never shrink below their floors.
fn explored(now: LayerShares, settings: &Settings) -> LayerShares {
    let wide = EXPLORE.wide.max(settings.defensive.unwrap_or(0.0));
    LayerShares { halo: now.halo.max(EXPLORE.halo), wide: now.wide.max(wide) }
}

fn absorb(round: &mut Round, refined: Refined) -> (Fit, Option<f64>) {
    round.exponent = refined.exponent;
    round.step = refined.step;
    round.candidates = refined.candidates;
    (refined.fit, refined.predicted)
}

/// Draws, evaluates, scores and pools one round.
fn draw_round(
    target: &Standard,
    settings: &Settings,
    course: &mut Course,
    proposal: &Mixture,
    fit: &Fit,
    r: u32,
    draws: usize,
) -> Result<Round, TuneError> {
    let Drawn { points, labels } = proposal.draw(draws, settings.seed, Purpose::Round, r);
    let log_proposal = proposal.log_density(&points);
    let (log_target, slopes) = target.values_and_slopes(&points)?;
    let failed = log_target.iter().filter(|l| l.is_nan()).count() as u32;
    let log_weights: Vec<f64> =
        log_target.iter().zip(&log_proposal).map(|(l, q)| if l.is_nan() { f64::NEG_INFINITY } else { l - q }).collect();
    course.pool.add(&points, &log_target, &log_proposal, slopes.as_ref(), proposal.clone(), settings.seed);
    course.proposals.push(proposal.clone());
    Ok(Round {
        index: r + 1,
        draws: draws as u32,
        evaluations: target.spent(),
        failed,
        components: fit.full.len(),
        df: fit.full.components()[0].df(),
        halo_share: fit.layers.map_or(0.0, |l| l.halo),
        wide_share: fit.layers.map_or(0.0, |l| l.wide),
        predicted_ess_fraction: None,
        score: LogWeights::new(log_weights).ok().map(|w| score(&w, &labels)),
        exponent: 0.0,
        step: Step::Kept,
        candidates: Vec::new(),
        births: 0,
    })
}

/// Two rounds in which nothing beat the present proposal, no birth was called for, and the weights are even already.
fn settled(rounds: &[Round]) -> bool {
    const EVEN: f64 = 0.9;
    rounds.len() >= 4
        && rounds[rounds.len() - 2..]
            .iter()
            .all(|r| r.step == Step::Kept && r.births == 0 && r.score.as_ref().is_some_and(|s| s.ess_fraction > EVEN))
}
