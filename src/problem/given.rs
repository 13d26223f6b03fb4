//! Variables whose distribution has parameters that depend on other variables.
//!
//! Such a variable is `x = F^-1(Phi(u); theta)` with its own standard normal score `u` and parameters
//! `theta = theta(other variables)`: given those it has the distribution asked for, and its coordinate `u` is standard
//! normal whatever they are (Rosenblatt, Ann. Math. Statist. 23 (1952) 470-472). No Jacobian is left over.

use std::ops::Range;

use super::space::over_blocks;
use crate::distribution::Distribution;
use crate::distribution::DistributionError;
use crate::expression::Program;
use crate::numeric::BLOCK;
use crate::numeric::Points;

/// A parameter: a number, or output `k` of the group's program.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) enum Parameter {
    Fixed(f64),
    Output(usize),
}

/// One variable, or the members of an `each`, that share their parameters.
#[derive(Debug, Clone)]
pub(crate) struct GivenGroup {
    pub(crate) members: Range<usize>,
    pub(crate) family: String,
    pub(crate) parameters: Vec<(String, Parameter)>,
    pub(crate) program: Program,
    pub(crate) between: Option<(f64, f64)>,
    pub(crate) shift: Option<f64>,
    pub(crate) discrete: bool,
}

impl GivenGroup {
    /// Values of the program's outputs at points in natural units.
    pub(crate) fn parameter_values(&self, x: &Points) -> Vec<Points> {
        self.program.values(x)
    }

    /// Parameters at point `i`.
    fn parameters_at(&self, values: &[Points], i: usize) -> Vec<f64> {
        let number = |&(_, parameter): &(String, Parameter)| match parameter {
            Parameter::Fixed(number) => number,
            Parameter::Output(k) => values[k].get(i, 0),
        };
        self.parameters.iter().map(number).collect()
    }

    /// The distribution with these parameters, none where there is none (a negative spread, say).
    fn distribution(&self, parameters: &[f64]) -> Option<Distribution> {
        self.settled(parameters).ok()
    }

    fn settled(&self, parameters: &[f64]) -> Result<Distribution, DistributionError> {
        let pairs: Vec<(&str, f64)> =
            self.parameters.iter().zip(parameters).map(|((key, _), &value)| (key.as_str(), value)).collect();
        settled(&self.family, &pairs, self.shift, self.between)
    }

    /// The distribution of the members at point `i`, or why there is none.
    pub(crate) fn try_distribution(&self, values: &[Points], i: usize) -> Result<Distribution, DistributionError> {
        self.settled(&self.parameters_at(values, i))
    }

    /// The distribution of the members at point `i`.
    pub(crate) fn distribution_at(&self, values: &[Points], i: usize) -> Option<Distribution> {
        self.distribution(&self.parameters_at(values, i))
    }

    /// Writes the members' values into `x`, whose other variables are there already. NaN where there is no distribution.
    pub(crate) fn fill(&self, u: &Points, x: &mut Points) {
        let values = self.parameter_values(x);
        over_blocks(x, |b, block| {
            for i in 0..u.block_len(b) {
                let distribution = self.distribution_at(&values, b * BLOCK + i);
                for j in self.members.clone() {
                    block[j * BLOCK + i] =
                        distribution.as_ref().map_or(f64::NAN, |given| given.from_score(u.column(b, j)[i]));
                }
            }
        });
    }

    /// Moves the slopes of the members (`natural`) to their scores (`gradient`) and to the variables that the
    /// parameters depend on (`natural` again).
    pub(crate) fn pull_back(&self, u: &Points, x: &Points, natural: &mut Points, gradient: &mut Points) {
        if self.discrete {
            return; // A whole number does not move with its score nor with its parameters, but for jumps.
        }
        let values = self.parameter_values(x);
        let mut owed = Points::zeros(self.parameters.len(), x.len());
        over_blocks(&mut owed, |b, block| {
            for i in 0..x.block_len(b) {
                let parameters = self.parameters_at(&values, b * BLOCK + i);
                for (k, (_, parameter)) in self.parameters.iter().enumerate() {
                    if matches!(parameter, Parameter::Output(_)) {
                        block[k * BLOCK + i] = self
                            .members
                            .clone()
                            .map(|j| {
                                let slope = natural.column(b, j)[i];
                                slope * self.slope(&parameters, k, u.column(b, j)[i], x.column(b, j)[i])
                            })
                            .sum();
                    }
                }
            }
        });
        over_blocks(gradient, |b, block| {
            for i in 0..x.block_len(b) {
                let distribution = self.distribution_at(&values, b * BLOCK + i);
                for j in self.members.clone() {
                    let (u, x) = (u.column(b, j)[i], x.column(b, j)[i]);
                    let slope = distribution.as_ref().map_or(f64::NAN, |given| given.score_slope(u, x));
                    block[j * BLOCK + i] = natural.column(b, j)[i] * slope;
                }
            }
        });
        for (k, (_, parameter)) in self.parameters.iter().enumerate() {
            if let Parameter::Output(output) = parameter {
                let (_, slopes) = self.program.value_and_gradient(*output, x);
                over_blocks(natural, |b, block| {
                    let n = x.block_len(b);
                    for j in (0..x.dim()).filter(|&j| self.program.uses_input(j)) {
                        for i in 0..n {
                            block[j * BLOCK + i] += owed.column(b, k)[i] * slopes.column(b, j)[i];
                        }
                    }
                });
            }
        }
    }

