//! How fast a program answers, by the size of its batches.

use super::ProgramModel;
use super::ProgramSpec;
use crate::model::Model;
use crate::model::ModelError;
use crate::numeric::Points;
use std::time::Duration;
use std::time::Instant;

/// The pace of a program with batches of one size.
#[derive(Debug, Clone, PartialEq)]
pub struct Throughput {
    /// Points of a batch.
    pub batch: usize,
    /// Points that were asked.
    pub points: usize,
    /// Points a second.
    pub rate: f64,
}

/// Measures the workers of `spec` with batches of each of `sizes` in turn, each for about `patience` and at least one batch; a size
/// that would take longer than that by the pace before it is left out.
///
/// The processes are started, and have answered a first point, before the clock is.
///
/// # Errors
/// What keeps the program from answering.
///
/// # Panics
/// `points` is empty.
pub fn throughput(
    spec: &ProgramSpec,
    points: &Points,
    sizes: &[usize],
    patience: Duration,
) -> Result<Vec<Throughput>, ModelError> {
    let mut measured: Vec<Throughput> = Vec::new();
    for &batch in sizes {
        let slow = |before: &Throughput| batch as f64 / before.rate > 4.0 * patience.as_secs_f64();
        if measured.last().is_some_and(slow) {
            break;
        }
        let model = ProgramModel::new(ProgramSpec { batch: Some(batch), ..spec.clone() });
        let together = batch * spec.workers.max(1);
        let rows: Vec<usize> = (0..together).map(|i| i % points.len()).collect();
        let asked = points.select(&rows);
        let mut answers = Points::zeros(model.n_outputs(), together);
        // One point a worker, at least, before the clock is started.
        let warm = points.select(&rows[..together.min(8 * spec.workers.max(1))]);
        model.evaluate(&warm, &mut Points::zeros(model.n_outputs(), warm.len()))?;
        let (began, mut count) = (Instant::now(), 0);
        while count == 0 || began.elapsed() < patience {
            model.evaluate(&asked, &mut answers)?;
            count += together;
        }
        let rate = count as f64 / began.elapsed().as_secs_f64().max(1e-9);
        measured.push(Throughput { batch, points: count, rate });
    }
    Ok(measured)
}
