//! One row a round: `rounds.csv`.

use crate::adapt::Round;
use crate::adapt::rare::RareRound;
use crate::adapt::rare::RareStep;
use crate::problem::Aim;
use crate::store::StoreError;
use crate::store::Table;
use crate::store::decimal;
use crate::store::write_atomically;
use std::io;
use std::path::Path;

/// The columns, in order. A cell is empty where a number is not known; Gaussian components have `inf` degrees of freedom.
pub const ROUND_COLUMNS: [&str; 20] = [
    "round",
    "draws",
    "evaluations",
    "failed",
    "exponent",
    "components",
    "df",
    "step",
    "predicted_ess_fraction",
    "ess_fraction",
    "weight_variance",
    "perplexity",
    "tail_shape",
    "largest_share",
    "log_normaliser",
    "log_normaliser_se",
    "ess_fraction_se",
    "births",
    "halo_share",
    "wide_share",
];

/// The first columns where the aim is a probability or an expectation; `smoothing` is empty where the event itself was
/// aimed at. The value of the round, its standard error and its coefficient of variation follow.
pub const RARE_ROUND_COLUMNS: [&str; 14] = [
    "round",
    "draws",
    "evaluations",
    "failed",
    "smoothing",
    "components",
    "step",
    "predicted_ess_fraction",
    "ess_fraction",
    "weight_variance",
    "largest_share",
    "hits",
    "share",
    "outside_share",
];
const PROBABILITY_COLUMNS: [&str; 3] = ["probability", "probability_se", "probability_cv"];
const EXPECTATION_COLUMNS: [&str; 3] = ["expectation", "expectation_se", "expectation_cv"];

/// What the figures need of a round.
#[derive(Debug, Clone, PartialEq)]
pub struct RoundRow {
    /// Number, from 1.
    pub round: u32,
    /// Evaluations spent at its end.
    pub evaluations: f64,
    /// Tempering exponent, or width of smoothing.
    pub schedule: Option<f64>,
    /// Components.
    pub components: usize,
    /// ESS fraction that was predicted.
    pub predicted_ess_fraction: Option<f64>,
    /// ESS fraction of its own draws.
    pub ess_fraction: Option<f64>,
    /// Standard error of that.
    pub ess_fraction_se: Option<f64>,
    /// Weight variance of its own draws.
    pub weight_variance: Option<f64>,
}

/// The cells of all rounds.
#[must_use]
pub fn round_rows(rounds: &[Round]) -> Vec<Vec<String>> {
    rounds.iter().map(cells).collect()
}

/// Writes the rounds, whole or not at all.
///
/// # Errors
/// [`StoreError::Io`] with the path.
pub fn write_rounds(path: &Path, rounds: &[Round]) -> Result<(), StoreError> {
    write_rows(path, &ROUND_COLUMNS, &round_rows(rounds))
}

/// Writes the rounds of a probability or an expectation, whole or not at all.
///
/// # Errors
/// [`StoreError::Io`] with the path.
pub fn write_rare_rounds(path: &Path, aim: Aim, rounds: &[RareRound]) -> Result<(), StoreError> {
    let mut columns = RARE_ROUND_COLUMNS.to_vec();
    columns.extend(if aim == Aim::Probability { PROBABILITY_COLUMNS } else { EXPECTATION_COLUMNS });
    write_rows(path, &columns, &rounds.iter().map(rare_cells).collect::<Vec<_>>())
}

fn write_rows(path: &Path, columns: &[&str], rows: &[Vec<String>]) -> Result<(), StoreError> {
    write_atomically(path, |out| {
        let mut writer = csv::Writer::from_writer(out);
        writer.write_record(columns).map_err(io::Error::from)?;
        for row in rows {
            writer.write_record(row).map_err(io::Error::from)?;
        }
        writer.flush()
    })
}

/// Reads what the figures need of the rounds.
///
/// # Errors
/// As [`Table::read`].
pub fn read_rounds(path: &Path) -> Result<Vec<RoundRow>, StoreError> {
    let table = numbers_of(path)?;
    let column = |name: &str| {
        table.column(name).ok_or_else(|| StoreError::Table {
            path: path.to_path_buf(),
            line: 1,
            reason: format!("column {name:?} is missing"),
        })
    };
    let known = |x: f64| x.is_finite().then_some(x);
    let (rounds, evaluations) = (column("round")?, column("evaluations")?);
    // At the event itself nothing is smoothed, and the cell is empty.
    let schedule: Vec<Option<f64>> = match table.column("smoothing") {
        Some(smoothing) => smoothing.iter().map(|&width| Some(if width.is_nan() { 0.0 } else { width })).collect(),
        None => column("exponent")?.iter().map(|&exponent| known(exponent)).collect(),
    };
    let (components, predicted) = (column("components")?, column("predicted_ess_fraction")?);
    let (fresh, variance) = (column("ess_fraction")?, column("weight_variance")?);
    let fresh_se = table.column("ess_fraction_se");
    Ok((0..table.len())
        .map(|i| RoundRow {
            round: rounds[i] as u32,
            evaluations: evaluations[i],
            schedule: schedule[i],
            components: components[i] as usize,
            predicted_ess_fraction: known(predicted[i]),
            ess_fraction: known(fresh[i]),
            ess_fraction_se: fresh_se.map(|se| se[i]).and_then(known),
            weight_variance: known(variance[i]),
        })
        .collect())
}

