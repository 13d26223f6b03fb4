//! The target in the start's units: every evaluation of a tuning goes through here, is counted, and is told to the observer.

use super::observer::{Batch, Observer, Stage};
use super::together::Line;
use super::{TuneError, observer::Answers};
use crate::numeric::{Points, ln};
use crate::problem::Problem;
use std::cell::RefCell;

/// The problem's log density in `z = (x - near) / spread`, `x` its own coordinates, where the start is standard: centre 0, width 1.
pub(crate) struct Standard<'a> {
    source: &'a Problem,
    log_spread: f64,
    state: RefCell<State<'a>>,
}

/// Who answers.
enum Way<'a> {
    /// The problem itself; the observer is told.
    Observed(&'a mut dyn Observer),
    /// Whoever evaluates for several searches at once, in the start's units.
    Line(Line<f64>),
}

struct State<'a> {
    way: Way<'a>,
    spent: u64,
    failed: u64,
    stage: Stage,
}

/// Step of central differences where the target gives no gradient, in units of the start's width.
const DIFFERENCE: f64 = 1e-5;

impl<'a> Standard<'a> {
    pub(crate) fn new(source: &'a Problem, observer: &'a mut dyn Observer) -> Self {
        let log_spread = source.start().spread.iter().map(|&s| ln(s)).sum();
        let state = State { way: Way::Observed(observer), spent: 0, failed: 0, stage: Stage::Survey };
        Self { source, log_spread, state: RefCell::new(state) }
    }

    /// The target of one search among several; what it spends is counted here from zero, and where the line ends for all.
    pub(crate) fn on_line(source: &'a Problem, line: Line<f64>) -> Self {
        let state = State { way: Way::Line(line), spent: 0, failed: 0, stage: Stage::Survey };
        Self { source, log_spread: 0.0, state: RefCell::new(state) }
    }

