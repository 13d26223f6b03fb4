//! Production draws as rows in natural units.

use crate::numeric::Points;
use crate::problem::Aim;
use crate::problem::Nature;
use crate::problem::Problem;
use crate::production::Step;

/// Log density of the proposal, natural units.
const LOG_PROPOSAL: &str = "log_proposal";
/// What the variables' distributions contribute, natural units.
const LOG_NOMINAL: &str = "log_nominal";

/// Whether any variable has a distribution, so that `log_nominal` says something.
#[must_use]
pub fn has_nominal(problem: &Problem) -> bool {
    problem.variables().iter().any(|v| !matches!(v.nature, Nature::Range { .. }))
}

/// The first discrete variable: a value of it is a whole interval of the proposal's coordinate.
#[must_use]
pub fn first_discrete(problem: &Problem) -> Option<&str> {
    let discrete = |nature: &Nature| match nature {
        Nature::Range { .. } => false,
        Nature::Random(distribution) => distribution.is_discrete(),
        Nature::Dependent { family, .. } => ["binomial", "poisson", "geometric"].contains(&family.as_str()),
    };
    problem.variables().iter().find(|v| discrete(&v.nature)).map(|v| v.name.as_str())
}

/// Names of the columns of drawn points: the variables, `log_proposal`, `log_nominal` where variables have distributions. A
/// variable with one of these names gets an underscore.
#[must_use]
pub fn draw_names(problem: &Problem) -> Vec<String> {
    let last: &[&str] = if has_nominal(problem) { &[LOG_PROPOSAL, LOG_NOMINAL] } else { &[LOG_PROPOSAL] };
    named(problem.variables().iter().map(|v| v.name.clone()), last)
}

/// The columns of points in coordinates with their log proposal density there.
#[must_use]
pub fn draw_columns(problem: &Problem, points: &Points, log_proposal: &[f64]) -> Vec<Vec<f64>> {
    let natural = problem.to_natural(points);
    let jacobian = problem.log_jacobian(points);
    let mut columns: Vec<Vec<f64>> = (0..natural.dim()).map(|j| natural.coordinate(j)).collect();
    columns.push(less(log_proposal, &jacobian));
    if has_nominal(problem) {
        columns.push(less(&problem.log_prior(points), &jacobian));
    }
    columns
}

/// Names of the columns of production points that are kept: variables, estimates, the margin or integrand where the aim has one,
/// `log_nominal` there, `log_target` and `log_proposal`.
#[must_use]
pub fn kept_names(problem: &Problem) -> Vec<String> {
    let last: &[&str] = match problem.aim() {
        Aim::Density => &["log_target", LOG_PROPOSAL],
        _ => &["value", LOG_NOMINAL, "log_target", LOG_PROPOSAL],
    };
    named(problem.variables().iter().map(|v| v.name.clone()).chain(problem.estimate_names()), last)
}

/// The columns of a step of production.
#[must_use]
pub fn kept_columns(problem: &Problem, step: &Step) -> Vec<Vec<f64>> {
    let natural = problem.to_natural(&step.points);
    let jacobian = problem.log_jacobian(&step.points);
    let log_density = less(&step.evaluation.log_density, &jacobian);
    let mut columns: Vec<Vec<f64>> = (0..natural.dim()).map(|j| natural.coordinate(j)).collect();
    columns.extend(step.estimates.iter().cloned());
    if problem.aim() != Aim::Density {
        let value = &step.evaluation.value;
        let size = |i: usize| match problem.aim() {
            _ if value[i].is_nan() => f64::NAN,
            Aim::Probability if step.evaluation.hit[i] => 0.0,
            Aim::Probability => f64::NEG_INFINITY,
            _ => crate::numeric::ln(value[i].abs()),
        };
        let target = log_density.iter().enumerate().map(|(i, l)| l + size(i)).collect();
        columns.extend([value.clone(), log_density, target]);
    } else {
        columns.push(log_density);
    }
    columns.push(less(&step.log_proposal, &jacobian));
    columns
}

fn less(log: &[f64], jacobian: &[f64]) -> Vec<f64> {
    log.iter().zip(jacobian).map(|(l, j)| l - j).collect()
}

fn named(own: impl Iterator<Item = String>, last: &[&str]) -> Vec<String> {
    let mut names: Vec<String> = Vec::new();
    for mut name in own {
        while last.contains(&name.as_str()) || names.contains(&name) {
            name.push('_');
        }
        names.push(name);
    }
    names.extend(last.iter().map(|&name| name.to_owned()));
    names
}
