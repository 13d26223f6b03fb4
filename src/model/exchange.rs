//! Models that are run elsewhere: points go out, answers come back, whenever that may be.

use super::Model;
use super::ModelError;
use super::Surroundings;
use super::check_shapes;
use crate::numeric::Points;
use std::fmt;
use std::sync::Arc;
use std::sync::OnceLock;

/// The way to the outside and back.
pub trait Post: Send + Sync {
    /// Answers to `inputs` (named by `takes`): one point of `returns.len()` values each, NaN where the evaluation failed.
    ///
    /// # Errors
    /// [`ModelError::Waiting`] where the answers are not there yet; they are asked for by then.
    /// [`ModelError::Exchange`] where what is there cannot be used.
    fn deliver(&self, takes: &[String], returns: &[String], inputs: &Points) -> Result<Points, ModelError>;
}

/// A model that somebody else runs: a queue, a cluster, a laboratory.
///
/// It asks by the [`Post`] that it was given with [`Model::send_by`]; without one there is nobody to ask.
pub struct ExchangeModel {
    takes: Vec<String>,
    returns: Vec<String>,
    post: OnceLock<Box<dyn Post>>,
}

impl ExchangeModel {
    /// A model of these inputs and outputs, without a way to the outside yet.
    #[must_use]
    pub fn new(takes: Vec<String>, returns: Vec<String>) -> Self {
        Self { takes, returns, post: OnceLock::new() }
    }
}

impl fmt::Debug for ExchangeModel {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter
            .debug_struct("ExchangeModel")
            .field("takes", &self.takes)
            .field("returns", &self.returns)
            .finish_non_exhaustive()
    }
}

impl Model for ExchangeModel {
    fn n_inputs(&self) -> usize {
        self.takes.len()
    }

    fn n_outputs(&self) -> usize {
        self.returns.len()
    }

    fn evaluate(&self, inputs: &Points, outputs: &mut Points) -> Result<(), ModelError> {
        check_shapes(self, inputs.dim(), outputs.dim())?;
        if inputs.is_empty() {
            return Ok(());
        }
        let Some(post) = self.post.get() else {
            return Err(ModelError::Exchange(
                "the model of this problem is run elsewhere ([exchange]); only a command with a run folder can ask it"
                    .into(),
            ));
        };
        let answers = post.deliver(&self.takes, &self.returns, inputs)?;
        for i in 0..inputs.len() {
            (0..outputs.dim()).for_each(|k| outputs.set(i, k, answers.get(i, k)));
        }
        Ok(())
    }

    fn connect(&self, _: &Arc<dyn Surroundings>) {}

    fn send_by(&self, post: Box<dyn Post>) {
        let _ = self.post.set(post);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    struct Doubled;

    impl Post for Doubled {
        fn deliver(&self, takes: &[String], returns: &[String], inputs: &Points) -> Result<Points, ModelError> {
            assert_eq!((takes, returns), (&["x".to_owned()][..], &["y".to_owned()][..]));
            Ok(Points::from_rows(1, &inputs.coordinate(0).iter().map(|x| 2.0 * x).collect::<Vec<_>>()))
        }
    }

    #[test]
    fn answers_come_by_the_post() {
        let model = ExchangeModel::new(vec!["x".into()], vec!["y".into()]);
        let mut answers = Points::zeros(1, 2);
        let points = Points::from_rows(1, &[3.0, 4.0]);
        assert!(matches!(model.evaluate(&points, &mut answers), Err(ModelError::Exchange(_))));
        model.send_by(Box::new(Doubled));
        model.evaluate(&points, &mut answers).unwrap();
        assert_eq!(answers.coordinate(0), [6.0, 8.0]);
    }
}
