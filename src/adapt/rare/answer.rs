//! From the rounds to an answer: counted rounds combined with weights that were fixed before each was drawn.

use super::rounds::{Course, Drawn};
use super::survey::Scouts;
use super::tuning::{FailuresCounted, RareAnswer, RareDraws, RareValue, ValueWithError};
use crate::numeric::{Points, exp};
use crate::weights::{
    Answer, CombinedRounds, RoundMean, Strata, StratifiedMean, combine_rounds, log_interval, no_hit_bound,
    normal_interval, probability_interval,
};

/// The answer and what it rests on.
#[derive(Debug)]
pub(crate) struct Answering {
    pub(crate) answer: RareAnswer,
    pub(crate) draws: RareDraws,
    pub(crate) combined: CombinedRounds,
    pub(crate) failures: Option<FailuresCounted>,
    pub(crate) failing: Option<ValueWithError>,
    pub(crate) halves_z: f64,
    /// Mean of `|f| w`.
    pub(crate) mean_size: f64,
}

/// Effective draws from which a mean of one sign has an interval on the log scale.
const LOG_SCALE_DRAWS: f64 = 100.0;

/// A mean that is so many standard errors above zero has an interval on the log scale.
const SIGNED: f64 = 5.0;

/// Combines the counted rounds; all of them where none counts. Writes each round's share into its record.
pub(crate) fn of(course: &mut Course, scouts: &Scouts, event: bool, failures_are_inside: bool) -> Answering {
    let any_counted = course.drawn.iter().any(|d| d.counted);
    let used: Vec<usize> = (0..course.drawn.len()).filter(|&t| course.drawn[t].counted || !any_counted).collect();
    // With few effective draws the interval counts them one by one: no control variates then.
    let plain = combined_of(course, &used, &|drawn| Strata::new(&drawn.labels).mean(&drawn.terms));
    let terms: Vec<&[f64]> = used.iter().map(|&t| course.drawn[t].terms.as_slice()).collect();
    let evenness = Answer::of(&plain.contributions(&terms), &plain.contributions(&terms));
    let few = evenness.effective_draws < LOG_SCALE_DRAWS;
    let combined = if few { plain } else { combined_of(course, &used, &|drawn| drawn.mean) };
    for (&t, share) in used.iter().zip(&combined.shares) {
        course.rounds[t].share = *share;
    }
    let draws = gather(course, &used, &combined, few);
    // Plain terms: the folds of the controls tie the halves to each other.
    let halves_z = halves(course, &used, &combined.contributions(&terms));
    let failed = draws.value.iter().any(|v| v.is_nan());
    let mean_size = mean_size(course, &used, &combined);
    let failing = failed.then(|| failing(course, &used, &combined));
    let failures = failing.filter(|_| event).map(|_| {
        let here = ValueWithError { value: combined.value, se: combined.se };
        let other = other_way(course, &used, failures_are_inside);
        if failures_are_inside {
            FailuresCounted { outside: other, inside: here }
        } else {
            FailuresCounted { outside: here, inside: other }
        }
    });
    let answer = if mean_size > 0.0 {
        RareAnswer::Value(valued(&combined, &draws.contributions, evenness, event, failures.as_ref()))
    } else {
        no_hit(course, scouts)
    };
    Answering { answer, draws, combined, failures, failing, halves_z, mean_size }
}

fn combined_of(course: &Course, used: &[usize], mean: &dyn Fn(&Drawn) -> StratifiedMean) -> CombinedRounds {
    combine_rounds(&used.iter().map(|&t| round_mean(course, t, mean(&course.drawn[t]))).collect::<Vec<_>>())
}

/// Mean of `|f| w` over the rounds.
fn mean_size(course: &Course, used: &[usize], combined: &CombinedRounds) -> f64 {
    let of_round = |t: usize| {
        let terms = &course.drawn[t].terms;
        terms.iter().map(|z| z.abs()).sum::<f64>() / terms.len() as f64
    };
    used.iter().zip(&combined.shares).map(|(&t, share)| share * of_round(t)).sum()
}

fn round_mean(course: &Course, t: usize, mean: StratifiedMean) -> RoundMean {
    let drawn = &course.drawn[t];
    RoundMean { draws: drawn.terms.len(), evaluations_before: drawn.spent_before as usize, mean }
}

fn gather(course: &Course, used: &[usize], combined: &CombinedRounds, plain: bool) -> RareDraws {
    let dim = course.drawn.first().map_or(1, |d| d.points.dim());
    let mut draws = RareDraws {
        points: Points::new(dim),
        log_nominal: Vec::new(),
        log_proposal: Vec::new(),
        value: Vec::new(),
        hit: Vec::new(),
        round: Vec::new(),
        labels: Vec::new(),
        contributions: Vec::new(),
    };
    for &t in used {
        let drawn = &course.drawn[t];
        draws.points.extend(&drawn.points);
        draws.log_nominal.extend_from_slice(&drawn.answered.log_nominal);
        draws.log_proposal.extend_from_slice(&drawn.log_proposal);
        draws.value.extend_from_slice(&drawn.answered.value);
        draws.hit.extend_from_slice(&drawn.answered.hit);
        draws.round.extend(std::iter::repeat_n(t as u32 + 1, drawn.terms.len()));
        draws.labels.extend_from_slice(&drawn.labels);
    }
    let terms = |t: usize| if plain { &course.drawn[t].terms } else { &course.drawn[t].controlled };
    let terms: Vec<&[f64]> = used.iter().map(|&t| terms(t).as_slice()).collect();
    draws.contributions = combined.contributions(&terms);
    draws
}

