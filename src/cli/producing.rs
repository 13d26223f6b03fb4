//! Production at work: steps as long as they are pleasant, state saved every few seconds, progress shown.

use super::estimate_report;
use super::model_desk::ModelDesk;
use super::screen::Screen;
use super::signals::Signals;
use super::source::Source;
use evenpoise::model::ModelError;
use evenpoise::problem::EvaluateError;
use evenpoise::problem::ModelMeans;
use evenpoise::problem::Problem;
use evenpoise::production::Job;
use evenpoise::production::Outcome;
use evenpoise::production::Production;
use evenpoise::production::ProductionError;
use evenpoise::production::Sums;
use evenpoise::production::course_point;
use evenpoise::production::course_stop;
use evenpoise::report::kept_columns;
use evenpoise::store::CourseRow;
use evenpoise::store::EstimateState;
use evenpoise::store::PointsFile;
use evenpoise::store::finite;
use std::ops::Range;
use std::path::PathBuf;
use std::time::Duration;
use std::time::Instant;

/// A step is made to take about so long.
const STEP: Duration = Duration::from_millis(250);
/// Draws of the first step, and of the longest.
const FIRST_STEP: u64 = 16;
const LONGEST_STEP: u64 = 1 << 16;
/// Draws of a step for each worker of a program, at least: all are busy for most of it.
const WORKER_DRAWS: u64 = 4;
/// The state is saved at least this often; more often in the first seconds.
const SAVE_EVERY: Duration = Duration::from_secs(5);
const FIRST_SAVE: Duration = Duration::from_millis(100);
/// The changing line is worked out no more often than this.
const SHOW_EVERY: Duration = Duration::from_millis(500);

/// Why the work stopped.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) enum Stop {
    /// All draws are made.
    End,
    /// The time is over.
    Time,
    /// A signal came.
    Signal(u8),
    /// The model's answers come from elsewhere, as this text says.
    Waiting(String),
}

/// Who works, and where it stands.
pub(crate) struct Producer<'a> {
    pub(crate) source: &'a Source,
    pub(crate) screen: Screen,
    pub(crate) signals: Signals,
    pub(crate) state_file: PathBuf,
    pub(crate) state: EstimateState,
    pub(crate) kept: Option<PointsFile>,
    /// None without a model outside the problem file.
    pub(crate) desk: Option<ModelDesk>,
    /// Seconds after which to end.
    pub(crate) time: Option<f64>,
    clock: Clock,
}

/// What was when.
struct Clock {
    began: Instant,
    /// Seconds spent before this process.
    before: f64,
    saved: Instant,
    save_after: Duration,
    shown: Instant,
    step: u64,
    /// No step is made shorter.
    least: u64,
}

impl<'a> Producer<'a> {
    pub(crate) fn new(
        source: &'a Source,
        screen: Screen,
        signals: Signals,
        state_file: PathBuf,
        state: EstimateState,
    ) -> Self {
        let now = Instant::now();
        let least = least_step(&source.problem);
        let clock = Clock {
            began: now,
            before: state.seconds,
            saved: now,
            save_after: FIRST_SAVE,
            shown: now,
            step: FIRST_STEP.max(least),
            least,
        };
        Self { source, screen, signals, state_file, state, kept: None, desk: None, time: None, clock }
    }

    /// Makes the draws of `part` that the state does not hold yet.
    pub(crate) fn work(&mut self, part: Range<u64>) -> anyhow::Result<Stop> {
        let job = self.state.parts.job.clone();
        let empty = Sums::new(&job);
        let sums = std::mem::replace(&mut self.state.parts.sums, empty);
        let mut next = part.start + sums.draws;
        // A file of questions holds as many as it can.
        let in_files = self.source.problem.model_means() == Some(&ModelMeans::Exchange);
        let mut production = Production::new(&self.source.problem, &self.source.mixture, &job, sums);
        let stop = loop {
            if next >= part.end {
                break Stop::End;
            }
            if let Some(signal) = self.signals.came() {
                break Stop::Signal(signal);
            }
            if self.time.is_some_and(|time| self.seconds() >= time) {
                self.note(&job, production.sums());
                break Stop::Time;
            }
            let began = Instant::now();
            let noted = if in_files { part.end } else { part.start + course_stop(next - part.start) };
            let until = (next + self.clock.step).min(part.end).min(noted);
            let step = match production.advance(next..until) {
                Ok(step) => step,
                Err(error) => match self.halted(&error) {
                    Some(stop) => break stop,
                    None => return Err(self.failed(error, production.sums())),
                },
            };
            self.told();
            if let Some(kept) = &mut self.kept {
                kept.append(&kept_columns(&self.source.problem, &step))?;
            }
            self.clock.paced(began.elapsed(), until - next);
            next = until;
            if next == noted || next == part.end {
                self.note(&job, production.sums());
            }
            self.show(&job, production.sums(), part.end - part.start);
            if self.clock.saved.elapsed() >= self.clock.save_after {
                self.save(production.sums())?;
                self.finished()?;
            }
        };
        self.told();
        self.state.parts.sums = production.sums().clone();
        self.state.parts.sums.settle();
        match stop {
            Stop::Signal(_) | Stop::Waiting(_) => {
                self.save(production.sums())?;
                self.desk.as_ref().map_or(Ok(()), ModelDesk::keep)?;
            }
            Stop::End | Stop::Time => self.finished()?,
        }
        self.screen.clear();
        Ok(stop)
    }

