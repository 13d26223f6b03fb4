//! What looks wrong with a problem, each with advice.

use super::Trial;
use crate::numeric;
use crate::numeric::Points;
use crate::problem::Aim;
use crate::problem::Coordinate;
use crate::problem::Degrees;
use crate::problem::EvaluateError;
use crate::problem::Nature;
use crate::problem::Problem;
use crate::problem::Written;
use std::fmt;

/// A centre that lies so far below the best trial point, in nats, was put there by a wrong unit, not by a prior.
const FAR_BELOW: f64 = 1e4;
/// `ln 1e-6`: a distribution of which less is left was not cut off on purpose.
const LITTLE: f64 = -13.815_510_557_964_274;
/// Differences of the target below this part of its size are rounding.
const ROUNDING: f64 = 1e-9;
/// A coefficient of variation above this is probably a percentage.
const LARGEST_CV: f64 = 3.0;
/// More of the start than this outside the support is told.
const MOSTLY: f64 = 0.9;
/// An end carries mass where the density there is above this part of the largest along the variable.
const LOG_ENOUGH: f64 = -2.3;
/// Places along a variable, as parts of its interval; the first and the last are its ends.
const PLACES: [f64; 13] = [0.002, 0.01, 0.05, 0.15, 0.25, 0.35, 0.5, 0.65, 0.75, 0.85, 0.95, 0.99, 0.998];

/// Something that looks wrong. `Display` says what, and what to do.
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub enum Finding {
    /// Nothing depends on a variable.
    Unused {
        /// Its name.
        variable: String,
    },
    /// The ends of a truncated distribution leave almost nothing of it.
    LittleLeft {
        /// The variable.
        variable: String,
        /// `ln` of the probability between the ends.
        log_probability: f64,
    },
    /// An angle that is probably in degrees reaches a function that takes radians.
    Degrees(Degrees),
    /// A coefficient of variation that is probably a percentage.
    PercentCv {
        /// The variable.
        variable: String,
        /// The coefficient of variation.
        cv: f64,
    },
    /// Every trial point is outside the support.
    AllOutside {
        /// Trial points.
        points: usize,
    },
    /// Nearly every trial point is.
    MostlyOutside {
        /// Trial points.
        points: usize,
        /// Those outside.
        outside: usize,
    },
    /// The centre of the start is outside the support.
    CentreOutside,
    /// The centre lies far below the best trial point.
    FarBelow {
        /// Nats between them.
        nats: f64,
    },
    /// The target is the same at all trial points.
    Flat {
        /// What is the same.
        what: &'static str,
    },
    /// An interval carries density at both its ends.
    BothEnds {
        /// The variable.
        variable: String,
    },
    /// The model failed.
    Failures {
        /// Trial points.
        points: usize,
        /// Those that failed.
        failed: usize,
    },
}

impl fmt::Display for Finding {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Unused { variable } => write!(
                f,
                "Nothing depends on `{variable}`: it only dilutes the search. Use it in the target or an estimate, or drop it."
            ),
            Self::LittleLeft { variable, log_probability } => write!(
                f,
                "`between` leaves {} of the distribution of `{variable}`: a far tail stands for all of it. Check the ends and the \
                 parameters, and their units.",
                probability(*log_probability)
            ),
            Self::Degrees(Degrees { function, name, said: true }) => write!(
                f,
                "`{function}` is given `{name}`, which is in degrees: sin, cos and tan take radians. Multiply degrees by pi/180."
            ),
            Self::Degrees(Degrees { function, name, said: false }) => write!(
                f,
                "`{function}` is given `{name}`, most of whose values are beyond 2 pi: sin, cos and tan take radians. If it is in \
                 degrees, multiply it by pi/180."
            ),
            Self::PercentCv { variable, cv } => write!(
                f,
                "The `cv` of `{variable}` is {cv}: a standard deviation of {cv} times the mean. A cv is a share: 0.3 for 30 %."
            ),
            Self::AllOutside { points } => write!(
                f,
                "All {points} points of the start lie outside the support of the target. Move or widen `near` and `spread`, \
                 or check the formulas and `require`."
            ),
            Self::MostlyOutside { points, outside } => write!(
                f,
                "{outside} of {points} points of the start lie outside the support of the target. Move or widen `near` and \
                 `spread`, or check the formulas and `require`."
            ),
            Self::CentreOutside => write!(
                f,
                "The centre of the start lies outside the support of the target. Move `near`, or check the formulas there."
            ),
            Self::FarBelow { nats } => write!(
                f,
                "The log density at the centre of the start is {nats:.0} below the best of the trial points. A unit (m for mm) or a \
                 scale (a variance for a standard deviation) may be wrong, or `near` far off."
            ),
            Self::Flat { what } => write!(
                f,
                "{what} is the same at all trial points, so nothing is learnt from it. Check that its formulas use the variables and \
                 the data."
            ),
            Self::BothEnds { variable } => write!(
                f,
                "`{variable}` carries density at both ends of its range. If it is an angle, put the ends where there is no mass: one \
                 mode is cut in two there. If it is not, the range may be too narrow."
            ),
            Self::Failures { points, failed } => write!(
                f,
                "{failed} of {points} trial evaluations failed. Failed evaluations carry no weight, and more than 1 % of them spoil the \
                 verdict; mend the model there, or keep it away with `require`."
            ),
        }
    }
}

