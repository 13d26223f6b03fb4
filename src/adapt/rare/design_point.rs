//! The search for a design point: the point of the event that lies nearest to the origin of the scores.

use super::least_distance::{Cut, least_distance};
use super::scores::{Look, Scores};
use crate::adapt::TuneError;
use crate::numeric::linear::dot;

/// Where a search ended.
#[derive(Debug, Clone)]
pub(crate) struct Ended {
    /// The point found: the converged one, else the smallest one met that counts; none where nothing was met.
    pub(crate) at: Option<Vec<f64>>,
    /// Whether the search converged there.
    pub(crate) converged: bool,
    /// Unit gradient of the margin there, where it is known.
    pub(crate) normal: Option<Vec<f64>>,
    /// Distance from there to the surface by that gradient, against it positive.
    pub(crate) short: f64,
    /// Unit gradients met on the way.
    pub(crate) gradients: Vec<Vec<f64>>,
}

/// Iterations at most.
const ITERATIONS: usize = 20;
/// Longest step, in standard deviations.
const LONGEST: f64 = 2.5;
/// Trial lengths of a step, each this share of the one before.
const TRIALS: usize = 4;
const SHORTER: f64 = 0.4;
/// Converged: step and distance to the surface below this.
const CLOSE: f64 = 0.03;
/// Cuts that a kink is answered with.
const CUTS: usize = 6;
/// Failed steps after which the search gives up.
const FAILURES: usize = 4;
/// Cosine of the gradient with the point below which a converged point is no smooth design point; length of the step that looks further.
const STRAIGHT: f64 = 0.95;
const AFRESH: f64 = 0.5;
/// Gradients smaller than this say nothing.
const FLAT: f64 = 1e-12;
/// Sufficient decrease of the merit.
const DECREASE: f64 = 1e-4;

/// Rackwitz-Fiessler steps from `start` to the nearest point of the event.
///
/// The step goes to the point nearest to the origin on the tangent plane of the margin, shortened until the merit
/// `|u|^2/2 + c |g|` falls, `c = 2 max(|u|, |u_new|, .5) / |grad g|`. Where no length helps (a kink between two branches) the full
/// step is taken all the same, its gradient kept as one more cut, and from then on the step goes to the nearest point that meets the
/// last cuts together. Gives up before `cap` evaluations are exceeded.
///
/// # Source
/// Hasofer & Lind, J. Eng. Mech. 100 (1974) 111-121; Rackwitz & Fiessler, Comput. Struct. 9 (1978) 489-494; the merit after Zhang &
/// Der Kiureghian, "Two improved algorithms for reliability analysis" (1995); cuts, lengths and limits are ours.
pub(crate) fn search(target: &Scores, start: Look, cap: u64) -> Result<Ended, TuneError> {
    let mut best = start.hit.then(|| start.at.clone());
    let mut ended = Ended { at: None, converged: false, normal: None, short: 0.0, gradients: Vec::new() };
    let mut cuts: Vec<Cut> = Vec::new();
    let mut failures = 0;
    let mut afresh = false;
    let mut here = start;
    for _ in 0..ITERATIONS {
        if target.spent() + target.slope_cost() + TRIALS as u64 > cap {
            break;
        }
        let gradient = target.slope(&here)?;
        let length = dot(&gradient, &gradient).sqrt();
        if !(length > FLAT * (1.0 + here.value.abs()) && length.is_finite() && here.value.is_finite()) {
            break;
        }
        let normal: Vec<f64> = gradient.iter().map(|g| g / length).collect();
        ended.gradients.push(normal.clone());
        let bound = (dot(&gradient, &here.at) - here.value) / length;
        cuts.push(Cut { normal: normal.clone(), bound });
        let recent = &cuts[cuts.len().saturating_sub(CUTS)..];
        let jointly = if failures > 0 { least_distance(recent) } else { None };
        let aim = jointly.unwrap_or_else(|| normal.iter().map(|n| bound * n).collect());
        let aim = keep_discrete(target, &here.at, aim);
        let mut step: Vec<f64> = aim.iter().zip(&here.at).map(|(a, u)| a - u).collect();
        let mut size = dot(&step, &step).sqrt();
        if size < CLOSE && here.value.abs() / length < CLOSE {
            // Cuts left over from elsewhere can hold a smooth search back: look once more without them.
            let reach = dot(&here.at, &here.at).sqrt();
            if failures > 0 && !afresh && dot(&normal, &here.at).abs() < STRAIGHT * reach {
                (afresh, failures) = (true, 0);
                let last = cuts.len() - 1;
                cuts.drain(..last);
                let plain: Vec<f64> = normal.iter().map(|n| bound * n).collect();
                here = step_towards(target, &here.at, &keep_discrete(target, &here.at, plain))?;
                continue;
            }
            ended.converged = true;
            ended.normal = Some(normal);
            ended.short = here.value / length;
            best = Some(here.at.clone());
            break;
        }
        if size > LONGEST {
            step.iter_mut().for_each(|s| *s *= LONGEST / size);
            size = LONGEST;
        }
        let reach = dot(&here.at, &here.at).sqrt().max(dot(&aim, &aim).sqrt()).max(0.5);
        let price = 2.0 * reach / length;
        let merit = |u: &[f64], value: f64| 0.5 * dot(u, u) + price * value.abs();
        let before = merit(&here.at, here.value);
        let mut first = None;
        let mut accepted = None;
        let mut share = 1.0;
        for _ in 0..TRIALS {
            let at: Vec<f64> = here.at.iter().zip(&step).map(|(u, s)| u + share * s).collect();
            let trial = target.look(&at)?;
            if trial.hit && best.as_ref().is_none_or(|b| dot(&at, &at) < dot(b, b)) {
                best = Some(at.clone());
                ended.normal = None;
            }
            if merit(&at, trial.value) < before - DECREASE * share * size {
                accepted = Some(trial);
                break;
            }
            first.get_or_insert(trial);
            share *= SHORTER;
        }
        here = match (accepted, first) {
            (Some(next), _) => next,
            (None, Some(full)) if failures < FAILURES => {
                failures += 1;
                full
            }
            _ => break,
        };
    }
    ended.at = best;
    Ok(ended)
}

