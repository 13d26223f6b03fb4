//! The figures that only a probability or an expectation has.

use super::figure_data::RunData;
use super::figure_data::directions;
use super::outline::outlines;
use super::places::places;
use super::rare_facts::RareFacts;
use super::rare_facts::RareRow;
use crate::figures::Drawing;
use crate::figures::Style;
use crate::figures::course;
use crate::figures::course::CourseData;
use crate::figures::course::CoursePoint;
use crate::figures::course::Kind;
use crate::figures::numbers::significant;
use crate::figures::rare_importance;
use crate::figures::rare_importance::Importance;
use crate::figures::rare_importance::ImportanceData;
use crate::figures::rare_margin;
use crate::figures::rare_margin::MarginData;
use crate::figures::rare_plane;
use crate::figures::rare_plane::PlaneData;
use crate::figures::rare_plane::PlaneOutline;
use crate::figures::rare_plane::PlaneSide;
use crate::figures::rare_plane::Space;
use crate::figures::sought::Sought;
use crate::problem::Aim;
use crate::proposal::Component;
use crate::proposal::Mixture;
use crate::weights::RoundMean;
use crate::weights::StratifiedMean;
use crate::weights::combine_rounds;
use crate::weights::log_interval;
use crate::weights::normal_interval;

/// Standard deviations of the nominal density that are outlined.
const NOMINAL: [f64; 3] = [1.0, 2.0, 3.0];
/// Components that are outlined, at most.
const OUTLINED: usize = 6;
/// Variables whose values at the nearest point a caption tells.
const TOLD: usize = 8;
/// A mean so many standard errors above zero has its interval on the log scale.
const SIGNED: f64 = 5.0;

/// Draws them: the course of the answer, margins, the event in a plane, the importance of the variables. The plane is that of
/// the first two of the variables in `chosen`, or of the two that matter most.
pub(super) fn draw(run: &RunData, facts: &RareFacts, chosen: &[usize], style: &Style) -> Vec<Drawing> {
    let sought = if run.problem.aim() == Aim::Probability { Sought::Event } else { Sought::Integrand };
    let mut drawings = vec![course::draw(&convergence(facts, sought), style)];
    let Some((values, distances, hit)) = run.draws.rare() else { return drawings };
    let length = |scores: &[f64]| scores.iter().map(|u| u * u).sum::<f64>().sqrt();
    let nearest = facts.points.iter().map(|point| length(&point.scores)).collect();
    drawings.push(rare_margin::draw(
        &MarginData {
            sought,
            margin_name: if sought == Sought::Event { "margin of the event" } else { "integrand" }.to_owned(),
            unit: None,
            distance: distances.to_vec(),
            margin: values.to_vec(),
            hit: hit.clone(),
            nearest,
        },
        style,
    ));
    if let Some([j, k]) = plane_of(run, facts, chosen) {
        drawings.push(rare_plane::draw(&plane(run, facts, (sought, hit), [j, k]), style));
    }
    if !facts.points.is_empty() {
        drawings.push(rare_importance::draw(&importance(run, facts, sought), style));
    }
    drawings
}

/// The answer as it stood after every counted round; after the last one it is the answer of the run.
fn convergence(facts: &RareFacts, sought: Sought) -> CourseData {
    let counted: Vec<&RareRow> = facts.rounds.iter().filter(|round| round.counted).collect();
    let mean = |round: &&RareRow| RoundMean {
        draws: round.draws,
        evaluations_before: round.evaluations - round.draws,
        mean: StratifiedMean { mean: round.value, se: round.se },
    };
    let means: Vec<RoundMean> = counted.iter().map(mean).collect();
    let point = |t: usize| {
        let last = facts.answer.filter(|_| t + 1 == means.len());
        let (estimate, standard_error, [low, high]) = last.unwrap_or_else(|| {
            let combined = combine_rounds(&means[..=t]);
            let (value, se) = (combined.value, combined.se);
            let on_log_scale = value > 0.0 && (sought == Sought::Event || value > SIGNED * se);
            (value, se, if on_log_scale { log_interval(value, se) } else { normal_interval(value, se) })
        });
        CoursePoint { spent: counted[t].evaluations as f64, estimate, standard_error, interval: (low, high) }
    };
    CourseData {
        name: "convergence".to_owned(),
        quantity: match sought {
            Sought::Event => "probability of the event",
            Sought::Integrand => "mean of the integrand",
        }
        .to_owned(),
        unit: None,
        spent: "evaluations".to_owned(),
        kind: if sought == Sought::Event { Kind::Probability } else { Kind::Mean },
        points: (0..means.len()).map(point).collect(),
        known: None,
    }
}

