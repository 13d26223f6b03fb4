//! The refit after a round: candidates side by side, ranked by the held-out draws, the winner fitted to all.

use super::aim::{FitTarget, relative};
use super::directed::{Directed, Part};
use super::em::{Covariances, em};
use super::layers::{Layers, squared_distance};
use super::plan::Plan;
use super::pool::Pool;
use super::survey::pick;
use super::tuning::{RareCandidate, RareStep};
use crate::adapt::TuneError;
use crate::numeric::linear::eigen;
use crate::numeric::{Points, Purpose, exp, ln, stream};
use crate::refit::Preference;
use rayon::prelude::*;

/// A proposal that exists twice: trained without the held-out draws (ranked), and on all (drawn from).
#[derive(Debug, Clone)]
pub(crate) struct Twin {
    pub(crate) trained: Directed,
    pub(crate) full: Directed,
}

impl Twin {
    pub(crate) fn same(fitted: Directed) -> Self {
        Self { trained: fitted.clone(), full: fitted }
    }
}

/// What a refit decided.
#[derive(Debug)]
pub(crate) struct Decision {
    pub(crate) twin: Twin,
    pub(crate) step: RareStep,
    /// Relative variance per draw predicted for the winner, with all its layers.
    pub(crate) predicted_variance: f64,
    pub(crate) candidates: Vec<RareCandidate>,
}

/// Anchors of the covariances, in effective points a coordinate.
const ANCHORS: [f64; 2] = [2.0, 20.0];
const ANCHOR_VARIANCE: f64 = 5.0;
const ANCHOR_SPLIT: f64 = 3.0;
/// A split by the variance of the rest, told by its own anchor.
const ANCHOR_SPLIT_REST: f64 = 3.5;
const REST_APART: f64 = 1.25;
const ITERATIONS: usize = 6;
const ITERATIONS_SEEDED: usize = 8;
const ITERATIONS_SPLIT: usize = 10;
/// Largest log ratio `target / proposal` that the variance step looks at.
const RATIO_CAP: f64 = 5.0;
/// A draw whose fitted density is below this share of the pool's is one that the fit lacks.
const LACKING: f64 = 0.15;
/// A component lighter than this is not split; halves lie this many standard deviations apart from the middle.
const SPLIT_LEAST: f64 = 0.04;
const SPLIT_APART: f64 = 0.8;
/// Weights below this share of the largest take no part.
const NEGLIGIBLE: f64 = 1e-9;

/// A candidate on the list: its kind, how to make it again from all draws (none for proposals that exist), and its fit.
type Listed<'a> = (RareStep, Option<(RareStep, f64)>, &'a Directed);

/// Draws to fit to, with their weights.
struct Material {
    points: Points,
    /// Truncated weights.
    weights: Vec<f64>,
    /// Weights of the variance step.
    variance: Vec<f64>,
    /// Raw weights.
    raw: Vec<f64>,
    /// Log terms of the second moment under the present proposal.
    log_second: Vec<f64>,
    /// Draws that the fit lacks.
    lacking: Vec<usize>,
}

/// The candidates that a target offers: kind and strength of the anchor.
const AT_EVENT: [(RareStep, f64); 7] = [
    (RareStep::CrossEntropy, ANCHORS[0]),
    (RareStep::CrossEntropy, ANCHORS[1]),
    (RareStep::Shift, 0.0),
    (RareStep::Variance, ANCHOR_VARIANCE),
    (RareStep::Seeded, ANCHOR_VARIANCE),
    (RareStep::Split, ANCHOR_SPLIT),
    (RareStep::Split, ANCHOR_SPLIT_REST),
];
const SMOOTHED: [(RareStep, f64); 4] = [AT_EVENT[0], AT_EVENT[1], AT_EVENT[2], AT_EVENT[5]];

