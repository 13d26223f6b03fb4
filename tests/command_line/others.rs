//! `check` and `points`.

use super::common::{SILL, evenpoise, folder};
use evenpoise::store::Table;
use predicates::prelude::PredicateBooleanExt;
use predicates::str::contains;
use std::fs;

const EVERYTHING: &str = r#"
title = "Levels of the Ellenmere reservoir (invented)"
[variables]
inflow = { distribution = "lognormal", mean = 40.0, sd = 9.0, unit = "m3/s" }
outflow = { distribution = "gamma", mean = 30.0, cv = 0.2, unit = "m3/s" }
spread = { distribution = "half-normal", scale = 1.0 }
effect = { each = "station", distribution = "normal", mean = 0.0, sd = "spread" }
idle = { range = [0.0, 1.0], near = 0.5, spread = 0.2 }
[[correlation]]
among = ["inflow", "outflow"]
rank = 0.4
[data]
file = "levels.csv"
missing = ["NA"]
[target]
aim = "density"
log_factor = "sum(log_density_normal(level, 0.01 * (inflow - outflow) + effect[station], 0.3))"
[estimates]
gain = "inflow - outflow"
"#;

#[test]
fn check_shows_the_problem_as_it_was_understood() {
    let folder = folder();
    fs::write(folder.path().join("levels.csv"), "station,level\nAlder,1.2\nBeck,NA\nAlder,0.9\nCarr,1.4\n").unwrap();
    fs::write(folder.path().join("all.toml"), EVERYTHING).unwrap();
    let output = evenpoise(folder.path()).args(["check", "all.toml"]).output().unwrap();
    let shown = String::from_utf8(output.stdout).unwrap();
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    // Pearson's relation for the rank correlation 0.4: scores 2 sin(0.4 pi / 6) = 0.4158.
    for text in [
        "Aim density",
        "effect[Alder]",
        "normal given other variables",
        "0.4000     0.4158",
        "3 rows used, 1 dropped",
        "log_factor",
        "gain",
        "200 trial points",
        "evaluations a second",
        "`idle`",
    ] {
        assert!(shown.contains(text), "{text:?} is missing from\n{shown}");
    }
    assert!(shown.lines().all(|line| line.chars().count() <= 80), "{shown}");
    evenpoise(folder.path()).args(["check", "sill.toml"]).assert().success().stdout(contains("Nothing."));
    let outside = SILL.replace("-2 * (slope - 0.4 * depth)^2\"", "-slope^2 - depth\"\nrequire = [\"depth > 90\"]");
    fs::write(folder.path().join("outside.toml"), outside).unwrap();
    evenpoise(folder.path())
        .args(["check", "outside.toml"])
        .assert()
        .success()
        .stdout(contains("lie outside the support"));
}

/// Means of even points are the weighted means, within what resampling adds: less than one copy a draw.
#[test]
fn even_points_have_the_weighted_means() {
    let folder = folder();
    evenpoise(folder.path()).args(["tune", "sill.toml"]).assert().success();
    let even = ["points", "sill.run", "--even", "4e3"];
    let said = evenpoise(folder.path())
        .args(even)
        .assert()
        .success()
        .stdout(contains("4,000 points").and(contains("distinct")));
    drop(said);
    let first = fs::read(folder.path().join("sill.run/even.csv")).unwrap();
    let even_points = Table::read(&folder.path().join("sill.run/even.csv")).unwrap();
    let weighted = Table::read(&folder.path().join("sill.run/points.csv")).unwrap();
    assert_eq!(even_points.names, ["depth", "slope", "head", "weight_"]);
    assert_eq!(even_points.len(), 4000);
    for name in ["depth", "slope"] {
        let mean = even_points.column(name).unwrap().iter().sum::<f64>() / 4000.0;
        let pairs = weighted.column(name).unwrap().iter().zip(weighted.column("weight").unwrap());
        let wanted: f64 = pairs.map(|(x, w)| x * w).sum();
        // Systematic remainders: a standard deviation of at most 0.5 copies for each of 750 draws of spread about one.
        assert!((mean - wanted).abs() < 4.5 * 0.5 * 750.0_f64.sqrt() / 4000.0 * 1.5, "{name}: {mean} {wanted}");
    }
    evenpoise(folder.path()).args(even).assert().success();
    assert!(fs::read(folder.path().join("sill.run/even.csv")).unwrap() == first);
    evenpoise(folder.path()).args(even).args(["--seed", "9", "--out", "other.npy"]).assert().success();
    let other = Table::read(&folder.path().join("other.npy")).unwrap();
    assert_eq!((other.len(), other.columns.len()), (4000, 4));
    assert_ne!(other.columns, even_points.columns);
}
