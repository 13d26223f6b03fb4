//! Values of a problem at points in the proposal's coordinates.

use std::borrow::Cow;

use thiserror::Error;

use super::Problem;
use super::programs::FormulaTarget;
use super::target::Aim;
use crate::model::Model;
use crate::model::ModelError;
use crate::numeric::Points;

/// What a problem says about points.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Evaluation {
    /// Aim density: log target in coordinates, Jacobian included; `-inf` outside, NaN where the model failed. Other
    /// aims: log nominal density in coordinates.
    pub log_density: Vec<f64>,
    /// Probability: the margin, negative or zero inside the event. Expectation: the integrand. NaN where the model
    /// failed. Empty for the aim density.
    pub value: Vec<f64>,
    /// Probability: whether the point is in the event, by its inequalities as written (and `require`). Else empty.
    pub hit: Vec<bool>,
}

/// What keeps points from being evaluated at all.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum EvaluateError {
    /// Points of another dimension than the problem's.
    #[error("the points have {given} coordinates, the problem has {expected}; give one coordinate a variable")]
    WrongDimension {
        /// Coordinates of the problem.
        expected: usize,
        /// Coordinates of the points.
        given: usize,
    },
    /// Derivatives were asked of a problem that has none.
    #[error("the model of this problem gives no derivatives; ask for values alone")]
    NoGradient,
    /// The model cannot go on.
    #[error("the model cannot go on")]
    Model(#[from] ModelError),
}

impl Problem {
    /// Log density, and value and hit where the aim has them, at `points` in the proposal's coordinates.
    ///
    /// Blocks of points are shared over the cores; the result is the same for any number of them. A formula that
    /// leaves its domain counts as outside: `-inf` for a density, no hit and the margin `+inf` for a probability, zero
    /// for an expectation.
    ///
    /// # Errors
    /// [`EvaluateError`]: points of another dimension, or a model that cannot go on.
    pub fn evaluate(&self, points: &Points) -> Result<Evaluation, EvaluateError> {
        self.check_dimension(points)?;
        let x = self.space.to_natural(points);
        let base = self.space.log_base(points, &x);
        match &self.target {
            super::Target::Formulas(target) => match &self.outside {
                None => {
                    let outputs = target.program.values(&x);
                    Ok(self.evaluation_of_formulas(target, base, &outputs))
                }
                Some(outside) => {
                    let known = outside.ask(&x, &inside(&base), false)?;
                    let outputs = target.program.values(&known.inputs);
                    let evaluation = self.evaluation_of_formulas(target, base, &outputs);
                    Ok(self.with_failures(target, evaluation, &outputs, &known.failed))
                }
            },
            super::Target::Model(model) => {
                let inside = inside(&base);
                let answers = ask(model.as_ref(), &chosen(&x, &inside))?;
                Ok(self.evaluation_of_model(base, &inside, &answers))
            }
        }
    }

    /// [`Problem::evaluate`], and a gradient with respect to the coordinates: of `log_density` for the aim density, of
    /// `value` for the others. Zero where the log density is `-inf`.
    ///
    /// Exact for formulas (automatic differentiation), with every Jacobian.
    ///
    /// # Errors
    /// As [`Problem::evaluate`]; [`EvaluateError::NoGradient`] where [`Problem::has_gradient`] is false.
    pub fn evaluate_with_gradient(&self, points: &Points) -> Result<(Evaluation, Points), EvaluateError> {
        self.check_dimension(points)?;
        if !self.has_gradient() {
            return Err(EvaluateError::NoGradient);
        }
        let x = self.space.to_natural(points);
        let base = self.space.log_base(points, &x);
        let (evaluation, slopes) = match &self.target {
            super::Target::Formulas(target) => match &self.outside {
                None => {
                    let outputs = target.program.values(&x);
                    let (_, slopes) = target.program.value_and_gradient(0, &x);
                    (self.evaluation_of_formulas(target, base, &outputs), slopes)
                }
                Some(outside) => {
                    let known = outside.ask(&x, &inside(&base), true)?;
                    let outputs = target.program.values(&known.inputs);
                    let (_, both) = target.program.value_and_gradient(0, &known.inputs);
                    let evaluation = self.evaluation_of_formulas(target, base, &outputs);
                    let slopes = through_the_model(&both, known.slopes.as_ref(), self.dim());
                    (self.with_failures(target, evaluation, &outputs, &known.failed), slopes)
                }
            },
            super::Target::Model(model) => {
                let inside = inside(&base);
                let chosen = chosen(&x, &inside);
                let mut answers = vec![0.0; inside.len()];
                let mut inner = Points::zeros(self.dim(), inside.len());
                model.gradient(&chosen, &mut answers, &mut inner)?;
                let mut slopes = Points::zeros(self.dim(), points.len());
                for (from, &to) in inside.iter().enumerate() {
                    for j in 0..self.dim() {
                        slopes.set(to, j, inner.get(from, j));
                    }
                }
                (self.evaluation_of_model(base, &inside, &answers), slopes)
            }
        };
        let own = self.aim == Aim::Density;
        let mut gradient = self.space.pull_back(points, &x, &slopes, own);
        let followed = if own { &evaluation.log_density } else { &evaluation.value };
        for (i, value) in followed.iter().enumerate().filter(|(_, value)| !value.is_finite()) {
            let fill = if value.is_nan() { f64::NAN } else { 0.0 };
            (0..self.dim()).for_each(|j| gradient.set(i, j, fill));
        }
        Ok((evaluation, gradient))
    }

