//! What production shows, in 80 columns.

use super::layout::HEADING;
use super::layout::QUIET;
use super::layout::WIDTH;
use super::layout::cut;
use super::layout::hanging;
use super::layout::of_word;
use super::layout::styled;
use super::numbers::count;
use super::numbers::duration;
use super::numbers::measured;
use super::numbers::percent;
use super::numbers::significant;
use super::tune_report::quiet;
use evenpoise::production::EstimateOutcome;
use evenpoise::production::Job;
use evenpoise::production::Outcome;
use evenpoise::production::PilotNumber;
use evenpoise::production::Shard;
use evenpoise::production::relative_variance;
use evenpoise::report::PROBABILITY_NOTE;
use evenpoise::store::EstimateParts;
use evenpoise::store::EstimateState;
use evenpoise::weights::TailReason;
use evenpoise::weights::verdict::Word;
use std::path::Path;

/// Most estimates in the table; all are in the file.
const MOST_ESTIMATES: usize = 30;
/// Most quantiles in the table.
const MOST_QUANTILES: usize = 5;

/// What a run begins with on the screen.
pub(crate) fn opening(state: &EstimateState, resumed: bool) -> String {
    let parts = &state.parts;
    let job = &parts.job;
    let draws = match (job.draws, parts.shard) {
        (None, _) if state.in_pilot => "a pilot first".to_owned(),
        (None, _) => "draws until the time is over".to_owned(),
        (Some(draws), Shard::WHOLE) => format!("{} draws", count(draws)),
        (Some(draws), shard) => {
            let part = shard.part(draws);
            format!(
                "{} of {} draws (shard {} of {})",
                count(part.end - part.start),
                count(draws),
                shard.index,
                shard.of
            )
        }
    };
    let facts = format!("production, aim {}, {draws}, seed {}", job.aim, job.seed);
    let mut out = format!("{}\n{}\n", styled(&cut(&job.title, WIDTH), HEADING), styled(&facts, QUIET));
    if resumed && parts.sums.draws > 0 {
        out.push_str(&hanging(
            "Resumed   ",
            &format!("{} draws were made and are not made again.", count(parts.sums.draws)),
        ));
    }
    out
}

/// What the pilot fixed.
pub(crate) fn pilot(number: &PilotNumber) -> String {
    let text = format!(
        "{} draws; for a relative error of {} the estimate takes {} others.",
        count(number.pilot_draws),
        percent(number.relative_error),
        count(number.draws)
    );
    hanging("Pilot     ", &text)
}

/// Whether the course has a line at so many draws: two to a power of ten.
pub(crate) fn is_worth_a_line(draws: u64) -> bool {
    let text = draws.to_string();
    text.len() >= 4 && (text.trim_end_matches('0') == "1" || text.starts_with("316"))
}

/// The running answer in a line.
pub(crate) fn progress(job: &Job, outcome: &Outcome) -> String {
    let (name, value, se) = match (outcome.value(), job.aim.as_str()) {
        (Some(v), aim) => (aim, v.value, v.se),
        (None, "density") => ("log Z", outcome.log_normaliser.value, outcome.log_normaliser.se),
        (None, aim) => (aim, f64::NAN, f64::NAN),
    };
    let m = measured(value, se, [f64::NAN; 2]);
    let tail =
        if outcome.tail_reason == TailReason::Fitted { significant(outcome.tail_shape, 2) } else { "-".to_owned() };
    format!("{:>13} draws  {name} {} ± {}  tail {tail}", count(outcome.draws), m.value, m.error)
}

/// How long it will still take, where the number is fixed.
pub(crate) fn left(done: u64, all: Option<u64>, seconds: f64) -> String {
    match all {
        Some(all) if done > 0 => {
            let left = seconds / done as f64 * all.saturating_sub(done) as f64;
            format!("  about {} left", duration(left))
        }
        _ => String::new(),
    }
}

/// What to do after an interruption.
pub(crate) fn interrupted(draws: u64, command: &str) -> String {
    format!("interrupted after {} draws; all are kept. Go on with\n  {command}", count(draws))
}

/// Answer, estimates and verdict; of a shard, where it is and what to do with it.
pub(crate) fn closing(parts: &EstimateParts, outcome: &Outcome, file: &Path, seconds: f64) -> String {
    let whole = parts.shard == Shard::WHOLE;
    let told = if whole { report(parts, outcome) } else { format!("\n{} draws made", count(outcome.draws)) };
    let mut out = format!("{told}\nFile      {}\nTime      {}\n", file.display(), duration(seconds));
    if !whole {
        let folder = file.parent().unwrap_or(Path::new(".")).display();
        out.push_str(&format!("Next      evenpoise pool {folder}/shard-*-of-{}.json\n", parts.shard.of));
    }
    out
}

/// The tables and the verdict.
pub(crate) fn report(parts: &EstimateParts, outcome: &Outcome) -> String {
    let mark = if outcome.verdict == Word::Unfit { ": NOT TO BE REPORTED" } else { "" };
    let title = format!("{} production draws{mark}", count(outcome.draws));
    let mut out = format!("\n{}\n{}", styled(&title, HEADING), answer(&parts.job, outcome));
    if !outcome.estimates.is_empty() {
        out.push_str(&format!(
            "\n{}\n{}",
            styled(&format!("{}{mark}", heading(&parts.job)), HEADING),
            estimates(&outcome.estimates)
        ));
    }
    out.push('\n');
    out.push_str(&verdict(outcome));
    if parts.job.is_event() {
        out.push_str(&quiet(PROBABILITY_NOTE));
    }
    out
}

