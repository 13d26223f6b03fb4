//! `evenpoise estimate`: production inside the program.

use super::ending::Ending;
use super::ending::Misuse;
use super::estimate_files;
use super::estimate_files::Place;
use super::estimate_files::Wanted;
use super::estimate_report;
use super::model_desk::ModelDesk;
use super::options;
use super::output;
use super::producing::Producer;
use super::producing::Stop;
use super::screen::Screen;
use super::signals::Signals;
use super::source;
use super::source::Source;
use anyhow::Context;
use evenpoise::problem::ModelMeans;
use evenpoise::production::Job;
use evenpoise::production::MOST_DRAWS;
use evenpoise::production::Outcome;
use evenpoise::production::PILOT_DRAWS;
use evenpoise::production::PILOT_MOST;
use evenpoise::production::Shard;
use evenpoise::production::Sums;
use evenpoise::production::pilot_draws;
use evenpoise::report::kept_names;
use evenpoise::store::EstimateParts;
use evenpoise::store::EstimateState;
use evenpoise::store::PointsFile;
use evenpoise::store::StoreError;
use evenpoise::weights::verdict::Word;
use std::path::PathBuf;

/// Stages of pilots: above those that users name.
const PILOT_STAGE: u32 = 0x0080_0000;

/// Production: the frozen proposal of RUN, many draws, the answer and its verdict.
///
/// Ends at a number of draws, a time, or a relative error. Sums have no error, so that shards, interruptions and threads change no
/// bit of the answer.
#[derive(Debug, clap::Args)]
#[command(group(clap::ArgGroup::new("end").required(true).multiple(true).args(["draws", "time", "relative_error"])))]
pub(crate) struct Args {
    /// Folder of a run, or a problem file with --proposal.
    #[arg(value_name = "RUN")]
    run: PathBuf,
    /// Proposal for a problem file: the folder of a run, or a proposal.json.
    #[arg(long, value_name = "RUN")]
    proposal: Option<PathBuf>,
    /// End after so many draws (all shards together).
    #[arg(long, value_name = "N", value_parser = options::count_from::<1>)]
    draws: Option<u64>,
    /// End after that time: 90s, 15min, 2h.
    #[arg(long, value_name = "TIME", value_parser = options::seconds)]
    time: Option<f64>,
    /// A pilot fixes the number of draws for this relative error of the answer; the draws after it alone make the estimate.
    #[arg(long, value_name = "SHARE", value_parser = options::share, conflicts_with = "draws")]
    relative_error: Option<f64>,
    /// Only part I of N equal parts, I from 1; `pool` puts them together.
    #[arg(long, value_name = "I/N", value_parser = options::shard, requires = "draws", conflicts_with_all = ["time", "relative_error"])]
    shard: Option<Shard>,
    /// Quantiles of every estimate, as 0.05,0.5,0.95.
    #[arg(long, value_name = "LIST", value_delimiter = ',', value_parser = options::share)]
    quantiles: Vec<f64>,
    /// Keep every point in FILE, CSV or .npy.
    #[arg(long, value_name = "FILE")]
    save_points: Option<PathBuf>,
    /// Seed of the draws [default: that of the run].
    #[arg(long, value_name = "N")]
    seed: Option<u64>,
    /// A further, independent stage of draws under the same seed.
    #[arg(long, value_name = "N", default_value_t = 1, value_parser = clap::value_parser!(u32).range(1..0x0080_0000))]
    stage: u32,
    /// Folder of the estimate [default: estimate in the folder of the run].
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
    /// Replace the estimate that is in the folder.
    #[arg(long, conflicts_with = "resume")]
    force: bool,
    /// Go on with an estimate that was interrupted.
    #[arg(long)]
    resume: bool,
    /// Threads [default: as many as the machine has cores]; results do not depend on their number.
    #[arg(long, value_name = "N", value_parser = options::count_from::<1>)]
    threads: Option<u64>,
    /// Print what came out as JSON on standard output, and nothing else there.
    #[arg(long)]
    json: bool,
}

pub(crate) fn run(args: &Args) -> anyhow::Result<Ending> {
    let source = source::of_problem(&args.run, args.proposal.as_deref())?;
    let threads = usize::try_from(args.threads.unwrap_or(0))?;
    let threads = rayon::ThreadPoolBuilder::new().num_threads(threads).build().context("starting the threads")?;
    threads.install(|| estimate(args, &source))
}

