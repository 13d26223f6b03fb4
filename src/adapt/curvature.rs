//! Components from the curvature of the target: at one point, and by probing along the soft axes of those there are.

use super::TuneError;
use super::standard::Standard;
use crate::numeric::linear::{compose, dot, eigen};
use crate::numeric::{Points, exp, ln, log_add_exp};
use crate::proposal::Component;

/// A Gaussian component whose scale is the target's own at that place.
#[derive(Debug, Clone)]
pub(crate) struct Local {
    pub(crate) component: Component,
    /// Log density of the target at its centre.
    pub(crate) log_density: f64,
    /// Log of the mass that the curvature implies.
    pub(crate) log_mass: f64,
}

/// Directions whose precision is above this (in the start's units) are stiff: a Newton step along them leads to the ridge.
const STIFF: f64 = 4.0;

/// Evaluations that [`by_curvature`] may need.
pub(crate) fn curvature_cost(target: &Standard) -> u64 {
    2 * target.hessian_cost() + 4 * target.dim() as u64 + 2
}

/// A component at `x`: gradient and Hessian from `2d + 1` gradients, a Newton step along the stiff directions (at most 4 standard
/// deviations each, kept if the density falls by less than `e`), every scale then checked at plus and minus one standard deviation
/// and shrunk where the density falls faster than the parabola says. None where the target is not smooth enough.
pub(crate) fn by_curvature(target: &Standard, x: &[f64], cap: u64) -> Result<Option<Local>, TuneError> {
    let d = x.len();
    if target.spent() + curvature_cost(target) > cap {
        return Ok(None);
    }
    let mut step = target.default_step();
    let (mut l, mut g, mut precision) = target.curvature(x, &vec![step; d])?;
    let Some(mut found) = eigen(&precision, d) else { return Ok(None) };
    let narrowest = 1.0 / found.values[d - 1].max(1e-300).sqrt();
    if narrowest < 10.0 * step {
        step = 1e-2 * narrowest;
        (l, g, precision) = target.curvature(x, &vec![step; d])?;
        let Some(again) = eigen(&precision, d) else { return Ok(None) };
        found = again;
    }
    if !l.is_finite() || g.iter().any(|v| !v.is_finite()) {
        return Ok(None);
    }
    // No softer than the start itself.
    let stiffness: Vec<f64> = found.values.iter().map(|&v| v.max(1.0)).collect();
    let mut moved = x.to_vec();
    for j in 0..d {
        if found.values[j] > STIFF {
            let sd = 1.0 / stiffness[j].sqrt();
            let along = (dot(&found.vectors[j], &g) / stiffness[j]).clamp(-4.0 * sd, 4.0 * sd);
            for (m, v) in moved.iter_mut().zip(&found.vectors[j]) {
                *m += along * v;
            }
        }
    }
    let there = target.value(&moved)?;
    let (centre, l) = if there > l - 1.0 { (moved, there) } else { (x.to_vec(), l) };
    let sds: Vec<f64> = stiffness.iter().map(|v| 1.0 / v.sqrt()).collect();
    let sds = checked_scales(target, &centre, l, &found.vectors, sds)?;
    let variances: Vec<f64> = sds.iter().map(|s| s * s).collect();
    let Ok(component) = Component::new(centre, &compose(&found.vectors, &variances), f64::INFINITY) else {
        return Ok(None);
    };
    let log_mass = l + 0.5 * d as f64 * ln(2.0 * std::f64::consts::PI) + component.log_det_factor();
    Ok(Some(Local { component, log_density: l, log_mass }))
}

/// Scales along the eigenvectors, shrunk until the density falls by about one half at one of them.
fn checked_scales(
    target: &Standard,
    centre: &[f64],
    l: f64,
    vectors: &[Vec<f64>],
    mut sds: Vec<f64>,
) -> Result<Vec<f64>, TuneError> {
    for _ in 0..2 {
        let mut around = Points::new(centre.len());
        for side in [1.0, -1.0] {
            for (v, s) in vectors.iter().zip(&sds) {
                around.push(&centre.iter().zip(v).map(|(c, v)| c + side * s * v).collect::<Vec<_>>());
            }
        }
        let values = target.values(&around)?;
        let d = sds.len();
        let mut settled = true;
        for j in 0..d {
            let drop = 0.5 * ((l - values[j]) + (l - values[d + j]));
            // A side that failed (NaN) says nothing; one outside the support (infinite drop) says: narrower.
            let factor = if drop.is_nan() { 1.0 } else { (0.5 / drop.max(0.05)).sqrt().clamp(0.3, 1.0) };
            sds[j] *= factor;
            settled &= factor > 0.8;
        }
        if settled {
            break;
        }
    }
    Ok(sds)
}