/// The variables of the plane: continuous ones before whole numbers, then by importance at the nearest point.
fn plane_of(run: &RunData, facts: &RareFacts, chosen: &[usize]) -> Option<[usize; 2]> {
    if let [j, k, ..] = chosen {
        return (j != k).then_some([*j, *k]);
    }
    let variables = run.problem.variables();
    let size = |j: usize| facts.points.first().map_or(0.0, |point| point.importance[j].abs());
    let mut order: Vec<usize> = (0..variables.len()).collect();
    order.sort_by(|&a, &b| {
        let whole = variables[a].is_discrete().cmp(&variables[b].is_discrete());
        whole.then(size(b).total_cmp(&size(a))).then(a.cmp(&b))
    });
    match order[..] {
        [j, k, ..] => Some([j, k]),
        _ => None,
    }
}

fn plane(run: &RunData, facts: &RareFacts, (sought, hit): (Sought, Vec<bool>), [j, k]: [usize; 2]) -> PlaneData {
    let directions = directions(run.problem);
    let lines = |mixture: &Mixture, which: &[usize]| {
        let outlined = outlines(run.problem, mixture, which, [(j, &directions[j]), (k, &directions[k])]);
        outlined.into_iter().map(|outline| PlaneOutline { x: outline.x, y: outline.y }).collect::<Vec<_>>()
    };
    let side = |j: usize| {
        let variable = &run.problem.variables()[j];
        PlaneSide {
            name: variable.label.clone().unwrap_or_else(|| variable.name.clone()),
            unit: variable.unit.clone(),
            importance: facts.points.first().map(|point| point.importance[j].abs()),
            values: run.draws.variable(j).to_vec(),
        }
    };
    PlaneData {
        sought,
        space: Space::Natural,
        x: side(j),
        y: side(k),
        hit,
        components: lines(run.mixture, &fitted(run)),
        n_components: n_fitted(run),
        nominal: NOMINAL
            .iter()
            .filter_map(|&sd| nominal(run.problem.dim(), sd))
            .flat_map(|m| lines(&m, &[0]))
            .collect(),
        design_points: facts.points.iter().map(|point| (point.natural[j], point.natural[k])).collect(),
    }
}

/// How many components are fitted ones: the first of a proposal; copies and the nominal density follow them.
fn n_fitted(run: &RunData) -> usize {
    run.rounds.last().map_or(0, |round| round.components).min(run.mixture.len())
}

/// The largest of the fitted components.
pub(super) fn fitted(run: &RunData) -> Vec<usize> {
    let shares = run.mixture.shares();
    let mut order: Vec<usize> = (0..n_fitted(run)).collect();
    order.sort_by(|&a, &b| shares[b].total_cmp(&shares[a]).then(a.cmp(&b)));
    order.truncate(OUTLINED);
    order
}

/// The nominal density of the scores, widened to `sd`.
fn nominal(d: usize, sd: f64) -> Option<Mixture> {
    let scale: Vec<f64> = (0..d * d).map(|i| if i % (d + 1) == 0 { sd * sd } else { 0.0 }).collect();
    Component::new(vec![0.0; d], &scale, f64::INFINITY).ok().map(Mixture::single)
}

fn importance(run: &RunData, facts: &RareFacts, sought: Sought) -> ImportanceData {
    let variables = run.problem.variables();
    let nearest = &facts.points[0];
    let cosine = |signed: f64| signed.signum() * signed.abs().sqrt();
    let place: Vec<String> = variables
        .iter()
        .zip(places(run.problem, &nearest.natural))
        .map(|(v, x)| format!("{} = {x}{}", v.name, v.unit.as_ref().map_or(String::new(), |unit| format!(" {unit}"))))
        .take(TOLD)
        .collect();
    let more = if variables.len() > TOLD { ", …" } else { "" };
    let first = nearest.first_order_probability.map_or(String::new(), |p| {
        format!(" Its first-order probability is {}: a by-product of the search, not the answer.", significant(p, 3))
    });
    let mut remarks = vec![format!(
        "It lies at distance {}, at {}{more}.{first}",
        significant(nearest.distance, 3),
        place.join(", ")
    )];
    if facts.points.len() > 1 {
        let others: Vec<String> = facts.points[1..].iter().map(|point| significant(point.distance, 3)).collect();
        remarks.push(format!("Others that the search found lie at {}.", others.join(", ")));
    }
    if !run.problem.correlations().is_empty() {
        remarks.push(
            "Variables are correlated: a bar belongs to the independent score that a variable adds to those before it in its group."
                .to_owned(),
        );
    }
    ImportanceData {
        sought,
        remarks,
        variables: variables
            .iter()
            .zip(&nearest.importance)
            .map(|(v, &signed)| Importance {
                name: v.label.clone().unwrap_or_else(|| v.name.clone()),
                cosine: cosine(signed),
            })
            .collect(),
    }
}
