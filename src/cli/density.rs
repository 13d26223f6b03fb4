//! `evenpoise density`: the proposal's log density at points from anywhere.

use super::ending::Ending;
use super::source;
use super::source::Source;
use anyhow::Context;
use evenpoise::numeric::Points;
use evenpoise::report::draw_columns;
use evenpoise::report::draw_names;
use evenpoise::report::first_discrete;
use evenpoise::store::StoreError;
use evenpoise::store::Table;
use evenpoise::store::TableWriter;
use evenpoise::store::write_atomically;
use std::io;
use std::io::Write;
use std::path::Path;
use std::path::PathBuf;

/// Log density of a proposal at the points in FILE, in natural units.
///
/// Columns are found by the variables' names, in any order; others are left alone. A .npy file has no names: its columns are the
/// variables in their order. The result has one row a point: `log_proposal`, and `log_nominal` where variables have distributions.
#[derive(Debug, clap::Args)]
pub(crate) struct Args {
    /// Folder of a run, or a proposal.json.
    #[arg(value_name = "RUN")]
    run: PathBuf,
    /// Points, CSV or .npy.
    #[arg(value_name = "FILE")]
    points: PathBuf,
    /// File for the densities, CSV or .npy [default: standard output, as CSV].
    #[arg(long, value_name = "FILE")]
    out: Option<PathBuf>,
}

pub(crate) fn run(args: &Args) -> anyhow::Result<Ending> {
    let source = source::of_proposal(&args.run)?;
    if let Some(name) = first_discrete(&source.problem) {
        anyhow::bail!(
            "`{name}` is discrete: a value of it is an interval of scores over which the proposal's density varies, so a point alone \
             has no single density; use the log_proposal that `evenpoise draw` writes beside each point"
        );
    }
    let natural = natural(&args.points, &source)?;
    let columns = densities(&source, &natural);
    let names = draw_names(&source.problem).split_off(source.problem.dim());
    match &args.out {
        None => TableWriter::csv(io::BufWriter::new(io::stdout().lock()), &names)
            .and_then(|table| rows(table, &columns))
            .context("cannot write to standard output")?,
        Some(path) => write_atomically(path, |out| {
            TableWriter::for_path(path, out, &names, natural.len() as u64).and_then(|table| rows(table, &columns))
        })?,
    }
    Ok(Ending::Done)
}

/// The points of a file, variable by variable.
fn natural(path: &Path, source: &Source) -> anyhow::Result<Points> {
    let table = Table::read(path)?;
    let wrong = |line: u64, reason: String| StoreError::Table { path: path.to_path_buf(), line, reason };
    let variables = source.problem.variables();
    let binary = path.extension().is_some_and(|ending| ending.eq_ignore_ascii_case("npy"));
    if binary && ![variables.len(), draw_names(&source.problem).len()].contains(&table.columns.len()) {
        let expected = format!("{} columns where the proposal has {} variables", table.columns.len(), variables.len());
        return Err(StoreError::Npy { path: path.to_path_buf(), reason: expected }.into());
    }
    let mut points = Points::zeros(variables.len(), table.len());
    for (j, variable) in variables.iter().enumerate() {
        let column = if binary { Some(table.columns[j].as_slice()) } else { table.column(&variable.name) };
        let column = column.ok_or_else(|| {
            wrong(1, format!("no column is named {:?}; the columns are {}", variable.name, table.names.join(", ")))
        })?;
        for (i, &x) in column.iter().enumerate() {
            if x.is_nan() {
                return Err(wrong(i as u64 + 2, format!("{:?} is missing or not a number", variable.name)).into());
            }
            points.set(i, j, x);
        }
    }
    Ok(points)
}

/// Log densities in natural units; `-inf` outside the support, where no coordinate is finite.
fn densities(source: &Source, natural: &Points) -> Vec<Vec<f64>> {
    let coordinates = source.problem.to_coordinates(natural);
    let inside: Vec<usize> =
        (0..natural.len()).filter(|&i| coordinates.point(i).iter().all(|z| z.is_finite())).collect();
    let points = coordinates.select(&inside);
    let d = source.problem.dim();
    let found = draw_columns(&source.problem, &points, &source.mixture.log_density(&points)).split_off(d);
    let spread = |column: Vec<f64>| {
        let mut all = vec![f64::NEG_INFINITY; natural.len()];
        inside.iter().zip(column).for_each(|(&i, l)| all[i] = l);
        all
    };
    found.into_iter().map(spread).collect()
}

fn rows<W: Write>(mut table: TableWriter<W>, columns: &[Vec<f64>]) -> io::Result<()> {
    for i in 0..columns.first().map_or(0, Vec::len) {
        table.row(&columns.iter().map(|column| column[i]).collect::<Vec<_>>())?;
    }
    table.finish()
}
