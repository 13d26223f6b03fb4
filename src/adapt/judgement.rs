//! From the report draws to estimates and a verdict.

use super::course::Course;
use super::standard::Standard;
use super::tuning::{Finalist, ReportDraws, Round, Survey};
use crate::numeric::exp;
use crate::problem::{Coordinate, Problem, Variable};
use crate::proposal::Mixture;
use crate::weights::verdict::{self, Check, DensityEvidence, RoundFacts, SurveyFacts, Verdict, Word};
use crate::weights::{Estimate, LogWeights, Score, Strata, ratio_estimate};

/// All that the verdict looks at.
#[derive(Debug)]
pub(crate) struct Evidence<'a> {
    pub(crate) survey: &'a Survey,
    pub(crate) rounds: &'a [Round],
    pub(crate) finalists: &'a [Finalist],
    pub(crate) report: &'a ReportDraws,
    pub(crate) score: Option<&'a Score>,
    pub(crate) estimates: &'a [(String, Estimate)],
    pub(crate) estimate_values: &'a [Vec<f64>],
    pub(crate) late_modes: &'a [f64],
    pub(crate) failed_share: f64,
    /// Whether light tails meet a half-line or an interval without a heavy-tailed layer behind them.
    pub(crate) unguarded_tails: bool,
}

/// Self-normalised estimates from the report draws; none where no draw met the target.
pub(crate) fn estimates(names: Vec<String>, values: &[Vec<f64>], report: &ReportDraws) -> Vec<(String, Estimate)> {
    let Ok(weights) = LogWeights::new(report.log_weights()) else {
        return Vec::new();
    };
    let strata = Strata::for_draws(&report.labels, weights.len());
    names.into_iter().zip(values).map(|(name, column)| (name, ratio_estimate(&weights, column, &strata))).collect()
}

/// Whether a proposal of Gaussian components alone stands for variables in log or logit coordinates: a density that is finite at
/// the end of its support has an exponential tail there, and a Gaussian falls faster.
pub(crate) fn unguarded_tails(problem: &Problem, chosen: &Mixture) -> bool {
    let ended = |v: &Variable| matches!(v.coordinate, Coordinate::Log { .. } | Coordinate::Logit { .. });
    problem.variables().iter().any(ended) && chosen.components().iter().all(|c| c.df() == f64::INFINITY)
}

/// Judges the report draws.
pub(crate) fn judge(evidence: &Evidence) -> Verdict {
    let (Some(score), Ok(weights)) = (evidence.score, LogWeights::new(evidence.report.log_weights())) else {
        return no_mass(evidence.report.labels.len());
    };
    let strata = Strata::for_draws(&evidence.report.labels, weights.len());
    let by_name: Vec<(&str, &Estimate)> = evidence.estimates.iter().map(|(n, e)| (n.as_str(), e)).collect();
    let mut halves = vec![("the normalising constant", strata.halves_z(weights.relative()))];
    for ((name, estimate), column) in evidence.estimates.iter().zip(evidence.estimate_values) {
        if estimate.value.is_finite() {
            halves.push((name, strata.halves_z(&residuals(&weights, column, estimate.value))));
        }
    }
    let later = evidence.rounds.len() / 2;
    let rounds: Vec<RoundFacts> = evidence.rounds[later..]
        .iter()
        .filter_map(|r| r.score.as_ref())
        .map(|s| RoundFacts {
            ess_fraction: s.ess_fraction,
            log_normaliser: s.log_normaliser,
            log_normaliser_se: cautious_se(s),
        })
        .collect();
    let predicted = evidence.finalists.iter().find(|f| f.chosen).and_then(|f| f.predicted_ess_fraction);
    verdict::judge(&DensityEvidence {
        score,
        estimates: &by_name,
        halves: &halves,
        predicted_ess_fraction: predicted.unwrap_or(f64::NAN),
        late_modes: evidence.late_modes,
        failed_share: evidence.failed_share,
        survey: SurveyFacts {
            climbs_finished: evidence.survey.finished as usize,
            modes: evidence.survey.modes.len(),
            walls: evidence.survey.walls as usize,
            modes_hit_once: hit_once(evidence.survey),
        },
        rounds: &rounds,
        unguarded_tails: evidence.unguarded_tails,
    })
}

/// Half-way (in squares) between the stratified error of a round's log normaliser and the plain one: in a round of some hundred draws the
/// variance within a stratum of ten is not known, and where the components fit well all of it lies in such strata. With the stratified
/// error alone 4 runs of 260 whose answers were right were called unfit for their rounds' disagreement.
fn cautious_se(score: &Score) -> f64 {
    let plain = (score.weight_variance / score.draws.max(1) as f64).sqrt();
    (0.5 * (score.log_normaliser_se * score.log_normaliser_se + plain * plain)).sqrt()
}

/// Modes that one climb alone ended at, of those whose mass by their curvature is not negligible beside the largest.
fn hit_once(survey: &Survey) -> usize {
    const NEGLIGIBLE: f64 = -9.0;
    let largest = survey.modes.iter().map(|m| m.log_mass).fold(f64::NEG_INFINITY, f64::max);
    survey.modes.iter().filter(|m| m.hits == 1 && m.log_mass - largest > NEGLIGIBLE).count()
}

/// `w (f - mean)`, whose halves must agree about zero.
fn residuals(weights: &LogWeights, values: &[f64], mean: f64) -> Vec<f64> {
    weights.relative().iter().zip(values).map(|(&w, f)| if w > 0.0 { w * (f - mean) } else { 0.0 }).collect()
}

fn no_mass(draws: usize) -> Verdict {
    let detail = format!(
        "None of the {draws} report draws met the target: there is nothing to report. Move or widen `near` and `spread`, \
         or give more evaluations."
    );
    let check = Check {
        name: "report draws that met the target",
        value: 0.0,
        limit: "at least 1".into(),
        word: Word::Unfit,
        detail,
    };
    Verdict::of(vec![check], verdict::unseen_caution(0))
}

/// Newborn components of the last rounds that lie far from everything fitted before, with the share of the mass they carry.
const LAST_ROUNDS: u32 = 2;

/// Masses of the modes first met in the last two rounds: components born there that are separate from all earlier ones.
pub(crate) fn late_modes(course: &Course, chosen: &Mixture, report: &ReportDraws, target: &Standard) -> Vec<f64> {
    let Ok(weights) = LogWeights::new(report.log_weights()) else {
        return Vec::new();
    };
    let rounds = course.rounds.len() as u32;
    let d = chosen.dim() as f64;
    // Squared distances of a Gaussian's own draws stay below d + 5 sqrt(2 d) + 5 in all but some 1 in 10^4.
    let reach = d + 5.0 * (2.0 * d).sqrt() + 5.0;
    let total: f64 = weights.relative().iter().sum();
    let mut masses = Vec::new();
    for (round, born) in course.born.iter().filter(|(round, _)| round + LAST_ROUNDS > rounds) {
        let earlier = &course.fits[*round as usize - 1].full;
        for component in born.components() {
            let separate = earlier.components().iter().all(|old| {
                old.distance(component.location()) > 4.0 * reach && component.distance(old.location()) > 4.0 * reach
            });
            if separate {
                let own = target.standardised(&report.points);
                let mass: f64 = (0..own.len())
                    .filter(|&i| component.distance(&own.point(i)) < reach)
                    .map(|i| weights.relative()[i])
                    .sum();
                // Born at a stray point that carries nothing: no mode.
                if mass / total > exp(-14.0) {
                    masses.push(mass / total);
                }
            }
        }
    }
    masses
}
