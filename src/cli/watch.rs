//! The observer of a tuning: journal, signals, clock and screen in one.

use super::layout;
use super::layout::QUIET;
use super::layout::styled;
use super::numbers;
use super::screen::Screen;
use super::signals::Signals;
use evenpoise::BoxError;
use evenpoise::adapt::Answers;
use evenpoise::adapt::Batch;
use evenpoise::adapt::Observer;
use evenpoise::adapt::Round;
use evenpoise::adapt::Stage;
use evenpoise::adapt::Survey;
use evenpoise::report::write_rounds;
use evenpoise::store::Recorder;
use evenpoise::store::StoreError;
use serde::Serialize;
use std::path::PathBuf;
use std::time::Duration;
use std::time::Instant;

/// Columns of the bar of a round.
const BAR: usize = 9;

/// Watches a tuning.
pub(crate) struct Watch {
    pub(crate) recorder: Recorder,
    pub(crate) screen: Screen,
    pub(crate) timings: Timings,
    signals: Signals,
    rounds_file: PathBuf,
    rounds: Vec<Round>,
    budget: u64,
    stage: Stage,
    /// When the batch at hand was asked for.
    asked: Instant,
    /// When the first batch that no journal held was asked for, and evaluations before it.
    working: Option<(Instant, u64)>,
    refused: Option<StoreError>,
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
    /// Seconds of the stage in all.
    seconds: f64,
    #[serde(skip)]
    began: Instant,
}

impl Watch {
    pub(crate) fn new(recorder: Recorder, screen: Screen, signals: Signals, rounds_file: PathBuf, budget: u64) -> Self {
        Self {
            recorder,
            screen,
            timings: Timings::default(),
            signals,
            rounds_file,
            rounds: Vec::new(),
            budget,
            stage: Stage::Survey,
            asked: Instant::now(),
            working: None,
            refused: None,
        }
    }

    /// The rounds' file could not be written.
    pub(crate) fn refused(&mut self) -> Option<StoreError> {
        self.refused.take()
    }

    /// The line that changes.
    fn show_progress(&mut self, spent: u64) {
        let left = self.seconds_left(spent).map_or(String::new(), |s| format!(", about {} left", numbers::duration(s)));
        let line =
            format!("{}: {} of {} evaluations{left}", self.stage, numbers::count(spent), numbers::count(self.budget));
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
            seconds: 0.0,
            began: Instant::now(),
        });
    }

    fn worked(&mut self, time: Duration) {
        if let Some(stage) = self.stages.last_mut() {
            stage.model_seconds += time.as_secs_f64();
        }
    }

    /// The last stage is over.
    pub(crate) fn end(&mut self) {
        if let Some(stage) = self.stages.last_mut() {
            stage.seconds = stage.began.elapsed().as_secs_f64();
        }
        self.total_seconds = self.stages.first().map_or(0.0, |stage| stage.began.elapsed().as_secs_f64());
    }
}

impl Observer for Watch {
    fn recorded(&mut self, batch: &Batch) -> Option<Answers> {
        let answers = self.recorder.recorded(batch);
        self.asked = Instant::now();
        if answers.is_none() && self.working.is_none() {
            self.working = Some((self.asked, batch.first));
        }
        answers
    }

    fn evaluated(&mut self, batch: &Batch, answers: &Answers) -> Result<(), BoxError> {
        let worked = self.asked.elapsed();
        self.timings.worked(worked);
        self.recorder.record(batch, answers, worked)?;
        self.show_progress(batch.first + batch.points.len() as u64);
        self.refused.take().map_or(Ok(()), |error| Err(error.into()))
    }

    fn stage(&mut self, stage: Stage) {
        self.stage = stage;
        self.timings.begin(stage);
    }

    fn surveyed(&mut self, survey: &Survey) {
        self.screen.keep(&survey_lines(survey));
        self.screen.keep("");
        ROUND_HEADING.iter().for_each(|line| self.screen.keep(&styled(line, QUIET)));
    }

    fn round(&mut self, round: &Round) {
        self.rounds.push(round.clone());
        if let Err(error) = write_rounds(&self.rounds_file, &self.rounds) {
            self.refused = Some(error);
        }
        let left = self.seconds_left(round.evaluations);
        self.screen.keep(&round_line(round, left));
    }

    fn interrupted(&self) -> bool {
        self.signals.came().is_some()
    }
}

/// Titles of the columns of [`round_line`].
const ROUND_HEADING: [&str; 2] = [
    "                      ESS fraction             weight    tail   evalua-     time",
    "round components predicted   fresh           variance   shape     tions     left",
];

/// Climbs, modes, and what could have been missed.
fn survey_lines(survey: &Survey) -> String {
    let modes = match survey.modes.len() {
        0 => "no mode inside the support".to_owned(),
        1 => format!("one mode, reached {} times", survey.modes[0].hits),
        n => {
            let hits: Vec<String> = survey.modes.iter().map(|mode| mode.hits.to_string()).collect();
            format!("{n} modes, reached {} times", layout::cut(&hits.join(", "), 40))
        }
    };
    let missed = if survey.finished == 0 {
        "No climb ended in a mode: what lies elsewhere is not known.".to_owned()
    } else {
        format!(
            "A mode whose basin takes {} of the start would have been met with 95 %; a smaller one could have been missed.",
            numbers::percent(survey.basin_share)
        )
    };
    let found =
        format!("{} climbs in {} evaluations: {modes}. {missed}", survey.starts, numbers::count(survey.evaluations));
    layout::hanging("Survey    ", &found)
}

/// One round in a line.
fn round_line(round: &Round, seconds_left: Option<f64>) -> String {
    let score = round.score.as_ref();
    let predicted = round.predicted_ess_fraction.map_or("-".to_owned(), |share| numbers::percent_fixed(share.min(1.0)));
    let fresh = score.map_or(f64::NAN, |score| score.ess_fraction);
    let known = |read: &dyn Fn(&evenpoise::weights::Score) -> f64, write: &dyn Fn(f64) -> String| {
        score.map(read).filter(|x| x.is_finite()).map_or("-".to_owned(), write)
    };
    format!(
        "{:>5} {:>10} {:>9} {:>7} {} {:>8} {:>7} {:>9} {:>8}",
        round.index,
        round.components,
        predicted,
        numbers::percent_fixed(fresh),
        layout::bar(fresh, BAR),
        known(&|s| s.weight_variance, &|x| numbers::significant(x, 3)),
        known(&|s| s.tail.shape, &|x| format!("{x:.2}")),
        numbers::count(round.evaluations),
        seconds_left.map_or("-".to_owned(), numbers::duration),
    )
}
