//! Pair by pair, and which tails the evidence is for.

use super::contestants::Kind;
use super::scored::Contestant;
use super::sentences;
use crate::numeric::normal::upper_tail;
use crate::weights::verdict::checks::TAIL_SOUND;
use crate::weights::{Score, TailReason};
use serde::Serialize;

/// ESS fraction of a contestant less that of the Gaussian mixture.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Difference {
    /// The contestant.
    pub name: String,
    /// The difference.
    pub value: f64,
    /// Its standard error, draw by draw: random numbers that both have in common cancel. None where either tail shape is above 0.5.
    pub se: Option<f64>,
    /// The standard error if the draws had nothing in common.
    pub se_independent: Option<f64>,
    /// Chance of a difference of this size in standard errors, were there none (both sides, normal).
    pub significance: Option<f64>,
}

/// Which tails.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Tails {
    /// Student-t components.
    Heavy,
    /// Gaussian ones are enough.
    Light,
    /// The evidence does not separate them.
    Undecided,
}

/// What to take, and why.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Recommendation {
    /// Which tails.
    pub tails: Tails,
    /// The contestant to take; none where undecided.
    pub contestant: Option<String>,
    /// One sentence with the reason.
    pub sentence: String,
}

/// A difference counts below this chance: several contestants are looked at, so not 5 %.
const SIGNIFICANT: f64 = 0.01;
/// A gain that counts, as a part of the draws: less is not worth another family.
const LEAST_GAIN: f64 = 0.01;
/// Weights of so little variance do not suffer from their top, if no draw has more than [`NO_HEAVY_DRAW`] of the total.
const EVEN: f64 = 0.05;
const NO_HEAVY_DRAW: f64 = 0.01;
/// Fitted degrees of freedom below these say that the tail is a power, whatever the draws of the light proposal have met.
const POWER_TAIL: f64 = 12.0;
/// From so many degrees of freedom on, a gain comes from the fit and the layers around it, and not from the tails.
const NEARLY_GAUSSIAN: f64 = 40.0;

/// What the top of a contestant's weights says.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub(super) enum Risk {
    /// The tail shape is below the limit with nine chances in ten, or the weights are too even for it to matter.
    None,
    /// Above it, but below the limit at which a mean still settles, with nine chances in ten.
    Some,
    /// Above that too, or not known.
    Grave,
}

/// The risk of a contestant. Even weights excuse a heavy top, but not where the tail of the target is known to be a power.
pub(super) fn risk(score: Option<&Score>, power_tail: bool) -> Risk {
    let Some(score) = score else { return Risk::Grave };
    let even = score.weight_variance <= EVEN && score.largest_share <= NO_HEAVY_DRAW;
    match score.tail.reason {
        TailReason::Bounded => Risk::None,
        _ if score.tail.upper <= TAIL_SOUND || (even && !power_tail) => Risk::None,
        _ if score.tail.upper <= score.tail.limit => Risk::Some,
        _ => Risk::Grave,
    }
}

/// Every contestant against the first.
pub(super) fn differences(contestants: &[Contestant]) -> Vec<Difference> {
    let Some((first, others)) = contestants.split_first() else { return Vec::new() };
    others.iter().map(|other| difference(other, first)).collect()
}

/// `a` less `b`, from their influences draw by draw.
pub(super) fn difference(a: &Contestant, b: &Contestant) -> Difference {
    let value = a.merits.ess_fraction.value - b.merits.ess_fraction.value;
    let errors = |c: &Contestant| c.score.as_ref().and_then(|s| s.ess_fraction_se);
    let (mut se, mut se_independent) = (None, None);
    if let (Some(of_a), Some(of_b)) = (errors(a), errors(b)) {
        let (of_draws, n) = (influences(a).into_iter().zip(influences(b)), a.draws.labels.len() as f64);
        se = Some(of_draws.map(|(a, b)| (a - b) * (a - b)).sum::<f64>().sqrt() / n);
        se_independent = Some((of_a * of_a + of_b * of_b).sqrt());
    }
    let chance =
        |se: f64| if se > 0.0 { 2.0 * upper_tail(value.abs() / se) } else { f64::from(u8::from(value == 0.0)) };
    Difference { name: a.name.clone(), value, se, se_independent, significance: se.map(chance) }
}

