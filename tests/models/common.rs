//! Small programs, and problems that ask them.

use assert_cmd::Command;
use evenpoise::model::{Model, ModelError, ProgramModel, ProgramSpec, Surroundings};
use evenpoise::numeric::Points;
use std::fs;
use std::path::Path;
use std::sync::Arc;
use std::sync::Mutex;
use std::time::Duration;

/// Whether a tool is there; a test that needs one that is not is told by one line, which the runner counts.
pub(crate) fn there(tool: &str) -> bool {
    let found = std::process::Command::new(tool).arg("--version").output().is_ok_and(|output| output.status.success());
    if !found {
        // A test's own output is only shown for tests that fail, or with --nocapture.
        let _ = fs::write("/dev/stderr", format!("skipped 1: there is no {tool}\n"));
    }
    found
}

/// A Python program in a folder of its own, with two values a point.
pub(crate) struct Script {
    pub(crate) folder: tempfile::TempDir,
}

impl Script {
    pub(crate) fn new(text: &str) -> Self {
        let folder = tempfile::tempdir().unwrap();
        fs::write(folder.path().join("model.py"), text).unwrap();
        Self { folder }
    }

    /// Asks it with one worker, so that it is known what a worker was asked.
    pub(crate) fn spec(&self) -> ProgramSpec {
        let spec = ProgramSpec::new(&["python3", "model.py"], self.folder.path(), &["a", "b"], 1);
        ProgramSpec { workers: 1, timeout: Some(Duration::from_secs(20)), ..spec }
    }
}

/// What a model told.
#[derive(Default)]
pub(crate) struct Heard {
    pub(crate) said: Mutex<Vec<String>>,
    pub(crate) notices: Mutex<Vec<String>>,
    pub(crate) answered: Mutex<Vec<(f64, f64)>>,
}

impl Surroundings for Heard {
    fn said(&self, line: &str) {
        self.said.lock().unwrap().push(line.to_owned());
    }

    fn notice(&self, text: &str) {
        self.notices.lock().unwrap().push(text.to_owned());
    }

    fn keeps_answers(&self) -> bool {
        true
    }

    fn answered(&self, inputs: &Points, answers: &Points) {
        let mut answered = self.answered.lock().unwrap();
        (0..inputs.len()).for_each(|i| answered.push((inputs.get(i, 0), answers.get(i, 0))));
    }
}

impl Heard {
    pub(crate) fn all_notices(&self) -> String {
        self.notices.lock().unwrap().join("\n")
    }
}

/// `n` points `(i, i / 7)`.
pub(crate) fn points(n: usize) -> Points {
    let mut points = Points::new(2);
    (0..n).for_each(|i| points.push(&[i as f64, i as f64 / 7.0]));
    points
}

/// Answers of a program to `n` points, and what it told.
pub(crate) fn answers(spec: ProgramSpec, n: usize) -> (Result<Vec<f64>, ModelError>, Arc<Heard>) {
    let heard = Arc::new(Heard::default());
    let model = ProgramModel::new(spec);
    let surroundings: Arc<dyn Surroundings> = heard.clone();
    model.connect(&surroundings);
    let mut out = Points::zeros(1, n);
    let answered = model.evaluate(&points(n), &mut out).map(|()| out.coordinate(0));
    (answered, heard)
}

/// Asserts that the answers are `a + b`, save for the points `failed`.
pub(crate) fn assert_sums(answers: &[f64], failed: &[usize]) {
    for (i, &answer) in answers.iter().enumerate() {
        let want = i as f64 + i as f64 / 7.0;
        assert!(if failed.contains(&i) { answer.is_nan() } else { answer == want }, "point {i}: {answer}, not {want}");
    }
}

/// The loop that a simple model has; `{body}` makes `y` of `a` and `b`.
pub(crate) fn looped(before: &str, body: &str) -> String {
    let body = body.replace('\n', "\n        ");
    format!(
        "import math, os, signal, sys, time\n{before}\nn = 0\nfor line in sys.stdin:\n    if line.split():\n        \
         a, b = map(float, line.split())\n        n += 1\n        y = a + b\n        {body}\n        print(repr(y), flush=True)\n"
    )
}

pub(crate) fn evenpoise(folder: &Path) -> Command {
    let mut command = Command::new(assert_cmd::cargo::cargo_bin!("evenpoise"));
    command.current_dir(folder).env_remove("NO_COLOR");
    command
}

/// A flood that two values make, tuned in a second or two; `{model}` is the table of the model.
pub(crate) fn weir(model: &str) -> String {
    format!(
        "title = \"A weir of the Ellenmere feeder (invented)\"\n[variables]\n\
         depth = {{ distribution = \"normal\", mean = 1.0, sd = 0.4, between = [0.0, inf], unit = \"m\" }}\n\
         width = {{ range = [0.0, inf], near = 3.0, spread = 1.0, unit = \"m\" }}\n{model}\n\
         [target]\naim = \"density\"\nlog_factor = \"log_density_normal(4.2, flow, 0.6) - 0.1 * width\"\n\
         [estimates]\nflow_then = \"flow\"\n[tuning]\nbudget = 900\n"
    )
}

/// The same weir, and how likely a great flow over it is.
pub(crate) fn flood(model: &str) -> String {
    format!(
        "title = \"A flood over a weir of the Ellenmere feeder (invented)\"\n[variables]\n\
         depth = {{ distribution = \"normal\", mean = 1.0, sd = 0.2, between = [0.0, inf], unit = \"m\" }}\n\
         width = {{ distribution = \"normal\", mean = 3.0, sd = 0.1, unit = \"m\" }}\n{model}\n\
         [target]\naim = \"probability\"\nevent = \"flow > 12\"\n[estimates]\nflow_then = \"flow\"\n[tuning]\nbudget = 900\n"
    )
}

/// The weir in Python, which a Rust test can check: 1.7 w d^1.5.
pub(crate) const WEIR: &str = "import sys\nfor line in sys.stdin:\n    if line.split():\n        d, w = map(float, line.split())\n        \
    print(repr(1.7 * w * d ** 1.5), flush=True)\n";

/// Tunes, whatever the verdict; what was said on standard error.
pub(crate) fn tune(folder: &Path, arguments: &[&str]) -> String {
    let output = evenpoise(folder).arg("tune").args(arguments).output().unwrap();
    let said = String::from_utf8_lossy(&output.stderr).into_owned();
    assert!(matches!(output.status.code(), Some(0 | 3)), "{:?}: {said}", output.status);
    said
}
