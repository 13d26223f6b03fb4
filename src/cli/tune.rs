//! `evenpoise tune`: from a problem to a proposal, its scores, verdict and figures.

use super::ending::Ending;
use super::header;
use super::model_desk::ModelDesk;
use super::options;
use super::options::TuningOptions;
use super::output;
use super::problem_file;
use super::problem_file::Located;
use super::raise::Budgets;
use super::rare_report;
use super::run_files;
use super::run_files::write_bytes;
use super::screen::Screen;
use super::signals::Signals;
use super::tune_report;
use super::watch::Watch;
use anyhow::Context;
use evenpoise::adapt;
use evenpoise::adapt::Settings;
use evenpoise::adapt::TuneError;
use evenpoise::adapt::Tuning;
use evenpoise::adapt::rare::RareTuning;
use evenpoise::adapt::rare::tune_rare;
use evenpoise::model::ModelError;
use evenpoise::problem::Aim;
use evenpoise::problem::EvaluateError;
use evenpoise::problem::Problem;
use evenpoise::problem::TuningKeys;
use evenpoise::store::Recorder;
use evenpoise::store::RunFolder;
use evenpoise::store::write_json;
use evenpoise::weights::verdict::Word;
use serde::Serialize;
use std::fs;
use std::path::PathBuf;

/// Tune a proposal for the integral in PROBLEM, and judge it.
#[derive(Debug, clap::Args)]
pub(crate) struct Args {
    /// Problem file; with --resume, the folder of a run does as well.
    problem: PathBuf,
    /// Folder of the run [default: the problem file's name ending in .run, beside it].
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
    /// Replace the run that is in the folder.
    #[arg(long, conflicts_with = "resume")]
    force: bool,
    /// Go on with a run that was interrupted, or with a finished one under a larger --budget: nothing that was evaluated is
    /// evaluated again.
    #[arg(long)]
    resume: bool,
    /// Print the summary as JSON on standard output, and nothing else there.
    #[arg(long)]
    json: bool,
    #[command(flatten)]
    pub(crate) tuning: TuningOptions,
}

pub(crate) fn run(args: &Args) -> anyhow::Result<Ending> {
    let located = problem_file::locate(&args.problem, args.out.as_deref());
    let resumed = if args.resume { Some(Resumed::open(args, &located)?) } else { None };
    let problem = problem_file::read(&located.file, |keys| {
        let keys = args.tuning.over(keys);
        match &resumed {
            Some(resumed) => resumed.budgets.over(&keys),
            // A budget on the command line is a plan of its own, whatever the file says of earlier ones.
            None if args.tuning.budget.is_some() => TuningKeys { extended_from: Vec::new(), ..keys },
            None => keys,
        }
    })?;
    options::check(problem.tuning())?;
    // Zero threads: as many as the machine has cores.
    let threads = usize::try_from(args.tuning.threads(problem.tuning()).unwrap_or(0))?;
    let threads = rayon::ThreadPoolBuilder::new().num_threads(threads).build().context("starting the threads")?;
    threads.install(|| tune(args, &located, &problem, resumed))
}

/// A run that is gone on with.
struct Resumed {
    folder: RunFolder,
    budgets: Budgets,
}

impl Resumed {
    fn open(args: &Args, located: &Located) -> anyhow::Result<Self> {
        let folder = RunFolder::open(&located.run)?;
        Ok(Self { folder, budgets: Budgets::of(args, located)? })
    }
}

