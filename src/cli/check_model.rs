//! What `check` shows of a model outside the problem file: its questions and answers, and how fast it is.

use super::layout::HEADING;
use super::layout::WIDTH;
use super::layout::cut;
use super::layout::hanging;
use super::layout::styled;
use super::numbers::count;
use super::numbers::rough;
use super::output;
use evenpoise::model::ProgramFormat;
use evenpoise::model::ProgramSpec;
use evenpoise::model::Throughput;
use evenpoise::model::throughput;
use evenpoise::numeric::Points;
use evenpoise::problem::ModelMeans;
use evenpoise::problem::Problem;
use evenpoise::problem::TuningKeys;
use evenpoise::report::trial::start_points;
use evenpoise::store::decimal;
use std::time::Duration;
use std::time::Instant;

/// Points that are shown.
const SHOWN: usize = 3;
/// Seconds that the trial points may take.
const SECONDS: f64 = 20.0;
/// Sizes of batches that are measured, and for how long each.
const SIZES: [usize; 3] = [1, 32, 1024];
const PATIENCE: Duration = Duration::from_millis(1500);
/// A pace within this factor of the best will do; all workers together must be so much faster than one to be worth it.
const NEARLY: f64 = 1.1;
const WORTH: f64 = 1.2;

/// Shows the model, and asks a few points; how many trial points there is time for, none where nothing can be asked.
pub(super) fn tried_before(problem: &Problem, wanted: usize) -> anyhow::Result<Option<usize>> {
    let (Some(means), Some((takes, returns))) = (problem.model_means(), problem.model_names()) else {
        return Ok(Some(wanted));
    };
    output::say(&heading("Model"))?;
    output::say(&hanging("  ", &described(means)))?;
    output::say(&hanging("  takes    ", &takes.join(", ")))?;
    output::say(&hanging("  returns  ", &returns.join(", ")))?;
    let points = start_points(problem, SHOWN + 1, problem.tuning().seed.unwrap_or(TuningKeys::SEED));
    let questions = problem.model_questions(&points).unwrap_or_else(|| Points::new(0));
    if *means == ModelMeans::Exchange {
        output::say(&exchange(takes, returns, &questions))?;
        return Ok(None);
    }
    // The first point pays for the start.
    problem.evaluate(&points.select(&[0]))?;
    let shown = points.select(&(1..=SHOWN).collect::<Vec<_>>());
    let began = Instant::now();
    problem.evaluate(&shown)?;
    let each = began.elapsed().as_secs_f64() / SHOWN as f64;
    let mut text = heading("Three points");
    let values = problem.model_values(&shown).unwrap_or_else(|| Points::new(0));
    for i in 0..SHOWN {
        text.push_str(&hanging("  asked     ", &shortened(&line(&questions, i + 1, " "))));
        text.push_str(&hanging("  answered  ", &shortened(&line(&values, i, " "))));
    }
    output::say(&text)?;
    Ok(Some(((SECONDS / each) as usize).clamp(SHOWN, wanted)))
}

fn heading(title: &str) -> String {
    format!("\n{}\n", styled(title, HEADING))
}

fn described(means: &ModelMeans) -> String {
    match means {
        ModelMeans::Program(spec) => {
            let format = if spec.format == ProgramFormat::F64 { "f64" } else { "text" };
            let folder = match spec.folder.as_os_str().is_empty() {
                true => String::new(),
                false => format!(" in {}", spec.folder.display()),
            };
            format!(
                "program `{}`{folder}; format {format}, up to {} at once",
                spec.run.join(" "),
                count(spec.workers as u64)
            )
        }
        ModelMeans::Library { file } => format!("library {}", file.display()),
        ModelMeans::Exchange => "run elsewhere: points go out in files, and answers come back in files".to_owned(),
    }
}

/// A line of a model with many values is cut: a few lines of it show the kind.
fn shortened(line: &str) -> String {
    cut(line, 6 * (WIDTH - 12))
}

