//! What a model outside the process tells while it works, and what it asks of whoever runs it.

use crate::numeric::Points;

/// Whoever runs a model: a terminal with a log, a test, nobody.
///
/// Every method has a default that does nothing. They are called from several threads.
pub trait Surroundings: Send + Sync {
    /// A line that a program wrote to its standard error.
    fn said(&self, line: &str) {
        let _ = line;
    }

    /// Something that the user should know: a worker was restarted, a point counts as failed.
    fn notice(&self, text: &str) {
        let _ = text;
    }

    /// Whether [`Surroundings::answered`] is listened to; asked once a batch of answers.
    fn keeps_answers(&self) -> bool {
        false
    }

    /// Points of the batch at hand that were answered, as they come in: to be kept in case the rest never does.
    fn answered(&self, inputs: &Points, answers: &Points) {
        let _ = (inputs, answers);
    }

    /// Whether to stop as soon as possible.
    fn interrupted(&self) -> bool {
        false
    }
}

/// Nobody: nothing is told.
#[derive(Debug, Clone, Copy, Default)]
pub struct Alone;

impl Surroundings for Alone {}
