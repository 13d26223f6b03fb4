//! A look at a problem before it is tuned: trial evaluations of the start, and what looks wrong.

mod findings;

pub use findings::{Finding, findings};

use crate::numeric::Points;
use crate::numeric::Purpose;
use crate::numeric::normal;
use crate::numeric::stream;
use crate::problem::Aim;
use crate::problem::EvaluateError;
use crate::problem::Evaluation;
use crate::problem::Problem;

/// Trial points of the start, and what the problem says about them and about the start's centre.
#[derive(Debug, Clone, PartialEq)]
pub struct Trial {
    /// The points, in coordinates.
    pub points: Points,
    /// Answers at the points.
    pub answers: Evaluation,
    /// Answers at the centre.
    pub centre: Evaluation,
    /// Points that fulfil every inequality of `require`, where there are any.
    pub fulfilled: Option<usize>,
}

/// How the trial points came out.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Tally {
    /// Points that have a density.
    pub inside: usize,
    /// Points outside the support.
    pub outside: usize,
    /// Points where the model failed.
    pub failed: usize,
    /// Points in the event; for an expectation those with an integrand that is not zero.
    pub met: usize,
}

/// `n` points drawn from the start: a normal distribution about its centre, in coordinates.
#[must_use]
pub fn start_points(problem: &Problem, n: usize, seed: u64) -> Points {
    let start = problem.start();
    let mut rng = stream(seed, Purpose::Trial, 0, 0);
    let mut points = Points::new(problem.dim());
    for _ in 0..n {
        let z: Vec<f64> = start.near.iter().zip(&start.spread).map(|(m, s)| m + s * normal::draw(&mut rng)).collect();
        points.push(&z);
    }
    points
}

impl Trial {
    /// Evaluates the centre, and takes the answers at `points`, whose evaluation the caller may have timed.
    ///
    /// # Errors
    /// [`EvaluateError`] where the model cannot go on.
    pub fn new(problem: &Problem, points: Points, answers: Evaluation) -> Result<Self, EvaluateError> {
        let centre = problem.evaluate(&Points::from_rows(problem.dim(), &problem.start().near))?;
        let fulfilled = match problem.has_requirements() {
            true => Some(problem.fulfils(&points)?.into_iter().filter(|fulfils| *fulfils).count()),
            false => None,
        };
        Ok(Self { points, answers, centre, fulfilled })
    }

    /// How the points came out.
    #[must_use]
    pub fn tally(&self, aim: Aim) -> Tally {
        let n = self.points.len();
        let log_density = &self.answers.log_density;
        let value = &self.answers.value;
        let failed = log_density.iter().chain(value).filter(|x| x.is_nan()).count();
        let outside = log_density.iter().filter(|l| **l == f64::NEG_INFINITY).count();
        let met = match aim {
            Aim::Density => 0,
            Aim::Probability => self.answers.hit.iter().filter(|hit| **hit).count(),
            Aim::Expectation => value.iter().filter(|f| f.is_finite() && **f != 0.0).count(),
        };
        Tally { inside: n - outside - failed.min(n - outside), outside, failed, met }
    }

    /// The trial point with the largest log density in natural units, and that density.
    #[must_use]
    pub fn best(&self, problem: &Problem) -> Option<(usize, f64)> {
        let jacobian = problem.log_jacobian(&self.points);
        let mut best: Option<(usize, f64)> = None;
        for (i, (l, j)) in self.answers.log_density.iter().zip(&jacobian).enumerate() {
            let natural = l - j;
            if natural.is_finite() && best.is_none_or(|(_, most)| natural > most) {
                best = Some((i, natural));
            }
        }
        best
    }

    /// Log density at the centre, in natural units.
    #[must_use]
    pub fn centre_log_density(&self, problem: &Problem) -> f64 {
        let centre = Points::from_rows(problem.dim(), &problem.start().near);
        self.centre.log_density[0] - problem.log_jacobian(&centre)[0]
    }
}
