//! The problem in standard normal scores: every evaluation goes through here, is counted, and is told to the observer.

use crate::adapt::TuneError;
use crate::adapt::observer::{Answers, Batch, Observer, Stage};
use crate::adapt::together::Line;
use crate::numeric::{Points, ln};
use crate::problem::{Aim, Failed, Problem};
use std::cell::RefCell;

/// A probability or an expectation over standard normal scores `u`.
pub(crate) struct Scores<'a> {
    source: &'a Problem,
    state: RefCell<State<'a>>,
}

/// Log nominal density, value, and whether it counts.
pub(crate) type OnePoint = (f64, f64, bool);

/// Who answers.
enum Way<'a> {
    /// The problem itself; the observer is told.
    Observed(&'a mut dyn Observer),
    /// Whoever evaluates for several searches at once.
    Line(Line<OnePoint>),
}

struct State<'a> {
    way: Way<'a>,
    spent: u64,
    failed: u64,
    stage: Stage,
}

/// Answers at a batch of points, one entry a point.
#[derive(Debug, Clone, Default)]
pub(crate) struct Answered {
    /// Log nominal density.
    pub(crate) log_nominal: Vec<f64>,
    /// Margin or integrand as the model gave it; NaN where it failed.
    pub(crate) value: Vec<f64>,
    /// Whether the point counts: inside the event, or an integrand that is not zero.
    pub(crate) hit: Vec<bool>,
}

impl Answered {
    /// Answer by answer.
    pub(crate) fn by_point(&self) -> Vec<OnePoint> {
        (0..self.value.len()).map(|i| (self.log_nominal[i], self.value[i], self.hit[i])).collect()
    }

    fn of_points(points: &[OnePoint]) -> Self {
        Self {
            log_nominal: points.iter().map(|p| p.0).collect(),
            value: points.iter().map(|p| p.1).collect(),
            hit: points.iter().map(|p| p.2).collect(),
        }
    }
}

/// One point looked at by a search.
#[derive(Debug, Clone)]
pub(crate) struct Look {
    /// Where.
    pub(crate) at: Vec<f64>,
    /// Margin or integrand; NaN where the model failed.
    pub(crate) value: f64,
    /// Whether it counts.
    pub(crate) hit: bool,
    /// Gradient of the value, where the problem gives one with it.
    pub(crate) gradient: Option<Vec<f64>>,
}

/// Step of forward differences in a score: large against rounding, small against the bend of a margin.
const DIFFERENCE: f64 = 1e-3;
/// Halvings that find where a discrete value begins on the axis of its score.
const HALVINGS: usize = 30;

impl<'a> Scores<'a> {
    pub(crate) fn new(source: &'a Problem, observer: &'a mut dyn Observer) -> Self {
        let state = State { way: Way::Observed(observer), spent: 0, failed: 0, stage: Stage::Survey };
        Self { source, state: RefCell::new(state) }
    }

    /// The target of one search among several; what it spends is counted here from zero, and where the line ends for all.
    pub(crate) fn on_line(source: &'a Problem, line: Line<OnePoint>) -> Self {
        let state = State { way: Way::Line(line), spent: 0, failed: 0, stage: Stage::Survey };
        Self { source, state: RefCell::new(state) }
    }

    pub(crate) fn dim(&self) -> usize {
        self.source.dim()
    }

