//! The inputs of the figures, out of a tuning or out of a run's files: the same numbers, so the same drawings.

use super::draws::DrawsTable;
use super::marginal;
use super::marginal::Direction;
use super::outline::outlines;
use super::outline::sizeable;
use super::rare_facts::RareFacts;
use super::rare_figures;
use super::rounds::RoundRow;
use crate::figures::Drawing;
use crate::figures::Style;
use crate::figures::columns::VariableColumn;
use crate::figures::dependence::strongest_partners;
use crate::figures::evenness::EvennessData;
use crate::figures::evenness::TailFit;
use crate::figures::heavy::HeavyData;
use crate::figures::progress::Phase;
use crate::figures::progress::ProgressData;
use crate::figures::progress::ReportScore;
use crate::figures::progress::RoundScore;
use crate::figures::progress::Schedule;
use crate::figures::variables::Partner;
use crate::figures::variables::VariableRow;
use crate::figures::variables::VariablesData;
use crate::figures::{evenness, heavy, progress, variables};
use crate::numeric::exp;
use crate::numeric::linear::cholesky;
use crate::problem::Aim;
use crate::problem::Coordinate;
use crate::problem::Nature;
use crate::problem::Problem;
use crate::proposal::Mixture;
use crate::weights::LogWeights;
use crate::weights::Score;
use crate::weights::TailReason;
use crate::weights::score;
use crate::weights::verdict::checks::TAIL_SOUND;

/// Name of the first span of evaluations.
pub const SURVEY_PHASE: &str = "survey";
/// Rows of the variables' figure, unless others are asked for.
const MOST_ROWS: usize = 24;
/// Partners of a variable.
const PARTNERS: usize = 2;

/// What the figures of a run are drawn from.
#[derive(Debug)]
pub struct RunData<'a> {
    /// The problem.
    pub problem: &'a Problem,
    /// The chosen proposal, as its file gives it.
    pub mixture: &'a Mixture,
    /// The report draws.
    pub draws: &'a DrawsTable,
    /// The rounds.
    pub rounds: &'a [RoundRow],
    /// Evaluations of the survey.
    pub survey_evaluations: u64,
    /// All evaluations.
    pub evaluations: u64,
    /// What else there is of a probability or an expectation.
    pub rare: Option<&'a RareFacts>,
}

/// All figures of a run; of the variables, those in `chosen` (all, up to 24, where it is empty).
#[must_use]
pub fn draw_figures(run: &RunData, chosen: &[usize], style: &Style) -> Vec<Drawing> {
    let score = LogWeights::new(run.draws.log_weights()).ok().map(|weights| score(&weights, &[]));
    let weights = run.draws.weights().to_vec();
    let mut drawings = vec![progress::draw(&progress_data(run, score.as_ref()), style)];
    if let Some(facts) = run.rare {
        drawings.extend(rare_figures::draw(run, facts, chosen, style));
    }
    if let Some(score) = &score {
        drawings.push(evenness::draw(&evenness_data(&weights, score), style));
    }
    let columns = columns(run);
    drawings.extend(variables::draw(&variables_data(run, &columns, &weights, chosen), style));
    drawings.push(heavy::draw(&HeavyData { variables: columns, weights }, style));
    drawings
}

fn progress_data(run: &RunData, score: Option<&Score>) -> ProgressData {
    let rounds = run.rounds.iter().map(|row| RoundScore {
        round: row.round,
        evaluations: row.evaluations,
        predicted_ess_fraction: row.predicted_ess_fraction,
        ess_fraction: row.ess_fraction,
        ess_fraction_se: row.ess_fraction_se,
        weight_variance: row.weight_variance,
        schedule: row.schedule,
        components: row.components,
    });
    let (all, survey) = (run.evaluations as f64, run.survey_evaluations as f64);
    let phase = |name: &str, from: f64, to: f64, shaded| Phase { name: name.to_owned(), from, to, shaded };
    let mut phases = vec![phase(SURVEY_PHASE, 0.0, survey, true)];
    if run.problem.aim() != Aim::Density {
        // All that follows are rounds, and the answer rests on them.
        phases.push(phase("rounds", survey, all, false));
        return ProgressData { phases, rounds: rounds.collect(), schedule: Schedule::Smoothing, report: None };
    }
    let report_from = all - run.draws.len() as f64;
    let last_round = run.rounds.last().map_or(survey, |row| row.evaluations);
    phases.push(phase("rounds", survey, last_round, false));
    phases.push(phase("confirm", last_round, report_from, true));
    phases.push(phase("report", report_from, all, true));
    ProgressData {
        phases,
        rounds: rounds.collect(),
        schedule: Schedule::Exponent,
        report: score.map(|score| ReportScore {
            evaluations: all,
            ess_fraction: score.ess_fraction,
            ess_fraction_se: score.ess_fraction_se,
            weight_variance: score.weight_variance,
        }),
    }
}

