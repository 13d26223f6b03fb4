//! What a round may turn its proposal into: every kind of refit, made side by side from points already paid for.

use super::{Anchor, GAUSSIAN_DF, Method, RefitError, births, effective, em, moments_fit};
use crate::numeric::{Points, Purpose, exp, stream};
use crate::proposal::{Component, Mixture};
use rayon::prelude::*;
use serde::Serialize;
use std::fmt;

/// A kind of refit; `rounds.csv` says which one won.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Step {
    /// The present proposal as it is.
    Kept,
    /// Only the degrees of freedom changed (infinite: Gaussian).
    Tails(f64),
    /// Cross-entropy fit by EM.
    CrossEntropy,
    /// The same, anchored to the present scales.
    Anchored,
    /// The same, anchored firmly.
    Firm,
    /// The same, anchored to the average scale of all components.
    Pooled,
    /// Cross-entropy fit with diagonal scales.
    Diagonal,
    /// Weighted mean and covariance of every component's responsibilities.
    Moments,
    /// EM on weights times the square root of target over proposal: half-way to the least variance.
    Variance,
    /// The two nearest components merged.
    Merged,
    /// Components split.
    Split,
    /// All components seeded afresh.
    Seeded(usize),
    /// Components fitted to the mass that the proposal lacks.
    Born(usize),
}

impl fmt::Display for Step {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let text = match self {
            Self::Kept => "kept",
            Self::Tails(_) => "tails",
            Self::CrossEntropy => "cross-entropy",
            Self::Anchored => "anchored",
            Self::Firm => "anchored-firmly",
            Self::Pooled => "pooled-scale",
            Self::Diagonal => "diagonal",
            Self::Moments => "moments",
            Self::Variance => "variance",
            Self::Merged => "merged",
            Self::Split => "split",
            Self::Seeded(_) => "seeded",
            Self::Born(_) => "born",
        };
        f.write_str(text)
    }
}

/// Which kinds of refit are considered.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, serde::Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Preference {
    /// All of them.
    Auto,
    /// Cross-entropy fits only.
    CrossEntropy,
    /// Moment matching only, taken without ranking: the plain loop, as a baseline.
    Moments,
    /// Half-variance fits only.
    Variance,
}

impl Preference {
    /// Whether refits of this kind are considered.
    #[must_use]
    pub fn allows(self, step: Step) -> bool {
        match self {
            Self::Auto => true,
            Self::CrossEntropy => !matches!(step, Step::Moments | Step::Variance),
            Self::Moments => step == Step::Moments,
            Self::Variance => matches!(step, Step::Variance | Step::Tails(_)),
        }
    }
}

/// A candidate: how it was made, and what it is.
#[derive(Debug, Clone)]
pub struct Candidate {
    /// The kind of refit.
    pub step: Step,
    /// The fitted mixture.
    pub mixture: Mixture,
}

/// What the candidates start from: the present mixture and the training points, weights and log ratios.
#[derive(Debug)]
pub struct Incumbent<'a> {
    /// The present mixture, fitted without the held-out points.
    pub mixture: &'a Mixture,
    /// Training points.
    pub points: &'a Points,
    /// Their weights, summing to one.
    pub weights: &'a [f64],
    /// Gradients of the log target at the training points, where there are any.
    pub gradients: Option<&'a Points>,
    /// `ln` of (normalised target over present proposal, layers included) at the training points.
    pub log_ratios: &'a [f64],
    /// Most components that the effective points can carry.
    pub most_components: usize,
    /// Degrees of freedom may be fitted.
    pub fit_df: bool,
    /// Seeds may replace all components (early rounds).
    pub reseed: bool,
    /// Which kinds are made.
    pub preference: Preference,
    /// Whether components may become Gaussian (infinite degrees of freedom).
    pub gaussian: bool,
    /// Scales are kept diagonal in every fit.
    pub diagonal: bool,
}

/// Strengths of the anchors, in effective points for every dimension.
const LOOSE: f64 = 0.3;
const ANCHORED: f64 = 3.0;
const FIRM: f64 = 20.0;
/// Degrees of freedom tried with locations and scales untouched.
const TAILS: [f64; 5] = [f64::INFINITY, 30.0, 10.0, 5.0, 3.0];
/// Iterations for candidates that grow: new components need longer to settle.
const GROWTH_ITERATIONS: usize = 20;

/// All candidates, [`Step::Kept`] first. Fits that fail are left out: the present proposal is always there.
///
/// Made side by side on the cores; each has its own random stream, so the result does not depend on their number.
#[must_use]
pub fn candidates(from: &Incumbent, seed: u64, round: u32) -> Vec<Candidate> {
    let steps: Vec<Step> = plan(from).into_iter().filter(|&s| from.preference.allows(s)).collect();
    let mut made: Vec<Candidate> = vec![Candidate { step: Step::Kept, mixture: from.mixture.clone() }];
    made.extend(
        steps
            .into_par_iter()
            .enumerate()
            .filter_map(|(i, step)| {
                let made = build(from, step, seed, round, i as u32).ok()?;
                let mixture = if from.gaussian { made } else { made.map(heavy_only).ok()? };
                Some(Candidate { step, mixture })
            })
            .collect::<Vec<_>>(),
    );
    made
}

/// Where Gaussian components are not wanted, the lightest tails that count as Student-t.
fn heavy_only(component: &Component) -> Component {
    if component.df() > GAUSSIAN_DF { component.with_df(GAUSSIAN_DF) } else { component.clone() }
}

