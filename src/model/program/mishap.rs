//! What can go wrong with a model program, told as it is.

use std::time::Duration;
use thiserror::Error;

/// Why a program gives no answers at all.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum ProgramError {
    /// There is no such program.
    #[error("there is no program `{program}`{}; check `run`, or the search path", hint.as_ref().map_or(String::new(), |hint| format!(" ({hint})")))]
    NotFound {
        /// The program as `run` names it.
        program: String,
        /// What was probably meant.
        hint: Option<String>,
    },
    /// The program may not be run.
    #[error("`{program}` may not be run; make it executable (chmod +x), or name its interpreter first in `run`")]
    NotExecutable {
        /// The program as `run` names it.
        program: String,
    },
    /// The system did not start it.
    #[error("`{program}` could not be started: {reason}")]
    NotStarted {
        /// The program as `run` names it.
        program: String,
        /// The system's reason.
        reason: String,
    },
    /// It never answered a single point.
    #[error("the model program never answered.\n{0}")]
    NeverAnswered(Box<Mishap>),
    /// It answered more than it was asked.
    #[error(
        "the model program answered {answered} points where {asked} were asked; which answer belongs to which point is not known: \
         print one line a point, and nothing for the empty line.\nTry it: {command}"
    )]
    TooMany {
        /// Answers that came.
        answered: usize,
        /// Points that were asked.
        asked: usize,
        /// A line for a shell that asks it.
        command: String,
    },
    /// It said something when nothing was asked.
    #[error(
        "the model program printed something after the last answer of a batch: print one line a point, and nothing for the empty line \
         that ends a batch.\nTry it: {command}"
    )]
    Unasked {
        /// A line for a shell that asks it.
        command: String,
    },
    /// The same point was answered in two ways.
    #[error(
        "the model program answered the point\n  {point}\nfirst with {before}, then with {now}. Either it skips lines (print nan for a \
         point that fails), or its answer depends on more than the point.\nTry it: {command}"
    )]
    OutOfStep {
        /// The point in natural units.
        point: String,
        /// The first answer.
        before: String,
        /// The second.
        now: String,
        /// A line for a shell that asks it.
        command: String,
    },
    /// Worker after worker ended without an answer.
    #[error("{times} times in a row points were given up without any answer between, so the run stops here.\n{last}")]
    GivenUp {
        /// Times.
        times: usize,
        /// What befell the last of them.
        last: Box<Mishap>,
    },
}

/// What befell a worker.
#[derive(Debug, Clone, PartialEq, Eq)]
#[non_exhaustive]
pub enum Cause {
    /// It ended by itself.
    Exited {
        /// Its exit status.
        status: i32,
    },
    /// A signal ended it.
    Killed {
        /// The signal's number.
        signal: i32,
    },
    /// Its output ended, though the process went on.
    Closed,
    /// Nothing came for too long.
    Hung {
        /// How long was waited.
        waited: Duration,
    },
    /// It answered with something that is no answer.
    Unreadable {
        /// The line.
        line: String,
        /// What is wrong with it.
        reason: String,
    },
}

/// What befell a worker, at which point, and how to see it again.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Mishap {
    /// What happened.
    pub cause: Cause,
    /// The first point without an answer, in natural units.
    pub point: String,
    /// Points of the batch that had an answer, and points in it.
    pub answered: (usize, usize),
    /// A line for a shell that asks the program for this point.
    pub command: String,
    /// The last lines of its standard error.
    pub said: Vec<String>,
}

impl std::fmt::Display for Mishap {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match &self.cause {
            Cause::Exited { status } => write!(f, "It ended with exit status {status}")?,
            Cause::Killed { signal } => write!(f, "It was ended by signal {signal}")?,
            Cause::Closed => write!(f, "It closed its standard output")?,
            Cause::Hung { waited } => {
                write!(f, "Nothing came for {} seconds (`timeout`; does it flush its output?)", waited.as_secs_f64())?;
            }
            Cause::Unreadable { line, reason } => {
                write!(
                    f,
                    "This line is no answer, {reason}: \"{line}\" (anything but answers goes to standard error)"
                )?;
            }
        }
        let (answered, asked) = self.answered;
        write!(
            f,
            ", after {answered} of {asked} points of a batch. The next point was\n  {}\nTry it: {}",
            self.point, self.command
        )?;
        if !self.said.is_empty() {
            write!(f, "\nIts standard error ended with")?;
            self.said.iter().try_for_each(|line| write!(f, "\n  | {line}"))?;
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn errors_cross_threads_and_say_what_to_do() {
        fn crosses<T: std::error::Error + Send + Sync + 'static>() {}
        crosses::<ProgramError>();
        let mishap = Mishap {
            cause: Cause::Hung { waited: Duration::from_millis(1500) },
            point: "inflow = 62.5".into(),
            answered: (3, 8),
            command: "echo \"62.5\" | ./tank".into(),
            said: vec!["no gate".into()],
        };
        let text = ProgramError::NeverAnswered(Box::new(mishap)).to_string();
        for part in ["1.5 seconds", "flush", "3 of 8", "inflow = 62.5", "echo \"62.5\" | ./tank", "| no gate"] {
            assert!(text.contains(part), "{text}");
        }
    }
}