    /// Whether [`Problem::evaluate_with_gradient`] answers.
    #[must_use]
    pub fn has_gradient(&self) -> bool {
        match &self.target {
            super::Target::Formulas(_) => self.outside.as_ref().is_none_or(super::Outside::has_gradient),
            super::Target::Model(model) => model.has_gradient(),
        }
    }

    /// What the variables' own distributions contribute to the log density at `points` in coordinates, Jacobians
    /// included; flat ranges contribute their Jacobians alone.
    #[must_use]
    pub fn log_prior(&self, points: &Points) -> Vec<f64> {
        self.space.log_base(points, &self.space.to_natural(points))
    }

    /// Values of the estimates at `points` in coordinates: one column of `points.len()` numbers for each of
    /// [`Problem::estimate_names`]. NaN where an estimate is undefined.
    #[must_use]
    pub fn estimates(&self, points: &Points) -> Vec<Vec<f64>> {
        let x = self.space.to_natural(points);
        let (super::Estimates::Formulas(program), Some(outside)) = (&self.estimates, &self.outside) else {
            return self.estimates_at(&x);
        };
        let asks = (self.dim()..program.n_inputs()).any(|i| program.uses_input(i));
        let inside = if asks { inside(&self.space.log_base(points, &x)) } else { Vec::new() };
        let inputs = outside.recall(&x, &inside).unwrap_or_else(|_| outside.padded(&x));
        self.estimates_at(&inputs)
    }

    /// Whether there are inequalities that must hold.
    #[must_use]
    pub fn has_requirements(&self) -> bool {
        matches!(&self.target, super::Target::Formulas(target) if target.requires().next().is_some())
    }

    /// Whether each point fulfils every inequality of `require`; true everywhere where there is none.
    ///
    /// # Errors
    /// Points of another dimension.
    pub fn fulfils(&self, points: &Points) -> Result<Vec<bool>, EvaluateError> {
        self.check_dimension(points)?;
        let super::Target::Formulas(target) = &self.target else { return Ok(vec![true; points.len()]) };
        let x = self.space.to_natural(points);
        let outputs = match &self.outside {
            None => target.program.values(&x),
            Some(outside) if target.requires().any(|k| self.uses_model(target, k)) => {
                let inside = inside(&self.space.log_base(points, &x));
                target.program.values(&outside.recall(&x, &inside)?)
            }
            Some(outside) => target.program.values(&outside.padded(&x)),
        };
        Ok((0..points.len()).map(|i| target.requires().all(|k| outputs[k].get(i, 0) == 1.0)).collect())
    }

    fn estimates_at(&self, x: &Points) -> Vec<Vec<f64>> {
        match &self.estimates {
            super::Estimates::None => Vec::new(),
            super::Estimates::Formulas(program) => {
                let outputs = program.values(x);
                outputs.iter().flat_map(|output| (0..output.dim()).map(|k| output.coordinate(k))).collect()
            }
            super::Estimates::Model(model) => {
                let mut answers = Points::zeros(model.n_outputs(), x.len());
                let failed = model.evaluate(x, &mut answers).is_err();
                (0..model.n_outputs())
                    .map(|k| if failed { vec![f64::NAN; x.len()] } else { answers.coordinate(k) })
                    .collect()
            }
        }
    }

    /// Whether output `k` of the target depends on what a model outside the file returns.
    fn uses_model(&self, target: &FormulaTarget, k: usize) -> bool {
        (self.dim()..target.program.n_inputs()).any(|i| target.program.output_uses_input(k, i))
    }

    /// The evaluation with NaN where the model failed, unless the point is known to be outside without it.
    fn with_failures(
        &self,
        target: &FormulaTarget,
        mut evaluation: Evaluation,
        outputs: &[Points],
        failed: &[bool],
    ) -> Evaluation {
        let known: Vec<usize> = target.requires().filter(|&k| !self.uses_model(target, k)).collect();
        for i in (0..failed.len()).filter(|&i| failed[i]) {
            if known.iter().any(|&k| outputs[k].get(i, 0) != 1.0) {
                continue;
            }
            match self.aim {
                Aim::Density => evaluation.log_density[i] = f64::NAN,
                Aim::Expectation => evaluation.value[i] = f64::NAN,
                Aim::Probability => {
                    evaluation.value[i] = f64::NAN;
                    evaluation.hit[i] = false;
                }
            }
        }
        evaluation
    }

    fn check_dimension(&self, points: &Points) -> Result<(), EvaluateError> {
        if points.dim() == self.dim() {
            return Ok(());
        }
        Err(EvaluateError::WrongDimension { expected: self.dim(), given: points.dim() })
    }

