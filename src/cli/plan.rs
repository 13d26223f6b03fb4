//! `evenpoise plan`: how much production a relative error takes.

use super::ending::Ending;
use super::layout::HEADING;
use super::layout::QUIET;
use super::layout::WIDTH;
use super::layout::cut;
use super::layout::hanging;
use super::layout::styled;
use super::numbers::count;
use super::numbers::duration;
use super::numbers::percent;
use super::numbers::rough;
use super::options;
use super::output;
use super::source;
use super::source::Source;
use evenpoise::production::CHUNK;
use evenpoise::production::Sequence;
use evenpoise::report::ProductionPlan;
use evenpoise::report::plan_of;
use std::path::Path;
use std::path::PathBuf;
use std::time::Instant;

/// Most estimates in the table.
const MOST: usize = 30;
/// Draws that are timed.
const TIMED: u64 = 16 * CHUNK;

/// Draws, time and cost of a production run for a relative error, from the report draws of RUN.
///
/// Two numbers of draws stand beside each other: as predicted, and enough with nine chances in ten (the upper bound of the
/// weight variance, or what the tail shape asks for where that is more).
#[derive(Debug, clap::Args)]
pub(crate) struct Args {
    /// Folders of runs, to be set side by side.
    #[arg(required = true, value_name = "RUN")]
    runs: Vec<PathBuf>,
    /// The relative error, as 1% or 0.01.
    #[arg(long, value_name = "SHARE", value_parser = options::share)]
    relative_error: f64,
    /// Machines to share the work.
    #[arg(long, value_name = "N", default_value_t = 1, value_parser = options::count_from::<1>)]
    machines: u64,
}

pub(crate) fn run(args: &Args) -> anyhow::Result<Ending> {
    let mut text = String::new();
    for run in &args.runs {
        let source = source::of_problem(run, None)?;
        let plan = plan_of(source.folder(), &source.problem, &source.mixture, source.file.made_by.evaluations)?;
        text.push_str(&table(args, run, &source, &plan));
    }
    text.push_str(&notes(args));
    output::say(&text)?;
    Ok(Ending::Done)
}

fn table(args: &Args, run: &Path, source: &Source, plan: &ProductionPlan) -> String {
    let own = seconds_per_draw(source);
    let title = format!("{}: relative error {}", run.display(), percent(args.relative_error));
    let word = source.file.verdict.as_deref().unwrap_or("not judged");
    let facts = format!("{} weighted draws, verdict {word}", count(plan.draws));
    let problem = cut(source.problem.title(), WIDTH);
    let mut out = format!("{}\n{problem}\n{}\n", styled(&title, HEADING), styled(&facts, QUIET));
    let head = format!("  {:<24} {:>12} {:>14} {:>11} {:>11}", "", "draws", "9 in 10", "model", "in all");
    out.push_str(&format!("{}\n", styled(&head, QUIET)));
    for quantity in plan.quantities.iter().take(MOST + 1) {
        let [predicted, enough] = quantity.draws(args.relative_error);
        let time =
            |each: Option<f64>| each.map_or("not known".to_owned(), |each| time(enough * each / args.machines as f64));
        let line = format!(
            "  {:<24} {:>12} {:>14} {:>11} {:>11}",
            cut(&quantity.name, 24),
            whole(predicted),
            whole(enough),
            time(plan.model_seconds),
            time(plan.model_seconds.map(|model| model + own))
        );
        out.push_str(&format!("{line}\n"));
    }
    if plan.quantities.len() > MOST + 1 {
        out.push_str(&format!("  and {} more\n", plan.quantities.len() - MOST - 1));
    }
    let enough = plan.quantities[0].draws(args.relative_error)[1];
    if enough.is_finite() {
        let shard = if args.machines > 1 { format!(" --shard I/{}", args.machines) } else { String::new() };
        let draws = (enough as u64).max(CHUNK);
        out.push_str(&format!("Next      evenpoise estimate {} --draws {draws}{shard}\n", run.display()));
    }
    out.push('\n');
    out
}

fn notes(args: &Args) -> String {
    let mut text = "Draws: as predicted, and enough with nine chances in ten. Times are for the larger number, with the seconds an evaluation \
                    took while tuning; in all: with drawing and weighing on this machine."
        .to_owned();
    if args.machines > 1 {
        text.push_str(&format!(" Times are those of each of {} machines like this one.", args.machines));
    }
    hanging("Note      ", &text)
}

/// What drawing and weighing take on this machine.
fn seconds_per_draw(source: &Source) -> f64 {
    let began = Instant::now();
    let points = Sequence::new(&source.mixture, 1, 1, None).draw(0..TIMED);
    let log_density = source.mixture.log_density(&points);
    began.elapsed().as_secs_f64() / log_density.len() as f64
}

fn whole(draws: f64) -> String {
    match draws {
        _ if !draws.is_finite() => "no number".to_owned(),
        _ if draws < 1e9 => count(draws as u64),
        _ => rough(draws),
    }
}

fn time(seconds: f64) -> String {
    if !seconds.is_finite() {
        return "-".to_owned();
    }
    if seconds < 1.0 { "under 1 s".to_owned() } else { duration(seconds) }
}
