//! `evenpoise figures`: the figures of a run again, in another size or form, or of other variables.

use super::ending::Ending;
use super::ending::Misuse;
use super::output;
use super::problem_file;
use super::run_files;
use super::run_files::Form;
use anyhow::Context;
use evenpoise::figures::Style;
use evenpoise::problem::Aim;
use evenpoise::problem::Problem;
use evenpoise::report::DrawsTable;
use evenpoise::report::RareFacts;
use evenpoise::report::RunData;
use evenpoise::report::draw_figures;
use evenpoise::report::read_evaluations;
use evenpoise::report::read_rounds;
use evenpoise::store::read_proposal;
use std::fs;
use std::path::PathBuf;

/// Draw the figures of RUN again.
#[derive(Debug, clap::Args)]
pub(crate) struct Args {
    /// Folder of a finished run.
    run: PathBuf,
    /// Form of the files.
    #[arg(long, value_enum, default_value = "png")]
    format: Form,
    /// Width, from 8cm to 60cm (or in mm or in).
    #[arg(long, default_value = "16cm", value_parser = centimetres)]
    width: f64,
    /// Dots per inch of PNG files, from 72 to 1200.
    #[arg(long, default_value_t = 300.0)]
    dpi: f64,
    /// Variables to show, by name [default: all, up to 24].
    #[arg(long, value_delimiter = ',', value_name = "NAMES")]
    variables: Vec<String>,
    /// Folder for the files [default: RUN/figures].
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
}

pub(crate) fn run(args: &Args) -> anyhow::Result<Ending> {
    let style = Style::new(args.width, args.dpi).map_err(|error| Misuse(error.to_string()))?;
    let problem = problem_file::read(&args.run.join(problem_file::COPY), Clone::clone)?;
    let chosen = args.variables.iter().map(|name| place(&problem, name)).collect::<Result<Vec<_>, _>>()?;
    let proposal = read_proposal(&args.run)?;
    let evaluations = read_evaluations(&args.run.join("summary.json"))?;
    let rare = (problem.aim() != Aim::Density).then(|| RareFacts::read(&args.run, problem.aim())).transpose()?;
    let data = RunData {
        problem: &problem,
        mixture: &proposal.mixture()?,
        draws: &DrawsTable::read(&args.run.join("points.csv"), &problem)?,
        rounds: &read_rounds(&args.run.join("rounds.csv"))?,
        survey_evaluations: evaluations.survey,
        evaluations: evaluations.all,
        rare: rare.as_ref(),
    };
    let folder = args.out.clone().unwrap_or_else(|| args.run.join("figures"));
    fs::create_dir_all(&folder).with_context(|| format!("cannot create the folder {}", folder.display()))?;
    let drawings = draw_figures(&data, &chosen, &style);
    run_files::write_figures(&folder, &drawings, args.format)?;
    let names: Vec<&str> = drawings.iter().map(|drawing| drawing.name.as_str()).collect();
    output::say(&format!("{}: {}\n", folder.display(), names.join(", ")))?;
    Ok(Ending::Done)
}

/// The place of a variable.
fn place(problem: &Problem, name: &str) -> Result<usize, Misuse> {
    let known = || problem.variables().iter().map(|v| v.name.as_str()).collect::<Vec<_>>().join(", ");
    let at = problem.variables().iter().position(|variable| variable.name == name);
    at.ok_or_else(|| Misuse(format!("no variable is called {name:?}; there are {}", known())))
}

/// A width in centimetres from `8cm`, `80mm` or `3.2in`.
fn centimetres(text: &str) -> Result<f64, String> {
    let units = [("cm", 1.0), ("mm", 0.1), ("in", 2.54)];
    let read = units.iter().find_map(|(unit, size)| {
        let number: f64 = text.strip_suffix(unit)?.trim().parse().ok()?;
        Some(number * size)
    });
    read.ok_or_else(|| "expected a width as 8cm, 80mm or 3.2in".to_owned())
}