fn evenness_data(weights: &[f64], score: &Score) -> EvennessData {
    let tail = &score.tail;
    let in_mean_weights = |log: f64| exp(log - score.log_normaliser);
    EvennessData {
        weights: weights.to_vec(),
        ess_fraction: score.ess_fraction,
        perplexity: score.perplexity,
        tail: (tail.reason == TailReason::Fitted).then(|| TailFit {
            shape: tail.shape,
            shape_upper: tail.upper,
            limit: TAIL_SOUND,
            threshold: in_mean_weights(tail.log_threshold),
            scale: in_mean_weights(tail.log_scale),
            share_above: tail.points as f64 / score.draws as f64,
        }),
    }
}

fn columns(run: &RunData) -> Vec<VariableColumn> {
    let variables = run.problem.variables().iter().enumerate();
    variables
        .map(|(j, variable)| VariableColumn {
            name: variable.name.clone(),
            label: variable.label.clone(),
            unit: variable.unit.clone(),
            values: run.draws.variable(j).to_vec(),
            discrete: variable.is_discrete(),
        })
        .collect()
}

fn variables_data(run: &RunData, columns: &[VariableColumn], weights: &[f64], chosen: &[usize]) -> VariablesData {
    let directions = directions(run.problem);
    let outlined = match run.rare {
        // The many copies of components that are there for caution would hide the draws.
        Some(_) => rare_figures::fitted(run),
        None => sizeable(run.mixture),
    };
    let values: Vec<&[f64]> = columns.iter().map(|column| column.values.as_slice()).collect();
    let partners = strongest_partners(&values, weights, PARTNERS);
    let all: Vec<usize> = (0..columns.len().min(MOST_ROWS)).collect();
    let rows = if chosen.is_empty() { &all } else { chosen };
    let row = |&j: &usize| {
        let variable = &run.problem.variables()[j];
        let (proposal_at, proposal_density) = match &variable.nature {
            Nature::Dependent { .. } => marginal::smoothed(&columns[j], weights),
            _ => marginal::closed(variable, run.mixture, &directions[j], &columns[j], weights),
        };
        let whole = |j: usize| columns[j].discrete;
        let pair = |&k: &usize| Partner {
            variable: k,
            // Over whole numbers an outline is a staircase that says nothing.
            outlines: if whole(j) || whole(k) {
                Vec::new()
            } else {
                outlines(run.problem, run.mixture, &outlined, [(j, &directions[j]), (k, &directions[k])])
            },
        };
        VariableRow { variable: j, proposal_at, proposal_density, partners: partners[j].iter().map(pair).collect() }
    };
    VariablesData { variables: columns.to_vec(), weights: weights.to_vec(), rows: rows.iter().map(row).collect() }
}

/// For every variable the direction in coordinates along which its own score runs.
pub(super) fn directions(problem: &Problem) -> Vec<Direction> {
    let d = problem.dim();
    let mut directions: Vec<Direction> =
        (0..d).map(|j| (0..d).map(|i| f64::from(u8::from(i == j))).collect()).collect();
    for correlation in problem.correlations() {
        let scored = |&j: &usize| problem.variables()[j].coordinate == Coordinate::StandardNormal;
        let n = correlation.members.len();
        let factor = cholesky(&correlation.score, n).filter(|_| correlation.members.iter().all(scored));
        for (row, &j) in correlation.members.iter().enumerate() {
            if let Some(factor) = &factor {
                for (column, &i) in correlation.members.iter().enumerate() {
                    directions[j][i] = factor[row * n + column];
                }
            }
        }
    }
    directions
}