fn tune(args: &Args, located: &Located, problem: &Problem, resumed: Option<Resumed>) -> anyhow::Result<Ending> {
    let settings = Settings::from_keys(problem.tuning());
    let signals = Signals::listen().context("listening for signals")?;
    let (folder, mut watch) = begin(args, located, problem, resumed, signals.clone())?;
    let tuned = match problem.aim() {
        Aim::Density => adapt::tune(problem, &settings, &mut watch).map(|tuning| Tuned::Density(Box::new(tuning))),
        _ => tune_rare(problem, &settings, &mut watch).map(|tuning| Tuned::Rare(Box::new(tuning))),
    };
    watch.screen.clear();
    watch.recorder.sync()?;
    watch.told()?;
    match (settled(tuned, watch.spent), watch.refused()) {
        (Err(TuneError::Interrupted { evaluations }), _) => {
            let resume = format!("evenpoise tune {} --resume", located.run.display());
            let kept = format!("interrupted after {evaluations} evaluations; all are kept. Go on with\n  {resume}");
            watch.screen.keep(&kept);
            Ok(Ending::Interrupted(signals.came().unwrap_or_default()))
        }
        (Err(TuneError::Evaluation(EvaluateError::Model(ModelError::Waiting { text, .. }))), _) => {
            let resume = format!("evenpoise tune {} --resume", located.run.display());
            watch.screen.keep(&format!("{text}\nThen go on with\n  {resume}"));
            Ok(Ending::Waiting)
        }
        (Err(error), _) => {
            // Nothing was evaluated, so nothing is kept that would stand in the way of the next try.
            if watch.recorder.is_empty() && !args.resume {
                drop(watch);
                folder.discard()?;
            }
            Err(error.into())
        }
        (Ok(_), Some(error)) => Err(error.into()),
        (Ok(Tuned::Density(tuning)), None) => {
            let summary = run_files::write(&folder, problem, &tuning, settings.seed)?;
            finish(args, &folder, watch, &tune_report::closing(&tuning), tuning.verdict.word, &summary)
        }
        (Ok(Tuned::Rare(tuning)), None) => {
            let summary = run_files::write_rare(&folder, problem, &tuning, settings.seed)?;
            finish(args, &folder, watch, &rare_report::closing(problem, &tuning), tuning.verdict.word, &summary)
        }
    }
}

/// A model that was stopped by a signal is an interruption, in the middle of a batch.
fn settled(tuned: Result<Tuned, TuneError>, evaluations: u64) -> Result<Tuned, TuneError> {
    match tuned {
        Err(TuneError::Evaluation(EvaluateError::Model(ModelError::Interrupted))) => {
            Err(TuneError::Interrupted { evaluations })
        }
        other => other,
    }
}

/// What came out, by the kind of aim.
enum Tuned {
    Density(Box<Tuning>),
    Rare(Box<RareTuning>),
}

/// Takes the folder and its journal.
fn begin<'p>(
    args: &Args,
    located: &Located,
    problem: &'p Problem,
    resumed: Option<Resumed>,
    signals: Signals,
) -> anyhow::Result<(RunFolder, Watch<'p>)> {
    let facts = header::facts(problem);
    let (folder, recorder, dropped, raised) = match resumed {
        Some(Resumed { folder, budgets }) => {
            let raised = budgets.write(args, located, problem)?;
            let (recorder, dropped) = Recorder::resume(folder.path(), &facts)?;
            (folder, recorder, dropped, raised)
        }
        None => {
            let folder = RunFolder::create(&located.run, args.force)?;
            let recorder = Recorder::begin(folder.path(), &facts)?;
            (folder, recorder, None, None)
        }
    };
    let log = folder.join("log.txt");
    let mut screen = Screen::new(&log).with_context(|| format!("cannot write {}", log.display()))?;
    let copy = folder.join(problem_file::COPY);
    let text = problem.text_for(folder.path());
    let stale = || !problem.tuning().extended_from.is_empty() && fs::read_to_string(&copy).ok().as_ref() != Some(&text);
    if !copy.exists() || stale() {
        write_bytes(&copy, text.as_bytes())?;
    }
    let settings = Settings::from_keys(problem.tuning());
    screen.keep(&tune_report::opening(problem, settings.budget, settings.seed));
    if let Some(raised) = raised {
        screen.keep(&raised);
    }
    if args.resume {
        screen.keep(&tune_report::resumed(recorder.found(), dropped.as_deref(), folder.stale_lock()));
    }
    let desk = ModelDesk::open(problem, folder.path(), "evaluations/unfinished", &signals)?;
    let about = (problem, settings.budget);
    let watch = Watch::new((recorder, screen, signals), folder.join("rounds.csv"), about, desk);
    Ok((folder, watch))
}

/// Shows the closing table, or the summary as JSON.
fn finish(
    args: &Args,
    folder: &RunFolder,
    mut watch: Watch<'_>,
    closing: &str,
    word: Word,
    summary: &impl Serialize,
) -> anyhow::Result<Ending> {
    watch.timings.end();
    write_json(&folder.join("timings.json"), &watch.timings)?;
    let closing = format!("{closing}{}", tune_report::whereabouts(&folder.path().display().to_string()));
    if args.json {
        watch.screen.keep(&closing);
        output::say(&format!("{}\n", serde_json::to_string_pretty(summary)?))?;
    } else {
        watch.screen.log(&closing);
        output::say(&closing)?;
    }
    Ok(if word == Word::Unfit { Ending::Unfit } else { Ending::Done })
}
