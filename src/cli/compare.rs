//! `evenpoise compare`: which tails, by how much, how sure.

use super::compare_report;
use super::compare_watch::CompareWatch;
use super::ending::Ending;
use super::ending::Misuse;
use super::header;
use super::options;
use super::output;
use super::problem_file;
use super::run_files::Form;
use super::run_files::write_bytes;
use super::run_files::write_figures;
use super::screen::Screen;
use super::signals::Signals;
use super::tune_report;
use anyhow::Context;
use evenpoise::adapt::Settings;
use evenpoise::adapt::TuneError;
use evenpoise::adapt::compare::Comparison;
use evenpoise::adapt::compare::Wanted;
use evenpoise::adapt::compare::compare;
use evenpoise::figures::Style;
use evenpoise::problem::Problem;
use evenpoise::problem::TuningKeys;
use evenpoise::proposal::Mixture;
use evenpoise::report::ComparisonSummary;
use evenpoise::report::comparison_figures;
use evenpoise::report::page::ComparisonPage;
use evenpoise::report::page::PageFigure;
use evenpoise::report::page::comparison_html;
use evenpoise::report::page::comparison_markdown;
use evenpoise::store::ProposalFile;
use evenpoise::store::Recorder;
use evenpoise::store::RunFolder;
use evenpoise::store::read_proposal;
use evenpoise::store::write_json;
use std::path::Path;
use std::path::PathBuf;

/// Compare light and heavy tails for the integral in PROBLEM.
///
/// Gaussian and Student-t mixtures, plain moment matching and any proposals given are scored on fresh draws: which tails, by how
/// much, how sure.
#[derive(Debug, clap::Args)]
pub(crate) struct Args {
    /// Problem file.
    problem: PathBuf,
    /// Folder of the comparison [default: the problem file's name ending in .compare, beside it].
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
    /// Replace the comparison that is in the folder.
    #[arg(long)]
    force: bool,
    /// Evaluations in all, those that make the contestants included [default: the problem's, or 20000].
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u64).range(1..))]
    budget: Option<u64>,
    /// Seed of every draw; the same seed writes the same bytes [default: the problem's, or 1].
    #[arg(long, value_name = "N")]
    seed: Option<u64>,
    /// A Student-t mixture with these degrees of freedom too; may be repeated.
    #[arg(long, value_name = "NUMBER", value_parser = degrees)]
    df: Vec<f64>,
    /// A proposal made before, too: the folder of a run, or its proposal.json; may be repeated.
    #[arg(long, value_name = "RUN")]
    proposal: Vec<PathBuf>,
    /// Print the comparison as JSON on standard output, and nothing else there.
    #[arg(long)]
    json: bool,
}

/// Ending of a comparison's folder.
const COMPARISON: &str = "compare";

pub(crate) fn run(args: &Args) -> anyhow::Result<Ending> {
    let change = |keys: &TuningKeys| TuningKeys {
        budget: args.budget.or(keys.budget),
        seed: args.seed.or(keys.seed),
        extended_from: Vec::new(),
        ..keys.clone()
    };
    let problem = problem_file::read(&args.problem, change)?;
    options::check(problem.tuning())?;
    let given = args.proposal.iter().map(|path| read_given(path, &problem)).collect::<anyhow::Result<Vec<_>>>()?;
    let threads = usize::try_from(problem.tuning().threads.unwrap_or(0))?;
    let threads = rayon::ThreadPoolBuilder::new().num_threads(threads).build().context("starting the threads")?;
    threads.install(|| compare_in_folder(args, &problem, given))
}

