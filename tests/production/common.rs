//! Three small problems, one an aim, tuned once; and the command.

use std::fs;
use std::path::Path;
use std::path::PathBuf;
use std::process::Command;
use std::process::Output;
use std::process::Stdio;
use std::sync::OnceLock;

/// A posterior with estimates, one of them a column.
const SILL: &str = r#"
title = "Sill of the Ellenmere feeder canal (invented)"
[variables]
depth = { distribution = "gamma", mean = 2.0, sd = 0.6, unit = "m" }
slope = { range = [-inf, inf], near = 0.0, spread = 2.0 }
[data]
file = "gauge.csv"
[target]
aim = "density"
log_factor = "-2 * (slope - 0.4 * depth)^2"
[estimates]
head = "depth * depth"
flow = "stage * depth + slope"
[tuning]
budget = 2500
"#;

/// A rare event with a discrete variable and correlation.
const FLOOD: &str = r#"
title = "Floods at two gauges of the Ellenmere reservoir (invented)"
[variables]
upper = { distribution = "gumbel", mean = 20.0, sd = 6.0, unit = "m3/s" }
lower = { distribution = "gamma", mean = 12.0, cv = 0.5, unit = "m3/s" }
stuck = { distribution = "binomial", n = 2, p = 0.1 }
[[correlation]]
among = ["upper", "lower"]
rank = 0.3
[target]
aim = "probability"
event = "upper + lower > 70 - 6 * stuck"
[estimates]
upper_part = "upper / (upper + lower)"
[tuning]
budget = 2500
"#;

/// An expectation whose integrand has both signs.
const BALANCE: &str = r#"
title = "Balance of a season's water account at Ellenmere (invented)"
[variables]
inflow = { distribution = "lognormal", mean = 7.0, cv = 0.35 }
need = { distribution = "normal", mean = 6.0, sd = 0.9 }
[target]
aim = "expectation"
integrand = "(inflow - need)^3"
[tuning]
budget = 2500
"#;

/// The names of the three.
pub(crate) const AIMS: [&str; 3] = ["sill", "flood", "balance"];

/// The folder with the three runs: `sill.run`, `flood.run`, `balance.run`. Nothing in it is written to after that.
pub(crate) fn runs() -> &'static Path {
    static RUNS: OnceLock<tempfile::TempDir> = OnceLock::new();
    RUNS.get_or_init(|| {
        let folder = tempfile::tempdir().unwrap();
        fs::write(folder.path().join("gauge.csv"), "stage\n0.5\n1.0\n1.5\n2.5\n").unwrap();
        for (name, text) in AIMS.iter().zip([SILL, FLOOD, BALANCE]) {
            fs::write(folder.path().join(format!("{name}.toml")), text).unwrap();
            let output = command(folder.path(), &["tune", &format!("{name}.toml")]).output().unwrap();
            assert!(done(&output), "{}", said(&output));
        }
        folder
    })
    .path()
}

/// The run of a problem.
pub(crate) fn run_of(name: &str) -> PathBuf {
    runs().join(format!("{name}.run"))
}

pub(crate) fn command(folder: &Path, arguments: &[&str]) -> Command {
    let mut command = Command::new(assert_cmd::cargo::cargo_bin!("evenpoise"));
    command.current_dir(folder).args(arguments).stdin(Stdio::null());
    command
}

/// Runs a command to its end, whatever the verdict.
pub(crate) fn finish(folder: &Path, arguments: &[&str]) -> Output {
    let output = command(folder, arguments).output().unwrap();
    assert!(done(&output), "{arguments:?}: {:?} {}", output.status, said(&output));
    output
}

/// What a command that must fail says.
pub(crate) fn refused(folder: &Path, arguments: &[&str]) -> String {
    let output = command(folder, arguments).output().unwrap();
    assert!(matches!(output.status.code(), Some(1 | 2)), "{arguments:?}: {:?}", output.status);
    said(&output)
}

pub(crate) fn done(output: &Output) -> bool {
    matches!(output.status.code(), Some(0 | 3))
}

pub(crate) fn said(output: &Output) -> String {
    String::from_utf8_lossy(&output.stderr).into_owned()
}

pub(crate) fn text(path: &Path) -> String {
    fs::read_to_string(path).unwrap()
}
