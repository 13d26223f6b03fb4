//! Models in any language: programs that are kept running and answer points through their standard input and output.

mod mishap;
mod pace;
mod pool;
mod protocol;
mod spec;
mod trial;
mod worker;

pub use mishap::Cause;
pub use mishap::Mishap;
pub use mishap::ProgramError;
pub use spec::ProgramFormat;
pub use spec::ProgramSpec;
pub use trial::Throughput;
pub use trial::throughput;

pub(crate) use protocol::decimal;
pub(crate) use spec::cores;

use super::Alone;
use super::Model;
use super::ModelError;
use super::Surroundings;
use super::check_shapes;
use crate::numeric::Points;
use pool::Pool;
use std::fmt;
use std::sync::Arc;
use std::sync::Mutex;
use std::sync::OnceLock;
use std::sync::PoisonError;

/// A model that is a program, in any language.
///
/// The text protocol: a line a point on its standard input, values separated by a space; an empty line ends a batch. It
/// prints a line a point, in order, whenever it likes; nothing for the empty line; and ends when its input closes.
/// Workers are started at the first question and asked to end when the model is dropped.
///
/// ```
/// use evenpoise::model::{Model, ProgramModel, ProgramSpec};
/// use evenpoise::numeric::Points;
/// let script = "while read x; do if [ -n \"$x\" ]; then echo $((2 * x)); fi; done";
/// let twice = ProgramModel::new(ProgramSpec::new(&["sh", "-c", script], std::path::Path::new("."), &["x"], 1));
/// let mut answers = Points::zeros(1, 3);
/// twice.evaluate(&Points::from_rows(1, &[1.0, 2.0, 30.0]), &mut answers).unwrap();
/// assert_eq!(answers.coordinate(0), [2.0, 4.0, 60.0]);
/// ```
pub struct ProgramModel {
    spec: ProgramSpec,
    surroundings: OnceLock<Arc<dyn Surroundings>>,
    pool: Mutex<Option<Pool>>,
}

impl ProgramModel {
    /// A program that is not started yet.
    #[must_use]
    pub fn new(spec: ProgramSpec) -> Self {
        Self { spec, surroundings: OnceLock::new(), pool: Mutex::new(None) }
    }

    /// How it is run.
    #[must_use]
    pub fn spec(&self) -> &ProgramSpec {
        &self.spec
    }

    fn ask(&self, inputs: &Points) -> Result<Vec<f64>, ModelError> {
        if inputs.is_empty() {
            return Ok(Vec::new());
        }
        // A panic elsewhere while the pool was held leaves it as usable as it was.
        let mut pool = self.pool.lock().unwrap_or_else(PoisonError::into_inner);
        let around = || self.surroundings.get().cloned().unwrap_or_else(|| Arc::new(Alone));
        pool.get_or_insert_with(|| Pool::new(&self.spec, around())).answers(inputs)
    }
}

impl fmt::Debug for ProgramModel {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.debug_struct("ProgramModel").field("spec", &self.spec).finish_non_exhaustive()
    }
}

impl Model for ProgramModel {
    fn n_inputs(&self) -> usize {
        self.spec.n_inputs()
    }

    fn n_outputs(&self) -> usize {
        if self.spec.gradient { 1 } else { self.spec.n_outputs }
    }

    fn evaluate(&self, inputs: &Points, outputs: &mut Points) -> Result<(), ModelError> {
        check_shapes(self, inputs.dim(), outputs.dim())?;
        let answers = self.ask(inputs)?;
        for (i, answer) in answers.chunks_exact(self.spec.width()).enumerate() {
            (0..outputs.dim()).for_each(|k| outputs.set(i, k, answer[k]));
        }
        Ok(())
    }

    fn has_gradient(&self) -> bool {
        self.spec.gradient
    }

    fn gradient(&self, inputs: &Points, values: &mut [f64], gradients: &mut Points) -> Result<(), ModelError> {
        if !self.spec.gradient {
            return Err(ModelError::NoGradient);
        }
        check_shapes(self, inputs.dim(), 1)?;
        let answers = self.ask(inputs)?;
        for (i, answer) in answers.chunks_exact(self.spec.width()).enumerate() {
            values[i] = answer[0];
            (0..inputs.dim()).for_each(|j| gradients.set(i, j, answer[1 + j]));
        }
        Ok(())
    }

    fn connect(&self, surroundings: &Arc<dyn Surroundings>) {
        // The first to connect stays: workers that are running tell it what they say.
        let _ = self.surroundings.set(Arc::clone(surroundings));
    }
}
