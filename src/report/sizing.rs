//! How many production draws a run asks for, out of the files it left.

use crate::numeric::Points;
use crate::numeric::exp;
use crate::numeric::ln;
use crate::problem::Aim;
use crate::problem::Problem;
use crate::production::Sized;
use crate::production::WeightedDraws;
use crate::production::size;
use crate::proposal::Mixture;
use crate::store::StoreError;
use crate::store::Table;
use crate::weights::TailShape;
use crate::weights::verdict::checks::{TAIL_COUNTS_SHARE, TAIL_MAY_COUNT_VARIANCE};
use std::path::Path;

/// What production of a run will take.
#[derive(Debug, Clone, PartialEq)]
pub struct ProductionPlan {
    /// The answer first, then the estimates.
    pub quantities: Vec<SizedQuantity>,
    /// Weighted draws that the plan rests on.
    pub draws: u64,
    /// Seconds of the model for an evaluation, as the tuning had them.
    pub model_seconds: Option<f64>,
}

/// A quantity with its predicted variance.
#[derive(Debug, Clone, PartialEq)]
pub struct SizedQuantity {
    /// Its name.
    pub name: String,
    /// Its relative variance a draw.
    pub sized: Sized,
    /// Draws below which its tail would not settle, whatever the variance.
    pub tail_draws: f64,
}

impl SizedQuantity {
    /// Draws for a relative error: as predicted, and with nine chances in ten (the upper bound of the variance, or the tail where
    /// it asks for more).
    #[must_use]
    pub fn draws(&self, relative_error: f64) -> [f64; 2] {
        let [predicted, upper] = self.sized.draws(relative_error);
        let tail = if self.tail_draws.is_nan() { f64::INFINITY } else { self.tail_draws };
        [predicted, upper.max(tail)]
    }
}

/// The plan of a run, from its `points.csv` and `timings.json`.
///
/// # Errors
/// [`StoreError`] where `points.csv` cannot be read or is not of this problem.
pub fn plan_of(
    folder: &Path,
    problem: &Problem,
    mixture: &Mixture,
    evaluations: u64,
) -> Result<ProductionPlan, StoreError> {
    let path = folder.join("points.csv");
    let table = Table::read(&path)?;
    let names = problem.estimate_names();
    let d = problem.dim();
    let fewest = d + names.len() + 3;
    let column = |name: &str| {
        table.column(name).filter(|_| table.columns.len() >= fewest).ok_or_else(|| StoreError::Table {
            path: path.clone(),
            line: 1,
            reason: format!("no column is named {name:?}; this is no file of report draws of the problem"),
        })
    };
    let (log_target, log_proposal) = (column("log_target")?, column("log_proposal")?);
    let mut natural = Points::zeros(d, table.len());
    for j in 0..d {
        (0..table.len()).for_each(|i| natural.set(i, j, table.columns[j][i]));
    }
    let points = problem.to_coordinates(&natural);
    let own_ratio: Vec<f64> = log_target.iter().zip(log_proposal).map(|(t, q)| t - q).collect();
    let (log_ratio, ages) = if problem.aim() == Aim::Density {
        (own_ratio.clone(), vec![1.0; table.len()])
    } else {
        let jacobian = problem.log_jacobian(&points);
        let log_q = mixture.log_density(&points);
        let ratio = (0..table.len()).map(|i| log_target[i] + jacobian[i] - log_q[i]).collect();
        (ratio, ages(column("round")?))
    };
    // A point whose coordinates are not finite lies on an end of its support; it has no weight worth planning with.
    let finite = |i: usize| log_ratio[i].is_finite() && points.point(i).iter().all(|z| z.is_finite());
    let largest = own_ratio.iter().copied().filter(|l| l.is_finite()).fold(f64::NEG_INFINITY, f64::max);
    let raw: Vec<f64> =
        (0..table.len()).map(|i| if finite(i) { ages[i] * exp(own_ratio[i] - largest) } else { 0.0 }).collect();
    let total: f64 = raw.iter().sum();
    let weights: Vec<f64> = raw.iter().map(|w| if total > 0.0 { w / total } else { 0.0 }).collect();
    // Draws of no weight count too: the constant is the mean over all of them.
    let log_mean = largest + ln(total / ages.iter().sum::<f64>());
    let draws = WeightedDraws { points: &points, weights: &weights, log_ratio: &log_ratio, log_mean };
    let tail = |values: Option<&[f64]>| tail_draws(&own_ratio, &ages, largest, values);
    let answer = match problem.aim() {
        Aim::Density => "normalising constant",
        other => other.word(),
    };
    let sized = |name: &str, values: Option<&[f64]>| SizedQuantity {
        name: name.to_owned(),
        sized: size(mixture, &draws, values),
        tail_draws: tail(values),
    };
    let mut quantities = vec![sized(answer, None)];
    quantities.extend(names.iter().enumerate().map(|(k, name)| sized(name, Some(&table.columns[d + k]))));
    Ok(ProductionPlan { quantities, draws: table.len() as u64, model_seconds: model_seconds(folder, evaluations) })
}

