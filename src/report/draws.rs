//! The report draws as a table in natural units: `points.csv`.

use crate::adapt::Tuning;
use crate::adapt::rare::RareDraws;
use crate::numeric::Points;
use crate::numeric::exp;
use crate::numeric::ln;
use crate::problem::Aim;
use crate::problem::Problem;
use crate::store::StoreError;
use crate::store::Table;
use crate::store::TableWriter;
use crate::store::write_atomically;
use std::path::Path;

/// The last columns: log densities in natural units, and the weight.
const LAST: [&str; 3] = ["log_target", "log_proposal", "weight"];
/// Columns before those where the aim is a probability or an expectation.
const RARE: [&str; 4] = ["round", "value", "score_distance", "log_nominal"];

/// Every report draw: the variables in natural units, the estimates, `log_target`, `log_proposal` and `weight`, which
/// sums to one.
///
/// `log_target` is `-inf` outside the support and NaN where the model failed; both have weight zero. For a probability
/// or an expectation the draws are those that the answer rests on, the target is the nominal density times the event or
/// the size of the integrand, and four columns come before: the round, the margin or integrand, the distance from the origin
/// of the standard normal scores, and `log_nominal`; the weight is the draw's part of the answer, by its size.
#[derive(Debug, Clone, PartialEq)]
pub struct DrawsTable {
    table: Table,
    n_variables: usize,
    /// Columns of variables and estimates.
    n_own: usize,
    rare: bool,
}

impl DrawsTable {
    /// The table of a tuning's report draws.
    #[must_use]
    pub fn of(problem: &Problem, tuning: &Tuning) -> Self {
        let report = &tuning.report;
        let natural = problem.to_natural(&report.points);
        let jacobian = problem.log_jacobian(&report.points);
        let in_natural_units = |log: &[f64]| log.iter().zip(&jacobian).map(|(l, j)| l - j).collect::<Vec<f64>>();
        let mut columns: Vec<Vec<f64>> = (0..natural.dim()).map(|j| natural.coordinate(j)).collect();
        columns.extend(tuning.estimate_values.iter().cloned());
        columns.push(in_natural_units(&report.log_target));
        columns.push(in_natural_units(&report.log_proposal));
        columns.push(weights(&report.log_weights()));
        Self::of_columns(problem, columns)
    }

    /// The table of the draws that a probability or an expectation rests on.
    #[must_use]
    pub fn of_rare(problem: &Problem, draws: &RareDraws) -> Self {
        let natural = problem.to_natural(&draws.points);
        let jacobian = problem.log_jacobian(&draws.points);
        let in_natural_units = |log: &[f64]| log.iter().zip(&jacobian).map(|(l, j)| l - j).collect::<Vec<f64>>();
        let event = problem.aim() == Aim::Probability;
        let log_size = |(value, &hit): (&f64, &bool)| match (value.is_nan(), hit) {
            (true, _) => f64::NAN,
            (false, false) => f64::NEG_INFINITY,
            (false, true) => {
                if event {
                    0.0
                } else {
                    ln(value.abs())
                }
            }
        };
        let log_nominal = in_natural_units(&draws.log_nominal);
        let sizes = draws.value.iter().zip(&draws.hit).map(log_size);
        let log_target = log_nominal.iter().zip(sizes).map(|(nominal, size)| nominal + size).collect();
        let contributed: f64 = draws.contributions.iter().map(|c| c.abs()).sum();
        let share = |c: &f64| if contributed > 0.0 { c.abs() / contributed } else { 0.0 };
        let mut columns: Vec<Vec<f64>> = (0..natural.dim()).map(|j| natural.coordinate(j)).collect();
        columns.extend(problem.estimates(&draws.points));
        columns.push(draws.round.iter().map(|&round| f64::from(round)).collect());
        columns.push(draws.value.clone());
        columns.push(distances(&draws.points));
        columns.push(log_nominal);
        columns.push(log_target);
        columns.push(in_natural_units(&draws.log_proposal));
        columns.push(draws.contributions.iter().map(share).collect());
        Self::of_columns(problem, columns)
    }

    fn of_columns(problem: &Problem, columns: Vec<Vec<f64>>) -> Self {
        Self {
            table: Table { names: names(problem), columns },
            n_variables: problem.dim(),
            n_own: problem.dim() + problem.estimate_names().len(),
            rare: problem.aim() != Aim::Density,
        }
    }

    /// Reads the table of a run of `problem`.
    ///
    /// # Errors
    /// As [`Table::read`]; [`StoreError::Table`] where the columns are not those of the problem.
    pub fn read(path: &Path, problem: &Problem) -> Result<Self, StoreError> {
        let table = Table::read(path)?;
        let expected = names(problem);
        if table.names != expected {
            let reason = format!("the columns are not those of the problem; expected {}", expected.join(","));
            return Err(StoreError::Table { path: path.to_path_buf(), line: 1, reason });
        }
        Ok(Self { table, ..Self::of_columns(problem, Vec::new()) })
    }