/// Ranks candidates on the held-out draws by the second moment of the whole proposal's weights; the winner is fitted to all draws.
pub(crate) fn refit(
    pool: &Pool,
    target: &FitTarget,
    layers: &Layers,
    plan: &Plan,
    present: &Twin,
    earlier: Option<&Twin>,
    round: u32,
) -> Result<Decision, TuneError> {
    let weights = relative(&target.log_weights);
    let rows = |held: bool| -> Vec<usize> {
        (0..pool.len()).filter(|&i| weights[i] > NEGLIGIBLE && (held || !pool.held_out[i])).collect()
    };
    let log_mixture = pool.log_mixture();
    let training = Material::new(pool, target, layers, &present.trained, &weights, &log_mixture, &rows(false))?;
    let judge = Judge::new(pool, target, &weights);

    let kinds: Vec<(RareStep, f64)> = if target.at_event { AT_EVENT.to_vec() } else { SMOOTHED.to_vec() };
    let kinds: Vec<(RareStep, f64)> =
        kinds.into_iter().filter(|(step, _)| allowed(plan.method, *step, target.at_event)).collect();
    let make = |kind: (RareStep, f64), start: &Directed, from: &Material| -> Option<Directed> {
        candidate(kind, start, from, plan, round)
    };
    let made: Vec<Option<Directed>> = kinds.par_iter().map(|&kind| make(kind, &present.trained, &training)).collect();
    let mut list: Vec<Listed<'_>> = vec![(RareStep::Kept, None, &present.trained)];
    if let Some(earlier) = earlier {
        list.push((RareStep::Earlier, None, &earlier.trained));
    }
    for (kind, fitted) in kinds.iter().zip(&made) {
        if let Some(fitted) = fitted {
            list.push((kind.0, Some(*kind), fitted));
        }
    }
    let scores: Vec<f64> = list
        .iter()
        .map(|(_, _, fitted)| Ok(judge.second_moment(&layers.whole(fitted)?)))
        .collect::<Result<_, TuneError>>()?;
    let candidates = list
        .iter()
        .zip(&scores)
        .map(|((step, _, fitted), score)| RareCandidate {
            step: *step,
            components: fitted.len(),
            predicted_variance: score - 1.0,
        })
        .collect();
    let best = (0..list.len()).fold(0, |best, i| if scores[i] < scores[best] { i } else { best });
    let (step, kind, trained) = (list[best].0, list[best].1, list[best].2.clone());
    let full = match kind {
        Some(kind) => {
            let all = Material::new(pool, target, layers, &present.full, &weights, &log_mixture, &rows(true))?;
            make(kind, &present.full, &all).unwrap_or_else(|| trained.clone())
        }
        None if step == RareStep::Earlier => earlier.map_or_else(|| trained.clone(), |e| e.full.clone()),
        None => present.full.clone(),
    };
    Ok(Decision { twin: Twin { trained, full }, step, predicted_variance: scores[best] - 1.0, candidates })
}

/// Whether a kind of refit is asked for. While the event is smoothed there is only the cross-entropy to go by.
fn allowed(method: Preference, step: RareStep, at_event: bool) -> bool {
    match method {
        Preference::CrossEntropy => step != RareStep::Variance,
        Preference::Variance => step != RareStep::CrossEntropy || !at_event,
        Preference::Auto | Preference::Moments => true,
    }
}

/// The held-out draws, ready to rank.
struct Judge {
    points: Points,
    /// `w t`, relative.
    log_terms: Vec<f64>,
    log_mean: f64,
    held_out: f64,
}

impl Judge {
    fn new(pool: &Pool, target: &FitTarget, weights: &[f64]) -> Self {
        let rows: Vec<usize> = (0..pool.len()).filter(|&i| pool.held_out[i] && weights[i] > NEGLIGIBLE).collect();
        let held_out = pool.held_out.iter().filter(|&&h| h).count() as f64;
        let sum: f64 = rows.iter().map(|&i| weights[i]).sum();
        let top = target.log_weights.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        Self {
            points: pool.points.select(&rows),
            log_terms: rows.iter().map(|&i| ln(weights[i]) + target.log_target[i] - top).collect(),
            log_mean: ln(sum / held_out),
            held_out,
        }
    }

    /// `E[w t/q] / E[w]^2`: the second moment of the normalised weights under `q`, one plus their relative variance. Not known (infinite)
    /// where no held-out draw counts.
    fn second_moment(&self, q: &Directed) -> f64 {
        if self.points.is_empty() {
            return f64::INFINITY;
        }
        let log_q = q.log_density(&self.points);
        let sum: f64 = self.log_terms.iter().zip(&log_q).map(|(t, q)| exp(t - q - 2.0 * self.log_mean)).sum();
        sum / self.held_out
    }
}

