//! The page of a tuning whose aim is a probability or an expectation.

use super::data::{AnswerLine, PageData, PageFigure, PointLine, RoundLine, RunFacts, ScheduleKind, SurveyLine};
use super::density::{notes, variables};
use super::numbers::{NOTHING, count, share, short};
use super::raises::raises;
use crate::adapt::rare::{DesignPoint, RareAnswer, RareRound, RareSurvey, RareTuning, RareValue, ValueWithError};
use crate::problem::{Aim, Problem};
use crate::report::rounds::rare_step;
use crate::weights::{no_hit_bound, normal_interval};

/// Variables that carry less of a point's direction than this are not named.
const LEAST_IMPORTANCE: f64 = 0.05;

impl PageData {
    /// The page of the tuning of a probability or an expectation.
    #[must_use]
    pub fn of_rare(problem: &Problem, tuning: &RareTuning, figures: Vec<PageFigure>, run: RunFacts) -> Self {
        let n = tuning.chosen.len();
        let parts =
            if n == 1 { "one component".to_owned() } else { format!("{n} components, the defensive ones included") };
        Self {
            title: problem.title().to_owned(),
            aim: problem.aim(),
            verdict: tuning.verdict.clone(),
            variables: variables(problem),
            statement: run.statement.clone(),
            notes: notes(problem),
            survey: surveyed(problem, &tuning.survey),
            schedule: ScheduleKind::Smoothing,
            rounds: rounds(&tuning.rounds),
            stop: "the budget was spent".to_owned(),
            finalists: Vec::new(),
            proposal: format!(
                "The proposal for production is that of the last refit: a mixture of {parts}, in standard normal scores. The answer does not rest \
                 on it alone, but on every round drawn after the event was first reached."
            ),
            score: None,
            answers: answers(problem, tuning),
            remarks: remarks(problem, tuning),
            raises: raises(problem.aim(), &tuning.extended_from, run.evaluations),
            figures,
            run,
        }
    }
}

fn answers(problem: &Problem, tuning: &RareTuning) -> Vec<AnswerLine> {
    let name = problem.aim().word();
    let mut lines = vec![match &tuning.answer {
        RareAnswer::Value(value) => answer(name, value),
        RareAnswer::NoHit { upper_bound, nominal_draws } => {
            let note = format!(
                "no number: nothing was met; with 95 % at most {}, which rests on {} draws of the variables' own distribution alone",
                short(*upper_bound),
                count(*nominal_draws as u64)
            );
            AnswerLine { note, ..beside(name, ValueWithError { value: f64::NAN, se: f64::NAN }) }
        }
    }];
    if let Some(both) = tuning.failures_counted {
        lines.push(beside("with failed evaluations counted as outside", both.outside));
        lines.push(beside("with failed evaluations counted as inside", both.inside));
    }
    if let Some(failing) = tuning.failing {
        lines.push(beside("probability that the model fails", failing));
    }
    if let Some(pooled) = tuning.pooled {
        lines.push(AnswerLine {
            note: "adapted: not the answer".to_owned(),
            ..beside("pooled over all rounds", pooled)
        });
    }
    lines
}

fn answer(name: &str, value: &RareValue) -> AnswerLine {
    AnswerLine {
        name: name.to_owned(),
        value: value.value,
        se: value.se,
        interval_95: value.interval_95,
        interval_method: value.interval_method.to_owned(),
        effective_draws: value.answer.effective_draws,
        note: String::new(),
    }
}

/// A number that stands beside the answer.
fn beside(name: &str, number: ValueWithError) -> AnswerLine {
    AnswerLine {
        name: name.to_owned(),
        value: number.value,
        se: number.se,
        interval_95: normal_interval(number.value, number.se),
        interval_method: String::new(),
        effective_draws: f64::NAN,
        note: String::new(),
    }
}

