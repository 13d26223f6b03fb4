//! Shards pooled are the single run.

use super::common::{AIMS, command, finish, run_of, text};
use std::fs;

/// 64 shards of one run, pooled, are the file of the single run, to the last byte, for every aim; the number of threads changes
/// nothing either, nor does the order of the files.
#[test]
fn sixty_four_shards_are_the_single_run() {
    for aim in AIMS {
        let folder = tempfile::tempdir().unwrap();
        let run = run_of(aim).display().to_string();
        // An aim without estimates has nothing to give quantiles of.
        let quantiles: &[&str] = if aim == "balance" { &[] } else { &["--quantiles", "0.1,50%"] };
        let common = [&["estimate", &run, "--draws", "5000"][..], quantiles].concat();
        finish(folder.path(), &[&common[..], &["--threads", "1", "--out", "single"]].concat());
        for index in 1..=64 {
            let shard = format!("{index}/64");
            finish(folder.path(), &[&common[..], &["--shard", &shard, "--out", "shards"]].concat());
        }
        let shards = fs::read_dir(folder.path().join("shards")).unwrap();
        let mut files: Vec<String> = shards.map(|e| e.unwrap().path().display().to_string()).collect();
        assert_eq!(files.len(), 64, "a shard leaves one file");
        files.sort();
        files.reverse();
        let mut pool = command(folder.path(), &["pool", "--out", "pooled"]);
        assert!(matches!(pool.args(&files).output().unwrap().status.code(), Some(0 | 3)));
        let [single, pooled] = ["single", "pooled"].map(|name| text(&folder.path().join(name).join("estimate.json")));
        assert!(single == pooled, "{aim}: the pooled file differs from the single one");
        assert!(single.contains("\"index\": 1") && single.contains("\"of\": 1"));
    }
}

/// The answer of production is the tuning's, within their errors (4.5 of them: false alarm 7e-6 each), and better known.
#[test]
fn production_agrees_with_the_tuning() {
    for (aim, key) in [("sill", "log_normaliser"), ("flood", "probability"), ("balance", "expectation")] {
        let folder = tempfile::tempdir().unwrap();
        let run = run_of(aim);
        finish(folder.path(), &["estimate", &run.display().to_string(), "--draws", "2e4", "--out", "."]);
        let read = |path| -> serde_json::Value { serde_json::from_str(&text(path)).unwrap() };
        let (estimate, summary) = (read(&folder.path().join("estimate.json")), read(&run.join("summary.json")));
        let pair = |v: &serde_json::Value| [&v[key]["value"], &v[key]["se"]].map(|x| x.as_f64().unwrap());
        let ([a, se_a], [b, se_b]) = (pair(&estimate), pair(&summary));
        assert!((a - b).abs() < 4.5 * (se_a * se_a + se_b * se_b).sqrt(), "{aim}: {a} ± {se_a}, {b} ± {se_b}");
        assert!(se_a < 1.1 * se_b, "{aim}: {se_a} {se_b}");
        assert!(
            folder.path().join("figures/course.png").is_file() && folder.path().join("figures/course.csv").is_file()
        );
        assert_eq!(folder.path().join("figures/bands-flow.png").is_file(), aim == "sill");
        assert!(!folder.path().join("state.json").exists() && !folder.path().join("lock").exists());
    }
}

/// Every line fits 80 columns, and the answer stands in it with its verdict.
#[test]
fn the_table_fits_a_terminal() {
    let folder = tempfile::tempdir().unwrap();
    for aim in AIMS {
        let run = run_of(aim).display().to_string();
        let out = finish(folder.path(), &["estimate", &run, "--draws", "3000", "--force", "--out", "e"]);
        let shown = String::from_utf8(out.stdout).unwrap();
        assert!(shown.contains("Verdict   ") && shown.contains("effective draws"), "{shown}");
        let tables = ["Estimates", "within the event", "expectation"];
        assert!(tables.iter().any(|title| shown.contains(title)));
        assert!(shown.lines().all(|line| line.chars().count() <= 80), "{shown}");
        let planned = finish(folder.path(), &["plan", &run, "--relative-error", "1%", "--machines", "3"]);
        let planned = String::from_utf8(planned.stdout).unwrap();
        let own = |line: &&str| !line.starts_with("Next") && !line.contains(".run:");
        assert!(planned.lines().filter(own).all(|line| line.chars().count() <= 80), "{planned}");
        assert!(planned.contains("--shard I/3"), "{planned}");
    }
}

/// Two stages: a pilot fixes the number, other draws make the estimate, and an aim that is missed is told with what to do.
#[test]
fn a_relative_error_is_aimed_at_in_two_stages() {
    let folder = tempfile::tempdir().unwrap();
    let run = run_of("flood").display().to_string();
    finish(folder.path(), &["estimate", &run, "--relative-error", "3%", "--out", "aimed"]);
    let value: serde_json::Value = serde_json::from_str(&text(&folder.path().join("aimed/estimate.json"))).unwrap();
    let draws = value["pilot"]["draws"].as_u64().unwrap();
    assert_eq!(value["draws"].as_u64(), Some(draws));
    assert!(value["pilot"]["pilot_draws"].as_u64().unwrap() >= 1000);
    assert!(value["probability"]["cv"].as_f64().unwrap() < 0.04);
    // The second stage is what a run of that number is, and knows nothing of the pilot.
    finish(folder.path(), &["estimate", &run, "--draws", &draws.to_string(), "--out", "plain"]);
    let plain: serde_json::Value = serde_json::from_str(&text(&folder.path().join("plain/estimate.json"))).unwrap();
    assert_eq!(value["probability"], plain["probability"]);
    assert_ne!(value["pilot"], plain["pilot"]);
}

/// A run may end by time: whatever it has made by then is an answer.
#[test]
fn a_run_may_end_by_time() {
    let folder = tempfile::tempdir().unwrap();
    let run = run_of("balance").display().to_string();
    finish(folder.path(), &["estimate", &run, "--time", "1s", "--out", "timed"]);
    let value: serde_json::Value = serde_json::from_str(&text(&folder.path().join("timed/estimate.json"))).unwrap();
    let (draws, answer) = (value["draws"].as_u64().unwrap(), &value["expectation"]);
    assert!(draws > 0 && answer["value"].is_number(), "{draws} draws, {answer}");
}
