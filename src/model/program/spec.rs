//! How a model program is run.

use std::path::Path;
use std::path::PathBuf;
use std::process::Command;
use std::time::Duration;

/// How points and answers are written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ProgramFormat {
    /// A line a point, decimal numbers separated by spaces, an empty line after every batch.
    Text,
    /// Little-endian: the number of points as `u64`, then the values of all points as `f64`; answers as `f64`.
    F64,
}

/// A program that answers points, one process a worker.
#[derive(Debug, Clone, PartialEq)]
pub struct ProgramSpec {
    /// The program and its arguments; no shell. A program with a slash in it is looked for from `folder`.
    pub run: Vec<String>,
    /// Where it is started.
    pub folder: PathBuf,
    /// Names of the values of a point, in order.
    pub takes: Vec<String>,
    /// Values of an answer, derivatives not counted.
    pub n_outputs: usize,
    /// Processes at once, at least one.
    pub workers: usize,
    /// Most points in a batch; none: chosen by the program's pace.
    pub batch: Option<usize>,
    /// Longest wait without any answer; none waits for ever.
    pub timeout: Option<Duration>,
    /// How often an unanswered point is asked in all, at least once.
    pub tries: u32,
    /// How points and answers are written.
    pub format: ProgramFormat,
    /// Whether an answer is one value and its derivatives with respect to every value of the point.
    pub gradient: bool,
}

impl ProgramSpec {
    /// Seconds without an answer after which a worker hangs, unless told otherwise.
    pub const TIMEOUT: Duration = Duration::from_secs(60);
    /// Tries of a point, unless told otherwise.
    pub const TRIES: u32 = 3;

    /// A program with the usual settings: text, a worker a core, a minute of patience, three tries.
    #[must_use]
    pub fn new(run: &[&str], folder: &Path, takes: &[&str], n_outputs: usize) -> Self {
        Self {
            run: run.iter().map(|&part| part.to_owned()).collect(),
            folder: folder.to_path_buf(),
            takes: takes.iter().map(|&name| name.to_owned()).collect(),
            n_outputs,
            workers: cores(),
            batch: None,
            timeout: Some(Self::TIMEOUT),
            tries: Self::TRIES,
            format: ProgramFormat::Text,
            gradient: false,
        }
    }

    /// Values of a point.
    pub(crate) fn n_inputs(&self) -> usize {
        self.takes.len()
    }

    /// Numbers of one answer, derivatives included.
    pub(crate) fn width(&self) -> usize {
        if self.gradient { 1 + self.n_inputs() } else { self.n_outputs }
    }

    /// The command, ready to be started.
    pub(crate) fn command(&self) -> Command {
        let program = self.run.first().map_or("", String::as_str);
        let mut command = if program.contains('/') {
            // With another working folder it would not be said from where a relative path is meant.
            let path = self.folder.join(program);
            Command::new(std::path::absolute(&path).unwrap_or(path))
        } else {
            Command::new(program)
        };
        command.args(self.run.iter().skip(1));
        if !self.folder.as_os_str().is_empty() {
            command.current_dir(&self.folder);
        }
        command
    }

    /// A point in natural units: `inflow = 62.5, gate_level = 3`.
    pub(crate) fn named(&self, point: &[f64]) -> String {
        let each =
            self.takes.iter().zip(point).map(|(name, value)| format!("{name} = {}", super::protocol::decimal(*value)));
        each.collect::<Vec<_>>().join(", ")
    }

    /// A line for a shell that asks the program for one point.
    pub(crate) fn reproduction(&self, point: &[f64]) -> String {
        let program: Vec<String> = self.run.iter().map(|part| quoted(part)).collect();
        let asked = match self.format {
            ProgramFormat::Text => {
                let values: Vec<String> = point.iter().map(|value| super::protocol::decimal(*value)).collect();
                format!("echo \"{}\" | {}", values.join(" "), program.join(" "))
            }
            ProgramFormat::F64 => {
                let bytes: String =
                    super::protocol::f64_batch(point, point.len()).iter().map(|byte| format!("\\{byte:03o}")).collect();
                format!("printf '{bytes}' | {} | od -A n -t f8", program.join(" "))
            }
        };
        if self.folder.as_os_str().is_empty() {
            asked
        } else {
            format!("(cd {} && {asked})", quoted(&self.folder.display().to_string()))
        }
    }
}

/// Cores of this machine.
pub(crate) fn cores() -> usize {
    std::thread::available_parallelism().map_or(1, std::num::NonZero::get)
}

/// `text` as one word of a shell.
fn quoted(text: &str) -> String {
    let plain = !text.is_empty() && text.chars().all(|c| c.is_ascii_alphanumeric() || "-_./=+:,@%".contains(c));
    if plain { text.to_owned() } else { format!("'{}'", text.replace('\'', "'\\''")) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_point_can_be_asked_again_by_hand() {
        let mut spec = ProgramSpec::new(&["python3", "my tank.py"], Path::new("a/b"), &["inflow", "gate"], 1);
        assert_eq!(spec.reproduction(&[0.1, -3.0]), "(cd a/b && echo \"0.1 -3\" | python3 'my tank.py')");
        assert_eq!(spec.named(&[0.1, -3.0]), "inflow = 0.1, gate = -3");
        spec.format = ProgramFormat::F64;
        spec.folder = PathBuf::new();
        let wanted =
            "printf '\\001\\000\\000\\000\\000\\000\\000\\000\\000\\000\\000\\000\\000\\000\\360\\077' | python3";
        assert!(spec.reproduction(&[1.0]).starts_with(wanted), "{}", spec.reproduction(&[1.0]));
        assert_eq!(quoted("it's"), "'it'\\''s'");
    }
}
