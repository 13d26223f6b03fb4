//! What `check` shows, in 80 columns.

use super::layout::HEADING;
use super::layout::QUIET;
use super::layout::WIDTH;
use super::layout::cut;
use super::layout::hanging;
use super::layout::styled;
use super::numbers::count;
use super::numbers::percent;
use super::numbers::rough;
use super::numbers::significant;
use super::numbers::trimmed;
use evenpoise::distribution::Distribution;
use evenpoise::distribution::correlation::LinearCorrelation;
use evenpoise::distribution::correlation::rank_of_score;
use evenpoise::numeric::Points;
use evenpoise::problem::Aim;
use evenpoise::problem::Correlation;
use evenpoise::problem::Nature;
use evenpoise::problem::Problem;
use evenpoise::problem::Variable;
use evenpoise::report::trial::Finding;
use evenpoise::report::trial::Trial;
use std::time::Duration;

/// Most variables, and most pairs of correlated ones, that are shown.
const MOST: usize = 40;
/// Scales of the start to both sides of its centre that hold 95 %.
const CENTRAL_95: f64 = 1.96;

/// The problem as it was understood.
pub(crate) fn understood(problem: &Problem) -> String {
    let what = match problem.aim() {
        Aim::Density => "the normalising constant of a density, and means under it",
        Aim::Expectation => "the mean of an integrand under the variables' distributions",
        Aim::Probability => "the probability of an event under the variables' distributions",
    };
    let mut out = format!("{}\n", styled(&cut(problem.title(), WIDTH), HEADING));
    out.push_str(&hanging("", &format!("Aim {}: {what}.", problem.aim().word())));
    out.push_str(&variables(problem));
    out.push_str(&correlations(problem));
    out.push_str(&data(problem));
    out.push_str(&target(problem));
    out
}

fn heading(title: &str) -> String {
    format!("\n{}\n", styled(title, HEADING))
}

fn variables(problem: &Problem) -> String {
    let d = problem.dim();
    let title = if d == 1 { "One variable".to_owned() } else { format!("{d} variables") };
    let mut out = heading(&title);
    let start = problem.start();
    let mut corners = Points::new(d);
    for side in [0.0, -CENTRAL_95, CENTRAL_95] {
        let corner: Vec<f64> =
            start.near.iter().zip(&start.spread).map(|(near, spread)| near + side * spread).collect();
        corners.push(&corner);
    }
    let natural = problem.to_natural(&corners);
    for (j, variable) in problem.variables().iter().enumerate().take(MOST) {
        let unit = variable.unit.as_ref().map_or(String::new(), |unit| format!(" {unit}"));
        let ends = [natural.get(1, j).min(natural.get(2, j)), natural.get(1, j).max(natural.get(2, j))];
        let [near, low, high] = [natural.get(0, j), ends[0], ends[1]].map(|x| trimmed(x, 3));
        let text = format!(
            "{}; coordinate {}; start {near}{unit} (95 % within {low} to {high})",
            nature(variable),
            variable.coordinate.word()
        );
        out.push_str(&hanging(&format!("  {:<16}  ", cut(&variable.name, 16)), &text));
    }
    if d > MOST {
        out.push_str(&format!("  and {} more\n", d - MOST));
    }
    out
}

fn nature(variable: &Variable) -> String {
    match &variable.nature {
        Nature::Range { low, high } => format!("flat on {}", interval(*low, *high)),
        Nature::Random(distribution) => {
            let parameters: Vec<String> = distribution
                .parameters()
                .iter()
                .map(|(name, value)| format!("{name} {}", trimmed(*value, 4)))
                .collect();
            let (low, high) = distribution.support();
            let shift = if distribution.shift() == 0.0 {
                String::new()
            } else {
                format!(", shifted by {}", trimmed(distribution.shift(), 4))
            };
            let kind = if distribution.is_discrete() { ", whole numbers" } else { "" };
            format!("{}: {}{shift}; on {}{kind}", distribution.family(), parameters.join(", "), interval(low, high))
        }
        Nature::Dependent { family, parameters } => {
            let parameters: Vec<String> = parameters.iter().map(|(name, text)| format!("{name} = {text}")).collect();
            format!("{family} given other variables: {}", parameters.join(", "))
        }
    }
}

fn interval(low: f64, high: f64) -> String {
    match (low.is_finite(), high.is_finite()) {
        (false, false) => "the whole line".to_owned(),
        (true, false) => format!("{} and above", trimmed(low, 4)),
        (false, true) => format!("{} and below", trimmed(high, 4)),
        (true, true) => format!("{} to {}", trimmed(low, 4), trimmed(high, 4)),
    }
}

