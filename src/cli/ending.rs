//! How a command ends: its exit status, and the one place where errors are told.

use super::output;
use evenpoise::problem::ProblemErrors;
use std::io;
use std::process::ExitCode;
use thiserror::Error;

/// How a command ended.
#[derive(Debug)]
pub(crate) enum Ending {
    /// Done, and not unfit.
    Done,
    /// Done, and the verdict is unfit.
    Unfit,
    /// Stopped by a signal of that number; everything is saved.
    Interrupted(u8),
    /// The model's answers come from elsewhere, later.
    Waiting,
    /// Failed.
    Failed(anyhow::Error),
}

/// Options that do not go together, as only the problem file could tell.
#[derive(Debug, Error)]
#[error("{0}")]
pub(crate) struct Misuse(pub(crate) String);

/// Exit status of a failure.
const FAILED: u8 = 1;
/// Exit status of wrong usage.
const MISUSED: u8 = 2;
/// Exit status of an unfit verdict.
const UNFIT: u8 = 3;
/// Exit status of a run that waits for answers.
const WAITING: u8 = 4;
/// A process that a signal ends has this much more than the signal's number.
const SIGNALLED: u8 = 128;

impl From<anyhow::Error> for Ending {
    fn from(error: anyhow::Error) -> Self {
        let broken = |cause: &(dyn std::error::Error + 'static)| {
            cause.downcast_ref::<io::Error>().is_some_and(|error| error.kind() == io::ErrorKind::BrokenPipe)
        };
        // Whoever read the output has read enough.
        if error.chain().any(broken) { Self::Done } else { Self::Failed(error) }
    }
}

/// The exit status; an error is told first.
pub(crate) fn status(ending: Ending) -> ExitCode {
    match ending {
        Ending::Done => ExitCode::SUCCESS,
        Ending::Unfit => ExitCode::from(UNFIT),
        Ending::Waiting => ExitCode::from(WAITING),
        Ending::Interrupted(signal) => ExitCode::from(SIGNALLED + signal),
        Ending::Failed(error) => {
            let status = if error.is::<Misuse>() { MISUSED } else { FAILED };
            match error.downcast_ref::<ProblemErrors>() {
                Some(faults) => output::complain(&faults.render(true)),
                None => output::complain(&format!("error: {error:#}")),
            }
            ExitCode::from(status)
        }
    }
}

/// The exit status where the arguments ask for help, or are wrong.
pub(crate) fn of_parsing(error: &clap::Error) -> ExitCode {
    // Nothing is left to be told where even this cannot be printed.
    let _ = error.print();
    if error.use_stderr() { ExitCode::from(MISUSED) } else { ExitCode::SUCCESS }
}