/// What every draw does to the ESS fraction, by the delta method: `2 (W - 1)/m - (W^2 - m)/m^2`, `W` the weight over the mean and `m`
/// the mean square of `W`.
fn influences(contestant: &Contestant) -> Vec<f64> {
    let log = &contestant.draws.log_weights;
    let largest = log.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    let relative: Vec<f64> = log.iter().map(|l| crate::numeric::exp(l - largest)).collect();
    let n = relative.len() as f64;
    let mean = relative.iter().sum::<f64>() / n;
    let second = relative.iter().map(|w| w * w).sum::<f64>() / n / (mean * mean);
    let influence = |w: f64| 2.0 * (w - 1.0) / second - (w * w - second) / (second * second);
    relative.into_iter().map(|w| influence(w / mean)).collect()
}

/// Whether a difference is a gain that counts.
pub(super) fn gains(difference: &Difference) -> bool {
    difference.value >= LEAST_GAIN && difference.significance.is_some_and(|chance| chance < SIGNIFICANT)
}

/// Heavy tails are preferred where the light contestant has a risk that they have not (or a grave one where theirs is less), or a
/// significantly lower ESS fraction; light ones are enough where they have no risk and nothing is gained by heavy ones; all else is
/// undecided.
pub(super) fn recommend(contestants: &[Contestant], differences: &[Difference]) -> Recommendation {
    let light = contestants.iter().find(|c| c.kind == Kind::Gaussian);
    let (Some(light), Some(heavy)) = (light, best_heavy(contestants)) else {
        return Recommendation { tails: Tails::Undecided, contestant: None, sentence: sentences::nothing_met() };
    };
    let gain = differences.iter().find(|d| d.name == heavy.name);
    let gained = gain.is_some_and(gains);
    let power = contestants.iter().find(|c| c.kind == Kind::StudentT).is_some_and(|c| c.df < POWER_TAIL);
    let (of_light, of_heavy) = (risk(light.score.as_ref(), power), risk(heavy.score.as_ref(), false));
    let lighter_top = upper(heavy) < upper(light);
    let (tails, sentence) = match (of_light, of_heavy) {
        (Risk::Some | Risk::Grave, Risk::None) => (Tails::Heavy, sentences::removes_risk(light, heavy)),
        (Risk::Grave, Risk::Some) if lighter_top => (Tails::Heavy, sentences::lowers_risk(light, heavy)),
        (Risk::Some | Risk::Grave, _) => (Tails::Undecided, sentences::both_at_risk(light, heavy)),
        (Risk::None, Risk::None) if gained && heavy.df >= NEARLY_GAUSSIAN => {
            (Tails::Undecided, sentences::gain_of_fit(light, heavy))
        }
        (Risk::None, Risk::None) if gained => (Tails::Heavy, sentences::gains(light, heavy, gain)),
        (Risk::None, _) if gained => (Tails::Undecided, sentences::gain_with_risk(heavy)),
        (Risk::None, _) if power => (Tails::Undecided, sentences::power_tail(light, heavy)),
        (Risk::None, _) => (Tails::Light, sentences::enough(light, heavy, gain)),
    };
    let chosen = match tails {
        Tails::Heavy => Some(heavy),
        Tails::Light => Some(light),
        Tails::Undecided => None,
    };
    Recommendation { tails, contestant: chosen.map(|c| c.name.clone()), sentence }
}

/// Upper bound of the tail shape; above all where it is not known.
fn upper(contestant: &Contestant) -> f64 {
    contestant.score.as_ref().map(|s| s.tail.upper).filter(|u| !u.is_nan()).unwrap_or(f64::INFINITY)
}

/// The Student-t contestant with the fitted degrees of freedom, unless another is safer, or as safe and significantly better.
fn best_heavy(contestants: &[Contestant]) -> Option<&Contestant> {
    let mut best: Option<&Contestant> = None;
    for one in contestants.iter().filter(|c| c.kind.is_heavy()) {
        let better = best.is_none_or(|best| {
            let (now, then) = (risk(one.score.as_ref(), false), risk(best.score.as_ref(), false));
            now < then || (now == then && gains(&difference(one, best)))
        });
        if better {
            best = Some(one);
        }
    }
    best
}
