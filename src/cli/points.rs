//! `evenpoise points`: the weighted draws of a run, or evenly weighted ones.

use super::ending::Ending;
use super::ending::Misuse;
use super::numbers::count;
use super::options;
use super::output;
use super::problem_file;
use evenpoise::problem::TuningKeys;
use evenpoise::report::DrawsTable;
use evenpoise::store::read_proposal;
use evenpoise::weights::resample;
use std::path::PathBuf;

/// Evenly weighted points out of the report draws of RUN, for tools that know no weights.
///
/// Without --even: the report draws as they are, each with its weight.
#[derive(Debug, clap::Args)]
pub(crate) struct Args {
    /// Folder of a finished run.
    run: PathBuf,
    /// How many evenly weighted points.
    #[arg(long, value_name = "N", value_parser = options::count_from::<1>)]
    even: Option<u64>,
    /// File for the points, CSV or .npy [default: RUN/even.csv with --even, RUN/weighted.csv without].
    #[arg(long, value_name = "FILE")]
    out: Option<PathBuf>,
    /// Seed of the resampling [default: that of the run].
    #[arg(long, value_name = "N", requires = "even")]
    seed: Option<u64>,
}

pub(crate) fn run(args: &Args) -> anyhow::Result<Ending> {
    let problem = problem_file::read(&args.run.join(problem_file::COPY), TuningKeys::clone)?;
    let draws = DrawsTable::read(&args.run.join("points.csv"), &problem)?;
    let Some(even) = args.even else {
        let out = args.out.clone().unwrap_or_else(|| args.run.join("weighted.csv"));
        draws.write(&out)?;
        output::say(&format!("{}: {} weighted points\n", out.display(), count(draws.len() as u64)))?;
        return Ok(Ending::Done);
    };
    let seed = args.seed.map_or_else(|| read_proposal(&args.run).map(|proposal| proposal.made_by.seed), Ok)?;
    let mut chosen = resample(draws.weights(), usize::try_from(even)?, seed);
    if chosen.is_empty() {
        return Err(Misuse("no draw of this run has any weight; tune it again with a larger budget".to_owned()).into());
    }
    let out = args.out.clone().unwrap_or_else(|| args.run.join("even.csv"));
    draws.write_chosen(&out, &chosen)?;
    chosen.dedup();
    let distinct = count(chosen.len() as u64);
    output::say(&format!("{}: {} points of even weight, {distinct} of them distinct\n", out.display(), count(even)))?;
    Ok(Ending::Done)
}
