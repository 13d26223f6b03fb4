//! `evenpoise schema`: the JSON Schema of a file format.

use super::ending::Ending;
use super::output;

/// Print the JSON Schema of a file format.
#[derive(Debug, clap::Args)]
pub(crate) struct Args {
    /// The format.
    #[arg(value_enum)]
    format: Format,
}

/// A file format.
#[derive(Debug, Clone, Copy, PartialEq, Eq, clap::ValueEnum)]
enum Format {
    /// proposal.json.
    Proposal,
    /// summary.json.
    Summary,
    /// One row of rounds.csv, as an object of its cells.
    Rounds,
    /// comparison.json.
    Comparison,
}

pub(crate) fn run(args: &Args) -> anyhow::Result<Ending> {
    output::say(match args.format {
        Format::Proposal => include_str!("schemas/proposal.json"),
        Format::Summary => include_str!("schemas/summary.json"),
        Format::Rounds => include_str!("schemas/rounds.json"),
        Format::Comparison => include_str!("schemas/comparison.json"),
    })?;
    Ok(Ending::Done)
}
