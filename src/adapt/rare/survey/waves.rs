//! The survey where questions go out together: a wave of searches from the scouts, then one from what they left open.

use super::Searching;
use super::{LATER, NEAR_COSINE, ON_THE_WAY, REPEATS_UNEXPLAINED, distance, pick};
use crate::adapt::TuneError;
use crate::adapt::rare::design_point::{self, Ended};
use crate::adapt::rare::mode;
use crate::adapt::rare::scores::{Look, Scores};
use crate::adapt::together::together;
use crate::numeric::Points;
use crate::numeric::linear::dot;

/// Searches of the first wave, and evaluations that one should be able to spend: so many slopes with their trials.
const FEWEST: u64 = 2;
const MOST: u64 = 6;
const STEPS: u64 = 8;
/// Share of the searches' evaluations that the first wave may take.
const FIRST_SHARE: f64 = 0.6;

/// Where a search begins: at a point that was looked at, or at one that is yet to be.
enum Start {
    Seen(Look),
    New(Vec<f64>),
}

impl Searching<'_, '_> {
    /// All of the survey, in few batches.
    pub(super) fn run_together(&mut self) -> Result<(), TuneError> {
        if !self.log_weights.iter().any(|l| l.is_finite()) {
            return Ok(());
        }
        let left = self.cap.saturating_sub(self.target.spent());
        let one = STEPS * (self.target.slope_cost() + 2);
        let count = (left / one).clamp(FEWEST, MOST) as usize;
        let starts = self.first_starts(count)?;
        self.wave(&starts, (FIRST_SHARE * left as f64) as u64)?;
        self.connect_at_once()?;
        let hunts = self.hunts()?;
        self.wave(&hunts, self.cap.saturating_sub(self.target.spent()) / 2)?;
        let next: Vec<Start> =
            self.found.iter().flat_map(|p| self.target.neighbours(&p.at)).map(Start::New).take(MOST as usize).collect();
        self.wave(&next, self.cap.saturating_sub(self.target.spent()))?;
        self.connect_at_once()
    }

    /// The middle in many dimensions, the nearest hits that lie in different directions, then scouts by their weight.
    fn first_starts(&mut self, count: usize) -> Result<Vec<Start>, TuneError> {
        let mut starts = Vec::new();
        if self.plan.directions && self.target.is_event() {
            starts.push(Start::New(vec![0.0; self.target.dim()]));
        }
        let hunts = self.hunts()?;
        starts.extend(hunts.into_iter().take(count / 2));
        let mut log_weights = self.log_weights.clone();
        while starts.len() < count {
            let i = pick(&log_weights, &mut self.rng);
            starts.push(Start::Seen(self.scout(i)?));
            for k in 0..self.rows.len() {
                if dot(&self.rows[k], &self.rows[i]) > NEAR_COSINE * self.norms[k] * self.norms[i] {
                    log_weights[k] -= LATER;
                }
            }
        }
        Ok(starts)
    }

    /// Scouts that count and that nothing explains, the nearest first, one of every direction.
    fn hunts(&mut self) -> Result<Vec<Start>, TuneError> {
        let mut starts = Vec::new();
        while starts.len() < REPEATS_UNEXPLAINED {
            let Some(i) = self.nearest_unexplained() else { break };
            self.mark_direction(i);
            starts.push(Start::Seen(self.scout(i)?));
        }
        Ok(starts)
    }

    /// One search from every start, which together spend at most `allowed`.
    fn wave(&mut self, starts: &[Start], allowed: u64) -> Result<(), TuneError> {
        let room = 3 * (self.target.slope_cost() + 2);
        let count = starts.len().min(usize::try_from(allowed / room).unwrap_or(usize::MAX));
        if count == 0 {
            return Ok(());
        }
        let each = allowed / count as u64;
        let (target, problem, event) = (self.target, self.target.problem(), self.target.is_event());
        let ends: Vec<Ended> = together(
            count,
            |k, line| {
                let own = Scores::on_line(problem, line);
                let start = match &starts[k] {
                    Start::Seen(look) => look.clone(),
                    Start::New(at) => own.look(at)?,
                };
                if event { design_point::search(&own, start, each) } else { mode::climb(&own, start, each) }
            },
            |u| target.answers(u).map(|answered| answered.by_point()),
        )?;
        for ended in ends {
            self.searches += 1;
            self.keep(ended)?;
        }
        Ok(())
    }

    /// Every unexplained scout against the found point in the most similar direction, all ways in one batch.
    fn connect_at_once(&mut self) -> Result<(), TuneError> {
        let room = self.cap.saturating_sub(self.target.spent()) / ON_THE_WAY.len() as u64;
        let most = usize::try_from(room.min(self.plan.budget / super::BUDGET_PER_CHECK)).unwrap_or(usize::MAX);
        let open: Vec<usize> = (0..self.rows.len()).filter(|&i| self.unexplained[i]).take(most).collect();
        if open.is_empty() || self.found.is_empty() {
            return Ok(());
        }
        let mut between = Points::new(self.target.dim());
        for &i in &open {
            let row = &self.rows[i];
            let nearest = self.found.iter().min_by(|a, b| distance(&a.at, row).total_cmp(&distance(&b.at, row)));
            let Some(point) = nearest else { continue };
            for share in ON_THE_WAY {
                let at: Vec<f64> = point.at.iter().zip(row).map(|(p, u)| p + share * (u - p)).collect();
                between.push(&at);
            }
        }
        let hit = self.target.answers(&between)?.hit;
        for (way, &i) in hit.chunks_exact(ON_THE_WAY.len()).zip(&open) {
            if way.iter().all(|&h| h) {
                self.unexplained[i] = false;
            }
        }
        Ok(())
    }
}
