//! `[exchange]`: points go out, a script answers them, and the run goes on.

use crate::common::{WEIR, evenpoise, flood, there, tune, weir};
use std::fs;
use std::path::Path;

const TABLE: &str = "[exchange]\nreturns = [\"flow\"]\n";

/// Starts or goes on; the exit status and what was said.
fn step(folder: &Path, arguments: &[&str]) -> (i32, String) {
    let output = evenpoise(folder).arg("tune").args(arguments).output().unwrap();
    (output.status.code().unwrap(), String::from_utf8_lossy(&output.stderr).into_owned())
}

/// Answers a file as a laboratory would: last row first, columns turned about, `each` says what stands in the cell.
pub(crate) fn answer(run: &Path, number: u32, each: impl Fn(f64) -> String) {
    let asked = fs::read_to_string(run.join(format!("asked/{number:04}.csv"))).unwrap();
    let mut lines = asked.lines();
    assert_eq!(lines.next(), Some("id,depth,width"));
    let mut rows: Vec<String> = lines
        .map(|line| {
            let cells: Vec<&str> = line.split(',').collect();
            let (d, w): (f64, f64) = (cells[1].parse().unwrap(), cells[2].parse().unwrap());
            format!("{},{}", each(1.7 * w * d.powf(1.5)), cells[0])
        })
        .collect();
    rows.reverse();
    fs::write(run.join(format!("answered/{number:04}.csv")), format!("flow,id\n{}\n", rows.join("\n"))).unwrap();
}

#[test]
fn an_exchange_ends_with_the_bytes_of_a_program() {
    if there("python3") {
        exchanged(weir);
    }
}

#[test]
fn so_does_the_exchange_of_a_rare_event() {
    if there("python3") {
        exchanged(flood);
    }
}

fn exchanged(problem: fn(&str) -> String) {
    let folder = tempfile::tempdir().unwrap();
    let folder = folder.path();
    fs::write(folder.join("weir.py"), WEIR).unwrap();
    fs::write(
        folder.join("program.toml"),
        problem("[program]\nrun = [\"python3\", \"weir.py\"]\nreturns = [\"flow\"]\n"),
    )
    .unwrap();
    fs::write(folder.join("weir.toml"), problem(TABLE)).unwrap();
    tune(folder, &["program.toml"]);
    let run = folder.join("weir.run");
    let (mut status, mut said) = step(folder, &["weir.toml"]);
    let mut asked = 0;
    while status == 4 {
        asked += 1;
        assert!(said.contains(&format!("weir.run/asked/{asked:04}.csv")), "{said}");
        assert!(said.contains("evenpoise tune weir.run --resume"), "{said}");
        assert!(asked < 60);
        // Nothing is asked twice, and nothing goes on without an answer.
        if asked == 2 {
            assert_eq!(step(folder, &["weir.toml", "--resume"]).0, 4);
            assert!(!run.join("asked/0003.csv").exists());
        }
        answer(&run, asked, |flow| format!("{flow}"));
        (status, said) = step(folder, &[if asked % 2 == 0 { "weir.toml" } else { "weir.run" }, "--resume"]);
    }
    assert!(status == 0 || status == 3, "{status}: {said}");
    // A survey of some twenty steps, rounds, confirm and report draws; estimates are not asked again.
    assert!(asked <= 40, "{asked} files");
    let proposal = |run: &str| fs::read(folder.join(run).join("proposal.json")).unwrap();
    assert!(proposal("weir.run") == proposal("program.run"));
    let points = |run: &str| fs::read(folder.join(run).join("points.csv")).unwrap();
    assert!(points("weir.run") == points("program.run"));
}

#[test]
fn answers_that_cannot_be_used_are_told() {
    let folder = tempfile::tempdir().unwrap();
    let folder = folder.path();
    fs::write(folder.join("weir.toml"), weir(TABLE)).unwrap();
    let (status, said) = step(folder, &["weir.toml"]);
    assert_eq!(status, 4, "{said}");
    let run = folder.join("weir.run");
    let path = run.join("answered/0001.csv");
    for (text, part) in [
        ("id,flow\n1,2\n1,3\n", "line 3: the id 1 stands in line 2 already"),
        ("id,flow\n0,2\n", "line 2: the id \"0\" was not asked"),
        ("id,level\n1,2\n", "line 1: there is no column `flow`"),
        ("id,flow\n1,high\n", "line 2: \"high\" in the column `flow` is no number"),
    ] {
        fs::write(&path, text).unwrap();
        let (status, said) = step(folder, &["weir.toml", "--resume"]);
        assert!(status == 1 && said.contains("answered/0001.csv") && said.contains(part), "{status}: {said}");
    }
    assert!(run.join("asked/0001.csv").exists());
    fs::write(&path, "id,flow\n1,2\n").unwrap();
    let (status, said) = step(folder, &["weir.toml", "--resume"]);
    assert!(status == 4 && said.contains("have no row yet (id 2, 3, "), "{status}: {said}");
    // Blank cells are failures: answered, and the next file is asked.
    answer(&run, 1, |flow| if flow > 4.0 { String::new() } else { format!("{flow}") });
    assert_eq!(step(folder, &["weir.toml", "--resume"]).0, 4);
    assert!(run.join("asked/0002.csv").exists());
}

#[test]
fn check_says_what_would_be_asked() {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("weir.toml"), weir(TABLE)).unwrap();
    let output = evenpoise(folder.path()).args(["check", "weir.toml"]).output().unwrap();
    let said = String::from_utf8_lossy(&output.stdout).into_owned();
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    for part in ["id,depth,width", "id,flow", "asked/0001.csv", "answered/0001.csv"] {
        assert!(said.contains(part), "{said}");
    }
    assert!(said.lines().all(|line| line.chars().count() <= 80), "{said}");
}
