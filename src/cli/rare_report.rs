//! The closing table of a probability or an expectation, in 80 columns.

use super::layout::HEADING;
use super::layout::QUIET;
use super::layout::cut;
use super::layout::hanging;
use super::layout::styled;
use super::numbers::count;
use super::numbers::measured;
use super::numbers::percent;
use super::numbers::significant;
use super::tune_report::mark;
use super::tune_report::quiet;
use super::tune_report::raised;
use super::tune_report::verdict;
use evenpoise::adapt::rare::DesignPoint;
use evenpoise::adapt::rare::RareAnswer;
use evenpoise::adapt::rare::RareTuning;
use evenpoise::adapt::rare::RareValue;
use evenpoise::problem::Aim;
use evenpoise::problem::Problem;
use evenpoise::report::PROBABILITY_NOTE;
use evenpoise::report::places;

/// Most points in the table; all are in the summary.
const MOST_POINTS: usize = 8;
/// Variables that are named with a point.
const NAMED: usize = 3;

/// Answer, design points and verdict.
pub(crate) fn closing(problem: &Problem, tuning: &RareTuning) -> String {
    let (n, raised) = (tuning.chosen.len(), raised(&tuning.extended_from));
    let parts = format!("{n} components; {} evaluations in all{raised}", count(tuning.evaluations));
    let counted = tuning.rounds.iter().filter(|round| round.counted).count();
    let draws = count(tuning.draws.log_nominal.len() as u64);
    let title = format!("Answer from the {draws} draws of {counted} rounds{}", mark(&tuning.verdict));
    let mut out = format!("\n{}\n{}\n", hanging("Proposal  ", &parts), styled(&title, HEADING));
    match &tuning.answer {
        RareAnswer::Value(value) => out.push_str(&answer(problem.aim(), value)),
        RareAnswer::NoHit { upper_bound, nominal_draws } => out.push_str(&hanging(
            "  ",
            &format!(
                "The event was never met. From {} draws of the nominal density its probability is below {} with 95 %.",
                count(*nominal_draws as u64),
                significant(*upper_bound, 2)
            ),
        )),
    }
    if let Some(counted) = &tuning.failures_counted {
        let [outside, inside] = [counted.outside, counted.inside].map(|way| {
            let way = measured(way.value, way.se, [f64::NAN; 2]);
            format!("{} ± {}", way.value, way.error)
        });
        out.push_str(&row("failures counted outside", &outside));
        out.push_str(&row("failures counted inside", &inside));
    }
    out.push_str(&points(problem, &tuning.survey.points));
    out.push_str(&format!("\n{}", verdict(&tuning.verdict)));
    if problem.aim() == Aim::Probability {
        out.push_str(&quiet(PROBABILITY_NOTE));
    }
    out
}

fn answer(aim: Aim, value: &RareValue) -> String {
    let numbers = measured(value.value, value.se, value.interval_95);
    let rests = &value.answer;
    row(aim.word(), &format!("{} ± {}", numbers.value, numbers.error))
        + &row("95 % interval", &format!("{} ({})", numbers.interval, value.interval_method))
        + &row("coefficient of variation", &percent(value.cv))
        + &row("effective draws", &significant(rests.effective_draws, 4))
        + &row("largest share of one draw", &percent(rests.largest_share))
}

fn row(name: &str, value: &str) -> String {
    hanging(&format!("  {name:<27}"), value)
}

/// The points that the survey found, the nearest first.
fn points(problem: &Problem, points: &[DesignPoint]) -> String {
    if points.is_empty() {
        return String::new();
    }
    let event = problem.aim() == Aim::Probability;
    let mut nearest: Vec<&DesignPoint> = points.iter().collect();
    nearest.sort_by(|a, b| a.distance.total_cmp(&b.distance));
    let title = if event { "Design points" } else { "Modes of the integrand" };
    let titles = "  distance  first order  what carries it: part of the way, and the value there";
    let mut out = format!("\n{}\n{}\n", styled(title, HEADING), styled(titles, QUIET));
    for point in nearest.iter().take(MOST_POINTS) {
        let first = point.first_order_probability.map_or("-".to_owned(), |p| significant(p, 3));
        let head = format!("  {:>8}  {first:>11}  ", significant(point.distance, 3));
        out.push_str(&hanging(&head, &carried(problem, point)));
    }
    if nearest.len() > MOST_POINTS {
        out.push_str(&format!("  and {} more in summary.json\n", nearest.len() - MOST_POINTS));
    }
    out
}

/// The variables that matter most at a point.
fn carried(problem: &Problem, point: &DesignPoint) -> String {
    let mut order: Vec<usize> = (0..problem.dim()).collect();
    order.sort_by(|&a, &b| point.importance[b].abs().total_cmp(&point.importance[a].abs()).then(a.cmp(&b)));
    let values = places(problem, &point.natural);
    let named = order.iter().take(NAMED).map(|&j| {
        let variable = &problem.variables()[j];
        let unit = variable.unit.as_ref().map_or(String::new(), |unit| format!(" {unit}"));
        let value = &values[j];
        format!("{} {} ({value}{unit})", cut(&variable.name, 16), percent(point.importance[j].abs()))
    });
    named.collect::<Vec<_>>().join(", ")
}
