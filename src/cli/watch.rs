//! The observer of a tuning: journal, signals, clock and screen in one.

use super::model_desk::ModelDesk;
use super::numbers;
use super::round_lines;
use super::screen::Screen;
use super::signals::Signals;
use evenpoise::BoxError;
use evenpoise::adapt::Answers;
use evenpoise::adapt::Batch;
use evenpoise::adapt::Observer;
use evenpoise::adapt::Round;
use evenpoise::adapt::Stage;
use evenpoise::adapt::Survey;
use evenpoise::adapt::rare::RareRound;
use evenpoise::adapt::rare::RareSurvey;
use evenpoise::problem::Aim;
use evenpoise::problem::Problem;
use evenpoise::report::write_rare_rounds;
use evenpoise::report::write_rounds;
use evenpoise::store::Recorder;
use evenpoise::store::StoreError;
use serde::Serialize;
use std::path::PathBuf;
use std::time::Duration;
use std::time::Instant;

/// Watches a tuning.
pub(crate) struct Watch<'p> {
    problem: &'p Problem,
    /// None without a model outside the problem file.
    desk: Option<ModelDesk>,
    pub(crate) recorder: Recorder,
    pub(crate) screen: Screen,
    pub(crate) timings: Timings,
    signals: Signals,
    rounds_file: PathBuf,
    aim: Aim,
    rounds: Vec<Round>,
    rare_rounds: Vec<RareRound>,
    budget: u64,
    stage: Stage,
    /// When the batch at hand was asked for.
    asked: Instant,
    /// When the first batch that no journal held was asked for, and evaluations before it.
    working: Option<(Instant, u64)>,
    refused: Option<StoreError>,
    /// Evaluations so far.
    pub(crate) spent: u64,
}

/// Seconds spent, part by part.
#[derive(Debug, Default, Serialize)]
pub(crate) struct Timings {
    stages: Vec<StageTime>,
    /// Seconds from the first evaluation to the last file.
    pub(crate) total_seconds: f64,
}

#[derive(Debug, Serialize)]
struct StageTime {
    stage: String,
    /// Seconds that the model worked.
    model_seconds: f64,
    /// Seconds of everything else: fits, choices, files.
    tool_seconds: f64,
    /// Seconds of the stage in all.
    seconds: f64,
    #[serde(skip)]
    began: Instant,
}

impl<'p> Watch<'p> {
    /// Watches a tuning of that aim and budget; the rounds go to `rounds_file`.
    pub(crate) fn new(
        (recorder, screen, signals): (Recorder, Screen, Signals),
        rounds_file: PathBuf,
        (problem, budget): (&'p Problem, u64),
        desk: Option<ModelDesk>,
    ) -> Self {
        Self {
            problem,
            desk,
            recorder,
            screen,
            timings: Timings::default(),
            signals,
            rounds_file,
            aim: problem.aim(),
            rounds: Vec::new(),
            rare_rounds: Vec::new(),
            budget,
            stage: Stage::Survey,
            asked: Instant::now(),
            working: None,
            refused: None,
            spent: 0,
        }
    }

    /// The rounds' file could not be written.
    pub(crate) fn refused(&mut self) -> Option<StoreError> {
        self.refused.take()
    }

    /// Shows what the model still has to say, and keeps what it answered of a batch that is not whole.
    pub(crate) fn told(&mut self) -> Result<(), StoreError> {
        let Some(desk) = &self.desk else { return Ok(()) };
        desk.notices().iter().for_each(|notice| self.screen.keep(notice));
        desk.keep()
    }

    /// The line that changes.
    fn show_progress(&mut self, spent: u64) {
        let left = self.seconds_left(spent).map_or(String::new(), |s| format!(", about {} left", numbers::duration(s)));
        let times = match self.desk.as_ref().and(self.timings.apart()) {
            Some((model, tool)) => format!(", model {}, rest {}", numbers::duration(model), numbers::duration(tool)),
            None => String::new(),
        };
        let line = format!(
            "{}: {} of {} evaluations{left}{times}",
            self.stage,
            numbers::count(spent),
            numbers::count(self.budget)
        );
        self.screen.now(&line);
    }

    fn seconds_left(&self, spent: u64) -> Option<f64> {
        let (since, before) = self.working?;
        let done = spent.checked_sub(before).filter(|&done| done > 0)?;
        Some(since.elapsed().as_secs_f64() / done as f64 * self.budget.saturating_sub(spent) as f64)
    }
}

impl Timings {
    fn begin(&mut self, stage: Stage) {
        self.end();
        self.stages.push(StageTime {
            stage: stage.to_string(),
            model_seconds: 0.0,
            tool_seconds: 0.0,
            seconds: 0.0,
            began: Instant::now(),
        });
    }

