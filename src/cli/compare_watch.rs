//! The observer of a comparison: journal, signals and screen in one.

use super::numbers;
use super::screen::Screen;
use super::signals::Signals;
use evenpoise::BoxError;
use evenpoise::adapt::Answers;
use evenpoise::adapt::Batch;
use evenpoise::adapt::Observer;
use evenpoise::store::Recorder;
use std::time::Instant;

/// Watches a comparison.
pub(crate) struct CompareWatch {
    pub(crate) recorder: Recorder,
    pub(crate) screen: Screen,
    signals: Signals,
    budget: u64,
    contestant: String,
    asked: Instant,
}

impl CompareWatch {
    /// Watches a comparison of that budget.
    pub(crate) fn new(recorder: Recorder, screen: Screen, signals: Signals, budget: u64) -> Self {
        Self { recorder, screen, signals, budget, contestant: String::new(), asked: Instant::now() }
    }
}

impl Observer for CompareWatch {
    fn recorded(&mut self, batch: &Batch) -> Option<Answers> {
        let answers = self.recorder.recorded(batch);
        self.asked = Instant::now();
        answers
    }

    fn evaluated(&mut self, batch: &Batch, answers: &Answers) -> Result<(), BoxError> {
        self.recorder.record(batch, answers, self.asked.elapsed())?;
        let spent = numbers::count(batch.first + batch.points.len() as u64);
        let budget = numbers::count(self.budget);
        self.screen.now(&format!("{}, {}: {spent} of {budget} evaluations", self.contestant, batch.stage));
        Ok(())
    }

    fn contestant(&mut self, name: &str) {
        name.clone_into(&mut self.contestant);
    }

    fn interrupted(&self) -> bool {
        self.signals.came().is_some()
    }
}
