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
use super::survey::{Found, Limits, identity, survey};
use super::survey_together::survey_together;
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
pub(crate) fn first_proposal(target: &Standard, settings: &Settings, plan: &Plan) -> Result<(Fit, Survey), TuneError> {
    target.enter(Stage::Survey);
    let exact = target.gradient_cost() == 1;
    let limits = Limits {
        least: plan.survey_least,
        all: plan.survey_cap,
        enough: plan.survey_enough,
        first_mode: if exact { plan.survey_cap } else { plan.first_mode_cap },
    };
    // Probes and births ask for a point or two at a time: they are left to targets that are asked so.
    let found = if target.in_batches() {
        survey_together(target, settings.seed, limits)?
    } else {
        survey(target, settings.seed, limits)?
    };
    let df = settings.first_df();
    let mut probed = 0;
    let main = if found.modes.is_empty() {
        at_start(target.dim(), df)?
    } else {
        let main = at_modes(&found, df)?;
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
    Ok((Fit { full: main.clone(), trained: main, layers }, survey))
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
    let count = plan.rounds(target.spent());
    let mut course = Course {
        rounds: Vec::new(),
        pool: Pool::new(target.dim()),
        fits: Vec::new(),
        proposals: Vec::new(),
        born: Vec::new(),
        stop: if count < plan.most_rounds { StopReason::Budget } else { StopReason::Rounds },
        last_draws: 0,
    };
    let mut fit = first;
    let mut predicted = None;
    let mut births_left = plan.births;
    for r in 0..count {
        let draws = plan.draws(r, count, target.spent()) as usize;
        if draws == 0 {
            course.stop = StopReason::Budget;
            break;
        }
        target.enter(Stage::Round(r + 1));
        let proposal = layered(&fit.full, wide, fit.layers)?;
        let mut round = draw_round(target, settings, &mut course, &proposal, &fit, r, draws)?;
        round.predicted_ess_fraction = predicted;
        course.last_draws = draws;
        if has_mass(&course.pool) {
            let refined = refine(&course.pool, &fit, wide, settings, r + 1, draws)?;
            (fit, predicted) = absorb(&mut round, refined);
            course.fits.push(fit.clone());
            let may_bear = settings.method == Preference::Auto && !target.in_batches();
            if r + 1 < count && fit.layers.is_some() && may_bear {
                target.enter(Stage::Births(r + 1));
                let before = target.spent();
                let cap = (before + births_left).min(before + plan.left_for_rounds(before) / 2);
                let now = layered(&fit.full, wide, fit.layers)?;
                let df = fit.full.components()[0].df();
                if let Some(born) = births(target, &course.pool, &now, df, cap)? {
                    round.births = born.len() as u32;
                    fit = join(&fit, &born)?;
                    course.born.push((r + 1, born));
                }
                births_left -= target.spent() - before;
            }
            fit.layers = fit.layers.map(|now| explored(now, settings));
        }
        round.evaluations = target.spent();
        target.tell(|o| o.round(&round));
        course.rounds.push(round);
        if settled(&course.rounds) {
            course.stop = StopReason::NoGain;
            break;
        }
    }
    if course.fits.is_empty() {
        return Err(TuneError::NoMass { draws: course.pool.len() });
    }
    Ok(course)
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
    let log_target = target.values(&points)?;
    let failed = log_target.iter().filter(|l| l.is_nan()).count() as u32;
    let log_weights: Vec<f64> =
        log_target.iter().zip(&log_proposal).map(|(l, q)| if l.is_nan() { f64::NEG_INFINITY } else { l - q }).collect();
    course.pool.add(&points, &log_target, &log_proposal, proposal.clone(), settings.seed);
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