    fn worked(&mut self, time: Duration) {
        if let Some(stage) = self.stages.last_mut() {
            stage.model_seconds += time.as_secs_f64();
        }
    }

    /// Seconds of the model and of everything else, so far.
    fn apart(&self) -> Option<(f64, f64)> {
        let model: f64 = self.stages.iter().map(|stage| stage.model_seconds).sum();
        self.stages.first().map(|first| (model, first.began.elapsed().as_secs_f64() - model))
    }

    /// The last stage is over.
    pub(crate) fn end(&mut self) {
        if let Some(stage) = self.stages.last_mut() {
            stage.seconds = stage.began.elapsed().as_secs_f64();
            stage.tool_seconds = stage.seconds - stage.model_seconds;
        }
        self.total_seconds = self.stages.first().map_or(0.0, |stage| stage.began.elapsed().as_secs_f64());
    }
}

impl Observer for Watch<'_> {
    fn recorded(&mut self, batch: &Batch) -> Option<Answers> {
        let found = self.recorder.recorded_with_model(batch);
        if let Some((_, Some(values))) = &found {
            self.problem.remember(batch.points, values);
        }
        let answers = found.map(|(answers, _)| answers);
        self.spent = batch.first;
        self.asked = Instant::now();
        if answers.is_none() && self.working.is_none() {
            self.working = Some((self.asked, batch.first));
        }
        answers
    }

    fn evaluated(&mut self, batch: &Batch, answers: &Answers) -> Result<(), BoxError> {
        let worked = self.asked.elapsed();
        self.timings.worked(worked);
        let model = self.desk.is_some().then(|| self.problem.model_values(batch.points)).flatten();
        self.recorder.record_with_model(batch, answers, model.as_ref(), worked)?;
        if let Some(desk) = &self.desk {
            desk.finished()?;
            desk.notices().iter().for_each(|notice| self.screen.keep(notice));
        }
        self.spent = batch.first + batch.points.len() as u64;
        self.show_progress(batch.first + batch.points.len() as u64);
        self.refused.take().map_or(Ok(()), |error| Err(error.into()))
    }

    fn stage(&mut self, stage: Stage) {
        self.stage = stage;
        self.timings.begin(stage);
    }

    fn surveyed(&mut self, survey: &Survey) {
        self.screen.keep(&round_lines::survey(survey));
    }

    fn round(&mut self, round: &Round) {
        self.rounds.push(round.clone());
        self.refused = write_rounds(&self.rounds_file, &self.rounds).err();
        let left = self.seconds_left(round.evaluations);
        self.screen.keep(&round_lines::round(round, left));
    }

    fn rare_surveyed(&mut self, survey: &RareSurvey) {
        self.screen.keep(&round_lines::rare_survey(survey, self.aim));
    }

    fn rare_round(&mut self, round: &RareRound) {
        self.rare_rounds.push(round.clone());
        self.refused = write_rare_rounds(&self.rounds_file, self.aim, &self.rare_rounds).err();
        let left = self.seconds_left(round.evaluations);
        self.screen.keep(&round_lines::rare_round(round, left));
    }

    fn interrupted(&self) -> bool {
        self.signals.came().is_some()
    }
}