    /// Writes the table, whole or not at all.
    ///
    /// # Errors
    /// [`StoreError::Io`] with the path.
    pub fn write(&self, path: &Path) -> Result<(), StoreError> {
        write_table(path, &self.table, &(0..self.len()).collect::<Vec<_>>())
    }

    /// Number of draws.
    #[must_use]
    pub fn len(&self) -> usize {
        self.table.len()
    }

    /// Whether there is no draw.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.table.is_empty()
    }

    /// The names of the columns.
    #[must_use]
    pub fn names(&self) -> &[String] {
        &self.table.names
    }

    /// Values of variable `j` in natural units.
    #[must_use]
    pub fn variable(&self, j: usize) -> &[f64] {
        &self.table.columns[j]
    }

    /// Names of the estimates with their values.
    pub fn estimates(&self) -> impl Iterator<Item = (&str, &[f64])> {
        (self.n_variables..self.n_own).map(|k| (self.table.names[k].as_str(), self.table.columns[k].as_slice()))
    }

    /// Margins or integrands, distances from the origin of the scores, and whether each draw counts: in the event, or with an
    /// integrand that is not zero. For a probability or an expectation alone.
    #[must_use]
    pub fn rare(&self) -> Option<(&[f64], &[f64], Vec<bool>)> {
        let first = self.table.columns.len() - RARE.len() - LAST.len();
        let target = &self.table.columns[first + RARE.len()];
        let counts = target.iter().map(|&log| log > f64::NEG_INFINITY).collect();
        self.rare.then(|| (self.table.columns[first + 1].as_slice(), self.table.columns[first + 2].as_slice(), counts))
    }

    /// Weights, summing to one.
    #[must_use]
    pub fn weights(&self) -> &[f64] {
        &self.table.columns[self.table.columns.len() - 1]
    }

    /// Log weights, target over proposal; `-inf` where the model failed. For a probability or an expectation: logarithms of
    /// the parts of the answer, whose rounds count differently.
    #[must_use]
    pub fn log_weights(&self) -> Vec<f64> {
        if self.rare {
            return self.weights().iter().map(|&w| ln(w)).collect();
        }
        let k = self.table.columns.len() - LAST.len();
        let (target, proposal) = (&self.table.columns[k], &self.table.columns[k + 1]);
        target.iter().zip(proposal).map(|(t, q)| if t.is_nan() { f64::NEG_INFINITY } else { t - q }).collect()
    }

    /// Writes the variables and estimates of the draws in `chosen`, which may name a draw more than once.
    ///
    /// # Errors
    /// [`StoreError::Io`] with the path.
    pub fn write_chosen(&self, path: &Path, chosen: &[usize]) -> Result<(), StoreError> {
        let kept = self.n_own;
        let table = Table { names: self.table.names[..kept].to_vec(), columns: self.table.columns[..kept].to_vec() };
        write_table(path, &table, chosen)
    }
}

/// Distances of points from the origin.
fn distances(points: &Points) -> Vec<f64> {
    let square = |i| points.point(i).iter().map(|u| u * u).sum::<f64>();
    (0..points.len()).map(|i| square(i).sqrt()).collect()
}

fn write_table(path: &Path, table: &Table, rows: &[usize]) -> Result<(), StoreError> {
    write_atomically(path, |out| {
        let mut writer = TableWriter::for_path(path, out, &table.names, rows.len() as u64)?;
        let mut row = vec![0.0; table.columns.len()];
        for &i in rows {
            for (cell, column) in row.iter_mut().zip(&table.columns) {
                *cell = column[i];
            }
            writer.row(&row)?;
        }
        writer.finish()
    })
}

/// Shares of the total weight; all zero where nothing has weight.
fn weights(log_weights: &[f64]) -> Vec<f64> {
    let largest = log_weights.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    if largest == f64::NEG_INFINITY {
        return vec![0.0; log_weights.len()];
    }
    let relative: Vec<f64> = log_weights.iter().map(|l| exp(l - largest)).collect();
    let log_sum = largest + ln(relative.iter().sum());
    log_weights.iter().map(|l| exp(l - log_sum)).collect()
}

/// Names of all columns. A variable or estimate that has the name of one of the last gets an underscore.
fn names(problem: &Problem) -> Vec<String> {
    let own = problem.variables().iter().map(|v| v.name.clone()).chain(problem.estimate_names());
    let last: Vec<&str> = if problem.aim() == Aim::Density { LAST.to_vec() } else { [&RARE[..], &LAST].concat() };
    let mut names: Vec<String> = Vec::new();
    for mut name in own {
        while last.contains(&name.as_str()) || names.contains(&name) {
            name.push('_');
        }
        names.push(name);
    }
    names.extend(last.into_iter().map(str::to_owned));
    names
}