fn compare_in_folder(args: &Args, problem: &Problem, given: Vec<(String, Mixture)>) -> anyhow::Result<Ending> {
    let settings = Settings::from_keys(problem.tuning());
    let (budget, seed) = (settings.budget, settings.seed);
    let path = args.out.clone().unwrap_or_else(|| args.problem.with_extension(COMPARISON));
    let signals = Signals::listen().context("listening for signals")?;
    let folder = RunFolder::create(&path, args.force)?;
    let recorder = Recorder::begin(folder.path(), &header::facts(problem))?;
    let log = folder.join("log.txt");
    let mut screen = Screen::new(&log).with_context(|| format!("cannot write {}", log.display()))?;
    write_bytes(&folder.join(problem_file::COPY), problem.text_for(folder.path()).as_bytes())?;
    screen.keep(&tune_report::opening(problem, budget, seed));
    let mut watch = CompareWatch::new(recorder, screen, signals.clone(), budget);
    let compared = compare(problem, &Wanted { settings, df: args.df.clone(), given }, &mut watch);
    watch.screen.clear();
    watch.recorder.sync()?;
    match compared {
        Err(TuneError::Interrupted { evaluations }) => {
            watch
                .screen
                .keep(&format!("interrupted after {evaluations} evaluations; a comparison begins anew with --force"));
            Ok(Ending::Interrupted(signals.came().unwrap_or_default()))
        }
        Err(error) => {
            if watch.recorder.is_empty() {
                drop(watch);
                folder.discard()?;
            }
            Err(error.into())
        }
        Ok(comparison) => {
            let summary = write(&folder, problem, &comparison, seed, &command(args))?;
            let closing = compare_report::closing(&summary, &folder.path().display().to_string());
            if args.json {
                watch.screen.keep(&closing);
                output::say(&format!("{}\n", serde_json::to_string_pretty(&summary)?))?;
            } else {
                watch.screen.log(&closing);
                output::say(&closing)?;
            }
            Ok(Ending::Done)
        }
    }
}

/// Writes everything but the log.
fn write(
    folder: &RunFolder,
    problem: &Problem,
    comparison: &Comparison,
    seed: u64,
    command: &str,
) -> anyhow::Result<ComparisonSummary> {
    let summary = ComparisonSummary::of(problem, comparison, header::provenance(problem, seed));
    let drawings = comparison_figures(problem.aim(), comparison, seed, &Style::default());
    let page = ComparisonPage {
        summary: summary.clone(),
        aim: problem.aim(),
        figures: drawings.iter().map(PageFigure::of).collect(),
        program: header::PROGRAM.to_owned(),
        command: command.to_owned(),
        statement: problem.text_for(folder.path()),
    };
    write_figures(&folder.create_inside("figures")?, &drawings, Form::Png)?;
    write_bytes(&folder.join("report.html"), comparison_html(&page).as_bytes())?;
    write_bytes(&folder.join("report.md"), comparison_markdown(&page).as_bytes())?;
    write_json(&folder.join("comparison.json"), &summary)?;
    Ok(summary)
}

/// The command that makes the same comparison again; the copy of the problem holds budget and seed.
fn command(args: &Args) -> String {
    let df: String = args.df.iter().map(|df| format!(" --df {df}")).collect();
    let given: String = args.proposal.iter().map(|path| format!(" --proposal {}", name_of(path))).collect();
    format!("evenpoise compare problem.toml --out again.compare{df}{given}")
}

/// A proposal of the same variables in the same coordinates.
fn read_given(path: &Path, problem: &Problem) -> anyhow::Result<(String, Mixture)> {
    let file = read_proposal(path)?;
    let mixture = file.mixture().with_context(|| format!("the proposal in {}", path.display()))?;
    let own = ProposalFile::new(problem, &mixture, file.made_by.clone());
    if own.variables != file.variables || own.correlations != file.correlations {
        let reason = "is of other variables or coordinates than the problem; tune the problem as it is now";
        return Err(Misuse(format!("the proposal in {} {reason}", path.display())).into());
    }
    Ok((name_of(path), mixture))
}

/// The name of a run's folder, or of a file.
fn name_of(path: &Path) -> String {
    path.file_name().unwrap_or(path.as_os_str()).to_string_lossy().into_owned()
}

fn degrees(text: &str) -> Result<f64, String> {
    let number: f64 = text.parse().map_err(|_| "expected a number above 0".to_owned())?;
    if number > 0.0 && number.is_finite() { Ok(number) } else { Err("expected a number above 0".to_owned()) }
}
