//! The survey: climbs from starts spread wide and narrow, until the modes repeat themselves.

use super::TuneError;
use super::climb::{End, climb};
use super::curvature::{Local, by_curvature};
use super::modes::{KnownMode, examine};
use super::standard::Standard;
use crate::numeric::{Purpose, normal, stream};

/// What the survey found, in the start's units.
#[derive(Debug, Clone, Default)]
pub(crate) struct Found {
    pub(crate) modes: Vec<KnownMode>,
    /// Components at end points that are no interior maxima (walls, ridges), when there is no mode at all.
    pub(crate) footholds: Vec<Local>,
    pub(crate) starts: u32,
    pub(crate) finished: u32,
    pub(crate) runaways: u32,
    pub(crate) stuck: u32,
    pub(crate) void: u32,
}

/// Radii of the starts, in turn: 2 for modes outside the start, 1/2 and 1/4 for thin basins inside a wide one.
const RADII: [f64; 5] = [1.0, 2.0, 0.5, 1.0, 0.25];
/// Climbs that are enough for a basin share of 5 %, and the most that are made (1 %).
const ENOUGH: u32 = 60;
const MOST: u32 = 300;
/// Climbs without any mode after which there is none.
const HOPELESS: u32 = 6;

/// Climbs until every mode repeats itself or the evaluations up to `cap` are spent; `least` evaluations are spent looking for
/// thin basins even when nothing new turns up.
pub(crate) fn survey(target: &Standard, seed: u64, least: u64, cap: u64) -> Result<Found, TuneError> {
    let d = target.dim();
    let mut found = Found::default();
    let mut ends: Vec<(f64, Vec<f64>)> = Vec::new();
    let identity = identity(d);
    while found.starts < MOST && target.spent() + 2 * target.gradient_cost() < cap {
        let failed = found.starts - found.finished;
        if found.modes.is_empty() && failed >= HOPELESS {
            break;
        }
        if found.starts >= ENOUGH && target.spent() >= least && found.modes.iter().all(|m| m.hits > 1) {
            break;
        }
        let radius = RADII[found.starts as usize % RADII.len()];
        let mut rng = stream(seed, Purpose::Survey, found.starts, 0);
        let start: Vec<f64> = (0..d).map(|_| radius * normal::draw(&mut rng)).collect();
        let borrowed = found.modes.first().filter(|_| found.starts % 2 == 1).map(|m| m.scale.clone());
        let own_scale = borrowed.is_none();
        let metric = borrowed.unwrap_or_else(|| identity.clone());
        let steps = if found.modes.is_empty() { 40 + 6 * d as u64 } else { 60 };
        found.starts += 1;
        match climb(target, start, &metric, own_scale, &found.modes, steps, cap)? {
            End::Known(j) => {
                found.modes[j].hits += 1;
                found.finished += 1;
            }
            End::Top(x, metric) => match examine(target, &x, &metric, cap)? {
                Some(mode) => {
                    found.finished += 1;
                    match found.modes.iter_mut().find(|m| m.same(&mode)) {
                        Some(old) => old.hits += 1,
                        None => found.modes.push(mode),
                    }
                }
                None => {
                    found.stuck += 1;
                    ends.push((0.0, x));
                }
            },
            End::Stuck(x) | End::Unfinished(x) => {
                found.stuck += 1;
                ends.push((0.0, x));
            }
            End::Away => found.runaways += 1,
            End::Void => found.void += 1,
            End::Spent => break,
        }
    }
    if found.modes.is_empty() {
        found.footholds = footholds(target, &ends, cap)?;
    }
    Ok(found)
}

/// Components from the curvature at end points that were no maxima: better than nothing to begin with.
fn footholds(target: &Standard, ends: &[(f64, Vec<f64>)], cap: u64) -> Result<Vec<Local>, TuneError> {
    const FEW: usize = 4;
    let mut locals: Vec<Local> = Vec::new();
    for (_, x) in ends {
        if locals.len() == FEW {
            break;
        }
        if let Some(local) = by_curvature(target, x, cap)?
            && local.log_density.is_finite()
            && locals.iter().all(|other| other.component.distance(local.component.location()) > 4.0)
        {
            locals.push(local);
        }
    }
    Ok(locals)
}

pub(crate) fn identity(d: usize) -> Vec<f64> {
    let mut identity = vec![0.0; d * d];
    for j in 0..d {
        identity[j * d + j] = 1.0;
    }
    identity
}
