//! A Rust function as a model.

use std::fmt;

use rayon::prelude::*;

use super::Model;
use super::ModelError;
use super::check_shapes;
use crate::numeric::BLOCK;
use crate::numeric::Points;

type ValueFunction = dyn Fn(&[f64]) -> f64 + Send + Sync;
type VectorFunction = dyn Fn(&[f64], &mut [f64]) + Send + Sync;
type GradientFunction = dyn Fn(&[f64], &mut [f64]) -> f64 + Send + Sync;

enum Function {
    Value(Box<ValueFunction>),
    Vector(Box<VectorFunction>),
}

/// A model that is a Rust function of one point in natural units.
///
/// Blocks of points are shared over the cores; a point's answer depends on that point only, so the number of threads
/// changes nothing. The same bits on every machine need a function that does not call the system's mathematics
/// library: [`crate::numeric::exp`] and [`crate::numeric::ln`] are there for it.
///
/// ```
/// use evenpoise::model::{Closure, Model};
/// use evenpoise::numeric::Points;
/// let bowl = Closure::new(2, |x| -(x[0] * x[0] + x[1] * x[1]))
///     .with_gradient(|x, slope| {
///         slope[0] = -2.0 * x[0];
///         slope[1] = -2.0 * x[1];
///         -(x[0] * x[0] + x[1] * x[1])
///     });
/// let points = Points::from_rows(2, &[3.0, 4.0]);
/// let mut answers = Points::zeros(1, 1);
/// bowl.evaluate(&points, &mut answers).unwrap();
/// assert_eq!(answers.get(0, 0), -25.0);
/// let (mut values, mut slopes) = (vec![0.0], Points::zeros(2, 1));
/// bowl.gradient(&points, &mut values, &mut slopes).unwrap();
/// assert_eq!(slopes.point(0), vec![-6.0, -8.0]);
/// ```
pub struct Closure {
    n_inputs: usize,
    n_outputs: usize,
    function: Function,
    gradient: Option<Box<GradientFunction>>,
}

impl Closure {
    /// A model of `n_inputs` values and one answer.
    pub fn new(n_inputs: usize, value: impl Fn(&[f64]) -> f64 + Send + Sync + 'static) -> Self {
        Self { n_inputs, n_outputs: 1, function: Function::Value(Box::new(value)), gradient: None }
    }

    /// A model of `n_inputs` values and `n_outputs` answers, which `values` writes into its second argument.
    pub fn vector(
        n_inputs: usize,
        n_outputs: usize,
        values: impl Fn(&[f64], &mut [f64]) + Send + Sync + 'static,
    ) -> Self {
        Self { n_inputs, n_outputs, function: Function::Vector(Box::new(values)), gradient: None }
    }

    /// The same model with derivatives: `gradient` returns the value and writes its slopes into the second argument.
    ///
    /// It must agree with the value function; for a model of several answers it is never called.
    #[must_use]
    pub fn with_gradient(mut self, gradient: impl Fn(&[f64], &mut [f64]) -> f64 + Send + Sync + 'static) -> Self {
        self.gradient = Some(Box::new(gradient));
        self
    }
}

impl fmt::Debug for Closure {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter
            .debug_struct("Closure")
            .field("n_inputs", &self.n_inputs)
            .field("n_outputs", &self.n_outputs)
            .field("gradient", &self.gradient.is_some())
            .finish_non_exhaustive()
    }
}

impl Model for Closure {
    fn n_inputs(&self) -> usize {
        self.n_inputs
    }

    fn n_outputs(&self) -> usize {
        self.n_outputs
    }

    fn evaluate(&self, inputs: &Points, outputs: &mut Points) -> Result<(), ModelError> {
        check_shapes(self, inputs.dim(), outputs.dim())?;
        let blocks: Vec<&mut [f64]> = outputs.blocks_mut().collect();
        blocks.into_par_iter().enumerate().for_each(|(b, block)| {
            let mut point = vec![0.0; self.n_inputs];
            let mut answer = vec![0.0; self.n_outputs];
            for i in 0..inputs.block_len(b) {
                inputs.copy_point(b * BLOCK + i, &mut point);
                match &self.function {
                    Function::Value(value) => answer[0] = value(&point),
                    Function::Vector(values) => values(&point, &mut answer),
                }
                for (k, &number) in answer.iter().enumerate() {
                    block[k * BLOCK + i] = number;
                }
            }
        });
        Ok(())
    }

    fn has_gradient(&self) -> bool {
        self.gradient.is_some() && self.n_outputs == 1
    }

    fn gradient(&self, inputs: &Points, values: &mut [f64], gradients: &mut Points) -> Result<(), ModelError> {
        let Some(gradient) = self.gradient.as_ref().filter(|_| self.n_outputs == 1) else {
            return Err(ModelError::NoGradient);
        };
        check_shapes(self, inputs.dim(), 1)?;
        let blocks: Vec<(&mut [f64], &mut [f64])> = gradients.blocks_mut().zip(values.chunks_mut(BLOCK)).collect();
        blocks.into_par_iter().enumerate().for_each(|(b, (slopes, values))| {
            let mut point = vec![0.0; self.n_inputs];
            let mut slope = vec![0.0; self.n_inputs];
            for (i, value) in values.iter_mut().enumerate() {
                inputs.copy_point(b * BLOCK + i, &mut point);
                *value = gradient(&point, &mut slope);
                for (j, &number) in slope.iter().enumerate() {
                    slopes[j * BLOCK + i] = number;
                }
            }
        });
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn answers_keep_their_order_over_blocks() {
        let twice = Closure::vector(1, 2, |x, out| {
            out[0] = 2.0 * x[0];
            out[1] = -x[0];
        });
        let rows: Vec<f64> = (0..300).map(f64::from).collect();
        let points = Points::from_rows(1, &rows);
        let mut answers = Points::zeros(2, 300);
        twice.evaluate(&points, &mut answers).unwrap();
        assert_eq!(answers.point(299), vec![598.0, -299.0]);
        assert_eq!(answers.point(128), vec![256.0, -128.0]);
    }

    #[test]
    fn shapes_and_missing_derivatives_are_refused() {
        let model = Closure::new(2, |x| x[0]);
        let mut answers = Points::zeros(1, 1);
        let refused = model.evaluate(&Points::zeros(3, 1), &mut answers).unwrap_err();
        assert_eq!(refused, ModelError::WrongInputs { expected: 2, given: 3 });
        let refused = model.evaluate(&Points::zeros(2, 1), &mut Points::zeros(2, 1)).unwrap_err();
        assert_eq!(refused, ModelError::WrongOutputs { expected: 1, given: 2 });
        let refused = model.gradient(&Points::zeros(2, 1), &mut [0.0], &mut Points::zeros(2, 1)).unwrap_err();
        assert_eq!(refused, ModelError::NoGradient);
        assert!(!model.has_gradient());
    }
}
