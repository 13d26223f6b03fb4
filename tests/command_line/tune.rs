//! `tune`: files, bytes, tables.

use super::common::{assert_same, contents, evenpoise, folder, tune};
use evenpoise::store::{Table, read_proposal};
use serde_json::Value;
use std::fs;

#[test]
fn a_tuning_writes_its_files_and_shows_its_verdict() {
    let folder = folder();
    let output = evenpoise(folder.path()).args(["tune", "sill.toml"]).output().unwrap();
    let (out, err) = (String::from_utf8(output.stdout).unwrap(), String::from_utf8(output.stderr).unwrap());
    let run = folder.path().join("sill.run");
    let files = contents(&run);
    for name in [
        "problem.toml",
        "rounds.csv",
        "proposal.json",
        "points.csv",
        "summary.json",
        "report.html",
        "report.md",
        "figures/captions.md",
        "figures/progress.png",
        "figures/progress.csv",
        "figures/evenness.png",
        "figures/variables.png",
        "figures/heavy.csv",
    ] {
        assert!(files.contains_key(name), "{name} is missing from {:?}", files.keys());
    }
    assert!(run.join("timings.json").is_file() && run.join("evaluations/journal").is_file());
    assert!(!run.join("lock").exists());
    let summary: Value = serde_json::from_slice(&files["summary.json"]).unwrap();
    let word = summary["verdict"].as_str().unwrap();
    assert_eq!(output.status.code(), Some(if word == "unfit" { 3 } else { 0 }));
    assert!(out.contains(&word.to_uppercase()) && out.contains("head") && out.contains("weight variance"), "{out}");
    assert!(err.contains("Survey") && err.contains("round"), "{err}");
    for line in out.lines().chain(err.lines()) {
        assert!(line.chars().count() <= 80 && !line.contains('\x1b'), "{line:?}");
    }
    let log = fs::read_to_string(run.join("log.txt")).unwrap();
    assert!(out.lines().chain(err.lines()).all(|line| log.contains(line)), "{log}");
}

/// Weights of the report draws sum to one; weighted means are the summary's estimates; log weights carry the constant.
/// A variable or estimate with the name of a column of the table's own gets an underscore.
#[test]
fn the_files_agree_with_each_other() {
    let folder = folder();
    tune(folder.path(), &["sill.toml"]);
    let run = folder.path().join("sill.run");
    let points = Table::read(&run.join("points.csv")).unwrap();
    assert_eq!(points.names, ["depth", "slope", "head", "weight_", "log_target", "log_proposal", "weight"]);
    let summary: Value = serde_json::from_slice(&fs::read(run.join("summary.json")).unwrap()).unwrap();
    let column = |name: &str| points.column(name).unwrap();
    let weights = column("weight");
    assert!((weights.iter().sum::<f64>() - 1.0).abs() < 1e-12);
    for (name, key) in [("head", "head"), ("weight_", "weight")] {
        let mean: f64 = weights.iter().zip(column(name)).map(|(w, f)| w * f).sum();
        let told = summary["estimates"][key]["value"].as_f64().unwrap();
        assert!((mean - told).abs() < 1e-9 * told.abs(), "{name}: {mean} {told}");
    }
    // In natural units: the constant of this target is known. depth is marginal in its own gamma distribution, and the
    // integral over slope of exp(-2 (slope - ...)^2) is sqrt(pi / 2) for every depth.
    let ratio = column("log_target").iter().zip(column("log_proposal")).map(|(t, q)| (t - q).exp());
    let normaliser = ratio.sum::<f64>() / points.len() as f64;
    let se = summary["log_normaliser"]["se"].as_f64().unwrap();
    assert!((normaliser.ln() - 0.5 * (std::f64::consts::PI / 2.0).ln()).abs() < 5.0 * se + 1e-9, "{normaliser} {se}");
    let proposal = read_proposal(&run).unwrap();
    assert_eq!(proposal.verdict.as_deref(), summary["verdict"].as_str());
    assert_eq!(proposal.scores.as_ref().unwrap().ess_fraction, summary["ess_fraction"].as_f64());
    assert_eq!(summary["evaluations"], 3000);
    assert_eq!(proposal.made_by.digests["problem"], summary["digests"]["problem"]);
}

#[test]
fn the_proposal_reads_back_bit_for_bit() {
    let folder = folder();
    tune(folder.path(), &["sill.toml"]);
    let path = folder.path().join("sill.run/proposal.json");
    let again = folder.path().join("again.json");
    read_proposal(&path).unwrap().write(&again).unwrap();
    assert_eq!(fs::read(&path).unwrap(), fs::read(&again).unwrap());
}

#[test]
fn the_number_of_threads_changes_no_byte() {
    let folder = folder();
    for threads in ["1", "2"] {
        tune(folder.path(), &["sill.toml", "--threads", threads, "--out", threads]);
    }
    assert_same(&folder.path().join("1"), &folder.path().join("2"));
}

/// Options win over the file, are written into the run's copy of the problem, and "auto" takes a key back.
#[test]
fn options_win_over_the_file() {
    let folder = folder();
    let text = format!("{}df = 7.0\nseed = 3\n", super::common::SILL);
    fs::write(folder.path().join("heavy.toml"), text).unwrap();
    let options =
        ["heavy.toml", "--budget", "2.5e3", "--df", "auto", "--family", "gaussian", "--coordinates", "standard-normal"];
    tune(folder.path(), &options);
    let copy = fs::read_to_string(folder.path().join("heavy.run/problem.toml")).unwrap();
    for line in
        ["budget = 2500", "df = \"auto\"", "family = \"gaussian\"", "seed = 3", "coordinates = \"standard-normal\""]
    {
        assert!(copy.contains(line), "{copy}");
    }
    let proposal = read_proposal(&folder.path().join("heavy.run")).unwrap();
    assert_eq!(proposal.variables[0].coordinate, "standard-normal");
    assert_eq!(proposal.made_by.evaluations, 2500);
}

/// The figures drawn again from the files are the ones that the tuning drew, to the last byte.
#[test]
fn figures_are_drawn_again_from_the_files() {
    let folder = folder();
    tune(folder.path(), &["sill.toml"]);
    let again = ["figures", "sill.run", "--out", "again"];
    evenpoise(folder.path()).args(again).assert().success();
    for (name, bytes) in contents(&folder.path().join("sill.run")) {
        if let Some(name) = name.strip_prefix("figures/") {
            assert!(bytes == fs::read(folder.path().join("again").join(name)).unwrap(), "{name} differs");
        }
    }
    let small = ["figures", "sill.run", "--out", "small", "--format", "svg", "--width", "80mm", "--variables", "slope"];
    evenpoise(folder.path()).args(small).assert().success();
    let svg = fs::read_to_string(folder.path().join("small/variables.svg")).unwrap();
    assert!(svg.starts_with("<svg") || svg.starts_with("<?xml"));
    let numbers = fs::read_to_string(folder.path().join("small/variables.csv")).unwrap();
    assert!(numbers.lines().skip(1).all(|line| line.starts_with("slope,")));
}