    pub(crate) fn problem(&self) -> &'a Problem {
        self.source
    }

    /// Whether an event is asked for (else the mean of an integrand).
    pub(crate) fn is_event(&self) -> bool {
        self.source.aim() == Aim::Probability
    }

    /// Whether failed evaluations count as inside the event.
    pub(crate) fn failures_are_inside(&self) -> bool {
        self.source.failed() == Some(Failed::Inside)
    }

    /// Evaluations so far.
    pub(crate) fn spent(&self) -> u64 {
        self.state.borrow().spent
    }

    /// Evaluations that failed so far.
    pub(crate) fn failed(&self) -> u64 {
        self.state.borrow().failed
    }

    /// Evaluations that a gradient adds to a point already looked at.
    pub(crate) fn slope_cost(&self) -> u64 {
        if self.source.has_gradient() { 1 } else { self.dim() as u64 }
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

    /// Answers at `u`.
    pub(crate) fn answers(&self, u: &Points) -> Result<Answered, TuneError> {
        if let State { way: Way::Line(line), spent, .. } = &mut *self.state.borrow_mut() {
            let answers = line.ask(u)?;
            *spent += u.len() as u64;
            return Ok(Answered::of_points(&answers));
        }
        Ok(self.answered(self.ask(u, false)?))
    }

    /// One point, with its gradient where that costs nothing more.
    pub(crate) fn look(&self, u: &[f64]) -> Result<Look, TuneError> {
        let gradient = self.source.has_gradient();
        if !gradient {
            let answered = self.answers(&Points::from_rows(u.len(), u))?;
            return Ok(Look { at: u.to_vec(), value: answered.value[0], hit: answered.hit[0], gradient: None });
        }
        let answers = self.ask(&Points::from_rows(u.len(), u), gradient)?;
        let gradient = Some(answers.gradients.point(0));
        let answered = self.answered(answers);
        Ok(Look { at: u.to_vec(), value: answered.value[0], hit: answered.hit[0], gradient })
    }

    /// Gradient of the value at a point looked at: the exact one, or forward differences. Zero for discrete variables, whose values
    /// do not follow their scores smoothly.
    pub(crate) fn slope(&self, look: &Look) -> Result<Vec<f64>, TuneError> {
        let mut gradient = match &look.gradient {
            Some(gradient) => gradient.clone(),
            None => self.differences(look)?,
        };
        for (slope, variable) in gradient.iter_mut().zip(self.source.variables()) {
            if variable.is_discrete() {
                *slope = 0.0;
            }
        }
        Ok(gradient)
    }

    fn differences(&self, look: &Look) -> Result<Vec<f64>, TuneError> {
        if self.source.has_gradient() {
            return Ok(self.look(&look.at)?.gradient.unwrap_or_default());
        }
        let mut around = Points::new(self.dim());
        let mut u = look.at.clone();
        for j in 0..self.dim() {
            u[j] = look.at[j] + DIFFERENCE;
            around.push(&u);
            u[j] = look.at[j];
        }
        let values = self.answers(&around)?.value;
        Ok(values.iter().map(|v| (v - look.value) / DIFFERENCE).collect())
    }

    /// `u` with the score of every discrete variable moved towards zero as far as its value stays the same: the most likely score of
    /// that value. Costs no evaluation.
    pub(crate) fn with_likeliest_scores(&self, u: &[f64]) -> Vec<f64> {
        let mut moved = u.to_vec();
        for (j, variable) in self.source.variables().iter().enumerate() {
            if variable.is_discrete() {
                let value = |score: f64| {
                    let mut at = moved.clone();
                    at[j] = score;
                    self.source.to_natural(&Points::from_rows(at.len(), &at)).get(0, j)
                };
                moved[j] = likeliest(u[j], value);
            }
        }
        moved
    }

    /// The most likely score that gives the next value towards zero, for every discrete variable that has one.
    pub(crate) fn neighbours(&self, u: &[f64]) -> Vec<Vec<f64>> {
        let mut found = Vec::new();
        for (j, variable) in self.source.variables().iter().enumerate() {
            if variable.is_discrete() && u[j] != 0.0 {
                let mut next = u.to_vec();
                // Just over the border at which the present value begins.
                next[j] = u[j] - u[j].signum() * BORDER;
                found.push(self.with_likeliest_scores(&next));
            }
        }
        found
    }

    fn answered(&self, answers: Answers) -> Answered {
        let failed_counts = self.failures_are_inside();
        let event = self.is_event();
        let counts = |i: usize| {
            let value = answers.value[i];
            if value.is_nan() {
                event && failed_counts
            } else if event {
                answers.hit[i]
            } else {
                value != 0.0
            }
        };
        let hit = (0..answers.value.len()).map(counts).collect();
        Answered { log_nominal: answers.log_density, value: answers.value, hit }
    }

    fn ask(&self, u: &Points, gradient: bool) -> Result<Answers, TuneError> {
        let state = &mut *self.state.borrow_mut();
        let Way::Observed(observer) = &mut state.way else {
            return Err(TuneError::Survey("searches that ask together have no gradients".to_owned()));
        };
        if observer.interrupted() {
            return Err(TuneError::Interrupted { evaluations: state.spent });
        }
        let batch = Batch { stage: state.stage, first: state.spent, points: u, gradient };
        let answers = match observer.recorded(&batch) {
            Some(answers) => answers,
            None => {
                let (evaluation, gradients) = if gradient {
                    self.source.evaluate_with_gradient(u)?
                } else {
                    (self.source.evaluate(u)?, Points::new(u.dim()))
                };
                let answers = Answers {
                    log_density: evaluation.log_density,
                    gradients,
                    value: evaluation.value,
                    hit: evaluation.hit,
                };
                observer.evaluated(&batch, &answers).map_err(TuneError::Observer)?;
                answers
            }
        };
        state.spent += u.len() as u64;
        state.failed += answers.value.iter().filter(|v| v.is_nan()).count() as u64;
        if !self.is_event() && answers.value.iter().any(|v| v.is_infinite()) {
            return Err(TuneError::UnboundedIntegrand);
        }
        Ok(answers)
    }
}

