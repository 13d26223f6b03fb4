//! A mode that the survey knows, with the curvature there.

use super::TuneError;
use super::climb::Trail;
use super::standard::Standard;
use crate::numeric::linear::{compose, dot, eigen, times};
use crate::numeric::ln;

/// A mode in the start's units.
#[derive(Debug, Clone)]
pub(crate) struct KnownMode {
    pub(crate) x: Vec<f64>,
    pub(crate) log_density: f64,
    /// Scale matrix (inverse of the negative Hessian), soft directions cut at the start's width.
    pub(crate) scale: Vec<f64>,
    pub(crate) precision: Vec<f64>,
    /// Laplace's approximation of the log mass.
    pub(crate) log_mass: f64,
    pub(crate) hits: u32,
    /// Places that earlier climbs came through on their way here.
    pub(crate) trail: Trail,
}

/// A direction whose precision is below this is as wide as three starts or more: the start's own width is taken.
const SOFT: f64 = 1.0 / 9.0;

/// A climb is on the heels of an earlier one within this many standard deviations of the mode, and nats, of a place it came through.
const HEELS: f64 = 0.5;
/// Places kept for each mode.
const LONGEST_TRAIL: usize = 2000;

impl KnownMode {
    /// Whether a climb at `x` with log density `l` is inside this mode's basin: near in its scale, and as high as its parabola says;
    /// or on the heels of an earlier climb that ended here.
    pub(crate) fn contains(&self, x: &[f64], l: f64) -> bool {
        let distance = self.distance(x);
        let near = distance < x.len() as f64 && (l - (self.log_density - 0.5 * distance)).abs() < 1.0 + 0.25 * distance;
        near || self.trail.iter().any(|(p, lp)| (l - lp).abs() < HEELS && self.apart(x, p) < HEELS * HEELS)
    }

    /// Adds the places of a climb that ended here.
    pub(crate) fn follow(&mut self, trail: Trail) {
        if self.trail.len() < LONGEST_TRAIL {
            self.trail.extend(trail);
        }
    }

    fn apart(&self, a: &[f64], b: &[f64]) -> f64 {
        let y: Vec<f64> = a.iter().zip(b).map(|(a, b)| a - b).collect();
        dot(&y, &times(&self.precision, &y))
    }

    pub(crate) fn distance(&self, x: &[f64]) -> f64 {
        self.apart(x, &self.x)
    }

    /// Whether two modes are one: within `sqrt(d)` of each other under the curvature of either.
    pub(crate) fn same(&self, other: &Self) -> bool {
        self.distance(&other.x).min(other.distance(&self.x)) < (self.x.len() as f64).sqrt()
    }
}

/// Examines a stationary point: curvature, one Newton step, and whether it is a maximum with a gradient that vanishes in its own scale.
/// None where it is not, or where the evaluations allowed do not suffice.
pub(crate) fn examine(target: &Standard, x: &[f64], metric: &[f64], cap: u64) -> Result<Option<KnownMode>, TuneError> {
    let d = x.len();
    if target.spent() + target.hessian_cost() + 1 > cap {
        return Ok(None);
    }
    let mut steps: Vec<f64> =
        (0..d).map(|j| (1e-3 * metric[j * d + j].abs().sqrt()).clamp(1e-9, target.default_step())).collect();
    let (mut l, mut g, mut precision) = target.curvature(x, &steps)?;
    let Some(mut found) = eigen(&precision, d) else {
        return Ok(None);
    };
    // A step that is not small against the narrowest width gives a blurred curvature: once more with a smaller one.
    let narrowest = 1.0 / found.values[d - 1].max(1e-300).sqrt();
    if narrowest < 20.0 * steps.iter().copied().fold(0.0, f64::max) && target.spent() + target.hessian_cost() < cap {
        for step in &mut steps {
            *step = step.min(1e-2 * narrowest);
        }
        (l, g, precision) = target.curvature(x, &steps)?;
        let Some(again) = eigen(&precision, d) else {
            return Ok(None);
        };
        found = again;
    }
    if found.values.iter().any(|&v| v <= 0.0) || !l.is_finite() {
        return Ok(None);
    }
    let values: Vec<f64> = found.values.iter().map(|&v| if v <= SOFT { 1.0 } else { v }).collect();
    let scale = compose(&found.vectors, &values.iter().map(|v| 1.0 / v).collect::<Vec<_>>());
    let precision = compose(&found.vectors, &values);
    let newton = times(&scale, &g);
    let mut at = x.to_vec();
    let mut best = l;
    if target.spent() < cap {
        let moved: Vec<f64> = x.iter().zip(&newton).map(|(a, s)| a + s).collect();
        let higher = target.value(&moved)?;
        if higher > l {
            at = moved;
            best = higher;
        }
    }
    if !(dot(&g, &newton) < 1.0) {
        return Ok(None);
    }
    let log_volume = -0.5 * values.iter().map(|&v| ln(v)).sum::<f64>();
    let log_mass = best + 0.5 * d as f64 * ln(2.0 * std::f64::consts::PI) + log_volume;
    Ok(Some(KnownMode { x: at, log_density: best, scale, precision, log_mass, hits: 1, trail: Vec::new() }))
}
