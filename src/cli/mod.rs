//! The command line: one file a subcommand, each with its `Args` and its `run`.
//!
//! Results go to standard output, everything else to standard error. No arithmetic lives here: commands read, call the
//! library, and write.

mod check;
mod check_model;
mod check_report;
mod compare;
mod compare_report;
mod compare_watch;
mod density;
mod draw;
mod ending;
mod estimate;
mod estimate_files;
mod estimate_report;
mod figures;
mod header;
mod layout;
mod model_desk;
mod numbers;
mod options;
mod output;
mod plan;
mod points;
mod pool;
mod problem_file;
mod producing;
mod raise;
mod rare_report;
mod round_lines;
mod run_files;
mod schema;
mod screen;
mod signals;
mod source;
mod tune;
mod tune_report;
mod watch;

use clap::Parser;
use clap::Subcommand;
use ending::Ending;
use std::process::ExitCode;

/// Finds, proves and uses the distribution to sample from.
///
/// State an integral in a problem file (a normalising constant, a posterior, an expected cost, a failure probability);
/// `tune` finds the proposal to sample from, shows how even its weights are, and says whether the numbers may be reported.
#[derive(Debug, Parser)]
#[command(name = "evenpoise", version, max_term_width = 80, disable_help_subcommand = true)]
struct Cli {
    #[command(subcommand)]
    command: Command,
}

#[derive(Debug, Subcommand)]
enum Command {
    Tune(Box<tune::Args>),
    Check(check::Args),
    Plan(plan::Args),
    Draw(draw::Args),
    Density(density::Args),
    Estimate(Box<estimate::Args>),
    Pool(pool::Args),
    Compare(compare::Args),
    Points(points::Args),
    Figures(figures::Args),
    Schema(schema::Args),
}

/// Parses, dispatches, tells the error if there was one, and gives the exit status.
pub(crate) fn main() -> ExitCode {
    let parsed = match Cli::try_parse() {
        Ok(parsed) => parsed,
        Err(error) => return ending::of_parsing(&error),
    };
    let ended = match &parsed.command {
        Command::Tune(args) => tune::run(args),
        Command::Check(args) => check::run(args),
        Command::Plan(args) => plan::run(args),
        Command::Draw(args) => draw::run(args),
        Command::Density(args) => density::run(args),
        Command::Estimate(args) => estimate::run(args),
        Command::Pool(args) => pool::run(args),
        Command::Compare(args) => compare::run(args),
        Command::Points(args) => points::run(args),
        Command::Figures(args) => figures::run(args),
        Command::Schema(args) => schema::run(args),
    };
    ending::status(ended.unwrap_or_else(Ending::from))
}
