//! The evidence for the verdict.

use super::answer::Answering;
use super::layers::squared_distance;
use super::rounds::Course;
use super::survey::{Explored, Scouts};
use super::tuning::{RareAnswer, RareSurvey};
use crate::numeric::ln;
use crate::weights::TailShape;
use crate::weights::verdict::{self, Check, FailureFacts, RareEvidence, Verdict, Word, judge_rare};

/// A scout whose weight under the last fit and its copies is below this many times the answer is explained by that fit.
const EXPLAINING_WEIGHT: f64 = 50.0;
/// Last refits whose new regions are late.
const LAST_REFITS: usize = 2;
/// A region is separate where it lies so many standard deviations (per coordinate, in the mean) from everything fitted before.
const SEPARATE: f64 = 3.0;

/// What failures do, in the words of the verdict.
pub(crate) struct Failures {
    pub(crate) share: f64,
    pub(crate) declared: bool,
    pub(crate) inside_is_value: bool,
}

/// Judges the run.
pub(crate) fn judge(
    course: &Course,
    scouts: &Scouts,
    explored: &Explored,
    answering: &Answering,
    survey: &RareSurvey,
    failures: &Failures,
) -> Verdict {
    let searches = survey.scouts + survey.searches;
    let RareAnswer::Value(value) = &answering.answer else {
        return nothing_met(&answering.answer, searches);
    };
    let counted: Vec<usize> = (0..course.drawn.len()).filter(|&t| course.drawn[t].counted).collect();
    let last = course.drawn.last();
    let sizes: Vec<f64> = last.map_or_else(Vec::new, |d| d.terms.iter().map(|z| z.abs()).collect());
    let last_tail = TailShape::of(&sizes, 0.0);
    let record = course.rounds.last();
    let other_value = answering
        .failures
        .as_ref()
        .map_or(value.value, |f| if failures.inside_is_value { f.outside.value } else { f.inside.value });
    // Of the answer, not of the worst round: the first rounds are small, and their proposals rough.
    let outside: f64 = counted
        .iter()
        .map(|&t| &course.rounds[t])
        .map(|round| round.share * round.outside_share * round.value.abs() / answering.mean_size)
        .sum();
    let unexplained = unexplained(course, scouts, explored, answering.mean_size);
    let late = late_regions(course);
    judge_rare(&RareEvidence {
        value: value.value,
        se: value.se,
        interval_95: value.interval_95,
        mean_size: answering.mean_size,
        answer: &value.answer,
        last_tail: &last_tail,
        counted_rounds: counted.len(),
        chi_square: answering.combined.chi_square,
        halves_z: answering.halves_z,
        outside_share: outside,
        unexplained_scouts: unexplained,
        fresh_ess_fraction: record.map_or(f64::NAN, |r| r.ess_fraction),
        predicted_ess_fraction: record.and_then(|r| r.predicted_ess_fraction).unwrap_or(f64::NAN),
        late_regions: &late,
        failures: FailureFacts { share: failures.share, declared: failures.declared, other_value },
        searches,
    })
}

/// Scouts in the event that neither the tangent plane at a found point nor the last fit explains.
fn unexplained(course: &Course, scouts: &Scouts, explored: &Explored, answer: f64) -> usize {
    if explored.unexplained.is_empty() {
        return 0;
    }
    let points = explored.space.reduce(&scouts.points.select(&explored.unexplained));
    let Ok(fit) = course.layers.following(&course.twin.full) else {
        return explored.unexplained.len();
    };
    let log_fitted = fit.log_density(&points);
    let limit = ln(EXPLAINING_WEIGHT * answer);
    explored.unexplained.iter().zip(&log_fitted).filter(|(i, q)| scouts.answered.log_nominal[**i] - **q > limit).count()
}

/// Shares of the last fit's regions that were born in the last refits, far from everything fitted before.
fn late_regions(course: &Course) -> Vec<f64> {
    let rounds = course.rounds.len();
    let late = course.born.iter().filter(|(round, _)| round + LAST_REFITS >= rounds);
    late.filter_map(|(_, part)| {
        let parts = course.twin.full.parts();
        let nearest = parts
            .iter()
            .min_by(|a, b| squared_distance(&a.mean, &part.mean).total_cmp(&squared_distance(&b.mean, &part.mean)))?;
        let k = part.mean.len() as f64;
        let separate = parts
            .iter()
            .filter(|p| p.mean != nearest.mean)
            .all(|p| squared_distance(&p.mean, &part.mean) > SEPARATE * SEPARATE * k);
        (separate && parts.len() > 1).then_some(nearest.mass)
    })
    .collect()
}

fn nothing_met(answer: &RareAnswer, searches: usize) -> Verdict {
    let RareAnswer::NoHit { upper_bound, nominal_draws } = answer else {
        return Verdict::of(Vec::new(), verdict::unseen_caution(searches));
    };
    let detail = format!(
        "No draw met the event, so there is no value. The {nominal_draws} draws from the variables' own distributions alone say, with 95 %, \
         that the probability of meeting it is at most {upper_bound:.2e}. Raise the budget, or check the sign of the condition."
    );
    let check = Check {
        name: "draws that met the event",
        value: 0.0,
        limit: "at least 1".to_owned(),
        word: Word::Unfit,
        detail,
    };
    Verdict::of(vec![check], verdict::unseen_caution(searches))
}
