//! `evenpoise draw`: production points for other programs.

use super::ending::Ending;
use super::ending::Misuse;
use super::options;
use super::signals::Signals;
use super::source;
use super::source::Source;
use anyhow::Context;
use evenpoise::production::CHUNK;
use evenpoise::production::MOST_DRAWS;
use evenpoise::production::Sequence;
use evenpoise::production::Shard;
use evenpoise::report::draw_columns;
use evenpoise::report::draw_names;
use evenpoise::store::TableWriter;
use evenpoise::store::write_atomically;
use std::io;
use std::io::Write;
use std::ops::Range;
use std::path::PathBuf;

/// Draws that are made, and written, together.
const TOGETHER: u64 = 16 * CHUNK;

/// Production points from a proposal, with its log density at each.
///
/// Columns: the variables in natural units, `log_proposal`, and `log_nominal` where variables have distributions. The log weight
/// of a point is the log target less `log_proposal`. Points are the same whoever draws which shard; shards follow each other.
#[derive(Debug, clap::Args)]
pub(crate) struct Args {
    /// Folder of a run, or a proposal.json.
    #[arg(value_name = "RUN")]
    run: PathBuf,
    /// How many points, all shards together.
    #[arg(long, value_name = "N", value_parser = options::count_from::<1>)]
    draws: u64,
    /// File for the points, CSV or .npy [default: standard output, as CSV].
    #[arg(long, value_name = "FILE")]
    out: Option<PathBuf>,
    /// Seed of the draws [default: that of the run].
    #[arg(long, value_name = "N")]
    seed: Option<u64>,
    /// Only part I of N equal parts, I from 1.
    #[arg(long, value_name = "I/N", value_parser = options::shard)]
    shard: Option<Shard>,
}

pub(crate) fn run(args: &Args) -> anyhow::Result<Ending> {
    if args.draws > MOST_DRAWS {
        return Err(Misuse(format!("at most {MOST_DRAWS} draws have streams of their own; use several seeds")).into());
    }
    let source = source::of_proposal(&args.run)?;
    let signals = Signals::listen().context("listening for signals")?;
    let sequence = Sequence::new(&source.mixture, args.seed.unwrap_or(source.file.made_by.seed), 1, Some(args.draws));
    let part = args.shard.unwrap_or(Shard::WHOLE).part(args.draws);
    let names = draw_names(&source.problem);
    let written = match &args.out {
        None => {
            let out = io::BufWriter::new(io::stdout().lock());
            TableWriter::csv(out, &names)
                .and_then(|table| stream(table, &source, &sequence, part, &signals))
                .context("cannot write to standard output")
        }
        Some(path) => write_atomically(path, |out| {
            let table = TableWriter::for_path(path, out, &names, part.end - part.start)?;
            stream(table, &source, &sequence, part.clone(), &signals)
        })
        .map_err(anyhow::Error::from),
    };
    match (written, signals.came()) {
        (Err(_), Some(signal)) => Ok(Ending::Interrupted(signal)),
        (Err(error), None) => Err(error),
        (Ok(()), _) => Ok(Ending::Done),
    }
}

/// Draws and writes, a step at a time: memory does not grow with the number.
fn stream<W: Write>(
    mut table: TableWriter<W>,
    source: &Source,
    sequence: &Sequence<'_>,
    part: Range<u64>,
    signals: &Signals,
) -> io::Result<()> {
    let mut row = Vec::new();
    for from in part.clone().step_by(TOGETHER as usize) {
        if signals.came().is_some() {
            return Err(io::Error::other("interrupted"));
        }
        let points = sequence.draw(from..(from + TOGETHER).min(part.end));
        let columns = draw_columns(&source.problem, &points, &source.mixture.log_density(&points));
        for i in 0..points.len() {
            row.clear();
            row.extend(columns.iter().map(|column| column[i]));
            table.row(&row)?;
        }
    }
    table.finish()
}
