//! What a survey and a round show, one line a round.

use super::layout;
use super::layout::QUIET;
use super::layout::hanging;
use super::layout::styled;
use super::numbers;
use evenpoise::adapt::Round;
use evenpoise::adapt::Survey;
use evenpoise::adapt::rare::RareRound;
use evenpoise::adapt::rare::RareSurvey;
use evenpoise::problem::Aim;

/// Columns of the bar of a round.
const BAR: usize = 9;

/// Titles of the columns of [`round`].
const ROUND_HEADING: [&str; 2] = [
    "                      ESS fraction             weight    tail   evalua-     time",
    "round components predicted   fresh           variance   shape     tions     left",
];

/// Climbs, modes, and what could have been missed.
pub(crate) fn survey(survey: &Survey) -> String {
    let modes = match survey.modes.len() {
        0 => "no mode inside the support".to_owned(),
        1 => format!("one mode, reached {} times", survey.modes[0].hits),
        n => {
            let hits: Vec<String> = survey.modes.iter().map(|mode| mode.hits.to_string()).collect();
            format!("{n} modes, reached {} times", layout::cut(&hits.join(", "), 40))
        }
    };
    let missed = if survey.finished == 0 {
        "No climb ended in a mode: what lies elsewhere is not known.".to_owned()
    } else {
        format!(
            "A mode whose basin takes {} of the start would have been met with 95 %; a smaller one could have been missed.",
            numbers::percent(survey.basin_share)
        )
    };
    let found = format!(
        "{} climbs in {} evaluations: {modes}. {missed}",
        survey.starts,
        numbers::count(survey.evaluations + survey.later_evaluations)
    );
    hanging("Survey    ", &found) + &heading(&ROUND_HEADING)
}

fn heading(titles: &[&str; 2]) -> String {
    format!("\n{}\n{}\n", styled(titles[0], QUIET), styled(titles[1], QUIET))
}

/// One round in a line.
pub(crate) fn round(round: &Round, seconds_left: Option<f64>) -> String {
    let score = round.score.as_ref();
    let predicted = round.predicted_ess_fraction.map_or("-".to_owned(), |share| numbers::percent_fixed(share.min(1.0)));
    let fresh = score.map_or(f64::NAN, |score| score.ess_fraction);
    let known = |read: &dyn Fn(&evenpoise::weights::Score) -> f64, write: &dyn Fn(f64) -> String| {
        score.map(read).filter(|x| x.is_finite()).map_or("-".to_owned(), write)
    };
    format!(
        "{:>5} {:>10} {:>9} {:>7} {} {:>8} {:>7} {:>9} {:>8}",
        round.index,
        round.components,
        predicted,
        numbers::percent_fixed(fresh),
        layout::bar(fresh, BAR),
        known(&|s| s.weight_variance, &|x| numbers::significant(x, 3)),
        known(&|s| s.tail.shape, &|x| format!("{x:.2}")),
        numbers::count(round.evaluations),
        seconds_left.map_or("-".to_owned(), numbers::duration),
    )
}

/// Titles of the columns of [`rare_round`].
const RARE_HEADING: [&str; 2] = [
    "                      ESS fraction                               evalua-    time",
    "round components predicted   fresh               value       cv    tions    left",
];

/// Scouts, searches, and what they found.
pub(crate) fn rare_survey(survey: &RareSurvey, aim: Aim) -> String {
    let (met, points) = match aim {
        Aim::Probability => ("met the event", "design point"),
        _ => ("had an integrand that is not zero", "mode"),
    };
    let many = if survey.points.len() == 1 { "" } else { "s" };
    let nearest = survey.points.iter().map(|point| point.distance).fold(f64::INFINITY, f64::min);
    let distance = if nearest.is_finite() && aim == Aim::Probability {
        format!(", the nearest {} standard deviations from the centre", numbers::significant(nearest, 3))
    } else {
        String::new()
    };
    let found = format!(
        "{} wide draws, of which {} {met}; {} searches found {} {points}{many}{distance}; {} evaluations.",
        survey.scouts,
        survey.scouts_that_met,
        survey.searches,
        survey.points.len(),
        numbers::count(survey.evaluations),
    );
    hanging("Survey    ", &found) + &heading(&RARE_HEADING)
}

/// One round of a probability or an expectation in a line; a mark where it does not count in the answer.
pub(crate) fn rare_round(round: &RareRound, seconds_left: Option<f64>) -> String {
    let predicted = round.predicted_ess_fraction.map_or("-".to_owned(), |share| numbers::percent_fixed(share.min(1.0)));
    let number = |x: f64, digits: i32| if x.is_finite() { numbers::significant(x, digits) } else { "-".to_owned() };
    format!(
        "{:>5} {:>10} {:>9} {:>7} {} {:>9}{} {:>7} {:>8} {:>7}",
        round.index,
        round.components,
        predicted,
        numbers::percent_fixed(round.ess_fraction),
        layout::bar(round.ess_fraction, BAR),
        number(round.value, 3),
        if round.counted { " " } else { "*" },
        if round.cv.is_finite() { numbers::percent(round.cv) } else { "-".to_owned() },
        numbers::count(round.evaluations),
        seconds_left.map_or("-".to_owned(), numbers::duration),
    )
}