    /// Seconds spent, by this process and those before.
    pub(crate) fn seconds(&self) -> f64 {
        self.clock.before + self.clock.began.elapsed().as_secs_f64()
    }

    fn save(&mut self, sums: &Sums) -> anyhow::Result<()> {
        self.state.parts.sums = sums.clone();
        self.state.parts.sums.settle();
        self.state.seconds = self.seconds();
        if let Some(kept) = &mut self.kept {
            self.state.points_bytes = kept.sync()?;
        }
        self.state.write(&self.state_file)?;
        self.clock.saved = Instant::now();
        self.clock.save_after = (2 * self.clock.save_after).min(SAVE_EVERY);
        Ok(())
    }

    /// What stopped the model in the middle of a step, where that is no failure.
    fn halted(&self, error: &ProductionError) -> Option<Stop> {
        let ProductionError::Evaluation(EvaluateError::Model(error)) = error else { return None };
        match error {
            ModelError::Interrupted => Some(Stop::Signal(self.signals.came().unwrap_or_default())),
            ModelError::Waiting { text, .. } => Some(Stop::Waiting(text.clone())),
            _ => None,
        }
    }

    /// Keeps what was made before the model failed: with a mended one the work can go on.
    fn failed(&mut self, error: ProductionError, sums: &Sums) -> anyhow::Error {
        self.screen.clear();
        self.told();
        let kept = matches!(error, ProductionError::Evaluation(_)) && sums.draws > 0;
        let saved = if kept { self.save(sums) } else { Ok(()) };
        saved.err().unwrap_or_else(|| error.into())
    }

    /// Shows what the model has to say.
    fn told(&mut self) {
        let notices = self.desk.as_ref().map(ModelDesk::notices).unwrap_or_default();
        notices.iter().for_each(|notice| self.screen.keep(notice));
    }

    /// The sums hold all that the model has answered.
    fn finished(&self) -> anyhow::Result<()> {
        Ok(self.desk.as_ref().map_or(Ok(()), ModelDesk::finished)?)
    }

    /// Notes a point of the course, once.
    fn note(&mut self, job: &Job, sums: &Sums) {
        if self.state.in_pilot || self.state.course.last().is_some_and(|row| row.draws >= sums.draws) {
            return;
        }
        let (value, se, interval) = course_point(job, sums);
        self.state.course.push(CourseRow {
            draws: sums.draws,
            value: finite(value),
            se: finite(se),
            interval_95: interval.map(finite),
        });
        if estimate_report::is_worth_a_line(sums.draws) {
            self.screen.keep(&estimate_report::progress(job, &Outcome::of(job, sums)));
        }
    }

    fn show(&mut self, job: &Job, sums: &Sums, all: u64) {
        if !self.screen.is_live() || self.clock.shown.elapsed() < SHOW_EVERY {
            return;
        }
        self.clock.shown = Instant::now();
        let line = estimate_report::progress(job, &Outcome::of(job, sums));
        let left = estimate_report::left(sums.draws, job.draws.map(|_| all), self.clock.began.elapsed().as_secs_f64());
        self.screen.now(&format!("{line}{left}"));
    }
}

impl Clock {
    /// The next step is longer where this one was short, and shorter where it was long.
    fn paced(&mut self, took: Duration, draws: u64) {
        if took > 2 * STEP {
            self.step = (draws / 2).max(self.least);
        } else if 2 * took < STEP && draws == self.step {
            self.step = (2 * self.step).min(LONGEST_STEP);
        }
    }
}

/// Draws of a step, at least. Where files are answered, a step is a file: it is as long as can be.
fn least_step(problem: &Problem) -> u64 {
    match problem.model_means() {
        Some(ModelMeans::Program(program)) => WORKER_DRAWS * program.workers as u64,
        Some(ModelMeans::Exchange) => LONGEST_STEP,
        Some(ModelMeans::Library { .. }) | None => 1,
    }
}