/// A first short step towards `aim`.
fn step_towards(target: &Scores, here: &[f64], aim: &[f64]) -> Result<Look, TuneError> {
    let step: Vec<f64> = aim.iter().zip(here).map(|(a, u)| a - u).collect();
    let share = (AFRESH / dot(&step, &step).sqrt().max(1e-12)).min(1.0);
    let at: Vec<f64> = here.iter().zip(&step).map(|(u, s)| u + share * s).collect();
    target.look(&at)
}

/// The aim of a step with every discrete variable at the most likely score of its present value: its margin has no slope to follow.
pub(crate) fn keep_discrete(target: &Scores, here: &[f64], mut aim: Vec<f64>) -> Vec<f64> {
    let variables = target.problem().variables();
    if variables.iter().any(crate::problem::Variable::is_discrete) {
        let kept = target.with_likeliest_scores(here);
        for (j, variable) in variables.iter().enumerate() {
            if variable.is_discrete() {
                aim[j] = kept[j];
            }
        }
    }
    aim
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::adapt::Silent;
    use crate::distribution::Distribution;
    use crate::model::Closure;
    use crate::problem::{Aim, Problem, Variable};

    fn from(start: &[f64], margin: impl Fn(&[f64]) -> f64 + Send + Sync + 'static) -> (Ended, u64) {
        let normal = Distribution::new("normal", &[("mean", 0.0), ("sd", 1.0)]).unwrap();
        let names: Vec<String> = (0..start.len()).map(|j| format!("u{j}")).collect();
        let variables = names.iter().map(|n| Variable::random(n, normal.clone())).collect();
        let model = Box::new(Closure::new(start.len(), margin));
        let problem = Problem::from_model("A margin", variables, Aim::Probability, model).unwrap();
        let mut silent = Silent;
        let target = Scores::new(&problem, &mut silent);
        let look = target.look(start).unwrap();
        let ended = search(&target, look, 1000).unwrap();
        (ended, target.spent())
    }

    #[test]
    fn a_plane_takes_few_steps() {
        let (ended, spent) = from(&[4.0, -1.0, 0.5], |u| 3.0 - (u[0] + u[1] + u[2]) / 3.0_f64.sqrt());
        let p = ended.at.unwrap();
        assert!(ended.converged && p.iter().all(|v| (v - 3.0_f64.sqrt()).abs() < 1e-3), "{p:?}");
        assert!(spent < 15, "{spent}");
        assert!((ended.normal.unwrap()[0] + 1.0 / 3.0_f64.sqrt()).abs() < 1e-3);
    }

    /// The corner of two branches is the nearest point of an event that needs both: steps along one tangent bounce for ever.
    #[test]
    fn a_kink_is_met_by_cuts() {
        let (ended, _) = from(&[4.0, 1.0], |u| (2.0 - u[0] - 0.3 * u[1]).max(2.0 - u[1] + 0.5 * u[0]));
        let p = ended.at.unwrap();
        // Both tight: u0 + .3 u1 = 2 and u1 - .5 u0 = 2.
        let u0 = 1.4 / 1.15;
        assert!((p[0] - u0).abs() < 0.1 && (p[1] - (2.0 + 0.5 * u0)).abs() < 0.1, "{p:?}");
    }

    #[test]
    fn a_flat_margin_ends_at_once() {
        let (ended, spent) = from(&[2.0, 2.0], |u| if u[0] > 1.0 { -1.0 } else { 1.0 });
        assert_eq!(ended.at, Some(vec![2.0, 2.0]));
        assert!(!ended.converged && spent == 3);
    }
}
