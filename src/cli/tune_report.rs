//! The closing table of a tuning, in 80 columns.

use super::layout::HEADING;
use super::layout::QUIET;
use super::layout::WIDTH;
use super::layout::cut;
use super::layout::hanging;
use super::layout::of_word;
use super::layout::styled;
use super::numbers::count;
use super::numbers::measured;
use super::numbers::percent;
use super::numbers::significant;
use evenpoise::adapt::Extension;
use evenpoise::adapt::Tuning;
use evenpoise::problem::Problem;
use evenpoise::weights::Estimate;
use evenpoise::weights::Score;
use evenpoise::weights::TailReason;
use evenpoise::weights::verdict::Verdict;
use evenpoise::weights::verdict::Word;
use evenpoise::weights::verdict::checks::TAIL_SOUND;

/// Most estimates in the table; all are in the summary.
const MOST_ESTIMATES: usize = 30;

/// What a run begins with on the screen.
pub(crate) fn opening(problem: &Problem, budget: u64, seed: u64) -> String {
    let d = problem.dim();
    let variables = if d == 1 { "one variable".to_owned() } else { format!("{d} variables") };
    let facts = format!("aim {}, {variables}, {} evaluations, seed {seed}", problem.aim().word(), count(budget));
    format!("{}\n{}\n", styled(&cut(problem.title(), WIDTH), HEADING), styled(&facts, QUIET))
}

/// Scores, estimates and verdict.
pub(crate) fn closing(tuning: &Tuning) -> String {
    let mut out = String::from("\n");
    out.push_str(&proposal(tuning));
    let mark = mark(&tuning.verdict);
    if let Some(score) = &tuning.score {
        out.push_str(&format!("\n{}\n", styled(&format!("{} report draws{mark}", count(score.draws as u64)), HEADING)));
        out.push_str(&scores(score, &tuning.verdict));
    }
    if !tuning.estimates.is_empty() {
        out.push_str(&format!("\n{}\n", styled(&format!("Estimates{mark}"), HEADING)));
        out.push_str(&estimates(&tuning.estimates));
    }
    out.push('\n');
    out.push_str(&verdict(&tuning.verdict));
    out
}

fn proposal(tuning: &Tuning) -> String {
    let n = tuning.chosen.len();
    let tails = if tuning.df.is_finite() {
        format!("Student-t, {} degrees of freedom", significant(tuning.df, 3))
    } else {
        "Gaussian".to_owned()
    };
    let from = tuning.finalists.iter().find(|finalist| finalist.chosen).map_or("", |finalist| finalist.name.as_str());
    let from = if from == "ensemble" { "the last fits joined".to_owned() } else { from.to_owned() };
    let parts = if n == 1 { "one component".to_owned() } else { format!("{n} components") };
    let raised = raised(&tuning.extended_from);
    let spent = format!("{} evaluations in all{raised}", count(tuning.evaluations));
    hanging("Proposal  ", &format!("{parts} ({tails}), from {from}; {spent}"))
}

/// What is said of a budget that was raised.
pub(crate) fn raised(extended_from: &[Extension]) -> String {
    let budgets: Vec<String> = extended_from.iter().map(|earlier| count(earlier.budget)).collect();
    if budgets.is_empty() {
        String::new()
    } else {
        format!(" (the budget was raised from {})", budgets.join(", then "))
    }
}