impl Material {
    fn new(
        pool: &Pool,
        target: &FitTarget,
        layers: &Layers,
        present: &Directed,
        weights: &[f64],
        log_mixture: &[f64],
        rows: &[usize],
    ) -> Result<Self, TuneError> {
        let n = pool.len() as f64;
        let points = pool.points.select(rows);
        let total: f64 = weights.iter().sum();
        let top = target.log_weights.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        let log_integral = ln(total / n) + top;
        let log_whole = layers.whole(present)?.log_density(&points);
        let log_fitted = present.log_density(&points);
        let raw: Vec<f64> = rows.iter().map(|&i| weights[i]).collect();
        // Truncation: Ionides, J. Comput. Graph. Stat. 17 (2008) 295-311.
        let cut = total / n * n.sqrt();
        let truncated: Vec<f64> = raw.iter().map(|w| w.min(cut)).collect();
        let log_second: Vec<f64> = rows
            .iter()
            .zip(&log_whole)
            .zip(&raw)
            .map(|((&i, q), w)| ln(*w) + (target.log_target[i] - q - log_integral).min(RATIO_CAP))
            .collect();
        let variance = half_and_half(&truncated, &log_second);
        let lacking = (0..rows.len()).filter(|&t| log_fitted[t] - log_mixture[rows[t]] < ln(LACKING)).collect();
        Ok(Self { points, weights: truncated, variance, raw, log_second, lacking })
    }
}

/// Half the weights, half the terms of the second moment (to the same sum), those truncated too.
fn half_and_half(weights: &[f64], log_second: &[f64]) -> Vec<f64> {
    let total: f64 = weights.iter().sum();
    let second = relative(log_second);
    let n = second.len() as f64;
    let cut = second.iter().sum::<f64>() / n * n.sqrt();
    let second: Vec<f64> = second.iter().map(|s| s.min(cut)).collect();
    let scale = total / second.iter().sum::<f64>();
    weights.iter().zip(&second).map(|(w, s)| 0.5 * w + 0.5 * s * scale).collect()
}

/// One candidate; none where it cannot be made (nothing lacks, nothing to split, a covariance that is no covariance).
fn candidate(
    (step, strength): (RareStep, f64),
    start: &Directed,
    from: &Material,
    plan: &Plan,
    round: u32,
) -> Option<Directed> {
    let anchored = Covariances::Anchored { strength, diagonal: plan.diagonal };
    let fit = |start: &Directed, weights: &[f64], covariances, iterations| {
        em(start, &from.points, weights, covariances, iterations).ok()
    };
    if from.points.is_empty() {
        return None;
    }
    match step {
        RareStep::CrossEntropy => fit(start, &from.weights, anchored, ITERATIONS),
        RareStep::Shift => fit(start, &from.weights, Covariances::Unit, ITERATIONS),
        RareStep::Variance => fit(start, &from.variance, anchored, ITERATIONS),
        RareStep::Seeded if start.len() < plan.most_components => {
            let grown = seeded(start, from, plan, round)?;
            fit(&grown, &from.weights, anchored, ITERATIONS_SEEDED)
        }
        RareStep::Split if start.len() + 2 < plan.most_components => {
            let grown = if strength == ANCHOR_SPLIT_REST {
                split_rest(start, from, plan.most_components)?
            } else {
                split(start, from, plan.most_components)?
            };
            fit(&grown, &from.weights, anchored, ITERATIONS_SPLIT)
        }
        _ => None,
    }
}

/// A new component around a draw that the fit lacks, picked by its term of the second moment.
fn seeded(start: &Directed, from: &Material, plan: &Plan, round: u32) -> Option<Directed> {
    let total: f64 = from.raw.iter().sum();
    let lacking: f64 = from.lacking.iter().map(|&t| from.raw[t]).sum();
    if from.lacking.is_empty() || lacking < 1e-4 * total {
        return None;
    }
    let k = start.k();
    let mut rng = stream(plan.seed, Purpose::Refit, round, 1);
    let terms: Vec<f64> = from.lacking.iter().map(|&t| from.log_second[t]).collect();
    let centre = from.points.point(from.lacking[pick(&terms, &mut rng)]);
    let near: Vec<usize> = from
        .lacking
        .iter()
        .copied()
        .filter(|&t| squared_distance(&from.points.point(t)[..k], &centre[..k]) < 4.0)
        .collect();
    let mass: f64 = near.iter().map(|&t| from.raw[t]).sum();
    let effective = mass * mass / near.iter().map(|&t| from.raw[t] * from.raw[t]).sum::<f64>();
    let mut mean = vec![0.0; k];
    for &t in &near {
        let point = from.points.point(t);
        mean.iter_mut().zip(&point).for_each(|(m, x)| *m += from.raw[t] / mass * x);
    }
    let prior = (k + 1) as f64;
    let mut covariance = super::directed::scaled_identity(k, 0.6 * prior / (effective + prior));
    for &t in &near {
        let point = from.points.point(t);
        let share = from.raw[t] / mass * effective / (effective + prior);
        for a in 0..k {
            for b in 0..k {
                covariance[a * k + b] += share * (point[a] - mean[a]) * (point[b] - mean[b]);
            }
        }
    }
    let mut parts = start.parts();
    let rest = parts.iter().map(|p| p.rest).sum::<f64>() / parts.len() as f64;
    parts.iter_mut().for_each(|p| p.mass *= 0.95);
    parts.push(Part { mass: 0.05, mean, covariance, rest });
    Directed::new(&parts, start.rest_dim()).ok()
}