fn correlations(problem: &Problem) -> String {
    if problem.correlations().is_empty() {
        return String::new();
    }
    let mut rows: Vec<String> = problem.correlations().iter().flat_map(|group| pairs(problem, group)).collect();
    let more = rows.len().saturating_sub(MOST);
    rows.truncate(MOST);
    let titles = format!("  {:<40}  {:>9}  {:>9}  {:>9}", "", "linear", "rank", "scores");
    let mut out = format!("{}{}\n{}", heading("Correlations"), styled(&titles, QUIET), rows.concat());
    if more > 0 {
        out.push_str(&format!("  and {more} more\n"));
    }
    out
}

/// Every pair of a group that is correlated, with all three kinds of its correlation.
fn pairs(problem: &Problem, group: &Correlation) -> Vec<String> {
    let n = group.members.len();
    let mut rows = Vec::new();
    for i in 0..n {
        for j in 0..i {
            let score = group.score[i * n + j];
            let [a, b] = [group.members[j], group.members[i]].map(|k| &problem.variables()[k]);
            if score != 0.0 {
                let names = cut(&format!("{}, {}", a.name, b.name), 40);
                let linear = linear(a, b, score).map_or("none".to_owned(), |r| format!("{r:.4}"));
                let rank = rank_of_score(score).map_or("none".to_owned(), |r| format!("{r:.4}"));
                rows.push(format!("  {names:<40}  {linear:>9}  {rank:>9}  {score:>9.4}\n"));
            }
        }
    }
    rows
}

/// The correlation of two variables themselves; none where one of them has no standard deviation.
fn linear(a: &Variable, b: &Variable, score: f64) -> Option<f64> {
    let distribution = |variable: &Variable| -> Option<Distribution> {
        match &variable.nature {
            Nature::Random(distribution) => Some(distribution.clone()),
            _ => None,
        }
    };
    LinearCorrelation::new(&distribution(a)?, &distribution(b)?).ok()?.linear(score).ok()
}

fn data(problem: &Problem) -> String {
    let files = problem.data_files();
    if files.is_empty() {
        return String::new();
    }
    let mut out = heading("Data");
    for file in files {
        let used = count((file.rows - file.dropped) as u64);
        let dropped = match file.dropped {
            0 => "none dropped".to_owned(),
            n => format!("{} dropped for a missing cell", count(n as u64)),
        };
        let text = format!("{used} rows used, {dropped}; columns {}", file.columns.join(", "));
        out.push_str(&hanging(&format!("  {:<16}  ", cut(&file.file, 30)), &text));
    }
    out
}

/// The target as it is written, and the names under which estimates are reported.
fn target(problem: &Problem) -> String {
    let mut out = heading("Target");
    let text = problem.text();
    let lines = text.lines().skip_while(|line| *line != "[target]").skip(1).take_while(|line| !line.is_empty());
    for line in lines.filter(|line| *line != "require = []") {
        out.push_str(&hanging("  ", line));
    }
    let names = problem.estimate_names();
    if !names.is_empty() {
        out.push_str(&heading(if names.len() == 1 { "One estimate" } else { "Estimates" }));
        out.push_str(&hanging("  ", &names.join(", ")));
    }
    out
}

/// How the trial evaluations came out.
pub(crate) fn tried(problem: &Problem, trial: &Trial, took: Duration) -> String {
    let n = trial.points.len();
    let tally = trial.tally(problem.aim());
    let share = |k: usize| format!("{:>7}", percent(k as f64 / n as f64));
    let mut out = heading(&format!("{n} trial points of the start"));
    out.push_str(&format!(
        "  inside   {}    outside {}    failed {}\n",
        share(tally.inside),
        share(tally.outside),
        share(tally.failed)
    ));
    match problem.aim() {
        Aim::Density => {
            let best = trial.best(problem).map_or("none".to_owned(), |(_, best)| significant(best, 6));
            let centre = trial.centre_log_density(problem);
            let centre = if centre.is_nan() { "failed".to_owned() } else { significant(centre, 6) };
            out.push_str(&format!(
                "  log density in natural units: {centre} at the centre, {best} at the best point\n"
            ));
        }
        Aim::Probability => out.push_str(&format!(
            "  in the event {}; margin at the centre {}\n",
            share(tally.met).trim_start(),
            significant(trial.centre.value[0], 4)
        )),
        Aim::Expectation => out.push_str(&format!(
            "  integrand not zero at {}; at the centre {}\n",
            share(tally.met).trim_start(),
            significant(trial.centre.value[0], 4)
        )),
    }
    let rate = n as f64 / took.as_secs_f64();
    let gradient = if problem.has_gradient() { ", with exact gradients" } else { "" };
    out.push_str(&format!("  about {} evaluations a second{gradient}\n", rough(rate)));
    out
}

/// What looks wrong.
pub(crate) fn found(findings: &[Finding]) -> String {
    if findings.is_empty() {
        return format!("{}  Nothing.\n", heading("What looks wrong"));
    }
    let each: Vec<String> = findings.iter().map(|finding| hanging("  - ", &finding.to_string())).collect();
    format!("{}{}", heading("What looks wrong"), each.concat())
}
