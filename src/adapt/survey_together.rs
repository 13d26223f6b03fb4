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

/// Climbs together, from starts that no earlier climb had; every climb may spend the same. A survey that was made before goes
/// on until the most climbs are made and every mode repeats itself, as far as the limits have room for whole climbs.
pub(crate) fn look_on_together(
    target: &Standard,
    seed: u64,
    limits: Limits,
    found: &mut Found,
) -> Result<(), TuneError> {
    let d = target.dim();
    let before = found.starts;
    if before >= MOST as u32 && found.modes.iter().all(|m| m.hits > 1) {
        return Ok(());
    }
    let each = GRADIENTS * target.gradient_cost() + 2 * target.hessian_cost() + 1;
    let room = |limit: u64| limit.saturating_sub(target.spent());
    let (all, enough) = (room(limits.all), room(limits.enough));
    let least = u64::from(before == 0);
    let count = (all / each).max(LEAST.min(enough / each)).clamp(least, MOST) as usize;
    if count == 0 {
        return Ok(());
    }
    // Where the budget is small against the dimension, even one climb must leave something for the rounds.
    let allowed = each.min(room(limits.first_mode).max(enough) / count as u64);
    let problem = target.problem();
    let ends = together(
        count,
        |k, line| {
            let target = Standard::on_line(problem, line);
            let number = before + k as u32;
            let mut rng = stream(seed, Purpose::Survey, number, 0);
            let radius = RADII[number as usize % RADII.len()];
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
    found.starts += count as u32;
    for (mode, end) in ends {
        match end {
            End::Top(..) => match mode {
                Some(mode) => add(found, mode),
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
    Ok(())
}

fn add(found: &mut Found, mode: KnownMode) {
    found.finished += 1;
    match found.modes.iter_mut().find(|known| known.same(&mode)) {
        Some(known) => known.hits += 1,
        None => found.modes.push(mode),
    }
}
