//! One row a round: `rounds.csv`.

use crate::adapt::Round;
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

/// What the figures need of a round.
#[derive(Debug, Clone, PartialEq)]
pub struct RoundRow {
    /// Number, from 1.
    pub round: u32,
    /// Evaluations spent at its end.
    pub evaluations: f64,
    /// Tempering exponent.
    pub exponent: Option<f64>,
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
    write_atomically(path, |out| {
        let mut writer = csv::Writer::from_writer(out);
        writer.write_record(ROUND_COLUMNS).map_err(io::Error::from)?;
        for row in round_rows(rounds) {
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
    let text =
        std::fs::read(path).map_err(|source| StoreError::Io { action: "read", path: path.to_path_buf(), source })?;
    let table = Table::read_csv(without_texts(&text).as_slice(), path)?;
    let column = |name: &str| {
        table.column(name).ok_or_else(|| StoreError::Table {
            path: path.to_path_buf(),
            line: 1,
            reason: format!("column {name:?} is missing"),
        })
    };
    let known = |x: f64| x.is_finite().then_some(x);
    let (rounds, evaluations, exponent) = (column("round")?, column("evaluations")?, column("exponent")?);
    let (components, predicted) = (column("components")?, column("predicted_ess_fraction")?);
    let (fresh, fresh_se, variance) = (column("ess_fraction")?, column("ess_fraction_se")?, column("weight_variance")?);
    Ok((0..table.len())
        .map(|i| RoundRow {
            round: rounds[i] as u32,
            evaluations: evaluations[i],
            exponent: known(exponent[i]),
            components: components[i] as usize,
            predicted_ess_fraction: known(predicted[i]),
            ess_fraction: known(fresh[i]),
            ess_fraction_se: known(fresh_se[i]),
            weight_variance: known(variance[i]),
        })
        .collect())
}

impl From<&Round> for RoundRow {
    fn from(round: &Round) -> Self {
        let score = round.score.as_ref();
        let known = |x: f64| x.is_finite().then_some(x);
        Self {
            round: round.index,
            evaluations: round.evaluations as f64,
            exponent: known(round.exponent),
            components: round.components,
            predicted_ess_fraction: round.predicted_ess_fraction.and_then(known),
            ess_fraction: score.and_then(|s| known(s.ess_fraction)),
            ess_fraction_se: score.and_then(|s| s.ess_fraction_se).and_then(known),
            weight_variance: score.and_then(|s| known(s.weight_variance)),
        }
    }
}

fn cells(round: &Round) -> Vec<String> {
    let number = |x: f64| if x.is_nan() { String::new() } else { decimal(x) };
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
    for record in reader.records().map_while(Result::ok) {
        let kept =
            record.iter().enumerate().filter(|(k, _)| ROUND_COLUMNS.get(*k) != Some(&"step")).map(|(_, cell)| cell);
        // Writing to memory cannot fail, and a table that misses a row is told by whoever reads it.
        let _ = writer.write_record(kept);
    }
    writer.into_inner().unwrap_or_default()
}