    /// `dx / d parameter k` at a fixed score: exact where the parameter moves or stretches the distribution, else by
    /// differences of fourth order, right to about twelve digits.
    fn slope(&self, parameters: &[f64], k: usize, u: f64, x: f64) -> f64 {
        let exact = self.exact_slope(parameters, k, u, x - self.shift.unwrap_or(0.0));
        if let Some(slope) = exact.filter(|_| self.between.is_none()) {
            return slope;
        }
        self.difference(parameters, k, u)
    }

    fn exact_slope(&self, parameters: &[f64], k: usize, u: f64, x: f64) -> Option<f64> {
        let value = |key: &str| self.parameters.iter().position(|(name, _)| name == key).map(|at| parameters[at]);
        if value("cv").is_some() {
            return None; // The coefficient of variation ties spread to mean.
        }
        let scaled = |centre: f64| (x - centre) / parameters[k];
        match (self.family.as_str(), self.parameters[k].0.as_str()) {
            ("normal" | "logistic" | "gumbel" | "gumbel-min", "mean") => Some(1.0),
            ("normal" | "logistic" | "gumbel" | "gumbel-min", "sd") => Some(scaled(value("mean")?)),
            ("cauchy" | "student-t" | "gev" | "gumbel" | "gumbel-min" | "logistic", "location") => Some(1.0),
            ("cauchy" | "student-t" | "gev" | "gumbel" | "gumbel-min" | "logistic", "scale") => {
                Some(scaled(value("location").unwrap_or(0.0)))
            }
            ("half-normal" | "half-cauchy" | "weibull" | "inverse-gamma", "scale") => Some(scaled(0.0)),
            ("exponential", "mean") | ("pareto", "minimum") => Some(scaled(0.0)),
            ("exponential" | "gamma", "rate") => Some(-scaled(0.0)),
            ("lognormal", "log_mean") => Some(x),
            ("lognormal", "log_sd") => Some(x * u),
            ("uniform", "low") => Some((value("high")? - x) / (value("high")? - value("low")?)),
            ("uniform", "high") => Some((x - value("low")?) / (value("high")? - value("low")?)),
            _ => None,
        }
    }

    fn difference(&self, parameters: &[f64], k: usize, u: f64) -> f64 {
        let key = self.parameters[k].0.as_str();
        let moves = ["mean", "location", "low", "high", "mode"].contains(&key);
        let size = match self.distribution(parameters) {
            // A place is measured by the width of the distribution, a size by itself.
            Some(given) if moves => given.from_score(0.7) - given.from_score(-0.7),
            Some(_) if key == "log_mean" => 1.0,
            Some(_) => parameters[k].abs(),
            None => return f64::NAN,
        };
        let h = 1e-3 * size;
        let at = |step: f64| {
            let mut moved = parameters.to_vec();
            moved[k] += step;
            self.distribution(&moved).map_or(f64::NAN, |given| given.from_score(u))
        };
        (8.0 * (at(h) - at(-h)) - (at(2.0 * h) - at(-2.0 * h))) / (12.0 * h)
    }
}

/// The distribution with these parameters, moved by `shift` and kept `between`.
pub(crate) fn settled(
    family: &str,
    parameters: &[(&str, f64)],
    shift: Option<f64>,
    between: Option<(f64, f64)>,
) -> Result<Distribution, DistributionError> {
    let mut distribution = Distribution::new(family, parameters)?;
    if let Some(shift) = shift {
        distribution = distribution.shifted(shift)?;
    }
    if let Some((low, high)) = between {
        distribution = distribution.truncated(low, high)?;
    }
    Ok(distribution)
}
