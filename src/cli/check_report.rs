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
use evenpoise::problem::Aim;
use evenpoise::problem::Correlation;
use evenpoise::problem::Nature;
use evenpoise::problem::Problem;
use evenpoise::problem::Variable;
use evenpoise::problem::Written;
use evenpoise::report::trial::Finding;
use evenpoise::report::trial::Trial;
use std::time::Duration;

/// Most variables, and most pairs of correlated ones, that are shown.
const MOST: usize = 40;

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
    for (j, variable) in problem.variables().iter().enumerate().take(MOST) {
        out.push_str(&hanging(&format!("  {:<16}  ", cut(&variable.name, 16)), &nature(problem, j)));
        out.push_str(&hanging(&" ".repeat(20), &start(problem, j)));
    }
    if d > MOST {
        out.push_str(&format!("  and {} more\n", d - MOST));
    }
    out
}

/// Unit, coordinate and start of a variable.
fn start(problem: &Problem, j: usize) -> String {
    let variable = &problem.variables()[j];
    let unit = variable.unit.as_ref().map_or(String::new(), |unit| format!("in {unit}; "));
    let [near, low, high] = problem.start_of(j);
    // Enough digits to tell the ends from the centre.
    let width = (high - low).abs();
    let size = near.abs().max(low.abs()).max(high.abs());
    let digits = if width > 0.0 && size.is_finite() { 3 + (size / width).max(1.0).log10().floor() as i32 } else { 3 };
    let [near, low, high] = [near, low, high].map(|x| trimmed(x, digits.min(12)));
    let given = match variable.nature {
        Nature::Dependent { .. } => ", given the others at their start",
        _ => "",
    };
    format!("{unit}coordinate {}; start {near} (95 % from {low} to {high}{given})", variable.coordinate.word())
}

fn nature(problem: &Problem, j: usize) -> String {
    let variable = &problem.variables()[j];
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
            let own: Vec<&str> = distribution.parameters().iter().map(|(name, _)| *name).collect();
            let parameters = match as_written(problem, j, &own) {
                Some(written) => format!("{written} (that is {})", parameters.join(", ")),
                None => parameters.join(", "),
            };
            format!("{}: {parameters}{shift}; on {}{kind}", distribution.family(), interval(low, high))
        }
        Nature::Dependent { family, parameters } => {
            let parameters: Vec<String> = parameters.iter().map(|(name, text)| format!("{name} = {text}")).collect();
            format!("{family} given other variables: {}", parameters.join(", "))
        }
    }
}

/// The parameters of a distribution as the file gives them, where they are others than its `own`.
fn as_written(problem: &Problem, j: usize, own: &[&str]) -> Option<String> {
    let written = problem.written_parameters(j);
    if written.iter().all(|(name, value)| own.contains(&name.as_str()) && matches!(value, Written::Number(_))) {
        return None;
    }
    let each = written.iter().map(|(name, value)| match value {
        Written::Number(value) => format!("{name} {}", trimmed(*value, 4)),
        Written::Formula(text) => format!("{name} = {text}"),
    });
    Some(each.collect::<Vec<_>>().join(", "))
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
        for (name, labels) in estimates(&names) {
            let over = match labels.as_slice() {
                [] => "one number".to_owned(),
                labels => {
                    let shown: Vec<&str> = labels.iter().take(8).copied().collect();
                    let more = if labels.len() > shown.len() { ", ..." } else { "" };
                    format!("one for each of {}: {}{more}", count(labels.len() as u64), shown.join(", "))
                }
            };
            out.push_str(&hanging(&format!("  {:<16}  ", cut(name, 16)), &over));
        }
    }
    out
}

/// Estimates by name, each with the labels of what it runs over.
fn estimates(names: &[String]) -> Vec<(&str, Vec<&str>)> {
    let mut found: Vec<(&str, Vec<&str>)> = Vec::new();
    for name in names {
        let (base, label) = match name.split_once('[') {
            Some((base, label)) => (base, label.strip_suffix(']')),
            None => (name.as_str(), None),
        };
        match (found.last_mut(), label) {
            (Some((last, labels)), Some(label)) if *last == base && !labels.is_empty() => labels.push(label),
            _ => found.push((base, label.into_iter().collect())),
        }
    }
    found
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
    if let Some(fulfilled) = trial.fulfilled {
        out.push_str(&format!("  `require` holds at {}\n", share(fulfilled).trim_start()));
    }
    match problem.aim() {
        Aim::Density => {
            let best = trial.best(problem).map_or("none".to_owned(), |(_, best)| significant(best, 6));
            let centre = trial.centre_log_density(problem);
            let centre = if centre.is_nan() { "failed".to_owned() } else { significant(centre, 6) };
            let text = format!("log density {centre} at the centre, {best} at the best point (natural units)");
            out.push_str(&hanging("  ", &text));
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
