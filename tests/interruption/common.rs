//! A problem that takes a second or so, its run without any interruption, and folders compared byte for byte.

use std::fs;
use std::path::Path;
use std::path::PathBuf;
use std::process::Child;
use std::process::Command;
use std::process::Output;
use std::process::Stdio;
use std::time::Duration;
use std::time::Instant;

const CANAL: &str = r#"
title = "Roughness of the Ellenmere feeder canal (invented)"
[variables]
roughness = { distribution = "lognormal", mean = 0.03, cv = 0.4 }
offset = { range = [-inf, inf], near = 0.0, spread = 1.0, unit = "m3/s" }
noise = { distribution = "half-normal", scale = 0.5, unit = "m3/s" }
[data]
file = "gauge.csv"
[target]
aim = "density"
log_factor = "sum(log_density_normal(flow, offset + 0.05 * depth^1.67 / roughness, noise))"
[estimates]
conveyance = "0.05 / roughness"
[tuning]
budget = 2000
"#;

/// The probability of a flood over two gauges, far out.
pub(crate) const FLOOD: &str = r#"
title = "Floods at two gauges of the Ellenmere reservoir (invented)"
[variables]
upper = { distribution = "gumbel", mean = 20.0, sd = 6.0, unit = "m3/s" }
lower = { distribution = "gamma", mean = 12.0, cv = 0.5, unit = "m3/s" }
[[correlation]]
among = ["upper", "lower"]
rank = 0.3
[data]
file = "gauge.csv"
[target]
aim = "probability"
event = "upper + lower > 70 + 0 * sum(depth * flow)"
[tuning]
budget = 3000
"#;

/// A folder with the problem, its data, and the run that nothing interrupted.
pub(crate) struct Case {
    folder: tempfile::TempDir,
    /// How long that run took.
    pub(crate) took: Duration,
}

impl Case {
    pub(crate) fn new() -> Self {
        Self::of(CANAL)
    }

    /// The case of another problem.
    pub(crate) fn of(problem: &str) -> Self {
        let folder = tempfile::tempdir().unwrap();
        let mut data = String::from("depth,flow\n");
        for i in 0..800_u32 {
            let depth = 0.5 + f64::from(i) / 600.0;
            // A fixed scatter between -0.2 and 0.2.
            let scatter = f64::from((i * 7919) % 401) / 1000.0 - 0.2;
            data.push_str(&format!("{depth},{}\n", 1.7 * depth.powf(1.67) + scatter));
        }
        fs::write(folder.path().join("gauge.csv"), data).unwrap();
        fs::write(folder.path().join("canal.toml"), problem).unwrap();
        let began = Instant::now();
        let case = Self { folder, took: Duration::ZERO };
        let output = case.run(&["tune", "canal.toml", "--out", "whole.run"]);
        assert!(done(&output), "{}", said(&output));
        Self { took: began.elapsed(), ..case }
    }

    pub(crate) fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    pub(crate) fn command(&self, arguments: &[&str]) -> Command {
        let mut command = Command::new(assert_cmd::cargo::cargo_bin!("evenpoise"));
        command.current_dir(self.folder.path()).args(arguments).stdin(Stdio::null());
        command
    }

    pub(crate) fn run(&self, arguments: &[&str]) -> Output {
        self.command(arguments).output().unwrap()
    }

    pub(crate) fn start(&self, arguments: &[&str]) -> Child {
        self.command(arguments).stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap()
    }

    /// Goes on with a run, or begins it where it was killed before its journal was there.
    pub(crate) fn complete(&self, run: &str) {
        let mut output = self.run(&["tune", "canal.toml", "--out", run, "--resume"]);
        if said(&output).contains("holds no run") {
            output = self.run(&["tune", "canal.toml", "--out", run]);
        }
        assert!(done(&output), "{}", said(&output));
    }

    /// Asserts that a run ended like the one that nothing interrupted.
    pub(crate) fn assert_whole(&self, run: &str) {
        self.assert_same("whole.run", run);
    }

    /// Asserts that a run ended like another, to the last byte, and left nothing else behind.
    pub(crate) fn assert_same(&self, wanted: &str, run: &str) {
        for folder in ["", "figures"] {
            for entry in fs::read_dir(self.path(wanted).join(folder)).unwrap() {
                let name = entry.unwrap().file_name();
                let at = Path::new(folder).join(&name);
                let whole = self.path(wanted).join(&at);
                if whole.is_file() && name != "timings.json" && name != "log.txt" {
                    let same = fs::read(&whole).unwrap() == fs::read(self.path(run).join(&at)).unwrap();
                    assert!(same, "{} differs after {run}", at.display());
                }
            }
        }
        let leftovers: Vec<_> = fs::read_dir(self.path(run))
            .unwrap()
            .map(|entry| entry.unwrap().file_name().into_string().unwrap())
            .filter(|name| name.ends_with(".partial") || name == "lock")
            .collect();
        assert!(leftovers.is_empty(), "{leftovers:?}");
    }

    /// A copy of the finished run with nothing but its journal and its problem.
    pub(crate) fn journal_alone(&self, run: &str) -> PathBuf {
        self.journal_of("whole.run", run)
    }

    /// A copy of a run with nothing but its journal and its problem.
    pub(crate) fn journal_of(&self, whole: &str, run: &str) -> PathBuf {
        let from = self.path(whole);
        let to = self.path(run);
        fs::create_dir_all(to.join("evaluations")).unwrap();
        fs::copy(from.join("problem.toml"), to.join("problem.toml")).unwrap();
        let journal = to.join("evaluations/journal");
        fs::copy(from.join("evaluations/journal"), &journal).unwrap();
        journal
    }
}

/// What a command said on standard error.
pub(crate) fn said(output: &Output) -> String {
    String::from_utf8_lossy(&output.stderr).into_owned()
}

/// A fixed sequence of numbers between 0 and 1: `frac(k sqrt 2)` fills the interval evenly.
pub(crate) fn parts(n: u32) -> impl Iterator<Item = f64> {
    (1..=n).map(|k| (f64::from(k) * std::f64::consts::SQRT_2).fract())
}

/// Whether a command came to its end, whatever the verdict.
pub(crate) fn done(output: &Output) -> bool {
    matches!(output.status.code(), Some(0 | 3))
}