fn scores(score: &Score, verdict: &Verdict) -> String {
    let interval = score
        .ess_fraction_interval
        .map_or(String::new(), |[low, high]| format!(" ({} to {})", percent(low), percent(high)));
    let ignored = verdict.checks.iter().any(|check| check.name == "tail shape" && check.word == Word::Sound);
    let tail = match score.tail.reason {
        TailReason::Fitted if ignored && score.tail.upper > TAIL_SOUND => {
            format!("{}; no draw is heavy enough for it to matter", significant(score.tail.shape, 2))
        }
        TailReason::Fitted => {
            let [shape, upper] = [score.tail.shape, score.tail.upper].map(|shape| significant(shape, 2));
            format!("{shape}, at most {upper} with 90 %; sound up to {TAIL_SOUND}")
        }
        TailReason::Bounded => "bounded: the largest weights are all equal".to_owned(),
        TailReason::TooFew => "not known: too few draws in the tail".to_owned(),
    };
    let normaliser = measured(score.log_normaliser, score.log_normaliser_se, [f64::NAN; 2]);
    let rows = [
        (
            "effective draws",
            format!("{} = {}{interval} of the draws", significant(score.ess, 4), percent(score.ess_fraction)),
        ),
        ("weight variance", significant(score.weight_variance, 3)),
        ("perplexity", significant(score.perplexity, 3)),
        ("tail shape", tail),
        ("largest share of one draw", percent(score.largest_share)),
        ("log normalising constant", format!("{} ± {}", normaliser.value, normaliser.error)),
    ];
    rows.iter().map(|(name, value)| format!("  {name:<27}{value}\n")).collect()
}

fn estimates(estimates: &[(String, Estimate)]) -> String {
    let shown = &estimates[..estimates.len().min(MOST_ESTIMATES)];
    let cells: Vec<[String; 4]> = shown
        .iter()
        .map(|(name, e)| {
            let m = measured(e.value, e.se, e.interval_95);
            [cut(name, 24), m.value, format!("± {}", m.error), m.interval]
        })
        .collect();
    let titles = ["", "value", "standard error", "95 % interval"].map(str::to_owned);
    let width = |k: usize| cells.iter().chain([&titles]).map(|row| row[k].chars().count()).max().unwrap_or(0);
    let widths = [0, 1, 2, 3].map(width);
    let line = |row: &[String; 4]| {
        let [name, value, error, interval] = row;
        let text =
            format!("  {name:<a$}  {value:>b$}  {error:<c$}  {interval}", a = widths[0], b = widths[1], c = widths[2]);
        text.trim_end().to_owned()
    };
    let mut out = format!("{}\n", styled(&line(&titles), QUIET));
    cells.iter().for_each(|row| out.push_str(&format!("{}\n", line(row))));
    if estimates.len() > shown.len() {
        out.push_str(&format!("  and {} more in summary.json\n", estimates.len() - shown.len()));
    }
    out
}

/// The word, its reasons, and what no check can see.
pub(crate) fn verdict(verdict: &Verdict) -> String {
    let meaning = match verdict.word {
        Word::Sound => "report these numbers",
        Word::Strained => "usable with the caution stated",
        Word::Unfit => "do not report numbers from this",
    };
    let passed = verdict.checks.iter().filter(|check| check.word == Word::Sound).count();
    let mut out = format!(
        "Verdict   {}: {meaning} ({passed} of {} checks are sound)\n",
        styled(&verdict.word.to_string().to_uppercase(), of_word(verdict.word)),
        verdict.checks.len()
    );
    for reason in &verdict.reasons {
        out.push_str(&hanging("        - ", reason));
    }
    out.push_str(&quiet(&verdict.caution));
    out
}

/// A remark below the verdict.
pub(crate) fn quiet(remark: &str) -> String {
    let lines = hanging("          ", remark);
    lines.lines().map(|line| format!("{}\n", styled(line, QUIET))).collect()
}

/// What a heading says of numbers that must not be used.
pub(crate) fn mark(verdict: &Verdict) -> &'static str {
    if verdict.word == Word::Unfit { ": NOT TO BE REPORTED" } else { "" }
}

/// Where everything is, and what to do next.
pub(crate) fn whereabouts(run: &str) -> String {
    format!(
        "\nReport    {run}/report.html\n          and report.md, proposal.json, points.csv, summary.json, figures\n\
         Next      evenpoise points {run} --even 4000\n"
    )
}

/// What a resumed run found.
pub(crate) fn resumed(found: u64, dropped: Option<&str>, stale: Option<&str>) -> String {
    let mut out = hanging("Resumed   ", &format!("{} evaluations were recorded and are not made again.", count(found)));
    for note in dropped
        .into_iter()
        .map(str::to_owned)
        .chain(stale.map(|who| format!("The lock of {who}, which is gone, was taken over.")))
    {
        out.push_str(&hanging("          ", &note));
    }
    out
}