/// Components split along their main axis, the heaviest first, as long as there is room for more.
fn split(start: &Directed, from: &Material, most: usize) -> Option<Directed> {
    let k = start.k();
    split_heaviest(start, from, most, |part, responsibilities| {
        let (mean, spread) = moments(responsibilities, &from.weights, &from.points, k);
        let main = eigen(&spread, k)?;
        let length = main.values[k - 1].max(0.0).sqrt();
        let covariance: Vec<f64> = spread
            .iter()
            .zip(&part.covariance)
            .enumerate()
            .map(|(at, (s, own))| 0.7 * s + 0.15 * own + if at % (k + 1) == 0 { 1e-6 } else { 0.0 })
            .collect();
        Some([1.0, -1.0].map(|side| {
            let moved =
                mean.iter().zip(&main.vectors[k - 1]).map(|(m, v)| m + side * SPLIT_APART * length * v).collect();
            Part { mean: moved, covariance: covariance.clone(), ..part.clone() }
        }))
    })
}

/// Components split by the variance of the rest: what the event wants there often changes along it.
fn split_rest(start: &Directed, from: &Material, most: usize) -> Option<Directed> {
    if start.rest_dim() == 0 {
        return None;
    }
    split_heaviest(start, from, most, |part, _| {
        Some([REST_APART, 1.0 / REST_APART].map(|factor| Part { rest: part.rest * factor, ..part.clone() }))
    })
}

/// The heaviest components replaced by the two halves that `halves` makes of each and its responsibilities, as far as there is room;
/// none where no component is heavy enough.
fn split_heaviest(
    start: &Directed,
    from: &Material,
    most: usize,
    halves: impl Fn(&Part, &[f64]) -> Option<[Part; 2]>,
) -> Option<Directed> {
    let (columns, _) = start.responsibilities(&from.points);
    let total: f64 = from.weights.iter().sum();
    let parts = start.parts();
    let shares: Vec<f64> =
        columns.iter().map(|c| c.iter().zip(&from.weights).map(|(r, w)| r * w).sum::<f64>() / total).collect();
    let mut order: Vec<usize> = (0..parts.len()).collect();
    order.sort_by(|&a, &b| shares[b].total_cmp(&shares[a]));
    let chosen = &order[..parts.len().min(most - parts.len()).max(1)];
    let mut grown = Vec::new();
    for (i, part) in parts.iter().enumerate() {
        if !chosen.contains(&i) || shares[i] <= SPLIT_LEAST {
            grown.push(Part { mass: shares[i].max(1e-3), ..part.clone() });
            continue;
        }
        grown.extend(halves(part, &columns[i])?.map(|half| Part { mass: 0.5 * shares[i], ..half }));
    }
    (grown.len() > parts.len()).then(|| Directed::new(&grown, start.rest_dim()).ok()).flatten()
}

/// Mean and covariance (row by row) of the first `k` coordinates, weighted.
fn moments(column: &[f64], weights: &[f64], points: &Points, k: usize) -> (Vec<f64>, Vec<f64>) {
    let mass: f64 = column.iter().zip(weights).map(|(r, w)| r * w).sum();
    let mut mean = vec![0.0; k];
    let rows: Vec<(f64, Vec<f64>)> = (0..points.len())
        .map(|i| (column[i] * weights[i] / mass, i))
        .filter(|(w, _)| *w > 1e-12)
        .map(|(w, i)| (w, points.point(i)))
        .collect();
    for (w, x) in &rows {
        mean.iter_mut().zip(x).for_each(|(m, v)| *m += w * v);
    }
    let mut spread = vec![0.0; k * k];
    for (w, x) in &rows {
        for a in 0..k {
            for b in 0..k {
                spread[a * k + b] += w * (x[a] - mean[a]) * (x[b] - mean[b]);
            }
        }
    }
    (mean, spread)
}
