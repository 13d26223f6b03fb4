//! Production and raised budgets with models outside the file.

use crate::common::{WEIR, evenpoise, flood, there, tune, weir};
use crate::exchange::answer;
use std::fs;
use std::path::Path;

const PROGRAM: &str = "[program]\nrun = [\"python3\", \"weir.py\"]\nreturns = [\"flow\"]\n";

/// The exit status of a command, and what it said.
fn said(folder: &Path, arguments: &[&str]) -> (Option<i32>, String) {
    let output = evenpoise(folder).args(arguments).output().unwrap();
    (output.status.code(), String::from_utf8_lossy(&output.stderr).into_owned())
}

fn folder_with(model: &str, problem: &str) -> tempfile::TempDir {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("weir.py"), model).unwrap();
    fs::write(folder.path().join("weir.toml"), problem).unwrap();
    folder
}

#[test]
fn an_estimate_is_the_same_by_program_and_by_exchange() {
    if !there("python3") {
        return;
    }
    let folder = folder_with(WEIR, &flood(PROGRAM));
    let folder = folder.path();
    tune(folder, &["weir.toml"]);
    let (status, told) = said(folder, &["estimate", "weir.run", "--draws", "3000", "--save-points", "points.csv"]);
    assert!(matches!(status, Some(0 | 3)), "{status:?}: {told}");
    // Every kept estimate is what the program answers: 1.7 w d^1.5.
    let points = fs::read_to_string(folder.join("points.csv")).unwrap();
    let names: Vec<&str> = points.lines().next().unwrap().split(',').collect();
    let column = |name: &str| names.iter().position(|known| *known == name).unwrap();
    let (depth, width, flow) = (column("depth"), column("width"), column("flow_then"));
    assert_eq!(points.lines().count(), 3001);
    for row in points.lines().skip(1) {
        let cells: Vec<f64> = row.split(',').map(|cell| cell.parse().unwrap_or(f64::NAN)).collect();
        assert!((cells[flow] - 1.7 * cells[width] * cells[depth].powf(1.5)).abs() < 1e-9, "{row}");
    }

    fs::write(folder.join("elsewhere.toml"), flood("[exchange]\nreturns = [\"flow\"]\n")).unwrap();
    let command = ["estimate", "elsewhere.toml", "--proposal", "weir.run", "--draws", "3000", "--out", "elsewhere"];
    let (status, told) = said(folder, &command);
    assert!(status == Some(4) && told.contains("3000 points are asked in"), "{status:?}: {told}");
    assert!(told.contains("--out elsewhere --resume"), "{told}");
    answer(&folder.join("elsewhere"), 1, |flow| format!("{flow}"));
    let (status, told) = said(folder, &[command.as_slice(), &["--resume"]].concat());
    assert!(matches!(status, Some(0 | 3)), "{status:?}: {told}");
    let sums = |path: &str| fs::read_to_string(folder.join(path)).unwrap();
    assert!(sums("elsewhere/estimate.json") == sums("weir.run/estimate/estimate.json"));

    let timed = ["estimate", "elsewhere.toml", "--proposal", "weir.run", "--time", "10s", "--out", "timed"];
    let (status, told) = said(folder, &timed);
    assert!(status == Some(2) && told.contains("--time has no meaning here"), "{status:?}: {told}");
}

#[test]
fn a_raised_budget_goes_on_with_a_program() {
    if !there("python3") {
        return;
    }
    let folder = folder_with(WEIR, &weir(PROGRAM));
    let folder = folder.path();
    tune(folder, &["weir.toml"]);
    let read = |name: &str| fs::read_to_string(folder.join("weir.run").join(name)).unwrap();
    tune(folder, &["weir.run", "--resume", "--budget", "2400"]);
    let summary: serde_json::Value = serde_json::from_str(&read("summary.json")).unwrap();
    assert_eq!(summary["extended_from"][0]["budget"], 900, "{}", summary["extended_from"]);
    // Out of the journal, without asking a point: the same bytes.
    let (proposal, points) = (read("proposal.json"), read("points.csv"));
    fs::remove_file(folder.join("weir.run/points.csv")).unwrap();
    tune(folder, &["weir.run", "--resume"]);
    assert!(read("proposal.json") == proposal && read("points.csv") == points);
}

#[test]
fn a_program_with_derivatives_tunes_and_is_resumed() {
    if !there("python3") {
        return;
    }
    let model = "import sys\nfor line in sys.stdin:\n    if line.split():\n        d, w = map(float, line.split())\n        \
         print(repr(1.7 * w * d ** 1.5), repr(2.55 * w * d ** 0.5), repr(1.7 * d ** 1.5), flush=True)\n";
    let folder = folder_with(model, &weir(&format!("{PROGRAM}gradient = true\n")));
    let folder = folder.path();
    tune(folder, &["weir.toml"]);
    let read = |name: &str| fs::read_to_string(folder.join("weir.run").join(name)).unwrap();
    let (proposal, points) = (read("proposal.json"), read("points.csv"));
    fs::remove_file(folder.join("weir.run/points.csv")).unwrap();
    tune(folder, &["weir.run", "--resume"]);
    assert!(read("proposal.json") == proposal && read("points.csv") == points);
    let timings: serde_json::Value = serde_json::from_str(&read("timings.json")).unwrap();
    // Everything came out of the journal.
    let asked: f64 = timings["stages"].as_array().unwrap().iter().map(|s| s["model_seconds"].as_f64().unwrap()).sum();
    assert_eq!(asked, 0.0);
}
