//! The closing tables of a comparison, in 80 columns.

use super::layout::HEADING;
use super::layout::QUIET;
use super::layout::cut;
use super::layout::hanging;
use super::layout::styled;
use super::numbers::percent;
use super::numbers::rough;
use super::numbers::trimmed;
use evenpoise::adapt::compare::Difference;
use evenpoise::adapt::compare::Interval;
use evenpoise::report::ComparisonSummary;
use evenpoise::report::ContestantSummary;

/// Columns of a proposal's name, and of each of the three numbers beside it.
const NAME: usize = 22;
const NUMBER: usize = 19;

/// Tables, differences, recommendation, and where everything is.
pub(crate) fn closing(summary: &ComparisonSummary, folder: &str) -> String {
    let mut out = String::from("\n");
    let heading = |out: &mut String, titles: [&str; 4]| out.push_str(&format!("{}\n", styled(&line(titles), QUIET)));
    out.push_str(&format!("{}\n", styled("Scores on fresh draws: value and 95 % interval", HEADING)));
    heading(&mut out, ["", "ESS fraction %", "weight variance", "tail shape"]);
    for c in &summary.contestants {
        out.push_str(&format!("{}\n", weights(c)));
    }
    out.push('\n');
    heading(&mut out, ["", "largest share %", "relative error %", "draws for 1 %"]);
    for c in &summary.contestants {
        out.push_str(&format!("{}\n", costs(c)));
    }
    if let Some(y) = &summary.yardstick {
        out.push_str(&format!("{}\n", line(["Plain draws", "", "", &with_interval(y.draws_for_one_percent, whole)])));
    }
    out.push_str(&format!("\n{}\n", styled("ESS fraction less that of the Gaussian mixture, in points", HEADING)));
    heading(&mut out, ["", "difference", "standard error", "chance if none"]);
    for difference in &summary.differences {
        out.push_str(&format!("{}\n", against(difference)));
    }
    out.push('\n');
    out.push_str(&hanging("Tails     ", &summary.recommendation.sentence));
    let quiet = format!("{} It speaks of what the draws have met.", summary.shared);
    let quiet = hanging("          ", &quiet);
    out.extend(quiet.lines().map(|line| format!("{}\n", styled(line, QUIET))));
    out.push_str(&format!("\nReport    {folder}/report.html\n          and report.md, comparison.json, figures\n"));
    out
}

fn line([name, a, b, c]: [&str; 4]) -> String {
    let text = format!("{:<NAME$}{a:>NUMBER$}{b:>NUMBER$}{c:>NUMBER$}", cut(name, NAME - 1));
    text.trim_end().to_owned()
}

fn weights(c: &ContestantSummary) -> String {
    let of_hundred = |x: f64| trimmed(100.0 * x, 3);
    let short = |x: f64| trimmed(x, 2);
    line([
        &c.name,
        &with_interval(c.ess_fraction, of_hundred),
        &with_interval(c.weight_variance, short),
        &with_interval(c.tail_shape, |x| format!("{x:.2}")),
    ])
}

fn costs(c: &ContestantSummary) -> String {
    let of_hundred = |x: f64| trimmed(100.0 * x, 2);
    line([
        &c.name,
        &with_interval(c.largest_share, of_hundred),
        &with_interval(c.relative_error, of_hundred),
        &with_interval(c.draws_for_one_percent, whole),
    ])
}

fn against(d: &Difference) -> String {
    let points = |x: f64| format!("{:+.1}", 100.0 * x);
    let se = d.se.map_or("not known".to_owned(), |se| format!("{:.2}", 100.0 * se));
    let chance = d
        .significance
        .map_or("not known".to_owned(), |p| if p < 0.001 { "below 0.1 %".to_owned() } else { percent(p) });
    line([&d.name, &points(d.value), &se, &chance])
}

/// `value low..high`; the value alone where that is too wide, which is a number of draws that nobody makes.
fn with_interval(x: Interval, write: impl Fn(f64) -> String) -> String {
    if x.value == f64::NEG_INFINITY {
        return "bounded".to_owned();
    }
    if x.value.is_nan() {
        return "not known".to_owned();
    }
    if x.low.is_nan() || x.high.is_nan() {
        return write(x.value);
    }
    let whole = format!("{} {}..{}", write(x.value), write(x.low), write(x.high));
    if whole.chars().count() < NUMBER { whole } else { write(x.value) }
}

/// A number of draws, two digits; large ones with a power of ten.
fn whole(x: f64) -> String {
    if x < 9_950.0 { rough(x) } else { format!("{x:.1e}") }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_widest_numbers_leave_a_space_between_columns() {
        let interval = |value, low, high| Interval { value, low, high };
        let cells = [
            with_interval(interval(9_900.0, 8_700.0, 9_900.0), whole),
            with_interval(interval(2.3e12, 1.1e12, 4.5e12), whole),
            with_interval(interval(0.066, 0.056, 0.077), |x| trimmed(x, 2)),
            with_interval(interval(-0.21, -0.43, -0.01), |x| format!("{x:.2}")),
            with_interval(interval(f64::NEG_INFINITY, f64::NAN, f64::NAN), |x| trimmed(x, 2)),
        ];
        assert!(cells.iter().all(|cell| cell.chars().count() < NUMBER), "{cells:?}");
        assert_eq!(line(["a proposal with a long name", "1", "2", "3"]).chars().count(), NAME + 3 * NUMBER);
    }
}
