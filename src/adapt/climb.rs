//! One climb of the survey: a quasi-Newton ascent that stops as soon as it is inside a known mode.
//!
//! The driver (iteration count, states, termination) is `argmin`'s; the step is ours, because it needs what line searches of
//! a library do not give: a cap on the step, a stop inside known modes, and an answer for every odd end.

use super::TuneError;
use super::modes::KnownMode;
use super::standard::Standard;
use crate::numeric::linear::{dot, times};
use argmin::core::{Error, Executor, IterState, KV, Problem, Solver, State, TerminationReason, TerminationStatus};

/// How a climb ended.
#[derive(Debug, Clone, PartialEq)]
pub(crate) enum End {
    /// At a stationary point: location and inverse metric there.
    Top(Vec<f64>, Vec<f64>),
    /// Inside the basin of the mode with this index.
    Known(usize),
    /// It left for infinity.
    Away,
    /// No step along an uphill direction goes up, because the support ends there.
    Wall,
    /// No step along an uphill direction goes up: a kink, or rounding on a ridge.
    Stuck,
    /// Its steps ran out.
    Unfinished,
    /// No density or no gradient to climb by.
    Void,
    /// The evaluations allowed ran out.
    Spent,
}

/// Armijo's constant: the rise asked for, as a share of the one the slope promises.
const ARMIJO: f64 = 1e-4;
/// Steps are shortened by this until they rise enough, at most so many times.
const BACKTRACK: f64 = 0.35;
const BACKTRACKS: usize = 12;
/// Steps grow by this after one along which the density was not concave.
const LENGTHEN: f64 = 4.0;
/// Expected rise below this (nats) is the top.
const FLAT: f64 = 1e-6;
/// A climb this far out, in units of the start, has run away.
const FAR: f64 = 25.0;

/// Climbs from `x` with the first inverse metric `metric`, at most `steps` steps and up to `cap` evaluations in all.
pub(crate) fn climb(
    target: &Standard,
    x: Vec<f64>,
    metric: &[f64],
    own_scale: bool,
    known: &[KnownMode],
    steps: u64,
    cap: u64,
) -> Result<(End, Trail), TuneError> {
    let ascent = Ascent { target, cap };
    let solver = Climb {
        known,
        metric: metric.to_vec(),
        first: metric.to_vec(),
        own_scale,
        end: None,
        stride: 1.0,
        trail: Vec::new(),
    };
    let state = Executor::new(ascent, solver).configure(|s| s.param(x).max_iters(steps)).timer(false);
    match state.run() {
        Ok(result) => Ok((result.solver.end.unwrap_or(End::Unfinished), result.solver.trail)),
        Err(error) => match error.downcast::<TuneError>() {
            Ok(error) => Err(error),
            Err(other) => Err(TuneError::Survey(other.to_string())),
        },
    }
}

/// The places that a climb came through, with their log densities.
pub(crate) type Trail = Vec<(Vec<f64>, f64)>;

/// The operator handed to the driver: the target, and the count up to which it may be asked.
struct Ascent<'a, 'b> {
    target: &'a Standard<'b>,
    cap: u64,
}

impl Ascent<'_, '_> {
    /// Log density and gradient; none where the evaluations ran out.
    fn at(&self, x: &[f64]) -> Result<Option<(f64, Vec<f64>)>, Error> {
        if self.target.spent() + self.target.gradient_cost() > self.cap {
            return Ok(None);
        }
        Ok(Some(self.target.gradient(x)?))
    }
}

struct Climb<'k> {
    known: &'k [KnownMode],
    metric: Vec<f64>,
    first: Vec<f64>,
    /// Whether the first metric is replaced by the scale of the first step (it was only a guess).
    own_scale: bool,
    end: Option<End>,
    /// Steps are lengthened by this where the density is not concave along them: there the metric learns nothing, and a
    /// heavy tail would be walked in steps that shrink with its slope.
    stride: f64,
    trail: Trail,
}

type Position = IterState<Vec<f64>, Vec<f64>, (), (), (), f64>;

