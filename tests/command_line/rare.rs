//! Runs of a probability and of an expectation: their figures, tables and report.

use super::common::{contents, evenpoise, folder};
use evenpoise::store::Table;
use serde_json::Value;
use std::fs;

const OVERTOPPING: &str = r#"
title = "Overtopping (invented)"
[variables]
inflow = { distribution = "gumbel", mean = 40.0, sd = 9.0, unit = "m3/s" }
gate = { distribution = "beta", a = 8.0, b = 2.0 }
score_distance = { distribution = "poisson", mean = 3.0 }
[[correlation]]
among = ["inflow", "gate"]
score = 0.3
[target]
aim = "probability"
event = "0.05 * inflow / gate + 0.1 * score_distance > 7"
[tuning]
budget = 2500
"#;

const NAMES: [&str; 4] = ["convergence", "margin", "event", "importance"];

/// A folder with the run of an event and that of an integrand.
fn runs() -> tempfile::TempDir {
    let folder = folder();
    let mean = OVERTOPPING
        .replace("\"probability\"", "\"expectation\"")
        .replace("event = \"0.05", "integrand = \"max(0, 0.05")
        .replace(" > 7", " - 5)");
    for (name, text) in [("over.toml", OVERTOPPING), ("mean.toml", &mean)] {
        fs::write(folder.path().join(name), text).unwrap();
        let output = evenpoise(folder.path()).args(["tune", name]).output().unwrap();
        assert!(matches!(output.status.code(), Some(0 | 3)), "{}", String::from_utf8_lossy(&output.stderr));
    }
    folder
}

#[test]
fn rare_figures_are_in_the_run_and_are_drawn_again_from_the_files() {
    let folder = runs();
    for run in ["over.run", "mean.run"] {
        let files = contents(&folder.path().join(run));
        let report = String::from_utf8(files["report.html"].clone()).unwrap();
        let captions = String::from_utf8(files["figures/captions.md"].clone()).unwrap();
        let markdown = String::from_utf8(files["report.md"].clone()).unwrap();
        for name in NAMES {
            assert!(files.contains_key(&format!("figures/{name}.csv")), "{run} {name}");
            assert!(files[&format!("figures/{name}.png")].starts_with(b"\x89PNG"));
            assert!(captions.contains(&format!("## {name}\n")) && markdown.contains(&format!("(figures/{name}.png)")));
        }
        assert!(report.contains("alt=\"Bar chart: the signed squared direction cosine"));
        evenpoise(folder.path()).args(["figures", run, "--out", "again"]).assert().success();
        for (name, bytes) in files {
            if let Some(name) = name.strip_prefix("figures/") {
                assert!(bytes == fs::read(folder.path().join("again").join(name)).unwrap(), "{run}: {name} differs");
            }
        }
    }
    let chosen = ["figures", "over.run", "--out", "chosen", "--format", "svg", "--width", "9cm"];
    evenpoise(folder.path()).args(chosen).args(["--variables", "gate,inflow"]).assert().success();
    let plane = fs::read_to_string(folder.path().join("chosen/event.csv")).unwrap();
    assert!(plane.starts_with("series,number,gate,inflow\n"), "{}", plane.lines().next().unwrap());
    assert!(fs::read_to_string(folder.path().join("chosen/margin.svg")).unwrap().contains("<svg"));
}

/// The course ends with the answer; margins and distances are those of the draws; bars are the squares of the nearest point.
#[test]
fn the_numbers_behind_rare_figures_are_those_of_the_run() {
    let folder = runs();
    let run = folder.path().join("over.run");
    let summary: Value = serde_json::from_slice(&fs::read(run.join("summary.json")).unwrap()).unwrap();
    let last_of = |name: &str| {
        let course = Table::read(&run.join("figures/convergence.csv")).unwrap();
        *course.column(name).unwrap().last().unwrap()
    };
    let answer = &summary["probability"];
    assert_eq!(last_of("estimate"), answer["value"].as_f64().unwrap());
    assert_eq!(last_of("lower"), answer["interval_95"][0].as_f64().unwrap());
    assert_eq!(last_of("spent"), 2500.0);

    let points = Table::read(&run.join("points.csv")).unwrap();
    assert_eq!(points.names[2], "score_distance_", "a variable with the name of a column of the table's own");
    let (distance, value) = (points.column("score_distance").unwrap(), points.column("value").unwrap());
    let target = points.column("log_target").unwrap();
    for i in 0..points.len() {
        assert_eq!(value[i] <= 0.0, target[i] > f64::NEG_INFINITY, "margin {} of draw {i}", value[i]);
    }
    // The nearest draw of the event is not nearer than the nearest design point, but for the tolerance of the search.
    let design = summary["survey"]["points"].as_array().unwrap();
    let nearest = design
        .iter()
        .min_by(|a, b| a["distance"].as_f64().unwrap().total_cmp(&b["distance"].as_f64().unwrap()))
        .unwrap();
    let inside = (0..points.len()).filter(|&i| value[i] <= 0.0).map(|i| distance[i]).fold(f64::INFINITY, f64::min);
    assert!(inside > nearest["distance"].as_f64().unwrap() - 0.02, "{inside} {nearest}");
    assert_eq!(nearest["natural"].as_array().unwrap().len(), 3);
    assert!(nearest["first_order_probability"].as_f64().unwrap() > 0.0);

    let bars = fs::read_to_string(run.join("figures/importance.csv")).unwrap();
    let squares: f64 = bars.lines().skip(1).map(|line| line.split(',').nth(2).unwrap().parse::<f64>().unwrap()).sum();
    assert!((squares - 1.0).abs() < 1e-9, "{squares}");
    let captions = fs::read_to_string(run.join("figures/captions.md")).unwrap();
    assert!(captions.contains("first-order probability") && captions.contains("a by-product of the search"));
}
