//! The page of a tuning whose aim is a density.

use super::data::{
    AnswerLine, FinalistLine, PageData, PageFigure, PointLine, RoundLine, RunFacts, ScheduleKind, SurveyLine,
    VariableLine,
};
use super::numbers::{count, number, share};
use super::raises::raises;
use crate::adapt::{Finalist, Round, StopReason, Survey, Tuning};
use crate::numeric::{Points, exp, log_sum_exp};
use crate::problem::{Nature, Problem};
use crate::report::places::starts;
use crate::weights::{Estimate, Score, normal_interval};

impl PageData {
    /// The page of a density's tuning.
    #[must_use]
    pub fn of_density(problem: &Problem, tuning: &Tuning, figures: Vec<PageFigure>, run: RunFacts) -> Self {
        let mut answers: Vec<AnswerLine> = tuning.score.iter().map(normaliser).collect();
        answers.extend(tuning.estimates.iter().map(|(name, estimate)| estimated(name, estimate)));
        Self {
            title: problem.title().to_owned(),
            aim: problem.aim(),
            verdict: tuning.verdict.clone(),
            variables: variables(problem),
            statement: run.statement.clone(),
            notes: notes(problem),
            survey: surveyed(problem, &tuning.survey),
            schedule: ScheduleKind::Exponent,
            rounds: tuning.rounds.iter().map(round).collect(),
            stop: match tuning.stop {
                StopReason::Budget => "the part of the budget that is set aside for them was spent",
                StopReason::Rounds => "as many rounds were made as had been asked for",
                StopReason::NoGain => "two rounds in a row brought nothing better",
            }
            .to_owned(),
            finalists: tuning.finalists.iter().map(finalist).collect(),
            proposal: proposal(tuning),
            score: tuning.score.clone(),
            answers,
            remarks: Vec::new(),
            raises: raises(problem.aim(), &tuning.extended_from, run.evaluations),
            figures,
            run,
        }
    }
}

/// The variables of a problem, whatever its aim.
pub(crate) fn variables(problem: &Problem) -> Vec<VariableLine> {
    let line = |(start, v): ([f64; 3], &crate::problem::Variable)| VariableLine {
        name: v.name.clone(),
        label: v.label.clone(),
        unit: v.unit.clone(),
        note: v.note.clone(),
        law: law(&v.nature),
        support: match &v.nature {
            Nature::Range { low, high } => [*low, *high],
            Nature::Random(distribution) => distribution.support().into(),
            Nature::Dependent { .. } => [f64::NAN; 2],
        },
        discrete: v.is_discrete(),
        coordinate: v.coordinate.word(),
        start,
    };
    starts(problem).into_iter().zip(problem.variables()).map(line).collect()
}

fn law(nature: &Nature) -> String {
    match nature {
        Nature::Range { .. } => "flat, not normalised".to_owned(),
        Nature::Random(distribution) => {
            let parameters: Vec<String> =
                distribution.parameters().iter().map(|(name, value)| format!("{name} = {}", number(*value))).collect();
            format!("{}: {}", distribution.family(), parameters.join(", "))
        }
        Nature::Dependent { family, parameters } => {
            let parameters: Vec<String> = parameters.iter().map(|(name, text)| format!("{name} = {text}")).collect();
            format!("{family}, given others: {}", parameters.join(", "))
        }
    }
}

/// Data, correlations and the unit of the normalising constant.
pub(crate) fn notes(problem: &Problem) -> Vec<String> {
    let mut notes = Vec::new();
    for file in problem.data_files() {
        let dropped = if file.dropped == 0 {
            String::new()
        } else {
            format!(
                ", of which {} were left out because a cell that a formula uses is missing",
                count(file.dropped as u64)
            )
        };
        notes.push(format!(
            "Data: {} rows of {} with the columns {}{dropped}.",
            count(file.rows as u64),
            // By its own name: the way to it depends on where the run was started or gone on with.
            std::path::Path::new(&file.file).file_name().unwrap_or_default().to_string_lossy(),
            file.columns.join(", ")
        ));
    }
    for group in problem.correlations() {
        let names: Vec<&str> = group.members.iter().map(|&m| problem.variables()[m].name.as_str()).collect();
        notes.push(format!("Correlated by a Gaussian copula: {}.", names.join(", ")));
    }
    if problem.variables().iter().any(|v| matches!(v.nature, Nature::Range { .. })) {
        notes.push(
            "A variable with a flat range has a measure that is not normalised: the normalising constant depends on its unit.".to_owned(),
        );
    }
    notes
}

