//! Models: a batch of points in, a batch of values out.
//!
//! A [`Model`] is what a problem asks when its target is not (only) a formula. It knows nothing of distributions,
//! coordinates or aims: it gets values in natural units and answers with numbers. [`Closure`] wraps a Rust function,
//! [`ProgramModel`] a program in any language, [`LibraryModel`] compiled code with a C interface, and [`ExchangeModel`]
//! whatever is run elsewhere and answers by files.
//!
//! **Invariant:** a model answers every point by its own values alone, so that the same point has the same answer in
//! any batch, at any place in it and on any number of threads.

mod closure;
mod exchange;
mod library;
mod program;
mod surroundings;

pub use closure::Closure;
pub use exchange::ExchangeModel;
pub use exchange::Post;
pub use library::LibraryError;
pub use library::LibraryModel;
pub use library::LibrarySpec;
pub use program::Cause;
pub use program::Mishap;
pub use program::ProgramError;
pub use program::ProgramFormat;
pub use program::ProgramModel;
pub use program::ProgramSpec;
pub use program::Throughput;
pub use program::throughput;
pub use surroundings::Alone;
pub use surroundings::Surroundings;

pub(crate) use program::cores;
pub(crate) use program::decimal;

use std::sync::Arc;
use thiserror::Error;

use crate::numeric::Points;

/// A batch of points to values.
///
/// The contract: an answer depends on its own point only; the same point has the same answer, bit for bit, in every
/// batch. NaN says "this evaluation failed": it is counted, and weighs nothing. An `Err` says that the model as a whole
/// cannot go on.
///
/// ```
/// use evenpoise::model::{Model, ModelError};
/// use evenpoise::numeric::Points;
/// /// Discharge over a weir, `1.7 width depth^2`; no answer for a dry one.
/// struct Weir;
/// impl Model for Weir {
///     fn n_inputs(&self) -> usize {
///         2
///     }
///     fn n_outputs(&self) -> usize {
///         1
///     }
///     fn evaluate(&self, inputs: &Points, outputs: &mut Points) -> Result<(), ModelError> {
///         for i in 0..inputs.len() {
///             let (width, depth) = (inputs.get(i, 0), inputs.get(i, 1));
///             outputs.set(i, 0, if depth > 0.0 { 1.7 * width * depth * depth } else { f64::NAN });
///         }
///         Ok(())
///     }
/// }
/// let mut answers = Points::zeros(1, 2);
/// Weir.evaluate(&Points::from_rows(2, &[10.0, 1.0, 10.0, -1.0]), &mut answers).unwrap();
/// assert!(answers.get(0, 0) == 17.0 && answers.get(1, 0).is_nan());
/// ```
pub trait Model: Send + Sync {
    /// Values that a point has: `inputs.dim()`.
    fn n_inputs(&self) -> usize;

    /// Values that an answer has: `outputs.dim()`.
    fn n_outputs(&self) -> usize;

    /// Answers every point of `inputs`, in order.
    ///
    /// # Shapes
    /// `inputs.dim()` is [`Model::n_inputs`]; `outputs` comes with `n_outputs` coordinates and `inputs.len()` points.
    ///
    /// # Errors
    /// [`ModelError`] when no further answer can be had. A single failed point is no error, it is NaN.
    fn evaluate(&self, inputs: &Points, outputs: &mut Points) -> Result<(), ModelError>;

    /// Whether [`Model::gradient`] answers.
    fn has_gradient(&self) -> bool {
        false
    }

    /// Values of a model of one output, and their derivatives with respect to every input.
    ///
    /// # Shapes
    /// `values` has one number a point; `gradients` has `n_inputs` coordinates and as many points as `inputs`.
    ///
    /// # Errors
    /// [`ModelError::NoGradient`] for models without one; else as [`Model::evaluate`].
    fn gradient(&self, inputs: &Points, values: &mut [f64], gradients: &mut Points) -> Result<(), ModelError> {
        let _ = (inputs, values, gradients);
        Err(ModelError::NoGradient)
    }

    /// Tells the model whom to tell, and whom to ask, while it works; before it is first asked. Models inside the process
    /// have nothing to say.
    fn connect(&self, surroundings: &Arc<dyn Surroundings>) {
        let _ = surroundings;
    }

    /// Gives an [`ExchangeModel`] its way to the outside. Other models have no use for it.
    fn send_by(&self, post: Box<dyn Post>) {
        drop(post);
    }
}

/// What keeps a model from answering at all.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum ModelError {
    /// Points came with another number of values than the model takes.
    #[error(
        "the model takes {expected} values a point and was given {given}; list its inputs in the model's own order"
    )]
    WrongInputs {
        /// Values that the model takes.
        expected: usize,
        /// Values that it was given.
        given: usize,
    },
    /// Room for another number of answers than the model gives.
    #[error("the model answers with {expected} values a point, and {given} were asked for")]
    WrongOutputs {
        /// Values that the model answers with.
        expected: usize,
        /// Values that were asked for.
        given: usize,
    },
    /// Derivatives were asked of a model that has none.
    #[error("the model gives no derivatives; ask for its values alone")]
    NoGradient,
    /// A program gives no answers.
    #[error(transparent)]
    Program(Box<ProgramError>),
    /// Compiled code gives no answers.
    #[error(transparent)]
    Library(#[from] LibraryError),
    /// The answers come later, from outside.
    #[error("waiting for the answers to {points} points")]
    Waiting {
        /// Points that were asked.
        points: usize,
        /// What was written, what is missing, and what to do, for the user.
        text: String,
    },
    /// What came from outside cannot be used, or nothing can be sent there.
    #[error("{0}")]
    Exchange(String),
    /// Whoever runs the model wants to stop.
    #[error("interrupted")]
    Interrupted,
}

impl From<ProgramError> for ModelError {
    fn from(error: ProgramError) -> Self {
        Self::Program(Box::new(error))
    }
}

/// Checks that `inputs` and `outputs` fit `model`.
pub(crate) fn check_shapes(model: &dyn Model, inputs: usize, outputs: usize) -> Result<(), ModelError> {
    if inputs != model.n_inputs() {
        return Err(ModelError::WrongInputs { expected: model.n_inputs(), given: inputs });
    }
    if outputs != model.n_outputs() {
        return Err(ModelError::WrongOutputs { expected: model.n_outputs(), given: outputs });
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn errors_may_cross_threads() {
        fn crosses<T: Send + Sync + 'static>() {}
        crosses::<ModelError>();
        crosses::<Box<dyn Model>>();
    }
}
