//! Exit statuses, and what stands on which stream.

use super::common::{evenpoise, folder, tune};
use predicates::prelude::PredicateBooleanExt;
use predicates::str::contains;
use serde_json::Value;
use std::fs;

#[test]
fn wrong_usage_ends_with_2() {
    let folder = folder();
    for arguments in [
        vec!["tune"],
        vec!["tune", "sill.toml", "--budget", "many"],
        vec!["tune", "sill.toml", "--budget", "99"],
        vec!["tune", "sill.toml", "--family", "cauchy"],
        vec!["tune", "sill.toml", "--defensive", "1"],
        vec!["tune", "sill.toml", "--force", "--resume"],
        vec!["tune", "sill.toml", "--family", "gaussian", "--df", "5"],
        vec!["ponder", "sill.toml"],
        vec![],
    ] {
        evenpoise(folder.path()).args(&arguments).assert().code(2).stdout("");
    }
    evenpoise(folder.path()).args(["tune", "--help"]).assert().success().stdout(contains("--report-share"));
    evenpoise(folder.path()).arg("--version").assert().success().stdout(contains("evenpoise 0."));
}

#[test]
fn a_wrong_problem_is_shown_with_a_caret() {
    let folder = folder();
    let wrong = super::common::SILL.replace("0.4 * depth", "0.4 * deph");
    fs::write(folder.path().join("wrong.toml"), wrong).unwrap();
    let assert = evenpoise(folder.path()).args(["tune", "wrong.toml"]).assert().code(1).stdout("");
    assert.stderr(contains("wrong.toml:8:").and(contains("^")).and(contains("depth")).and(contains("\x1b").not()));
    assert!(!folder.path().join("wrong.run").exists());
    let absent = evenpoise(folder.path()).args(["tune", "absent.toml"]).assert().code(1);
    absent.stderr(contains("absent.toml"));
}

/// A tuning that could not begin leaves no folder behind; one that spent evaluations in vain keeps them.
#[test]
fn a_tuning_that_cannot_begin_leaves_nothing() {
    let folder = folder();
    let assert = evenpoise(folder.path()).args(["tune", "sill.toml", "--budget", "120"]).assert().code(1);
    assert.stderr(contains("too small"));
    assert!(!folder.path().join("sill.run").exists());
    let nowhere = super::common::SILL.replace("[estimates]", "require = [\"slope > 1e6\"]\n[estimates]");
    fs::write(folder.path().join("nowhere.toml"), nowhere).unwrap();
    evenpoise(folder.path()).args(["tune", "nowhere.toml"]).assert().code(1).stderr(contains("missed the target"));
    assert!(folder.path().join("nowhere.run/evaluations/journal").is_file());
}

/// A standard output that takes nothing is an error; one that nobody reads is not.
#[cfg(target_os = "linux")]
#[test]
fn an_output_that_cannot_be_written_is_told() {
    let folder = folder();
    let full = fs::File::options().write(true).open("/dev/full").unwrap();
    let program = assert_cmd::cargo::cargo_bin!("evenpoise");
    let child = std::process::Command::new(program)
        .args(["check", "sill.toml"])
        .current_dir(folder.path())
        .stdout(full)
        .stderr(std::process::Stdio::piped())
        .spawn()
        .unwrap();
    let output = child.wait_with_output().unwrap();
    assert_eq!(output.status.code(), Some(1));
    assert!(String::from_utf8(output.stderr).unwrap().contains("standard output: No space left"));
}

#[test]
fn a_run_is_replaced_only_by_force() {
    let folder = folder();
    tune(folder.path(), &["sill.toml"]);
    let before = super::common::contents(&folder.path().join("sill.run"));
    let refused = evenpoise(folder.path()).args(["tune", "sill.toml", "--seed", "2"]).assert().code(1);
    refused.stderr(contains("--force").and(contains("--resume")));
    assert!(super::common::contents(&folder.path().join("sill.run")) == before);
    tune(folder.path(), &["sill.toml", "--seed", "2", "--force"]);
    assert!(super::common::contents(&folder.path().join("sill.run")) != before);
}

#[test]
fn json_alone_stands_on_standard_output() {
    let folder = folder();
    let output = evenpoise(folder.path()).args(["tune", "sill.toml", "--json"]).output().unwrap();
    let printed: Value = serde_json::from_slice(&output.stdout).unwrap();
    let written: Value =
        serde_json::from_slice(&fs::read(folder.path().join("sill.run/summary.json")).unwrap()).unwrap();
    assert_eq!(printed, written);
    assert_eq!(printed["format"], "evenpoise-summary/1");
    assert!(String::from_utf8(output.stderr).unwrap().contains("Verdict"));
}

/// An expectation of infinite variance: the verdict is unfit, the status says so, and the numbers are marked.
#[test]
fn an_unfit_verdict_ends_with_3() {
    let folder = folder();
    let heavy = super::common::SILL.replace("exp(slope)", "exp(2 * slope^2)");
    fs::write(folder.path().join("heavy.toml"), heavy).unwrap();
    let assert = evenpoise(folder.path()).args(["tune", "heavy.toml"]).assert().code(3);
    assert.stdout(contains("UNFIT").and(contains("NOT TO BE REPORTED")));
    assert!(folder.path().join("heavy.run/proposal.json").is_file());
}

#[test]
fn a_reader_that_has_read_enough_is_no_failure() {
    let folder = folder();
    let command = format!(
        "{} tune sill.toml --json 2>/dev/null | true; echo \"${{PIPESTATUS[0]}}\"",
        assert_cmd::cargo::cargo_bin!("evenpoise").display()
    );
    let output = std::process::Command::new("bash").args(["-c", &command]).current_dir(folder.path()).output().unwrap();
    assert_eq!(String::from_utf8(output.stdout).unwrap().trim(), "0");
}