/// A small probability from its logarithm, `3.1e-15`, however small.
fn probability(log: f64) -> String {
    let tens = log / std::f64::consts::LN_10;
    let exponent = tens.floor();
    format!("{:.1}e{exponent}", numeric::exp((tens - exponent) * std::f64::consts::LN_10))
}

/// Truncated distributions of which almost nothing is left.
fn little_left(problem: &Problem) -> Vec<Finding> {
    let left = problem.variables().iter().filter_map(|variable| match &variable.nature {
        Nature::Random(distribution) if distribution.log_kept() < LITTLE => {
            Some(Finding::LittleLeft { variable: variable.name.clone(), log_probability: distribution.log_kept() })
        }
        _ => None,
    });
    left.collect()
}

/// Coefficients of variation that are probably percentages, told once for the members of an `each`.
fn percent_cv(problem: &Problem) -> Vec<Finding> {
    let mut found: Vec<Finding> = Vec::new();
    for (j, variable) in problem.variables().iter().enumerate() {
        let name = variable.member.as_ref().map_or(&variable.name, |member| &member.group);
        for (key, value) in problem.written_parameters(j) {
            if let Written::Number(cv) = value
                && key == "cv"
                && cv > LARGEST_CV
            {
                let finding = Finding::PercentCv { variable: name.clone(), cv };
                if !found.contains(&finding) {
                    found.push(finding);
                }
            }
        }
    }
    found
}

/// All that looks wrong, from the trial and a few evaluations more along variables that live on an interval.
///
/// # Errors
/// [`EvaluateError`] where the model cannot go on.
pub fn findings(problem: &Problem, trial: &Trial) -> Result<Vec<Finding>, EvaluateError> {
    let unused = problem.unused_variables().into_iter().map(|name| Finding::Unused { variable: name.to_owned() });
    let mut found: Vec<Finding> = unused.collect();
    found.extend(little_left(problem));
    found.extend(percent_cv(problem));
    found.extend(problem.degrees(&problem.to_natural(&trial.points)).into_iter().map(Finding::Degrees));
    let tally = trial.tally(problem.aim());
    let points = trial.points.len();
    if tally.failed > 0 {
        found.push(Finding::Failures { points, failed: tally.failed });
    }
    if tally.outside == points {
        found.push(Finding::AllOutside { points });
        return Ok(found);
    }
    if tally.outside as f64 > MOSTLY * points as f64 {
        found.push(Finding::MostlyOutside { points, outside: tally.outside });
    }
    if trial.centre.log_density[0] == f64::NEG_INFINITY {
        found.push(Finding::CentreOutside);
    } else if let Some((_, best)) = trial.best(problem) {
        let nats = best - trial.centre_log_density(problem);
        if nats > FAR_BELOW {
            found.push(Finding::FarBelow { nats });
        }
    }
    if let Some(what) = flat(problem, trial) {
        found.push(Finding::Flat { what });
    } else if problem.aim() == Aim::Density {
        found.extend(both_ends(problem, trial)?);
    }
    Ok(found)
}

/// What is the same at all points, if anything is.
fn flat(problem: &Problem, trial: &Trial) -> Option<&'static str> {
    let (values, what): (Vec<f64>, _) = match problem.aim() {
        Aim::Density => {
            let prior = problem.log_prior(&trial.points);
            let factor = trial.answers.log_density.iter().zip(&prior).map(|(l, p)| l - p);
            (factor.filter(|x| x.is_finite()).collect(), "The target, beyond the variables' own densities,")
        }
        Aim::Probability => (trial.answers.value.clone(), "The margin of the event"),
        Aim::Expectation => (trial.answers.value.clone(), "The integrand"),
    };
    let low = values.iter().copied().fold(f64::INFINITY, f64::min);
    let high = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    // A cost that is zero at all trial points is a rare one, and no slip.
    if problem.aim() == Aim::Expectation && high == 0.0 && low == 0.0 {
        return None;
    }
    (values.len() > 1 && high - low <= ROUNDING * high.abs().max(low.abs()).max(1.0)).then_some(what)
}