/// Every column of numbers.
pub(super) fn numbers_of(path: &Path) -> Result<Table, StoreError> {
    let text =
        std::fs::read(path).map_err(|source| StoreError::Io { action: "read", path: path.to_path_buf(), source })?;
    Table::read_csv(without_texts(&text).as_slice(), path)
}

impl From<&Round> for RoundRow {
    fn from(round: &Round) -> Self {
        let score = round.score.as_ref();
        let known = |x: f64| x.is_finite().then_some(x);
        Self {
            round: round.index,
            evaluations: round.evaluations as f64,
            schedule: known(round.exponent),
            components: round.components,
            predicted_ess_fraction: round.predicted_ess_fraction.and_then(known),
            ess_fraction: score.and_then(|s| known(s.ess_fraction)),
            ess_fraction_se: score.and_then(|s| s.ess_fraction_se).and_then(known),
            weight_variance: score.and_then(|s| known(s.weight_variance)),
        }
    }
}

impl From<&RareRound> for RoundRow {
    fn from(round: &RareRound) -> Self {
        let known = |x: f64| x.is_finite().then_some(x);
        Self {
            round: round.index,
            evaluations: round.evaluations as f64,
            schedule: Some(round.smoothing.unwrap_or(0.0)),
            components: round.components,
            predicted_ess_fraction: round.predicted_ess_fraction.and_then(known),
            ess_fraction: known(round.ess_fraction),
            ess_fraction_se: None,
            weight_variance: known(variance_of(round.ess_fraction)),
        }
    }
}

/// Variance of weights of mean one whose ESS fraction is given.
fn variance_of(ess_fraction: f64) -> f64 {
    1.0 / ess_fraction - 1.0
}

/// A number in a cell, nothing where it is not known.
fn number(x: f64) -> String {
    if x.is_nan() { String::new() } else { decimal(x) }
}

fn rare_cells(round: &RareRound) -> Vec<String> {
    vec![
        round.index.to_string(),
        round.draws.to_string(),
        round.evaluations.to_string(),
        round.failed.to_string(),
        number(round.smoothing.unwrap_or(f64::NAN)),
        round.components.to_string(),
        rare_step(round.step).to_owned(),
        number(round.predicted_ess_fraction.unwrap_or(f64::NAN)),
        number(round.ess_fraction),
        number(variance_of(round.ess_fraction)),
        number(round.largest_share),
        round.hits.to_string(),
        number(round.share),
        number(round.outside_share),
        number(round.value),
        number(round.se),
        number(round.cv),
    ]
}

/// The kind of refit in a word.
pub(super) fn rare_step(step: RareStep) -> &'static str {
    match step {
        RareStep::Survey => "survey",
        RareStep::Kept => "kept",
        RareStep::Earlier => "earlier",
        RareStep::CrossEntropy => "cross-entropy",
        RareStep::Shift => "shift",
        RareStep::Variance => "variance",
        RareStep::Seeded => "seeded",
        RareStep::Split => "split",
    }
}

fn cells(round: &Round) -> Vec<String> {
    let of =
        |read: &dyn Fn(&crate::weights::Score) -> f64| round.score.as_ref().map_or(String::new(), |s| number(read(s)));
    vec![
        round.index.to_string(),
        round.draws.to_string(),
        round.evaluations.to_string(),
        round.failed.to_string(),
        number(round.exponent),
        round.components.to_string(),
        number(round.df),
        round.step.to_string(),
        number(round.predicted_ess_fraction.unwrap_or(f64::NAN)),
        of(&|s| s.ess_fraction),
        of(&|s| s.weight_variance),
        of(&|s| s.perplexity),
        of(&|s| s.tail.shape),
        of(&|s| s.largest_share),
        of(&|s| s.log_normaliser),
        of(&|s| s.log_normaliser_se),
        of(&|s| s.ess_fraction_se.unwrap_or(f64::NAN)),
        round.births.to_string(),
        number(round.halo_share),
        number(round.wide_share),
    ]
}

/// The bytes of the file without the cells of `step`, the one column of texts.
fn without_texts(bytes: &[u8]) -> Vec<u8> {
    let mut reader = csv::ReaderBuilder::new().has_headers(false).from_reader(bytes);
    let mut writer = csv::Writer::from_writer(Vec::new());
    let mut texts = None;
    for record in reader.records().map_while(Result::ok) {
        let texts = *texts.get_or_insert_with(|| record.iter().position(|title| title == "step"));
        let kept = record.iter().enumerate().filter(|(k, _)| Some(*k) != texts).map(|(_, cell)| cell);
        // Writing to memory cannot fail, and a table that misses a row is told by whoever reads it.
        let _ = writer.write_record(kept);
    }
    writer.into_inner().unwrap_or_default()
}
