//! Variables whose distribution has parameters that depend on other variables.
//!
//! Such a variable is `x = F^-1(Phi(u); theta)` with its own standard normal score `u` and parameters
//! `theta = theta(other variables)`: given those it has the distribution asked for, and its coordinate `u` is standard
//! normal whatever they are (Rosenblatt, Ann. Math. Statist. 23 (1952) 470-472). No Jacobian is left over.

use std::ops::Range;

use super::space::over_blocks;
use crate::distribution::Distribution;
use crate::distribution::DistributionError;
use crate::distribution::Form;
use crate::distribution::central_slope;
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
    pub(crate) form: Form,
    /// In the order of the form's names.
    pub(crate) parameters: Vec<Parameter>,
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
        let number = |&parameter: &Parameter| match parameter {
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
        placed(self.form.build(parameters)?, self.shift, self.between)
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
                for j in self.members.clone() {
                    let slope = natural.column(b, j)[i];
                    for (k, moved) in self.slopes(&parameters, u.column(b, j)[i]).into_iter().enumerate() {
                        block[k * BLOCK + i] += slope * moved;
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
        for (k, parameter) in self.parameters.iter().enumerate() {
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

    /// `dx / d parameter` for every parameter, at a fixed score: in closed form where the distribution has one, else (and
    /// where it is truncated) by differences of fourth order.
    fn slopes(&self, parameters: &[f64], u: f64) -> Vec<f64> {
        if self.between.is_none() {
            let exact = self.form.from_score_slopes(parameters, u);
            return exact.unwrap_or_else(|_| vec![f64::NAN; parameters.len()]);
        }
        (0..parameters.len())
            .map(|k| match self.parameters[k] {
                Parameter::Fixed(_) => 0.0,
                Parameter::Output(_) => self.difference(parameters, k, u),
            })
            .collect()
    }

    fn difference(&self, parameters: &[f64], k: usize, u: f64) -> f64 {
        let Some(given) = self.distribution(parameters) else { return f64::NAN };
        let size = match self.form.names()[k] {
            // A place is measured by the width of the distribution, a size by itself.
            "mean" | "location" | "low" | "high" | "mode" => given.from_score(0.7) - given.from_score(-0.7),
            "log_mean" => 1.0,
            _ => parameters[k].abs(),
        };
        central_slope(parameters[k], 1e-3 * size, |value| {
            let mut moved = parameters.to_vec();
            moved[k] = value;
            self.distribution(&moved).map(|moved| moved.from_score(u))
        })
    }
}

/// A distribution moved by `shift` and kept `between`.
pub(crate) fn placed(
    distribution: Distribution,
    shift: Option<f64>,
    between: Option<(f64, f64)>,
) -> Result<Distribution, DistributionError> {
    let moved = match shift {
        Some(shift) => distribution.shifted(shift)?,
        None => distribution,
    };
    match between {
        Some((low, high)) => moved.truncated(low, high),
        None => Ok(moved),
    }
}