fn line(points: &Points, i: usize, between: &str) -> String {
    (0..points.dim()).map(|j| decimal(points.get(i, j))).collect::<Vec<_>>().join(between)
}

/// What `tune` would ask, and what it wants back.
fn exchange(takes: &[String], returns: &[String], questions: &Points) -> String {
    let mut text = heading("What would be asked");
    text.push_str(&hanging("  ", "`tune` writes RUN/asked/0001.csv and ends with exit status 4:"));
    text.push_str(&format!("    {}\n", cut(&format!("id,{}", takes.join(",")), WIDTH - 4)));
    for i in 0..SHOWN {
        text.push_str(&format!("    {}\n", cut(&format!("{},{}", i + 1, line(questions, i, ",")), WIDTH - 4)));
    }
    text.push_str("    ...\n");
    text.push_str(&hanging(
        "  ",
        "Put RUN/answered/0001.csv beside it (rows and columns in any order, a blank cell or nan where a point failed), and run the \
         same command with --resume:",
    ));
    text.push_str(&format!("    {}\n", cut(&format!("id,{}", returns.join(",")), WIDTH - 4)));
    text.push_str(&hanging(
        "  ",
        "Some dozens of files in all: the survey asks for the steps of all its searches at once, then every round is one file, and so are \
         the draws that are reported. Nothing was evaluated here.",
    ));
    text
}

/// The pace of a program by the size of its batches, and which settings follow from it.
pub(super) fn measured(problem: &Problem) -> anyhow::Result<()> {
    let Some(ModelMeans::Program(spec)) = problem.model_means() else { return Ok(()) };
    let points = start_points(problem, SIZES[2], problem.tuning().seed.unwrap_or(TuningKeys::SEED));
    let Some(questions) = problem.model_questions(&points) else { return Ok(()) };
    let alone = ProgramSpec { workers: 1, ..spec.clone() };
    let rates = throughput(&alone, &questions, &SIZES, PATIENCE)?;
    let best = rates.iter().map(|rate| rate.rate).fold(0.0, f64::max);
    let Some(chosen) = rates.iter().find(|rate| rate.rate * NEARLY >= best) else { return Ok(()) };
    let all = match spec.workers {
        1 => None,
        _ => throughput(spec, &questions, &[chosen.batch], PATIENCE)?.into_iter().next(),
    };
    output::say(&paces(&rates, spec.workers, all.as_ref(), chosen))?;
    Ok(())
}

fn paces(rates: &[Throughput], workers: usize, all: Option<&Throughput>, chosen: &Throughput) -> String {
    let mut text = heading("Pace of the program");
    let row = |workers: usize, batch: usize, rate: &str| format!("  {workers:>7} {batch:>12} {rate:>17}\n");
    text.push_str("  workers  a batch of   points a second\n");
    for size in SIZES {
        let rate = rates.iter().find(|rate| rate.batch == size);
        text.push_str(&row(1, size, &rate.map_or("too slow to try".to_owned(), |rate| rough(rate.rate))));
    }
    if let Some(all) = all {
        text.push_str(&row(workers, all.batch, &rough(all.rate)));
    }
    let worth = all.is_some_and(|all| all.rate >= WORTH * chosen.rate);
    let why = match (worth, all) {
        (true, _) => "more workers are faster",
        (false, Some(_)) => "more workers are no faster: they share something, or each uses all cores by itself",
        (false, None) => "the file, or the machine, has one",
    };
    let workers = if worth { workers } else { 1 };
    let batch =
        if chosen.batch == SIZES[2] { "\"auto\", which finds large ones" } else { "\"auto\", which finds the size" };
    let advice = format!(
        "Advice: workers = {workers} ({why}); batch = {batch}; {} a batch is enough.",
        count(chosen.batch as u64)
    );
    text.push_str(&hanging("  ", &advice));
    text
}