impl<'a, 'b> Solver<Ascent<'a, 'b>, Position> for Climb<'_> {
    fn name(&self) -> &str {
        "capped BFGS ascent"
    }

    fn init(
        &mut self,
        problem: &mut Problem<Ascent<'a, 'b>>,
        mut state: Position,
    ) -> Result<(Position, Option<KV>), Error> {
        let x = state.take_param().unwrap_or_default();
        match problem.problem("evaluations", |p| p.at(&x))? {
            None => self.end = Some(End::Spent),
            Some((l, g)) if l.is_finite() && g.iter().all(|v| v.is_finite()) => {
                state = state.gradient(g).cost(-l);
            }
            Some(_) => self.end = Some(End::Void),
        }
        Ok((state.param(x), None))
    }

    fn next_iter(
        &mut self,
        problem: &mut Problem<Ascent<'a, 'b>>,
        mut state: Position,
    ) -> Result<(Position, Option<KV>), Error> {
        let x = state.take_param().unwrap_or_default();
        let l = -state.get_cost();
        let Some(g) = state.take_gradient() else {
            self.end.get_or_insert(End::Void);
            return Ok((state.param(x), None));
        };
        if let Some(j) = self.known.iter().position(|m| m.contains(&x, l)) {
            self.end = Some(End::Known(j));
            return Ok((state.param(x).gradient(g).cost(-l), None));
        }
        self.trail.push((x.clone(), l));
        let mut step = times(&self.metric, &g);
        let mut rise = dot(&g, &step);
        if !(rise > 0.0) {
            self.metric.clone_from(&self.first);
            step = times(&self.metric, &g);
            rise = dot(&g, &step);
        }
        if rise < FLAT {
            self.end = Some(End::Top(x.clone(), self.metric.clone()));
            return Ok((state.param(x).gradient(g).cost(-l), None));
        }
        for s in &mut step {
            *s *= self.stride;
        }
        self.shorten(&mut step);
        let slope = dot(&g, &step);
        let mut t = 1.0;
        let mut outside = false;
        for _ in 0..BACKTRACKS {
            let trial: Vec<f64> = x.iter().zip(&step).map(|(a, s)| a + t * s).collect();
            let Some((l_new, g_new)) = problem.problem("evaluations", |p| p.at(&trial))? else {
                self.end = Some(End::Spent);
                return Ok((state.param(x).gradient(g).cost(-l), None));
            };
            let usable = l_new.is_finite() && g_new.iter().all(|v| v.is_finite());
            if usable && l_new >= l + ARMIJO * t * slope {
                self.learn(&x, &trial, &g, &g_new);
                self.look(&trial, l, l_new, state.get_iter());
                return Ok((state.param(trial).gradient(g_new).cost(-l_new), None));
            }
            outside |= l_new == f64::NEG_INFINITY;
            t *= BACKTRACK;
        }
        // Nothing along the step rises: the top to within rounding, a wall, or a kink.
        self.end = Some(match (rise < 1e-2, outside) {
            (true, _) => End::Top(x.clone(), self.metric.clone()),
            (false, true) => End::Wall,
            (false, false) => End::Stuck,
        });
        Ok((state.param(x).gradient(g).cost(-l), None))
    }

    fn terminate(&mut self, _state: &Position) -> TerminationStatus {
        match self.end {
            Some(_) => TerminationStatus::Terminated(TerminationReason::SolverConverged),
            None => TerminationStatus::NotTerminated,
        }
    }
}

impl Climb<'_> {
    fn shorten(&self, step: &mut [f64]) {
        let length = dot(step, step).sqrt();
        let cap = 0.5 * (step.len() as f64).sqrt();
        if length > cap {
            for s in step {
                *s *= cap / length;
            }
        }
    }

    /// The BFGS update of the inverse metric (Nocedal & Wright 2006, equation 6.17), skipped without positive curvature.
    fn learn(&mut self, x: &[f64], x_new: &[f64], g: &[f64], g_new: &[f64]) {
        let d = x.len();
        let dx: Vec<f64> = x_new.iter().zip(x).map(|(a, b)| a - b).collect();
        let dg: Vec<f64> = g.iter().zip(g_new).map(|(a, b)| a - b).collect();
        let curvature = dot(&dx, &dg);
        if !(curvature > 1e-12) {
            self.stride *= LENGTHEN;
            return;
        }
        self.stride = 1.0;
        if self.own_scale {
            let scale = curvature / dot(&dg, &dg);
            self.metric = vec![0.0; d * d];
            for i in 0..d {
                self.metric[i * d + i] = scale;
            }
            self.own_scale = false;
        }
        let rho = 1.0 / curvature;
        let hg = times(&self.metric, &dg);
        let ghg = dot(&dg, &hg);
        for i in 0..d {
            for j in 0..d {
                self.metric[i * d + j] += rho * ((1.0 + rho * ghg) * dx[i] * dx[j] - dx[i] * hg[j] - hg[i] * dx[j]);
            }
        }
    }

    fn look(&mut self, x: &[f64], l: f64, l_new: f64, iteration: u64) {
        if (l_new - l).abs() < 1e-7 && iteration > 2 {
            self.end = Some(End::Top(x.to_vec(), self.metric.clone()));
        } else if dot(x, x).sqrt() > FAR * (x.len() as f64).sqrt() {
            self.end = Some(End::Away);
        }
    }
}
