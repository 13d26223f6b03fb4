//! A tuning's journal: answers go in before they are used, and come out again when the tuning is resumed.
//!
//! **When the disk is waited for.** Every batch is handed to the system at once, so a kill of the process loses nothing.
//! Waiting for the disk guards against a power cut, and costs milliseconds: after every batch it would cost a survey of
//! a formula, which asks thousands of times for one point, many times the formula itself. So the disk is waited for
//! whenever the model has worked [`SYNC_AFTER`] since the last time: answers of a slow model are safe before they are
//! used, and a power cut costs a fast one no more than that much work.

use super::Journal;
use super::JournalBatch;
use super::JournalColumn;
use super::JournalHeader;
use super::StoreError;
use crate::adapt::Answers;
use crate::adapt::Batch;
use crate::adapt::Stage;
use crate::numeric::Points;
use crate::numeric::Purpose;
use std::collections::VecDeque;
use std::path::Path;
use std::time::Duration;

/// Work of the model that a power cut may cost.
const SYNC_AFTER: Duration = Duration::from_millis(50);
/// Name of the gradients among a record's columns.
const GRADIENT: &str = "gradient";
/// Name of the values of a model outside the problem file.
const MODEL: &str = "model";
/// Columns of the margins or integrands, and of the hits (1 or 0).
const VALUE: &str = "value";
const HIT: &str = "hit";

/// Records batches; when a run is resumed, first gives back those that were recorded before.
#[derive(Debug)]
pub struct Recorder {
    journal: Journal,
    replay: VecDeque<JournalBatch>,
    /// Records given back so far.
    given: u64,
    /// Points in the records that were found.
    found: u64,
    unsynced: Duration,
    diverged: bool,
}

impl Recorder {
    /// Begins the journal of a new run.
    ///
    /// # Errors
    /// As [`Journal::create`].
    pub fn begin(folder: &Path, header: &JournalHeader) -> Result<Self, StoreError> {
        Ok(Self::of(Journal::create(folder, header)?, Vec::new()))
    }

    /// Goes on with the journal of a run; also what was dropped from a damaged end, in a sentence.
    ///
    /// # Errors
    /// As [`Journal::open_for_resume`].
    pub fn resume(folder: &Path, header: &JournalHeader) -> Result<(Self, Option<String>), StoreError> {
        let (journal, replay) = Journal::open_for_resume(folder, header)?;
        Ok((Self::of(journal, replay.batches), replay.dropped))
    }

    fn of(journal: Journal, batches: Vec<JournalBatch>) -> Self {
        let found = batches.iter().map(|batch| batch.points.len() as u64).sum();
        Self { journal, replay: batches.into(), given: 0, found, unsynced: Duration::ZERO, diverged: false }
    }

    /// Points whose answers were found in the journal.
    #[must_use]
    pub fn found(&self) -> u64 {
        self.found
    }

    /// Whether nothing was recorded, now or before.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.journal.is_empty()
    }

    /// Whether recorded batches are still to be given back.
    #[must_use]
    pub fn replaying(&self) -> bool {
        !self.replay.is_empty()
    }

    /// The answers to a batch that were recorded before, if the next record is that of this very batch.
    pub fn recorded(&mut self, batch: &Batch) -> Option<Answers> {
        self.recorded_with_model(batch).map(|(answers, _)| answers)
    }

    /// [`Recorder::recorded`], and the values of a model that were recorded beside the answers.
    pub fn recorded_with_model(&mut self, batch: &Batch) -> Option<(Answers, Option<Points>)> {
        let record = self.replay.pop_front()?;
        self.given += 1;
        if !is_of(&record, batch) {
            self.diverged = true;
            return None;
        }
        let column = |name: &str| record.columns.iter().find(|column| column.name == name).map(|c| c.values.clone());
        let numbers = |name: &str| column(name).map(|c| c.coordinate(0)).unwrap_or_default();
        let model = column(MODEL);
        let answers = Answers {
            gradients: column(GRADIENT).unwrap_or_else(|| Points::new(batch.points.dim())),
            value: numbers(VALUE),
            hit: numbers(HIT).iter().map(|&h| h > 0.0).collect(),
            log_density: record.log_density,
        };
        Some((answers, model))
    }

    /// Records answers that the model worked `worked` for.
    ///
    /// # Errors
    /// [`StoreError::Io`] when the disk refuses; [`StoreError::Diverged`] when the journal held other points.
    pub fn record(&mut self, batch: &Batch, answers: &Answers, worked: Duration) -> Result<(), StoreError> {
        self.record_with_model(batch, answers, None, worked)
    }

    /// [`Recorder::record`], with the values of a model beside the answers.
    ///
    /// # Errors
    /// As [`Recorder::record`].
    pub fn record_with_model(
        &mut self,
        batch: &Batch,
        answers: &Answers,
        model: Option<&Points>,
        worked: Duration,
    ) -> Result<(), StoreError> {
        if self.diverged {
            return Err(StoreError::Diverged { path: self.journal.path().to_path_buf(), record: self.given });
        }
        let (purpose, round) = place(batch.stage);
        let mut columns = columns_of(batch, answers);
        columns.extend(model.map(|values| JournalColumn { name: MODEL.to_owned(), values: values.clone() }));
        self.journal.write(&JournalBatch {
            purpose,
            round,
            points: batch.points.clone(),
            log_density: answers.log_density.clone(),
            columns,
        })?;
        self.unsynced += worked;
        if self.unsynced >= SYNC_AFTER { self.sync() } else { Ok(()) }
    }

    /// Waits until everything recorded is on the disk.
    ///
    /// # Errors
    /// As [`Journal::sync`].
    pub fn sync(&mut self) -> Result<(), StoreError> {
        self.unsynced = Duration::ZERO;
        self.journal.sync()
    }
}

