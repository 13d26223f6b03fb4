//! What the figures of a probability or an expectation need beside its draws: out of a tuning or out of a run's files alike.

use super::rounds::numbers_of;
use super::summary::read_summary;
use crate::adapt::rare::DesignPoint;
use crate::adapt::rare::RareRound;
use crate::adapt::rare::RareTuning;
use crate::problem::Aim;
use crate::store::StoreError;
use std::path::Path;

/// The answer, the points of the survey, and the rounds.
#[derive(Debug, Clone, PartialEq)]
pub struct RareFacts {
    /// Value, standard error and 95 % interval; none where nothing was met.
    pub answer: Option<(f64, f64, [f64; 2])>,
    /// Design points, or modes of the integrand, the nearest first.
    pub points: Vec<DesignPoint>,
    /// The rounds.
    pub rounds: Vec<RareRow>,
}

/// What the figures need of a round.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RareRow {
    /// Its draws.
    pub draws: usize,
    /// Evaluations spent at its end.
    pub evaluations: usize,
    /// Whether it counts in the answer.
    pub counted: bool,
    /// Its own estimate; NaN where it has none.
    pub value: f64,
    /// Standard error of that.
    pub se: f64,
}

impl RareFacts {
    /// The facts of a tuning.
    #[must_use]
    pub fn of(tuning: &RareTuning) -> Self {
        let answer = tuning.answer.value().map(|v| (v.value, v.se, v.interval_95));
        Self::new(answer, tuning.survey.points.clone(), tuning.rounds.iter().map(RareRow::from).collect())
    }

    /// The facts of a finished run, from its `summary.json` and `rounds.csv`.
    ///
    /// # Errors
    /// [`StoreError::Io`], [`StoreError::Json`], [`StoreError::Table`].
    pub fn read(run: &Path, aim: Aim) -> Result<Self, StoreError> {
        let path = run.join("summary.json");
        let summary = read_summary(&path)?;
        let wrong = |at: &str, reason: String| StoreError::Json { path: path.clone(), at: at.to_owned(), reason };
        let points = serde_json::from_value(summary["survey"]["points"].clone())
            .map_err(|error| wrong("survey.points", error.to_string()))?;
        let answer = &summary[aim.word()];
        let number = |at: &str, value: &serde_json::Value| {
            value
                .as_f64()
                .ok_or_else(|| wrong(&format!("{}.{at}", aim.word()), format!("is {value}; expected a number")))
        };
        let answer = if answer.is_null() {
            None
        } else {
            let interval = &answer["interval_95"];
            let ends = [number("interval_95[0]", &interval[0])?, number("interval_95[1]", &interval[1])?];
            Some((number("value", &answer["value"])?, number("se", &answer["se"])?, ends))
        };
        let path = run.join("rounds.csv");
        let table = numbers_of(&path)?;
        let column = |name: &str| {
            let missing =
                || StoreError::Table { path: path.clone(), line: 1, reason: format!("column {name:?} is missing") };
            table.column(name).ok_or_else(missing)
        };
        let (draws, evaluations, share) = (column("draws")?, column("evaluations")?, column("share")?);
        let (value, se) = (column(aim.word())?, column(&format!("{}_se", aim.word()))?);
        let row = |i: usize| RareRow {
            draws: draws[i] as usize,
            evaluations: evaluations[i] as usize,
            counted: share[i] > 0.0,
            value: value[i],
            se: se[i],
        };
        Ok(Self::new(answer, points, (0..table.len()).map(row).collect()))
    }

    fn new(answer: Option<(f64, f64, [f64; 2])>, mut points: Vec<DesignPoint>, rounds: Vec<RareRow>) -> Self {
        points.sort_by(|a, b| a.distance.total_cmp(&b.distance));
        Self { answer, points, rounds }
    }
}

impl From<&RareRound> for RareRow {
    fn from(round: &RareRound) -> Self {
        Self {
            draws: round.draws as usize,
            evaluations: round.evaluations as usize,
            counted: round.share > 0.0,
            value: round.value,
            se: round.se,
        }
    }
}