/// Step over the border of a discrete value, in its score: far above the width at which the halvings end.
const BORDER: f64 = 1e-6;

/// The score nearest to zero, on the same side, that gives the same value as `score`.
fn likeliest(score: f64, value: impl Fn(f64) -> f64) -> f64 {
    let same = value(score);
    if value(0.0) == same {
        return 0.0;
    }
    let (mut inside, mut outside) = (score, 0.0);
    for _ in 0..HALVINGS {
        let middle = 0.5 * (inside + outside);
        if value(middle) == same {
            inside = middle;
        } else {
            outside = middle;
        }
    }
    inside
}

/// `ln |f|`, `-inf` for zero and for a failure.
pub(crate) fn log_size(value: f64) -> f64 {
    if value == 0.0 || value.is_nan() { f64::NEG_INFINITY } else { ln(value.abs()) }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::adapt::Silent;
    use crate::distribution::Distribution;
    use crate::model::Closure;
    use crate::problem::Variable;

    /// A gate that fails with probability .1: the most likely score of "failed" is the normal 10 % point, 1.2816 above zero
    /// (SciPy 1.17.1, `norm.isf(.1)`).
    #[test]
    fn discrete_values_sit_at_their_most_likely_score() {
        let gate = Variable::random("gate", Distribution::new("bernoulli", &[("p", 0.1)]).unwrap());
        let level = Variable::random("level", Distribution::new("normal", &[("mean", 0.0), ("sd", 1.0)]).unwrap());
        let margin = Closure::new(2, |x| 3.0 - x[0] - x[1]);
        let problem = Problem::from_model("A gate", vec![gate, level], Aim::Probability, Box::new(margin)).unwrap();
        let mut silent = Silent;
        let scores = Scores::new(&problem, &mut silent);
        let moved = scores.with_likeliest_scores(&[2.5, 1.0]);
        assert!((moved[0] - 1.281_551_565_544_600_4).abs() < 1e-6 && moved[1] == 1.0, "{moved:?}");
        assert_eq!(scores.with_likeliest_scores(&[0.7, -3.0]), vec![0.0, -3.0]);
        assert_eq!(scores.neighbours(&moved), vec![vec![0.0, 1.0]]);
        assert_eq!(scores.spent(), 0);
        let look = scores.look(&[2.5, 1.0]).unwrap();
        assert_eq!((look.value, look.hit), (1.0, false));
        let slope = scores.slope(&look).unwrap();
        assert!(slope[0] == 0.0 && (slope[1] + 1.0).abs() < 1e-9);
        assert_eq!(scores.spent(), 3);
    }
}