/// What was answered beside the log densities.
fn columns_of(batch: &Batch, answers: &Answers) -> Vec<JournalColumn> {
    let column = |name: &str, values: Points| JournalColumn { name: name.to_owned(), values };
    let mut columns = Vec::new();
    if batch.gradient {
        columns.push(column(GRADIENT, answers.gradients.clone()));
    }
    if !answers.value.is_empty() {
        columns.push(column(VALUE, Points::from_rows(1, &answers.value)));
    }
    if !answers.hit.is_empty() {
        let flags: Vec<f64> = answers.hit.iter().map(|&h| f64::from(u8::from(h))).collect();
        columns.push(column(HIT, Points::from_rows(1, &flags)));
    }
    columns
}

/// Where in a tuning a batch belongs.
fn place(stage: Stage) -> (Purpose, u32) {
    match stage {
        Stage::Survey => (Purpose::Survey, 0),
        Stage::Round(round) => (Purpose::Round, round),
        Stage::Births(round) => (Purpose::Refit, round),
        Stage::Confirm => (Purpose::Confirm, 0),
        Stage::Report => (Purpose::Report, 0),
        Stage::Compare => (Purpose::Compare, 0),
    }
}

/// Whether a record is that of a batch, to the last bit.
fn is_of(record: &JournalBatch, batch: &Batch) -> bool {
    let same_points = |a: &Points, b: &Points| {
        (a.len(), a.dim()) == (b.len(), b.dim())
            && (0..a.dim()).all(|j| (0..a.len()).all(|i| a.get(i, j).to_bits() == b.get(i, j).to_bits()))
    };
    let gradient = record.columns.iter().any(|column| column.name == GRADIENT);
    (record.purpose, record.round) == place(batch.stage)
        && gradient == batch.gradient
        && same_points(&record.points, batch.points)
}

#[cfg(test)]
mod tests {
    use super::*;
    use tempfile::tempdir;

    fn batch(points: &Points, gradient: bool) -> Batch<'_> {
        Batch { stage: Stage::Births(3), first: 0, points, gradient }
    }

    #[test]
    fn answers_come_back_and_other_points_are_refused() {
        let folder = tempdir().unwrap();
        let header = JournalHeader::default();
        let points = Points::from_rows(2, &[0.1, 0.2, 0.3, 0.4]);
        let answers = Answers {
            log_density: vec![-1.0, f64::NEG_INFINITY],
            gradients: points.clone(),
            value: vec![0.5, -1.0],
            hit: vec![true, false],
        };
        let plain =
            Answers { log_density: vec![2.0, 3.0], gradients: Points::new(2), value: Vec::new(), hit: Vec::new() };
        let mut recorder = Recorder::begin(folder.path(), &header).unwrap();
        assert_eq!(recorder.recorded(&batch(&points, true)), None);
        recorder.record(&batch(&points, true), &answers, Duration::ZERO).unwrap();
        recorder.record(&batch(&points, false), &plain, Duration::from_secs(1)).unwrap();
        drop(recorder);

        let (mut recorder, dropped) = Recorder::resume(folder.path(), &header).unwrap();
        assert_eq!((recorder.found(), dropped), (4, None));
        assert_eq!(recorder.recorded(&batch(&points, true)), Some(answers));
        assert!(recorder.replaying());
        assert_eq!(recorder.recorded(&batch(&points, false)), Some(plain.clone()));
        assert!(!recorder.replaying());
        recorder.record(&batch(&points, false), &plain, Duration::ZERO).unwrap();
        drop(recorder);

        let (mut recorder, _) = Recorder::resume(folder.path(), &header).unwrap();
        let other = Points::from_rows(2, &[0.1, 0.2, 0.3, 0.5]);
        assert_eq!(recorder.recorded(&batch(&other, true)), None);
        let error = recorder.record(&batch(&other, true), &plain, Duration::ZERO).unwrap_err();
        assert!(matches!(error, StoreError::Diverged { record: 1, .. }), "{error}");
    }
}
