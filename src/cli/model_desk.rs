//! Where a model outside the problem file reports while a run works: its standard error goes to the run's log, its
//! mishaps to the screen, its answers to the file of the unfinished batch.

use super::signals::Signals;
use evenpoise::model::Surroundings;
use evenpoise::numeric::Points;
use evenpoise::problem::ModelMeans;
use evenpoise::problem::Problem;
use evenpoise::store::ExchangeFolder;
use evenpoise::store::StoreError;
use evenpoise::store::Unfinished;
use std::fs::File;
use std::fs::OpenOptions;
use std::io::Write;
use std::path::Path;
use std::sync::Arc;
use std::sync::Mutex;
use std::sync::MutexGuard;
use std::sync::PoisonError;
use std::time::Duration;
use std::time::Instant;

/// Work that a kill may cost.
const WRITE_AFTER: Duration = Duration::from_millis(200);
/// Bytes of standard error that the log takes.
const LOG_BYTES: usize = 1 << 20;

/// What is shared with the model's threads.
struct Desk {
    log: Mutex<Log>,
    notices: Mutex<Vec<String>>,
    unfinished: Mutex<Keeping>,
    signals: Signals,
}

struct Log {
    file: Option<File>,
    left: usize,
    left_out: usize,
}

struct Keeping {
    file: Unfinished,
    written: Instant,
    refused: Option<StoreError>,
}

/// The desk of one run.
pub(crate) struct ModelDesk(Arc<Desk>);

impl ModelDesk {
    /// Connects the model of a problem to the folder of a run, in which `unfinished` keeps answers of a batch that is not whole;
    /// none where the target is formulas alone.
    pub(crate) fn open(
        problem: &Problem,
        folder: &Path,
        unfinished: &str,
        signals: &Signals,
    ) -> Result<Option<Self>, StoreError> {
        let Some(means) = problem.model_means() else { return Ok(None) };
        let (file, found) = Unfinished::open(&folder.join(unfinished))?;
        found.iter().for_each(|(questions, answers)| problem.remember_unfinished(questions, answers));
        let log = OpenOptions::new().create(true).append(true).open(folder.join("log.txt")).ok();
        let desk = Arc::new(Desk {
            log: Mutex::new(Log { file: log, left: LOG_BYTES, left_out: 0 }),
            notices: Mutex::default(),
            unfinished: Mutex::new(Keeping { file, written: Instant::now(), refused: None }),
            signals: signals.clone(),
        });
        if *means == ModelMeans::Exchange {
            problem.send_by(Box::new(ExchangeFolder::new(folder)));
        }
        let surroundings: Arc<dyn Surroundings> = desk.clone();
        problem.connect(&surroundings);
        Ok(Some(Self(desk)))
    }

    /// What the user should see, once.
    pub(crate) fn notices(&self) -> Vec<String> {
        std::mem::take(&mut *lock(&self.0.notices))
    }

    /// The batch at hand is in the journal.
    pub(crate) fn finished(&self) -> Result<(), StoreError> {
        let mut keeping = lock(&self.0.unfinished);
        keeping.written = Instant::now();
        keeping.refused.take().map_or(Ok(()), Err)?;
        keeping.file.clear()
    }

    /// Writes what the log left out, and whatever was answered of a batch that will not be finished now.
    pub(crate) fn keep(&self) -> Result<(), StoreError> {
        let mut log = lock(&self.0.log);
        if log.left_out > 0 {
            let line = format!("[model] ({} bytes more are left out)", log.left_out);
            log.left_out = 0;
            if let Some(file) = &mut log.file {
                // A log that cannot be written is no reason to lose a run.
                let _ = writeln!(file, "{line}");
            }
        }
        drop(log);
        let mut keeping = lock(&self.0.unfinished);
        keeping.refused.take().map_or(Ok(()), Err)?;
        keeping.file.write()
    }
}

impl Surroundings for Desk {
    fn said(&self, line: &str) {
        let mut log = lock(&self.log);
        if line.len() >= log.left {
            log.left = 0;
            log.left_out += line.len() + 1;
            return;
        }
        log.left -= line.len() + 1;
        if let Some(file) = &mut log.file {
            let _ = file.write_all(format!("[model] {line}\n").as_bytes());
        }
    }

    fn notice(&self, text: &str) {
        lock(&self.notices).push(text.to_owned());
    }

    fn keeps_answers(&self) -> bool {
        true
    }

    fn answered(&self, inputs: &Points, answers: &Points) {
        let mut keeping = lock(&self.unfinished);
        keeping.file.add(inputs, answers);
        if keeping.written.elapsed() >= WRITE_AFTER {
            keeping.written = Instant::now();
            let written = keeping.file.write();
            keeping.refused = keeping.refused.take().or(written.err());
        }
    }

    fn interrupted(&self) -> bool {
        self.signals.came().is_some()
    }
}

/// A panic elsewhere leaves what is kept here as good as it was.
fn lock<T>(mutex: &Mutex<T>) -> MutexGuard<'_, T> {
    mutex.lock().unwrap_or_else(PoisonError::into_inner)
}