fn plan(from: &Incumbent) -> Vec<Step> {
    let k = from.mixture.len();
    let room = from.most_components;
    let mut steps = vec![Step::CrossEntropy, Step::Anchored, Step::Firm, Step::Moments, Step::Variance];
    if from.fit_df {
        steps.extend(TAILS.into_iter().filter(|df| from.gaussian || df.is_finite()).map(Step::Tails));
    }
    if from.mixture.dim() > 1 && !from.diagonal {
        steps.push(Step::Diagonal);
    }
    if k > 1 {
        steps.extend([Step::Pooled, Step::Merged]);
    }
    let several = (k / 3).max(1);
    let mut births = vec![1, several];
    births.dedup();
    steps.extend(births.into_iter().filter(|n| k + n <= room).map(Step::Born));
    if k + several <= room {
        steps.push(Step::Split);
    }
    if from.reseed && k < 8 {
        let mut counts = vec![1, 4.min(room), (k + 2).min(room), (2 * k).min(room)];
        counts.sort_unstable();
        counts.dedup();
        steps.extend(counts.into_iter().map(Step::Seeded));
    }
    steps
}

/// The method of a kind of fit: the same for the training copy and for the polish on all points.
fn method(step: Step, d: usize, fit_df: bool, diagonal: bool) -> Method {
    let (per_dimension, iterations) = match step {
        Step::Anchored | Step::Pooled => (ANCHORED, 8),
        Step::Firm => (FIRM, 8),
        Step::Variance => (1.0, 6),
        Step::Split | Step::Seeded(_) | Step::Born(_) => (0.5, GROWTH_ITERATIONS),
        _ => (LOOSE, 8),
    };
    Method {
        strength: per_dimension * d as f64,
        anchor: if step == Step::Pooled { Anchor::Pooled } else { Anchor::Own },
        iterations,
        fit_df,
        diagonal: diagonal || step == Step::Diagonal,
    }
}

fn build(from: &Incumbent, step: Step, seed: u64, round: u32, index: u32) -> Result<Mixture, RefitError> {
    let mut rng = stream(seed, Purpose::Refit, round, 16 + index);
    let (now, points, weights) = (from.mixture, from.points, from.weights);
    let slopes = from.gradients;
    let how = method(step, now.dim(), from.fit_df, from.diagonal);
    match step {
        Step::Kept => Ok(now.clone()),
        Step::Tails(df) => Ok(now.map(|c| c.with_df(df))?),
        Step::Moments => moments_fit(now, points, weights, how),
        Step::Variance => em(now, points, &half_variance_weights(from), None, how),
        Step::Merged => em(&births::merge_nearest(now)?, points, weights, slopes, how),
        Step::Split => {
            let chances: Vec<f64> = now.shares().iter().map(|a| a + 1e-3).collect();
            let which = distinct(&chances, (now.len() / 3).max(1), &mut rng);
            em(&births::split(now, points, weights, &which, &mut rng)?, points, weights, slopes, how)
        }
        Step::Seeded(count) => {
            let df = now.components()[0].df();
            em(&births::seed(points, weights, count, df, &mut rng)?, points, weights, slopes, how)
        }
        Step::Born(count) => {
            let lacking = lacking(from);
            em(&births::residual(now, points, weights, &lacking, count, &mut rng)?, points, weights, slopes, how)
        }
        _ => em(now, points, weights, slopes, how),
    }
}

/// The winner once more on all points, training and held out, by its own method. Candidates that froze locations and scales
/// (kept, tails) are not polished: that would move what they left alone.
#[must_use]
pub fn polish(
    winner: &Candidate,
    points: &Points,
    weights: &[f64],
    slopes: Option<&Points>,
    fit_df: bool,
    diagonal: bool,
) -> Mixture {
    let slopes = if winner.step == Step::Variance { None } else { slopes };
    let how = Method { iterations: 4, ..method(winner.step, winner.mixture.dim(), fit_df, diagonal) };
    let how = if matches!(winner.step, Step::Split | Step::Seeded(_) | Step::Born(_) | Step::Variance) {
        Method { strength: LOOSE * winner.mixture.dim() as f64, ..how }
    } else {
        how
    };
    let polished = match winner.step {
        Step::Kept | Step::Tails(_) => return winner.mixture.clone(),
        Step::Moments => moments_fit(&winner.mixture, points, weights, how),
        _ => em(&winner.mixture, points, weights, slopes, how),
    };
    polished.unwrap_or_else(|_| winner.mixture.clone())
}

/// Weights times the square root of target over proposal, no point above 2 percent.
fn half_variance_weights(from: &Incumbent) -> Vec<f64> {
    let raw: Vec<f64> =
        from.weights.iter().zip(from.log_ratios).map(|(w, l)| w * exp(0.5 * l.clamp(-50.0, 50.0))).collect();
    let cap = 0.02 * raw.iter().sum::<f64>();
    let capped: Vec<f64> = raw.iter().map(|v| v.min(cap)).collect();
    let sum: f64 = capped.iter().sum();
    capped.iter().map(|v| v / sum).collect()
}

/// The part `w (1 - q / target)+` of every weight that the proposal does not account for.
fn lacking(from: &Incumbent) -> Vec<f64> {
    from.weights.iter().zip(from.log_ratios).map(|(w, l)| w * (1.0 - exp(-l.clamp(-50.0, 50.0))).max(0.0)).collect()
}

fn distinct(chances: &[f64], count: usize, rng: &mut crate::numeric::Stream) -> Vec<usize> {
    let mut left = chances.to_vec();
    let mut chosen = Vec::with_capacity(count);
    while chosen.len() < count.min(chances.len()) {
        let k = births::pick(&left, rng);
        left[k] = 0.0;
        chosen.push(k);
    }
    chosen
}

/// Most components that training points of these weights can carry.
#[must_use]
pub fn most_components(weights: &[f64], d: usize) -> usize {
    const MOST: usize = 40;
    ((effective(weights) / (1.5 * (d as f64 + 2.0))) as usize).clamp(1, MOST)
}