/// Variables on an interval with density at both ends, looked at through the best trial point.
fn both_ends(problem: &Problem, trial: &Trial) -> Result<Vec<Finding>, EvaluateError> {
    let Some((best, _)) = trial.best(problem) else { return Ok(Vec::new()) };
    let mut found = Vec::new();
    for (j, variable) in problem.variables().iter().enumerate() {
        let Coordinate::Logit { low, high } = variable.coordinate else { continue };
        let flat = match &variable.nature {
            Nature::Range { .. } => true,
            Nature::Random(distribution) => distribution.family() == "uniform",
            Nature::Dependent { .. } => false,
        };
        if !flat {
            continue;
        }
        let through = problem.to_natural(&Points::from_rows(problem.dim(), &trial.points.point(best))).point(0);
        let mut line = Points::new(problem.dim());
        for part in PLACES {
            let mut x = through.clone();
            x[j] = low + part * (high - low);
            line.push(&x);
        }
        let line = problem.to_coordinates(&line);
        let (answers, jacobian) = (problem.evaluate(&line)?, problem.log_jacobian(&line));
        let natural: Vec<f64> = answers.log_density.iter().zip(&jacobian).map(|(l, j)| l - j).collect();
        let most = natural.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        let ends = [natural[0], natural[PLACES.len() - 1]];
        if ends.iter().all(|end| end - most > LOG_ENOUGH) {
            found.push(Finding::BothEnds { variable: variable.name.clone() });
        }
    }
    Ok(found)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::report::trial::start_points;
    use std::path::Path;

    fn found(variables: &str, target: &str) -> Vec<Finding> {
        let text = format!("title = \"A pond\"\n[variables]\n{variables}\n[target]\naim = \"density\"\n{target}\n");
        let problem = Problem::parse(&text, "pond.toml", Path::new(".")).unwrap();
        let points = start_points(&problem, 200, 1);
        let answers = problem.evaluate(&points).unwrap();
        findings(&problem, &Trial::new(&problem, points, answers).unwrap()).unwrap()
    }

    const DEPTH: &str = "depth = { distribution = \"normal\", mean = 2.0, sd = 1.0 }";
    const LEVEL: &str = "level = { range = [-inf, inf], near = 2.0, spread = 1.0 }";
    const ANGLE: &str = "angle = { range = [0.0, 6.283], near = 3.0, spread = 2.0 }";

    #[test]
    fn sound_problems_have_no_findings() {
        assert_eq!(found(DEPTH, "log_factor = \"-depth^2\""), []);
        assert_eq!(found(ANGLE, "log_density = \"3 * cos(angle - 3.1)\""), []);
    }

    #[test]
    fn each_fault_is_found() {
        for (variables, target, want) in [
            (format!("{DEPTH}\n{LEVEL}"), "log_factor = \"-level^2\"", Finding::Unused { variable: "depth".into() }),
            (LEVEL.into(), "log_density = \"-level\"\nrequire = [\"level > 90\"]", Finding::AllOutside { points: 200 }),
            (LEVEL.into(), "log_density = \"-(level - 2000)^2\"", Finding::FarBelow { nats: 0.0 }),
            (DEPTH.into(), "log_factor = \"0 * depth - 3\"", Finding::Flat { what: "" }),
            (
                "depth = { distribution = \"normal\", mean = 2.0, sd = 0.1, between = [3.0, inf] }".into(),
                "log_factor = \"-depth^2\"",
                Finding::LittleLeft { variable: "depth".into(), log_probability: 0.0 },
            ),
            (
                "depth = { distribution = \"gamma\", mean = 2.0, cv = 30.0 }".into(),
                "log_factor = \"-depth^2\"",
                Finding::PercentCv { variable: "depth".into(), cv: 30.0 },
            ),
            (
                format!("{DEPTH}\nbearing = {{ distribution = \"normal\", mean = 40.0, sd = 5.0, unit = \"deg\" }}"),
                "log_factor = \"-depth^2*cos(bearing)^2\"",
                Finding::Degrees(Degrees { function: "cos".into(), name: "bearing".into(), said: true }),
            ),
            (ANGLE.into(), "log_density = \"3 * cos(angle)\"", Finding::BothEnds { variable: "angle".into() }),
            (LEVEL.into(), "log_density = \"-level^2\"\nrequire = [\"abs(level - 2) > 0.1\"]", Finding::CentreOutside),
        ] {
            let kinds: Vec<_> = found(&variables, target).iter().map(std::mem::discriminant).collect();
            assert!(kinds.contains(&std::mem::discriminant(&want)), "{target}: {:?}", found(&variables, target));
        }
        // SciPy 1.17.1: norm.logsf(10) = -53.23128515051247, which is 7.6e-24.
        assert_eq!(probability(-53.231_285_150_512_47), "7.6e-24");
        let most = found(LEVEL, "log_density = \"-level\"\nrequire = [\"level > 3.6\"]");
        assert!(matches!(most[0], Finding::MostlyOutside { outside: 181..200, .. }), "{most:?}");
        for finding in most {
            assert!(finding.to_string().ends_with('.'));
        }
    }
}