/// What [`probe`] compares with.
pub(crate) struct Probing<'a> {
    /// Log density of the present proposal.
    pub(crate) log_proposal: &'a dyn Fn(&[f64]) -> f64,
    /// Logarithm of the normalising constant, as far as known.
    pub(crate) log_normaliser: f64,
    /// Highest log density met.
    pub(crate) highest: f64,
    /// Evaluations in all up to which it may go.
    pub(crate) cap: u64,
}

/// Axes probed of every component (its softest ones), and how far along them, in standard deviations.
const AXES: usize = 2;
const REACH: f64 = 2.0;
/// Steps back onto the ridge, at most: three left a strongly bent ridge unreached (lowest ESS .56 against .92 on a banana).
const STEPS_BACK: usize = 6;
/// A place is of interest within this many nats of the highest density, where the target is above the proposal by this factor.
const DEPTH: f64 = 9.0;
const GAP: f64 = 4.0;
/// Components of less than this share of the mass (log) are not worth having; most that one call adds.
const LEAST_LOG_MASS: f64 = -7.0;
const MOST: usize = 20;

/// New components along the soft axes of `from`: two standard deviations out, a few gradient steps back onto the ridge in the other
/// directions, and, where the proposal is thin against the target, a component from the curvature there; then on from that.
pub(crate) fn probe(target: &Standard, from: &[Component], against: &Probing) -> Result<Vec<Local>, TuneError> {
    let mut queue: std::collections::VecDeque<Component> = from.iter().cloned().collect();
    let mut born: Vec<Local> = Vec::new();
    while let Some(component) = queue.pop_front() {
        let d = component.dim();
        let Some(axes) = eigen(&component.scale(), d) else { continue };
        for axis in (0..d).rev().take(AXES) {
            for side in [1.0, -1.0] {
                let needed = STEPS_BACK as u64 * target.gradient_cost() + 1 + curvature_cost(target);
                if born.len() >= MOST || target.spent() + needed > against.cap {
                    return Ok(born);
                }
                let Some(x) = along(target, &component, &axes, axis, side)? else { continue };
                if let Some(local) = settle(target, &x, &born, against)? {
                    queue.push_back(local.component.clone());
                    born.push(local);
                }
            }
        }
    }
    Ok(born)
}

/// A point `REACH` standard deviations along an axis, led back onto the ridge by scaled gradient steps across it.
fn along(
    target: &Standard,
    component: &Component,
    axes: &crate::numeric::linear::Eigen,
    axis: usize,
    side: f64,
) -> Result<Option<Vec<f64>>, TuneError> {
    let sds: Vec<f64> = axes.values.iter().map(|v| v.max(0.0).sqrt()).collect();
    let mut x: Vec<f64> =
        component.location().iter().zip(&axes.vectors[axis]).map(|(c, v)| c + side * REACH * sds[axis] * v).collect();
    for _ in 0..STEPS_BACK {
        let (_, g) = target.gradient(&x)?;
        let pull: Vec<f64> =
            (0..sds.len()).map(|j| if j == axis { 0.0 } else { dot(&axes.vectors[j], &g) * sds[j] }).collect();
        let length = dot(&pull, &pull).sqrt();
        if !length.is_finite() {
            return Ok(None);
        }
        let shorten = (3.0 / length.max(1e-9)).min(1.0);
        for j in 0..sds.len() {
            for (x, v) in x.iter_mut().zip(&axes.vectors[j]) {
                *x += shorten * pull[j] * sds[j] * v;
            }
        }
        if length < 0.3 {
            break;
        }
    }
    Ok(Some(x))
}

/// A component at `x` if the target is high there, the proposal thin, and its mass worth a component.
fn settle(target: &Standard, x: &[f64], born: &[Local], against: &Probing) -> Result<Option<Local>, TuneError> {
    let thin = |x: &[f64], l: f64| {
        let mut q = (against.log_proposal)(x);
        for local in born {
            q = log_add_exp(q, local.log_mass - against.log_normaliser + local.component.log_density(x));
        }
        l - against.log_normaliser - q
    };
    let l = target.value(x)?;
    if !(l >= against.highest - DEPTH) || thin(x, l) < ln(GAP) {
        return Ok(None);
    }
    let Some(local) = by_curvature(target, x, against.cap)? else { return Ok(None) };
    let mass = local.log_mass - against.log_normaliser;
    let lacks = thin(local.component.location(), local.log_density) >= 0.5 * ln(GAP);
    Ok((mass > LEAST_LOG_MASS && lacks && exp(mass).is_finite()).then_some(local))
}