    fn evaluation_of_formulas(&self, target: &FormulaTarget, base: Vec<f64>, outputs: &[Points]) -> Evaluation {
        let n = base.len();
        let required = |i: usize| target.requires().all(|k| outputs[k].get(i, 0) == 1.0);
        let main: Vec<f64> = outputs[0].coordinate(0);
        match self.aim {
            Aim::Density => {
                let log_density =
                    (0..n).map(|i| if required(i) { total(base[i], main[i]) } else { f64::NEG_INFINITY }).collect();
                Evaluation { log_density, ..Evaluation::default() }
            }
            Aim::Expectation => {
                let value = |i: usize| if required(i) && !main[i].is_nan() { main[i] } else { 0.0 };
                Evaluation { value: (0..n).map(value).collect(), log_density: base, hit: Vec::new() }
            }
            Aim::Probability => {
                let hit = (0..n).map(|i| required(i) && outputs[1].get(i, 0) == 1.0).collect();
                // The margin of "event and require": the largest of them; an undefined one is far outside.
                let margin = |i: usize| {
                    let worst = target.require_margins().map(|k| outputs[k].get(i, 0));
                    worst.fold(main[i], |a, b| if a.is_nan() || b.is_nan() { f64::NAN } else { a.max(b) })
                };
                let value = (0..n).map(margin).map(|m| if m.is_nan() { f64::INFINITY } else { m }).collect();
                Evaluation { log_density: base, value, hit }
            }
        }
    }

    /// `answers` are those of the points `inside`; the others were not asked.
    fn evaluation_of_model(&self, base: Vec<f64>, inside: &[usize], answers: &[f64]) -> Evaluation {
        match self.aim {
            Aim::Density => {
                let mut log_density = vec![f64::NEG_INFINITY; base.len()];
                for (&i, &answer) in inside.iter().zip(answers) {
                    // +inf is no log factor: such an answer has failed.
                    let failed = answer.is_nan() || answer == f64::INFINITY;
                    log_density[i] = if failed { f64::NAN } else { total(base[i], answer) };
                }
                Evaluation { log_density, ..Evaluation::default() }
            }
            Aim::Expectation | Aim::Probability => {
                let probability = self.aim == Aim::Probability;
                let mut value = vec![if probability { f64::INFINITY } else { 0.0 }; base.len()];
                for (&i, &answer) in inside.iter().zip(answers) {
                    value[i] = answer;
                }
                let hit = if probability { value.iter().map(|&margin| margin <= 0.0).collect() } else { Vec::new() };
                Evaluation { log_density: base, value, hit }
            }
        }
    }
}

/// Log target from the variables' part and the formula's: outside where either is, or where a formula has no value.
fn total(base: f64, factor: f64) -> f64 {
    let sum = base + factor;
    // +inf is no density: a division by zero, or an overflow, at a point that the formula should have ruled out.
    if sum.is_nan() || sum == f64::INFINITY { f64::NEG_INFINITY } else { sum }
}

/// Derivatives with respect to the variables: the direct ones, and those through the one value that the model returns.
fn through_the_model(both: &Points, model: Option<&Points>, dim: usize) -> Points {
    let mut slopes = Points::zeros(dim, both.len());
    for i in 0..both.len() {
        let outer = both.get(i, dim);
        for j in 0..dim {
            let inner = model.map_or(0.0, |model| model.get(i, j));
            // A target that does not move with the model there does not care for its derivative.
            let through = if outer == 0.0 { 0.0 } else { outer * inner };
            slopes.set(i, j, both.get(i, j) + through);
        }
    }
    slopes
}

/// The points that have any density: a model is not asked about the others.
fn inside(base: &[f64]) -> Vec<usize> {
    (0..base.len()).filter(|&i| base[i] > f64::NEG_INFINITY).collect()
}

/// Those points; no copy is made where it is all of them.
fn chosen<'a>(x: &'a Points, inside: &[usize]) -> Cow<'a, Points> {
    if inside.len() == x.len() { Cow::Borrowed(x) } else { Cow::Owned(x.select(inside)) }
}

fn ask(model: &dyn Model, x: &Points) -> Result<Vec<f64>, ModelError> {
    let mut answers = Points::zeros(1, x.len());
    model.evaluate(x, &mut answers)?;
    Ok(answers.coordinate(0))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn errors_may_cross_threads() {
        fn crosses<T: std::error::Error + Send + Sync + 'static>() {}
        crosses::<EvaluateError>();
    }

    #[test]
    fn a_density_without_a_value_is_outside() {
        for (base, factor, want) in [
            (-1.0, -2.0, -3.0),
            (f64::NEG_INFINITY, f64::INFINITY, f64::NEG_INFINITY),
            (-1.0, f64::NAN, f64::NEG_INFINITY),
            (-1.0, f64::INFINITY, f64::NEG_INFINITY),
        ] {
            assert_eq!(total(base, factor), want);
        }
    }
}
