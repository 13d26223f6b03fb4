//! The survey of a target that is asked for many points at a time: all climbs at once, their steps in common batches.
//!
//! Climbs one after the other can stop inside a mode that an earlier one found, but a question of one step each is the
//! worst way to ask workers of a program, and hopeless where somebody answers files. Here a fixed number of climbs start
//! together, none knows of the others, and what they found is put together at the end: some twenty batches in all.

use super::TuneError;
use super::climb::{End, climb};
use super::modes::{KnownMode, examine};
use super::standard::Standard;
use super::survey::{Found, Limits, RADII, identity};
use super::together::together;
use crate::numeric::{Purpose, normal, stream};

/// Gradients that a climb may take, and how many climbs there are at least (as far as the budget allows) and at most.
const GRADIENTS: u64 = 20;
const LEAST: u64 = 4;
const MOST: u64 = 24;

/// Climbs together; every climb may spend the same.
pub(crate) fn survey_together(target: &Standard, seed: u64, limits: Limits) -> Result<Found, TuneError> {
    let d = target.dim();
    let each = GRADIENTS * target.gradient_cost() + 2 * target.hessian_cost() + 1;
    let count = (limits.all / each).max(LEAST.min(limits.enough / each)).clamp(1, MOST) as usize;
    // Where the budget is small against the dimension, even one climb must leave something for the rounds.
    let allowed = each.min(limits.first_mode.max(limits.enough) / count as u64);
    let problem = target.problem();
    let ends = together(
        count,
        |k, line| {
            let target = Standard::on_line(problem, line);
            let mut rng = stream(seed, Purpose::Survey, k as u32, 0);
            let radius = RADII[k % RADII.len()];
            let start: Vec<f64> = (0..d).map(|_| radius * normal::draw(&mut rng)).collect();
            let reach = allowed.min(GRADIENTS * target.gradient_cost());
            let (end, _) = climb(&target, start, &identity(d), true, &[], GRADIENTS, reach)?;
            match &end {
                End::Top(x, metric) => Ok((examine(&target, x, metric, allowed)?, end)),
                _ => Ok((None, end)),
            }
        },
        |z| target.values(z),
    )?;
    let mut found = Found { starts: count as u32, ..Found::default() };
    for (mode, end) in ends {
        match end {
            End::Top(..) => match mode {
                Some(mode) => add(&mut found, mode),
                None => found.stuck += 1,
            },
            End::Wall => {
                found.walls += 1;
                found.finished += 1;
            }
            End::Away => found.runaways += 1,
            End::Void => found.void += 1,
            End::Known(_) | End::Stuck | End::Unfinished | End::Spent => found.stuck += 1,
        }
    }
    Ok(found)
}

fn add(found: &mut Found, mode: KnownMode) {
    found.finished += 1;
    match found.modes.iter_mut().find(|known| known.same(&mode)) {
        Some(known) => known.hits += 1,
        None => found.modes.push(mode),
    }
}