fn estimate(args: &Args, source: &Source) -> anyhow::Result<Ending> {
    let shard = args.shard.unwrap_or(Shard::WHOLE);
    if args.draws.is_some_and(|draws| draws > MOST_DRAWS) {
        return Err(Misuse(format!("at most {MOST_DRAWS} draws have streams of their own; use several stages")).into());
    }
    if args.time.is_some() && source.problem.model_means() == Some(&ModelMeans::Exchange) {
        let advice = "the model's answers come in files from elsewhere, whenever they do: --time has no meaning here; \
                      give --draws or --relative-error";
        return Err(Misuse(advice.to_owned()).into());
    }
    let wanted = Wanted { seed: args.seed, stage: args.stage, draws: args.draws, quantiles: &args.quantiles };
    let job = estimate_files::job(source, &wanted)?;
    let signals = Signals::listen().context("listening for signals")?;
    let place = Place::take(&args.folder(source), shard, args.force, args.resume)?;
    let state = begun(args, source, &job, shard, &place)?;
    let log = place.work.join("log.txt");
    let mut screen = Screen::new(&log).with_context(|| format!("cannot write {}", log.display()))?;
    screen.keep(&estimate_report::opening(&state, args.resume));
    let desk = ModelDesk::open(&source.problem, &place.work, estimate_files::UNFINISHED, &signals)?;
    let mut producer = Producer::new(source, screen, signals, place.state(), state);
    producer.desk = desk;
    producer.time = args.time;
    if let Some(stop) = pilot(args, source, &mut producer)? {
        return Ok(stopped(args, stop, producer));
    }
    producer.kept = kept(args, source, &producer.state)?;
    let draws = producer.state.parts.job.draws;
    match producer.work(shard.part(draws.unwrap_or(MOST_DRAWS)))? {
        stop @ (Stop::Signal(_) | Stop::Waiting(_)) => Ok(stopped(args, stop, producer)),
        Stop::End | Stop::Time => finish(args, place, producer),
    }
}

impl Args {
    fn folder(&self, source: &Source) -> PathBuf {
        let of_run = self.run.is_dir() || self.proposal.as_ref().is_some_and(|path| path.is_dir());
        let beside = || if of_run { source.folder().join("estimate") } else { self.run.with_extension("estimate") };
        self.out.clone().unwrap_or_else(beside)
    }
}

/// The state to begin with: what was saved, or nothing yet.
fn begun(args: &Args, source: &Source, job: &Job, shard: Shard, place: &Place) -> anyhow::Result<EstimateState> {
    let pilot_job = || estimate_files::with_draws(job, source, None, PILOT_STAGE | args.stage);
    if args.resume && place.state().is_file() {
        let state = EstimateState::read(&place.state())?;
        let expected = match (&state.parts.pilot, state.in_pilot) {
            (_, true) => pilot_job(),
            (Some(pilot), _) => estimate_files::with_draws(job, source, Some(pilot.draws), args.stage),
            (None, false) => job.clone(),
        };
        let same = state.parts.job == expected && state.parts.shard == shard;
        let same_end = state.parts.pilot.map(|pilot| pilot.relative_error) == args.relative_error || state.in_pilot;
        if !(same && same_end) {
            return Err(changed(place, &state.parts, &expected, shard).into());
        }
        return Ok(state);
    }
    let in_pilot = args.relative_error.is_some();
    let job = if in_pilot { pilot_job() } else { job.clone() };
    let sums = Sums::new(&job);
    let parts = EstimateParts { shard, missing: Vec::new(), pilot: None, job, sums };
    Ok(EstimateState { parts, in_pilot, course: Vec::new(), points_bytes: 0, seconds: 0.0 })
}

/// The first thing that differs between a saved state and what is asked for now.
fn changed(place: &Place, parts: &EstimateParts, job: &Job, shard: Shard) -> StoreError {
    let texts = |job: &Job, shard: Shard| -> Vec<(&'static str, String)> {
        let draws = job.draws.map_or("not fixed".to_owned(), |draws| draws.to_string());
        vec![
            ("the program", job.program.clone()),
            ("the problem", job.problem.clone()),
            ("the proposal", job.proposal.clone()),
            ("the seed", job.seed.to_string()),
            ("the stage", job.stage.to_string()),
            ("the number of draws", draws),
            ("the shard", format!("{}/{}", shard.index, shard.of)),
            ("the list of quantiles", format!("{:?}", job.quantiles)),
        ]
    };
    let pairs = texts(&parts.job, parts.shard).into_iter().zip(texts(job, shard));
    let found = pairs.into_iter().find(|((_, before), (_, now))| before != now);
    let ((what, before), (_, now)) =
        found.unwrap_or((("what the run is laid out by", "other".to_owned()), ("", "this".to_owned())));
    StoreError::Changed { path: place.state(), what: what.to_owned(), before, now }
}