/// Halves of the counted draws, every round's components being strata of their own.
fn halves(course: &Course, used: &[usize], contributions: &[f64]) -> f64 {
    let (mut labels, mut offset) = (Vec::with_capacity(contributions.len()), 0);
    for &t in used {
        let own = &course.drawn[t].labels;
        labels.extend(own.iter().map(|l| l + offset));
        offset += own.iter().max().map_or(0, |m| m + 1);
    }
    if labels.is_empty() { f64::NAN } else { Strata::new(&labels).halves_z(contributions) }
}

/// The probability that the model fails, from the same draws.
fn failing(course: &Course, used: &[usize], combined: &CombinedRounds) -> ValueWithError {
    let (mut value, mut variance) = (0.0, 0.0);
    for (&t, share) in used.iter().zip(&combined.shares) {
        let drawn = &course.drawn[t];
        let weights: Vec<f64> = (0..drawn.terms.len())
            .map(|i| if drawn.answered.value[i].is_nan() { weight(course, t, i) } else { 0.0 })
            .collect();
        let mean = Strata::new(&drawn.labels).mean(&weights);
        value += share * mean.mean;
        variance += (share * mean.se) * (share * mean.se);
    }
    ValueWithError { value, se: variance.sqrt() }
}

fn weight(course: &Course, t: usize, i: usize) -> f64 {
    let drawn = &course.drawn[t];
    exp(drawn.answered.log_nominal[i] - drawn.log_proposal[i])
}

/// The probability with failures counted the other way.
fn other_way(course: &Course, used: &[usize], failures_are_inside: bool) -> ValueWithError {
    let means: Vec<RoundMean> = used
        .iter()
        .map(|&t| {
            let drawn = &course.drawn[t];
            let terms: Vec<f64> = (0..drawn.terms.len())
                .map(|i| match (drawn.answered.value[i].is_nan(), failures_are_inside) {
                    (true, true) => 0.0,
                    (true, false) => weight(course, t, i),
                    (false, _) => drawn.terms[i],
                })
                .collect();
            round_mean(course, t, Strata::new(&drawn.labels).mean(&terms))
        })
        .collect();
    let combined = combine_rounds(&means);
    ValueWithError { value: combined.value, se: combined.se }
}

fn valued(
    combined: &CombinedRounds,
    contributions: &[f64],
    answer: Answer,
    event: bool,
    failures: Option<&FailuresCounted>,
) -> RareValue {
    let (value, se) = (combined.value, combined.se);
    let (mut interval_95, interval_method) = if event {
        probability_interval(value, se, &answer, contributions)
    } else if value > SIGNED * se && answer.effective_draws >= LOG_SCALE_DRAWS {
        (log_interval(value, se), "log-normal")
    } else {
        (normal_interval(value, se), "normal")
    };
    if let Some(counted) = failures {
        let [low, _] = log_interval_or_point(counted.outside);
        let [_, high] = log_interval_or_point(counted.inside);
        interval_95 = [interval_95[0].min(low), interval_95[1].max(high)];
    }
    RareValue { value, se, cv: se / value.abs(), interval_95, interval_method, answer }
}

fn log_interval_or_point(counted: ValueWithError) -> [f64; 2] {
    if counted.value > 0.0 { log_interval(counted.value, counted.se) } else { [0.0; 2] }
}

fn no_hit(course: &Course, scouts: &Scouts) -> RareAnswer {
    let of_scouts = scouts.labels.iter().filter(|&&l| l == 0).count();
    let met = scouts.answered.hit.iter().zip(&scouts.labels).any(|(&h, &l)| h && l == 0);
    let of_rounds: usize = course.drawn.iter().map(|d| d.nominal_draws(&course.layers)).sum();
    let nominal_draws = of_rounds + if met { 0 } else { of_scouts };
    RareAnswer::NoHit { upper_bound: no_hit_bound(nominal_draws), nominal_draws }
}

/// The pooled value over all rounds and scouts (balance heuristic) and its error, as if the draws were independent.
pub(crate) fn pooled(course: &Course) -> Option<ValueWithError> {
    let pool = &course.pool;
    let terms: Vec<f64> = pool
        .log_mixture()
        .iter()
        .enumerate()
        .map(|(i, m)| if pool.size[i] == 0.0 { 0.0 } else { pool.size[i] * exp(pool.log_nominal[i] - m) })
        .collect();
    let mean = Strata::single(terms.len()).mean(&terms);
    terms.iter().any(|&z| z != 0.0).then_some(ValueWithError { value: mean.mean, se: mean.se })
}