fn surveyed(problem: &Problem, survey: &Survey) -> SurveyLine {
    let many = |n: u32, one: &str, more: &str| {
        if n == 1 { format!("1 {one}") } else { format!("{} {more}", count(u64::from(n))) }
    };
    let mut sentences = vec![format!(
        "{} started from points spread over the start and outside of it; {} in a mode, in {} evaluations.",
        many(survey.starts, "climb", "climbs"),
        many(survey.finished, "ended", "ended"),
        count(survey.evaluations + survey.later_evaluations)
    )];
    let others = [
        (survey.stuck, "stopped at a wall or on a ridge"),
        (survey.runaways, "ran away without end"),
        (survey.void, "began where the target is zero or fails"),
    ];
    let others: Vec<String> =
        others.iter().filter(|(n, _)| *n > 0).map(|(n, what)| format!("{} {what}", count(u64::from(*n)))).collect();
    if !others.is_empty() {
        sentences.push(format!("Of the others, {}.", others.join(", ")));
    }
    sentences.push(match survey.modes.len() {
        0 => "No interior maximum was found.".to_owned(),
        1 => "They found one mode.".to_owned(),
        n => format!("They found {n} separate modes."),
    });
    let log_masses: Vec<f64> = survey.modes.iter().map(|m| m.log_mass).collect();
    let all = log_sum_exp(&log_masses);
    let points = survey.modes.iter().map(|mode| PointLine {
        location: problem.to_natural(&Points::from_rows(mode.location.len(), &mode.location)).point(0),
        facts: vec![share(exp(mode.log_mass - all)), count(u64::from(mode.hits))],
    });
    SurveyLine {
        sentences,
        point_name: "mode",
        fact_titles: vec!["share of the mass by curvature#", "searches that ended there#"],
        points: points.collect(),
        basin_share: survey.basin_share,
        evaluations: survey.evaluations + survey.later_evaluations,
    }
}

fn round(round: &Round) -> RoundLine {
    let known = |read: &dyn Fn(&Score) -> f64| round.score.as_ref().map_or(f64::NAN, read);
    let winner = round.candidates.iter().find(|c| c.step == round.step);
    RoundLine {
        index: round.index,
        draws: round.draws,
        evaluations: round.evaluations,
        components: round.components,
        df: round.df,
        predicted_ess_fraction: round.predicted_ess_fraction.unwrap_or(f64::NAN),
        ess_fraction: known(&|s| s.ess_fraction),
        weight_variance: known(&|s| s.weight_variance),
        tail_shape: known(&|s| s.tail.shape),
        largest_share: known(&|s| s.largest_share),
        schedule: round.exponent,
        estimate: None,
        tried: round.candidates.len(),
        winner: round.step.to_string(),
        merit: winner.map_or(f64::NAN, |c| c.gain),
        births: round.births,
    }
}

fn finalist(finalist: &Finalist) -> FinalistLine {
    FinalistLine {
        name: if finalist.name == "ensemble" {
            "last fits joined".to_owned()
        } else {
            format!("proposal of {}", finalist.name)
        },
        predicted_ess_fraction: finalist.predicted_ess_fraction.unwrap_or(f64::NAN),
        ess_fraction: finalist.score.as_ref().map_or(f64::NAN, |s| s.ess_fraction),
        chosen: finalist.chosen,
    }
}

fn proposal(tuning: &Tuning) -> String {
    let n = tuning.chosen.len();
    let parts = if n == 1 { "one component".to_owned() } else { format!("{n} components, the wide ones included") };
    let tails = if tuning.df.is_finite() {
        format!("Student-t with {} degrees of freedom", number(tuning.df))
    } else {
        "Gaussian".to_owned()
    };
    format!("The chosen proposal is a mixture of {parts}; the fitted ones are {tails}.")
}

fn normaliser(score: &Score) -> AnswerLine {
    AnswerLine {
        name: "log normalising constant".to_owned(),
        value: score.log_normaliser,
        se: score.log_normaliser_se,
        interval_95: normal_interval(score.log_normaliser, score.log_normaliser_se),
        interval_method: "normal".to_owned(),
        effective_draws: score.ess,
        note: String::new(),
    }
}

/// An estimate as an answer.
pub(crate) fn estimated(name: &str, estimate: &Estimate) -> AnswerLine {
    let note = if estimate.share_undefined > 0.0 {
        format!("not given: undefined for {} of the weight", share(estimate.share_undefined))
    } else {
        String::new()
    };
    AnswerLine {
        name: name.to_owned(),
        value: estimate.value,
        se: estimate.se,
        interval_95: estimate.interval_95,
        interval_method: estimate.interval_method.to_owned(),
        effective_draws: estimate.effective_draws,
        note,
    }
}
