//! The survey: climbs from starts spread wide and narrow, until the modes repeat themselves.

use super::TuneError;
use super::climb::{End, climb};
use super::modes::{KnownMode, examine};
use super::standard::Standard;
use crate::numeric::{Purpose, normal, stream};

/// What the survey found, in the start's units.
#[derive(Debug, Clone, Default)]
pub(crate) struct Found {
    pub(crate) modes: Vec<KnownMode>,
    pub(crate) starts: u32,
    pub(crate) finished: u32,
    pub(crate) runaways: u32,
    pub(crate) walls: u32,
    pub(crate) stuck: u32,
    pub(crate) void: u32,
}

/// Radii of the starts, in turn: 2 for modes outside the start, 1/2 and 1/4 for thin basins inside a wide one.
pub(crate) const RADII: [f64; 5] = [1.0, 2.0, 0.5, 1.0, 0.25];
/// Climbs that are enough for a basin share of 5 %, and the most that are made (1 %).
const ENOUGH: u32 = 60;
const MOST: u32 = 300;
/// Climbs without any mode after which there is none.
const HOPELESS: u32 = 6;

/// How far the survey may go, in evaluations.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Limits {
    /// Spent looking for thin basins even when nothing new turns up.
    pub(crate) least: u64,
    /// The end, whatever was found.
    pub(crate) all: u64,
    /// The end as long as fewer climbs were made than are enough.
    pub(crate) enough: u64,
    /// The end as long as no mode was found.
    pub(crate) first_mode: u64,
}

/// Climbs until every mode repeats itself or the limits are reached. After a survey the climbs go on where they ended, from starts
/// of their own.
pub(crate) fn look_on(target: &Standard, seed: u64, limits: Limits, found: &mut Found) -> Result<(), TuneError> {
    let d = target.dim();
    let identity = identity(d);
    while found.starts < MOST {
        let cap = match (found.modes.is_empty(), found.finished < ENOUGH) {
            (true, _) => limits.first_mode,
            (false, true) => limits.enough,
            (false, false) => limits.all,
        };
        if target.spent() + 2 * target.gradient_cost() >= cap {
            break;
        }
        let failed = found.starts - found.finished;
        if found.modes.is_empty() && failed >= HOPELESS {
            break;
        }
        if found.finished >= ENOUGH && target.spent() >= limits.least && found.modes.iter().all(|m| m.hits > 1) {
            break;
        }
        let radius = RADII[found.starts as usize % RADII.len()];
        let mut rng = stream(seed, Purpose::Survey, found.starts, 0);
        let start: Vec<f64> = (0..d).map(|_| radius * normal::draw(&mut rng)).collect();
        // Three climbs of four walk in the scale of the first mode, the fourth in the start's, for what that scale would step over.
        let borrowed = found.modes.first().filter(|_| !found.starts.is_multiple_of(4)).map(|m| m.scale.clone());
        let own_scale = borrowed.is_none();
        let metric = borrowed.unwrap_or_else(|| identity.clone());
        let steps = if found.modes.is_empty() { 40 + 6 * d as u64 } else { 60 };
        found.starts += 1;
        let (end, trail) = climb(target, start, &metric, own_scale, &found.modes, steps, cap)?;
        match end {
            End::Known(j) => {
                found.modes[j].hits += 1;
                found.modes[j].follow(trail);
                found.finished += 1;
            }
            End::Top(x, metric) => match examine(target, &x, &metric, cap)? {
                Some(mode) => {
                    found.finished += 1;
                    let new = found.modes.len();
                    match found.modes.iter_mut().find(|m| m.same(&mode)) {
                        Some(old) => {
                            old.hits += 1;
                            old.follow(trail);
                        }
                        None => {
                            found.modes.push(mode);
                            found.modes[new].follow(trail);
                        }
                    }
                }
                None => found.stuck += 1,
            },
            End::Wall => {
                found.walls += 1;
                found.finished += 1;
            }
            End::Stuck | End::Unfinished => found.stuck += 1,
            End::Away => found.runaways += 1,
            End::Void => found.void += 1,
            End::Spent => break,
        }
    }
    Ok(())
}

pub(crate) fn identity(d: usize) -> Vec<f64> {
    let mut identity = vec![0.0; d * d];
    for j in 0..d {
        identity[j * d + j] = 1.0;
    }
    identity
}
