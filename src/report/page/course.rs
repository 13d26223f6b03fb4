//! What the page says about the way to the proposal: survey, rounds, refits, choice.

use super::blocks::{Block, Span, plain};
use super::data::{PageData, ScheduleKind};
use super::method;
use super::numbers::{NOTHING, column, count, share, share_column};
use crate::report::places::resolved;

/// Points of the survey and variables of a point that are shown.
const MOST_POINTS: usize = 12;
const MOST_COORDINATES: usize = 6;

pub(crate) fn survey(data: &PageData) -> Vec<Block> {
    let survey = &data.survey;
    let mut blocks = vec![Block::Heading(2, "Survey".into()), Block::text(survey.sentences.join(" "))];
    if !survey.points.is_empty() {
        let rows = survey.points.iter().take(MOST_POINTS).enumerate().map(|(k, point)| {
            let mut place: Vec<String> = data
                .variables
                .iter()
                .zip(&point.location)
                .take(MOST_COORDINATES)
                .map(|(v, x)| format!("{} = {}", v.name, resolved(*x, v.start[2] - v.start[1])))
                .collect();
            if point.location.len() > MOST_COORDINATES {
                place.push("…".into());
            }
            let mut row = vec![(k + 1).to_string(), place.join(", ")];
            row.extend(point.facts.iter().cloned());
            row
        });
        let caption = match survey.points.len() {
            n if n > MOST_POINTS => format!("The first {MOST_POINTS} of {n} {}s found", survey.point_name),
            _ => format!("Every {} found", survey.point_name),
        };
        let titles: Vec<&str> =
            [survey.point_name, "place"].into_iter().chain(survey.fact_titles.iter().copied()).collect();
        blocks.push(Block::table(&caption, &titles, rows.collect()));
    }
    blocks.push(Block::Paragraph(vec![
        Span::Strong("What could have been missed: ".into()),
        plain(format!(
            "one that attracts {} of the start or less may have been missed with a chance of 5 % and more (1 − 0.05^(1/searches)).",
            share(survey.basin_share)
        )),
    ]));
    blocks
}

pub(crate) fn tuning(data: &PageData) -> Vec<Block> {
    let mut blocks = vec![Block::Heading(2, "Tuning".into())];
    if data.rounds.is_empty() {
        blocks.push(Block::text("No round was made."));
        return blocks;
    }
    let what = match data.schedule {
        ScheduleKind::Exponent => {
            "ESS: effective sample size as a share of the draws. Infinite degrees of freedom are Gaussian components."
        }
        ScheduleKind::Smoothing => {
            "ESS: effective sample size of the contributions to the answer, as a share of the draws."
        }
    };
    blocks.push(Block::text(format!(
        "Every round is scored on its own draws, which had no part in making the proposal they come from. {what}"
    )));
    blocks.push(rounds(data));
    blocks.push(Block::text(format!("The rounds ended because {}.", data.stop)));
    for raise in &data.raises {
        blocks.push(Block::Paragraph(vec![Span::Strong("A raised budget. ".into()), plain(raise.clone())]));
    }
    blocks.extend(winners(data));
    if !data.finalists.is_empty() {
        let rows = data.finalists.iter().map(|f| {
            vec![
                f.name.clone(),
                share_column(f.predicted_ess_fraction),
                share_column(f.ess_fraction),
                if f.chosen { "chosen" } else { "not chosen" }.to_owned(),
            ]
        });
        blocks.push(Block::table("Finalists", &["proposal", "ESS predicted#", "ESS fresh#", "choice"], rows.collect()));
    }
    blocks.push(Block::text(data.proposal.clone()));
    blocks
}

fn winners(data: &PageData) -> Vec<Block> {
    let fitted: Vec<_> = data.rounds.iter().filter(|r| r.tried > 0).collect();
    if fitted.is_empty() {
        return Vec::new();
    }
    let (schedule, merit) = match data.schedule {
        ScheduleKind::Exponent => ("exponent#", "gain, nats#"),
        ScheduleKind::Smoothing => ("smoothing#", "predicted variance#"),
    };
    let rows = fitted.iter().map(|r| {
        vec![
            r.index.to_string(),
            column(r.schedule),
            count(r.tried as u64),
            r.winner.clone(),
            column(r.merit),
            if data.schedule == ScheduleKind::Exponent { count(u64::from(r.births)) } else { NOTHING.to_owned() },
        ]
    });
    let mut blocks = vec![known_columns(
        "Refits after the rounds, and who won",
        &["after round", schedule, "candidates#", "winner", merit, "births#"],
        rows.collect(),
    )];
    let mut kinds: Vec<&str> = Vec::new();
    for round in fitted {
        if !kinds.contains(&round.winner.as_str()) {
            kinds.push(&round.winner);
        }
    }
    let explained: Vec<String> = kinds.iter().map(|kind| format!("{kind}, {}", method::refit_kind(kind))).collect();
    let what = match data.schedule {
        ScheduleKind::Exponent => {
            "Exponent: the power of the target that the fit aimed at; 1 is the target itself. Gain: weighted log density on held-out points over \
             the present proposal's. Births: components added at heavy draws."
        }
        ScheduleKind::Smoothing => {
            "Smoothing: the width of the smoothed event, in units of the margin; 0 is the event itself. Predicted variance: relative variance of one \
             draw that the held-out draws predict."
        }
    };
    blocks.push(Block::text(format!("{what} Winners: {}.", explained.join("; "))));
    blocks
}

fn rounds(data: &PageData) -> Block {
    let titles = [
        "round",
        "draws#",
        "evaluations#",
        "components#",
        "degrees of freedom#",
        "ESS predicted#",
        "ESS fresh#",
        "weight variance#",
        "tail shape#",
        "largest share#",
        "estimate#",
        "its variation#",
    ];
    let rows = data.rounds.iter().map(|r| {
        let [value, variation] = r.estimate.unwrap_or([f64::NAN; 2]);
        vec![
            r.index.to_string(),
            count(u64::from(r.draws)),
            count(r.evaluations),
            count(r.components as u64),
            column(r.df),
            share_column(r.predicted_ess_fraction),
            share_column(r.ess_fraction),
            column(r.weight_variance),
            column(r.tail_shape),
            share_column(r.largest_share),
            column(value),
            share_column(variation),
        ]
    });
    known_columns("Rounds", &titles, rows.collect())
}

/// A table without the columns in which nothing is known.
fn known_columns(caption: &str, titles: &[&str], rows: Vec<Vec<String>>) -> Block {
    let known: Vec<usize> = (0..titles.len()).filter(|&k| rows.iter().any(|row| row[k] != NOTHING)).collect();
    let titles: Vec<&str> = known.iter().map(|&k| titles[k]).collect();
    let rows = rows.into_iter().map(|row| known.iter().map(|&k| row[k].clone()).collect());
    Block::table(caption, &titles, rows.collect())
}
