//! `compare` from end to end.

use super::common::{assert_same, evenpoise, folder};
use super::schema::{check, schema};
use serde_json::Value;
use std::fs;

#[test]
fn a_comparison_is_written_told_and_repeated_to_the_byte() {
    let folder = folder();
    let path = folder.path();
    let tuned = evenpoise(path).args(["tune", "sill.toml", "--budget", "1500"]).output().unwrap();
    assert!(path.join("sill.run/proposal.json").is_file(), "{}", String::from_utf8_lossy(&tuned.stderr));
    let options = ["sill.toml", "--budget", "6000", "--df", "6", "--proposal", "sill.run"];
    let output = evenpoise(path).arg("compare").args(options).output().unwrap();
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    let shown = String::from_utf8(output.stdout).unwrap();
    assert!(shown.lines().all(|line| line.chars().count() <= 80), "{shown}");
    for text in ["Gaussian", "Student-t, fitted", "Student-t, df 6", "Moment matching", "sill.run", "Tails     "] {
        assert!(shown.contains(text), "{text} in {shown}");
    }
    let run = path.join("sill.compare");
    for name in ["report.html", "report.md", "log.txt", "problem.toml", "figures/captions.md"] {
        assert!(run.join(name).is_file(), "{name}");
    }
    for name in ["tails", "degrees-of-freedom", "errors", "radial-tails"] {
        assert!(run.join(format!("figures/{name}.png")).is_file(), "{name}");
        assert!(run.join(format!("figures/{name}.csv")).is_file(), "{name}");
    }
    let file: Value = serde_json::from_slice(&fs::read(run.join("comparison.json")).unwrap()).unwrap();
    check(&schema("comparison", path), &file, "comparison");
    assert!(file["evaluations"].as_u64().unwrap() <= 6000);

    // A comparison is only replaced by force; elsewhere the same wishes leave the same bytes.
    let again = evenpoise(path).arg("compare").args(options).output().unwrap();
    assert_eq!(again.status.code(), Some(1));
    let json = evenpoise(path).arg("compare").args(options).args(["--out", "b.compare", "--json"]).output().unwrap();
    let printed: Value = serde_json::from_slice(&json.stdout).unwrap();
    assert_eq!(printed, file);
    assert_same(&run, &path.join("b.compare"));
}

#[test]
fn a_proposal_of_another_problem_is_refused() {
    let folder = folder();
    let path = folder.path();
    evenpoise(path).args(["tune", "sill.toml", "--budget", "1500"]).output().unwrap();
    let text = fs::read_to_string(path.join("sill.toml")).unwrap();
    fs::write(path.join("other.toml"), text.replace("slope", "incline")).unwrap();
    let output = evenpoise(path).args(["compare", "other.toml", "--proposal", "sill.run"]).output().unwrap();
    assert_eq!(output.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&output.stderr).contains("other variables or coordinates"));
    assert!(!path.join("other.compare").exists());
}