/// How much each draw counts: later rounds, whose proposals had learnt more, count more. `rounds` are those of the draws, in order.
fn ages(rounds: &[f64]) -> Vec<f64> {
    let mut ages = Vec::with_capacity(rounds.len());
    for round in rounds.chunk_by(|a, b| a == b) {
        let age = ages.len() as f64 + 0.5 * round.len() as f64;
        ages.extend(std::iter::repeat_n(age, round.len()));
    }
    ages
}

/// Draws that the tail shape of the newest draws asks for; NaN where nothing is known of it.
fn tail_draws(log_ratio: &[f64], ages: &[f64], largest: f64, values: Option<&[f64]>) -> f64 {
    let newest = ages.iter().copied().fold(0.0, f64::max);
    let rows: Vec<usize> = (0..ages.len()).filter(|&i| ages[i] == newest && log_ratio[i].is_finite()).collect();
    let weight = |i: usize| exp(log_ratio[i] - largest);
    let mean = values.map_or(0.0, |f| {
        let mass: f64 = rows.iter().map(|&i| weight(i)).sum();
        rows.iter().map(|&i| weight(i) * f[i]).sum::<f64>() / mass
    });
    let size = |&i: &usize| values.map_or(1.0, |f| (f[i] - mean).abs()) * weight(i);
    let sizes: Vec<f64> = rows.iter().map(size).collect();
    if nearly_even(&rows.iter().map(|&i| weight(i)).collect::<Vec<_>>(), &sizes) {
        return TailShape::of(&[1.0; 100], 0.0).draws_needed;
    }
    TailShape::of(&sizes, 0.0).draws_needed
}

/// Where the verdict lets a heavy but tiny top pass, it asks for no draws either.
fn nearly_even(weights: &[f64], sizes: &[f64]) -> bool {
    let n = weights.len() as f64;
    let (sum, squares) = weights.iter().fold((0.0, 0.0), |(s, q), w| (s + w, q + w * w));
    let largest = sizes.iter().copied().fold(0.0, f64::max) / sizes.iter().sum::<f64>();
    n * squares / (sum * sum) - 1.0 <= TAIL_MAY_COUNT_VARIANCE && largest <= TAIL_COUNTS_SHARE
}

/// Seconds of the model for an evaluation; none without timings.
fn model_seconds(folder: &Path, evaluations: u64) -> Option<f64> {
    let text = std::fs::read_to_string(folder.join("timings.json")).ok()?;
    let value: serde_json::Value = serde_json::from_str(&text).ok()?;
    let stages = value["stages"].as_array()?;
    let seconds: f64 = stages.iter().filter_map(|stage| stage["model_seconds"].as_f64()).sum();
    (evaluations > 0).then(|| seconds / evaluations as f64)
}