/// Runs the pilot, where one is asked for, and fixes the number of draws. Gives what stopped it.
fn pilot(args: &Args, source: &Source, producer: &mut Producer) -> anyhow::Result<Option<Stop>> {
    let Some(relative_error) = args.relative_error.filter(|_| producer.state.in_pilot) else { return Ok(None) };
    let mut until = PILOT_DRAWS;
    loop {
        match producer.work(0..until)? {
            stop @ (Stop::Signal(_) | Stop::Waiting(_)) => return Ok(Some(stop)),
            Stop::Time => anyhow::bail!("the time was over before the pilot had fixed a number of draws; give it more"),
            Stop::End => {}
        }
        let parts = &mut producer.state.parts;
        if let Some(number) = pilot_draws(&parts.job, &parts.sums, relative_error) {
            anyhow::ensure!(
                number.draws <= MOST_DRAWS,
                "a relative error of {relative_error} takes {} draws; tune the proposal longer, or aim lower",
                number.draws
            );
            let job = estimate_files::with_draws(&parts.job, source, Some(number.draws), args.stage);
            parts.pilot = Some(number);
            parts.sums = Sums::new(&job);
            parts.job = job;
            producer.state.in_pilot = false;
            producer.screen.keep(&estimate_report::pilot(&number));
            return Ok(None);
        }
        until *= 2;
        anyhow::ensure!(
            until <= PILOT_MOST,
            "a pilot of {} draws has fewer than 200 effective ones: the proposal is not fit for production; tune it longer",
            until / 2
        );
    }
}

fn kept(args: &Args, source: &Source, state: &EstimateState) -> anyhow::Result<Option<PointsFile>> {
    let Some(path) = &args.save_points else { return Ok(None) };
    if state.points_bytes > 0 {
        return Ok(Some(PointsFile::resume(path, state.points_bytes)?));
    }
    if state.parts.sums.draws > 0 {
        return Err(Misuse("the points before the interruption were not kept; begin anew (--force)".to_owned()).into());
    }
    let rows = state.parts.job.draws.filter(|_| args.time.is_none());
    let rows = rows.map(|draws| state.parts.shard.part(draws)).map(|part| part.end - part.start);
    Ok(Some(PointsFile::begin(path, &kept_names(&source.problem), rows)?))
}

/// Says how to go on with what was stopped before its end.
fn stopped(args: &Args, stop: Stop, mut producer: Producer) -> Ending {
    let draws = producer.state.parts.sums.draws;
    match stop {
        Stop::Waiting(text) => {
            producer.screen.keep(&format!("{text}\nThen go on with\n  {}", args.again()));
            Ending::Waiting
        }
        Stop::Signal(signal) => {
            producer.screen.keep(&estimate_report::interrupted(draws, &args.again()));
            Ending::Interrupted(signal)
        }
        Stop::End | Stop::Time => Ending::Done,
    }
}

impl Args {
    /// The command that goes on with this one.
    fn again(&self) -> String {
        let mut words: Vec<String> =
            std::env::args().skip(1).filter(|word| word != "--force" && word != "--resume").collect();
        words.insert(0, "evenpoise".to_owned());
        words.push("--resume".to_owned());
        let quoted = words.into_iter().map(|word| if word.contains([' ', '\'']) { format!("{word:?}") } else { word });
        quoted.collect::<Vec<_>>().join(" ")
    }
}

fn finish(args: &Args, place: Place, mut producer: Producer) -> anyhow::Result<Ending> {
    if let Some(kept) = &mut producer.kept {
        kept.sync()?;
    }
    let parts = &producer.state.parts;
    let outcome = Outcome::of(&parts.job, &parts.sums);
    parts.write(&place.result, &outcome)?;
    if parts.shard == Shard::WHOLE {
        estimate_files::figures(&place.work, &parts.job, &outcome, &producer.state.course)?;
    }
    let closing = estimate_report::closing(parts, &outcome, &place.result, producer.seconds());
    let missed = estimate_report::missed(parts, &outcome, &args.run.display().to_string(), args.stage);
    let closing = format!("{closing}{missed}");
    if args.json {
        producer.screen.keep(&closing);
        output::say(&format!("{}\n", serde_json::to_string_pretty(&outcome)?))?;
    } else {
        producer.screen.log(&closing);
        output::say(&closing)?;
    }
    let shard = producer.state.parts.shard;
    // A shard is not judged: its pool is.
    let unfit = outcome.verdict == Word::Unfit && shard == Shard::WHOLE;
    drop(producer);
    place.clear(shard)?;
    Ok(if unfit { Ending::Unfit } else { Ending::Done })
}