    pub(crate) fn problem(&self) -> &'a Problem {
        self.source
    }

    /// Whether points are best asked for many at a time.
    pub(crate) fn in_batches(&self) -> bool {
        self.source.asks_in_batches()
    }

    pub(crate) fn dim(&self) -> usize {
        self.source.dim()
    }

    /// `ln` of the Jacobian that the start's units bring: log densities in the proposal's coordinates are lower by it.
    pub(crate) fn log_spread(&self) -> f64 {
        self.log_spread
    }

    /// Evaluations so far.
    pub(crate) fn spent(&self) -> u64 {
        self.state.borrow().spent
    }

    /// Evaluations that failed so far.
    pub(crate) fn failed(&self) -> u64 {
        self.state.borrow().failed
    }

    /// Evaluations that one value with its gradient costs.
    pub(crate) fn gradient_cost(&self) -> u64 {
        if self.source.has_gradient() { 1 } else { 2 * self.dim() as u64 + 1 }
    }

    /// Evaluations that a value, its gradient and its Hessian cost.
    pub(crate) fn hessian_cost(&self) -> u64 {
        let d = self.dim() as u64;
        if self.source.has_gradient() { 2 * d + 1 } else { d * d + d + 1 }
    }

    pub(crate) fn enter(&self, stage: Stage) {
        let mut state = self.state.borrow_mut();
        state.stage = stage;
        if let Way::Observed(observer) = &mut state.way {
            observer.stage(stage);
        }
    }

    pub(crate) fn tell(&self, say: impl FnOnce(&mut dyn Observer)) {
        if let Way::Observed(observer) = &mut self.state.borrow_mut().way {
            say(*observer);
        }
    }

    /// The points in the proposal's coordinates.
    pub(crate) fn coordinates(&self, z: &Points) -> Points {
        let mut x = z.clone();
        for b in 0..x.n_blocks() {
            for j in 0..x.dim() {
                let (near, spread) = (self.source.start().near[j], self.source.start().spread[j]);
                for v in x.column_mut(b, j) {
                    *v = near + spread * *v;
                }
            }
        }
        x
    }

    /// Points of the proposal's coordinates in the start's units.
    pub(crate) fn standardised(&self, x: &Points) -> Points {
        let start = self.source.start();
        let mut z = x.clone();
        for b in 0..z.n_blocks() {
            for j in 0..z.dim() {
                for v in z.column_mut(b, j) {
                    *v = (*v - start.near[j]) / start.spread[j];
                }
            }
        }
        z
    }

    /// Log densities at `z`; `-inf` outside and NaN where the model failed.
    pub(crate) fn values(&self, z: &Points) -> Result<Vec<f64>, TuneError> {
        let answers = self.ask(z, false, z.len() as u64)?;
        Ok(answers.log_density)
    }

    /// Log densities at `z`, and their gradients where the target gives them for the price of the value.
    pub(crate) fn values_and_slopes(&self, z: &Points) -> Result<(Vec<f64>, Option<Points>), TuneError> {
        if !self.source.has_gradient() {
            return Ok((self.values(z)?, None));
        }
        let mut answers = self.ask(z, true, z.len() as u64)?;
        for b in 0..answers.gradients.n_blocks() {
            for j in 0..self.dim() {
                let spread = self.source.start().spread[j];
                answers.gradients.column_mut(b, j).iter_mut().for_each(|v| *v *= spread);
            }
        }
        Ok((answers.log_density, Some(answers.gradients)))
    }

    /// Log density of one point.
    pub(crate) fn value(&self, z: &[f64]) -> Result<f64, TuneError> {
        Ok(self.values(&Points::from_rows(z.len(), z))?[0])
    }

    /// Log densities and gradients at `z`, by central differences where the target has none to give. A gradient with an
    /// entry that could not be had is NaN there.
    pub(crate) fn gradients(&self, z: &Points) -> Result<(Vec<f64>, Vec<Vec<f64>>), TuneError> {
        let d = self.dim();
        if self.source.has_gradient() {
            let answers = self.ask(z, true, z.len() as u64)?;
            let spread = &self.source.start().spread;
            let gradients =
                (0..z.len()).map(|i| (0..d).map(|j| answers.gradients.get(i, j) * spread[j]).collect()).collect();
            return Ok((answers.log_density, gradients));
        }
        let mut all = Points::new(d);
        for i in 0..z.len() {
            let x = z.point(i);
            all.push(&x);
            for j in 0..d {
                for side in [1.0, -1.0] {
                    let mut y = x.clone();
                    y[j] += side * DIFFERENCE;
                    all.push(&y);
                }
            }
        }
        let l = self.values(&all)?;
        let each = 2 * d + 1;
        let gradients = (0..z.len())
            .map(|i| {
                let at = i * each + 1;
                (0..d).map(|j| (l[at + 2 * j] - l[at + 2 * j + 1]) / (2.0 * DIFFERENCE)).collect()
            })
            .collect();
        Ok(((0..z.len()).map(|i| l[i * each]).collect(), gradients))
    }

    /// Log density and gradient of one point.
    pub(crate) fn gradient(&self, z: &[f64]) -> Result<(f64, Vec<f64>), TuneError> {
        let (l, mut g) = self.gradients(&Points::from_rows(z.len(), z))?;
        Ok((l[0], g.swap_remove(0)))
    }

    /// Log density, gradient and negative Hessian (row by row, symmetric) at `z`, with steps `h` of the coordinates.
    pub(crate) fn curvature(&self, z: &[f64], h: &[f64]) -> Result<(f64, Vec<f64>, Vec<f64>), TuneError> {
        if self.source.has_gradient() { self.curvature_by_gradients(z, h) } else { self.curvature_by_values(z, h) }
    }

    fn curvature_by_gradients(&self, z: &[f64], h: &[f64]) -> Result<(f64, Vec<f64>, Vec<f64>), TuneError> {
        let d = self.dim();
        let mut around = Points::new(d);
        around.push(z);
        for j in 0..d {
            for side in [1.0, -1.0] {
                let mut y = z.to_vec();
                y[j] += side * h[j];
                around.push(&y);
            }
        }
        let (l, g) = self.gradients(&around)?;
        let mut precision = vec![0.0; d * d];
        for a in 0..d {
            for b in 0..d {
                let slope = -(g[1 + 2 * a][b] - g[2 + 2 * a][b]) / (2.0 * h[a]);
                precision[a * d + b] += 0.5 * slope;
                precision[b * d + a] += 0.5 * slope;
            }
        }
        Ok((l[0], g[0].clone(), precision))
    }

    fn curvature_by_values(&self, z: &[f64], h: &[f64]) -> Result<(f64, Vec<f64>, Vec<f64>), TuneError> {
        let d = self.dim();
        let mut around = Points::new(d);
        around.push(z);
        let moved = |steps: &[(usize, f64)]| {
            let mut y = z.to_vec();
            for &(j, side) in steps {
                y[j] += side * h[j];
            }
            y
        };
        for j in 0..d {
            around.push(&moved(&[(j, 1.0)]));
            around.push(&moved(&[(j, -1.0)]));
        }
        for a in 0..d {
            for b in 0..a {
                around.push(&moved(&[(a, 1.0), (b, 1.0)]));
                around.push(&moved(&[(a, -1.0), (b, -1.0)]));
            }
        }
        let l = self.values(&around)?;
        let gradient = (0..d).map(|j| (l[1 + 2 * j] - l[2 + 2 * j]) / (2.0 * h[j])).collect();
        let mut precision = vec![0.0; d * d];
        let bend = |j: usize| l[1 + 2 * j] + l[2 + 2 * j] - 2.0 * l[0];
        let mut at = 1 + 2 * d;
        for a in 0..d {
            precision[a * d + a] = -bend(a) / (h[a] * h[a]);
            for b in 0..a {
                let both = l[at] + l[at + 1] - 2.0 * l[0];
                at += 2;
                let mixed = -(both - bend(a) - bend(b)) / (2.0 * h[a] * h[b]);
                precision[a * d + b] = mixed;
                precision[b * d + a] = mixed;
            }
        }
        Ok((l[0], gradient, precision))
    }

    /// Steps for [`Standard::curvature`] where the width of the target is unknown: small against the start, large against rounding.
    pub(crate) fn default_step(&self) -> f64 {
        if self.source.has_gradient() { 1e-4 } else { 1e-3 }
    }

    fn ask(&self, z: &Points, gradient: bool, cost: u64) -> Result<Answers, TuneError> {
        let state = &mut *self.state.borrow_mut();
        let observer = match &mut state.way {
            Way::Observed(observer) => observer,
            Way::Line(line) => {
                let log_density = line.ask(z)?;
                state.spent += cost;
                return Ok(Answers {
                    log_density,
                    gradients: Points::new(z.dim()),
                    value: Vec::new(),
                    hit: Vec::new(),
                });
            }
        };
        if observer.interrupted() {
            return Err(TuneError::Interrupted { evaluations: state.spent });
        }
        let x = self.coordinates(z);
        let batch = Batch { stage: state.stage, first: state.spent, points: &x, gradient };
        let mut answers = match observer.recorded(&batch) {
            Some(answers) => answers,
            None => {
                let answers = self.evaluate(&x, gradient)?;
                observer.evaluated(&batch, &answers).map_err(TuneError::Observer)?;
                answers
            }
        };
        state.spent += cost;
        for l in &mut answers.log_density {
            if l.is_nan() {
                state.failed += 1;
            } else if *l == f64::INFINITY {
                return Err(TuneError::Unbounded);
            } else {
                *l += self.log_spread;
            }
        }
        Ok(answers)
    }

    fn evaluate(&self, x: &Points, gradient: bool) -> Result<Answers, TuneError> {
        if gradient {
            let (evaluation, gradients) = self.source.evaluate_with_gradient(x)?;
            Ok(Answers { log_density: evaluation.log_density, gradients, value: Vec::new(), hit: Vec::new() })
        } else {
            let evaluation = self.source.evaluate(x)?;
            let gradients = Points::new(x.dim());
            Ok(Answers { log_density: evaluation.log_density, gradients, value: Vec::new(), hit: Vec::new() })
        }
    }
}