/// What the answer is worth against plain sampling.
fn remarks(problem: &Problem, tuning: &RareTuning) -> Vec<String> {
    let Some(value) = tuning.answer.value() else { return Vec::new() };
    let mut remarks = vec![format!("The relative standard error is {}.", share(value.cv))];
    if problem.aim() == Aim::Probability && value.value > 0.0 && value.value < 1.0 && value.cv > 0.0 {
        let plain = (1.0 - value.value) / value.value / (value.cv * value.cv);
        remarks.push(format!(
            "Plain sampling of the variables would need some {} evaluations for the same error; this run made {}.",
            short(plain),
            count(tuning.evaluations)
        ));
    }
    remarks
}

fn surveyed(problem: &Problem, survey: &RareSurvey) -> SurveyLine {
    let event = problem.aim() == Aim::Probability;
    let (met, point_name) =
        if event { ("the event", "design point") } else { ("a part of the integrand that is not zero", "mode") };
    let number = match survey.points.len() {
        0 => "no point".to_owned(),
        1 => "one point".to_owned(),
        n => format!("{n} points"),
    };
    let sentences = vec![
        format!("Of {} wide scouts {} met {met}.", count(survey.scouts as u64), count(survey.scouts_that_met as u64)),
        format!(
            "{} searches found {number}, in {} evaluations with the scouts.",
            count(survey.searches as u64),
            count(survey.evaluations)
        ),
    ];
    let mut fact_titles = vec!["distance from the origin of the scores#", "squared direction cosines"];
    if event {
        fact_titles.push("first-order probability#");
    }
    let point = |point: &DesignPoint| {
        let mut facts = vec![short(point.distance), carried(problem, &point.importance)];
        if event {
            facts.push(point.first_order_probability.map_or(NOTHING.to_owned(), short));
        }
        PointLine { location: point.natural.clone(), facts }
    };
    let mut nearest: Vec<&DesignPoint> = survey.points.iter().collect();
    nearest.sort_by(|a, b| a.distance.total_cmp(&b.distance));
    SurveyLine {
        sentences,
        point_name,
        fact_titles,
        points: nearest.into_iter().map(point).collect(),
        basin_share: no_hit_bound(survey.scouts + survey.searches),
        evaluations: survey.evaluations,
    }
}

/// The variables that carry a point's direction, the first first, with the sense in which they lead there.
fn carried(problem: &Problem, importance: &[f64]) -> String {
    let mut order: Vec<usize> = (0..importance.len()).filter(|&j| importance[j].abs() >= LEAST_IMPORTANCE).collect();
    order.sort_by(|&a, &b| importance[b].abs().total_cmp(&importance[a].abs()).then(a.cmp(&b)));
    let named = order.iter().map(|&j| {
        let sense = if importance[j] > 0.0 { "large" } else { "small" };
        format!("{} ({sense}) {}", problem.variables()[j].name, share(importance[j].abs()))
    });
    let named: Vec<String> = named.collect();
    if named.is_empty() { NOTHING.to_owned() } else { named.join(", ") }
}

fn rounds(rounds: &[RareRound]) -> Vec<RoundLine> {
    let line = |(i, r): (usize, &RareRound)| {
        // The refit after a round shows in the round that follows; after the last one the best prediction was taken.
        let best = r.candidates.iter().min_by(|a, b| a.predicted_variance.total_cmp(&b.predicted_variance));
        let step = rounds.get(i + 1).map(|next| next.step).or(best.map(|candidate| candidate.step));
        let winner = r.candidates.iter().find(|candidate| Some(candidate.step) == step);
        RoundLine {
            index: r.index,
            draws: r.draws,
            evaluations: r.evaluations,
            components: r.components,
            df: f64::NAN,
            predicted_ess_fraction: r.predicted_ess_fraction.unwrap_or(f64::NAN),
            ess_fraction: r.ess_fraction,
            weight_variance: f64::NAN,
            tail_shape: f64::NAN,
            largest_share: r.largest_share,
            schedule: r.smoothing.unwrap_or(0.0),
            estimate: Some([r.value, r.cv]),
            tried: r.candidates.len(),
            winner: step.map_or(NOTHING, rare_step).to_owned(),
            merit: winner.map_or(f64::NAN, |candidate| candidate.predicted_variance),
            births: 0,
        }
    };
    rounds.iter().enumerate().map(line).collect()
}
