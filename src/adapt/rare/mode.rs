//! The search for a mode of `|f|` times the nominal density, where the mean of an integrand is asked for.

use super::design_point::Ended;
use super::scores::{Look, Scores, log_size};
use crate::adapt::TuneError;
use crate::numeric::linear::dot;

/// Iterations at most.
const ITERATIONS: usize = 12;
/// Longest step, in standard deviations, and the one below which the climb ends.
const LONGEST: f64 = 2.0;
const SHORTEST: f64 = 0.1;
/// Trial lengths of a step, each this share of the one before.
const TRIALS: usize = 4;
const SHORTER: f64 = 0.4;
/// Gain in nats below which the climb ends.
const GAIN: f64 = 0.02;

/// Climbs `ln |f| - |u|^2/2` from a point with `f != 0`: the step goes to `grad ln |f|`, which is the mode where `ln |f|` is linear.
pub(crate) fn climb(target: &Scores, start: Look, cap: u64) -> Result<Ended, TuneError> {
    let height = |look: &Look| log_size(look.value) - 0.5 * dot(&look.at, &look.at);
    let mut ended = Ended { at: None, converged: false, normal: None, short: 0.0, gradients: Vec::new() };
    let mut here = start;
    for _ in 0..ITERATIONS {
        if target.spent() + target.slope_cost() + TRIALS as u64 > cap {
            break;
        }
        let slope: Vec<f64> = target.slope(&here)?.iter().map(|g| g / here.value).collect();
        let length = dot(&slope, &slope).sqrt();
        if !length.is_finite() {
            break;
        }
        if length > 0.0 {
            ended.gradients.push(slope.iter().map(|s| s / length).collect());
        }
        let aim = super::design_point::keep_discrete(target, &here.at, slope);
        let mut step: Vec<f64> = aim.iter().zip(&here.at).map(|(a, u)| a - u).collect();
        let size = dot(&step, &step).sqrt();
        if size < SHORTEST {
            ended.converged = true;
            break;
        }
        if size > LONGEST {
            step.iter_mut().for_each(|s| *s *= LONGEST / size);
        }
        let before = height(&here);
        let mut share = 1.0;
        let mut next = None;
        for _ in 0..TRIALS {
            let at: Vec<f64> = here.at.iter().zip(&step).map(|(u, s)| u + share * s).collect();
            let trial = target.look(&at)?;
            if trial.hit && height(&trial) > before {
                next = Some(trial);
                break;
            }
            share *= SHORTER;
        }
        let Some(next) = next else { break };
        let gain = height(&next) - before;
        here = next;
        if gain < GAIN {
            ended.converged = true;
            break;
        }
    }
    ended.at = Some(here.at);
    Ok(ended)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::adapt::Silent;
    use crate::distribution::Distribution;
    use crate::model::Closure;
    use crate::problem::{Aim, Problem, Variable};

    /// `f = exp(2 u)`: the mode of `f phi` is at 2.
    #[test]
    fn a_log_linear_integrand_takes_one_step() {
        let normal = Distribution::new("normal", &[("mean", 0.0), ("sd", 1.0)]).unwrap();
        let model = Box::new(Closure::new(1, |u| -crate::numeric::exp(2.0 * u[0])));
        let variables = vec![Variable::random("u", normal)];
        let problem = Problem::from_model("A mean", variables, Aim::Expectation, model).unwrap();
        let mut silent = Silent;
        let target = Scores::new(&problem, &mut silent);
        let start = target.look(&[0.5]).unwrap();
        let ended = climb(&target, start, 100).unwrap();
        assert!(ended.converged && (ended.at.unwrap()[0] - 2.0).abs() < 0.05);
    }
}