fn heading(job: &Job) -> &'static str {
    match job.aim.as_str() {
        "probability" => "Estimates within the event",
        "expectation" => "Estimates weighted by the integrand",
        _ => "Estimates",
    }
}

fn answer(job: &Job, outcome: &Outcome) -> String {
    let tail = match outcome.tail_reason {
        TailReason::Fitted => significant(outcome.tail_shape, 2),
        TailReason::Bounded => "bounded: the largest weights are all equal".to_owned(),
        TailReason::TooFew => "not known: too few draws in the tail".to_owned(),
    };
    let mut rows = Vec::new();
    match (outcome.value(), &outcome.no_hit) {
        (Some(value), _) => {
            let m = measured(value.value, value.se, value.interval_95);
            rows.push((job.aim.clone(), format!("{} ± {}", m.value, m.error)));
            rows.push(("95 % interval".to_owned(), format!("{} ({})", m.interval, value.interval_method)));
            rows.push(("coefficient of variation".to_owned(), percent(value.cv)));
        }
        (None, Some(bound)) => {
            let text = format!(
                "below {} with 95 %, from {} nominal draws",
                significant(bound.upper_bound, 2),
                count(bound.nominal_draws)
            );
            rows.push((job.aim.clone(), text));
        }
        (None, None) => {
            let log = outcome.log_normaliser;
            let m = measured(log.value, log.se, log.interval_95);
            rows.push(("log normalising constant".to_owned(), format!("{} ± {}", m.value, m.error)));
            rows.push(("95 % interval".to_owned(), m.interval));
        }
    }
    let effective = outcome.ess_fraction * outcome.draws as f64;
    rows.push((
        "effective draws".to_owned(),
        format!("{} = {} of the draws", significant(effective, 4), percent(outcome.ess_fraction)),
    ));
    rows.push(("tail shape".to_owned(), tail));
    rows.push(("largest share of one draw".to_owned(), percent(outcome.largest_share)));
    if outcome.failed > 0 {
        rows.push(("failed evaluations".to_owned(), count(outcome.failed)));
    }
    if let Some(counted) = &outcome.failures_counted {
        for (name, pair) in [("failures counted outside", counted.outside), ("failures counted inside", counted.inside)]
        {
            let m = measured(pair.value, pair.se, [f64::NAN; 2]);
            rows.push((name.to_owned(), format!("{} ± {}", m.value, m.error)));
        }
    }
    rows.iter().map(|(name, value)| hanging(&format!("  {name:<27}"), value)).collect()
}

fn estimates(estimates: &[(String, EstimateOutcome)]) -> String {
    let mut out = String::new();
    let width = estimates.iter().take(MOST_ESTIMATES).map(|(name, _)| name.chars().count().min(24)).max().unwrap_or(0);
    for (name, e) in estimates.iter().take(MOST_ESTIMATES) {
        let m = measured(e.value, e.se, e.interval_95);
        out.push_str(&hanging(
            &format!("  {:<width$}  ", cut(name, 24)),
            &format!("{} ± {}  ({})", m.value, m.error, m.interval),
        ));
        for q in e.quantiles.iter().take(MOST_QUANTILES) {
            let text = match (q.value, q.interval_95) {
                (Some(value), Some([low, high])) => {
                    let m = measured(value, 0.25 * (high - low), [low, high]);
                    format!("{} ({})", m.value, m.interval)
                }
                _ => "not given: beyond the outermost bins".to_owned(),
            };
            out.push_str(&hanging(&format!("  {:<width$}    {:>6}  ", "", percent(q.share)), &text));
        }
    }
    if estimates.len() > MOST_ESTIMATES {
        out.push_str(&format!("  and {} more in the file\n", estimates.len() - MOST_ESTIMATES));
    }
    out
}

fn verdict(outcome: &Outcome) -> String {
    let meaning = match outcome.verdict {
        Word::Sound => "report these numbers",
        Word::Strained => "usable with the caution stated",
        Word::Unfit => "do not report numbers from this",
    };
    let passed = outcome.checks.iter().filter(|check| check.word == Word::Sound).count();
    let word = styled(&outcome.verdict.to_string().to_uppercase(), of_word(outcome.verdict));
    let mut out = format!("Verdict   {word}: {meaning} ({passed} of {} checks are sound)\n", outcome.checks.len());
    outcome.reasons.iter().for_each(|reason| out.push_str(&hanging("        - ", reason)));
    out.push_str(&quiet(&outcome.caution));
    out
}

/// What to do where a relative error was aimed at and missed: the aim is told as it is, never drawn up to.
pub(crate) fn missed(parts: &EstimateParts, outcome: &Outcome, run: &str, stage: u32) -> String {
    let Some(pilot) = &parts.pilot else { return String::new() };
    let reached = outcome.value().map_or(outcome.log_normaliser.se, |value| value.cv);
    if reached <= pilot.relative_error {
        return String::new();
    }
    let more = (relative_variance(&parts.job, &parts.sums).upper / pilot.relative_error / pilot.relative_error).ceil();
    let next = stage + 1;
    let text = format!(
        "The relative error is {}, above the {} aimed at. The number of draws was fixed beforehand and stays. A further stage, to be \
         reported beside this one:",
        percent(reached),
        percent(pilot.relative_error)
    );
    format!(
        "{}          evenpoise estimate {run} --draws {more:.0} --stage {next} --out {run}/estimate-{next}\n",
        hanging("Aim       ", &text)
    )
}
