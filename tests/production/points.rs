//! Points for other programs: `draw` and `density`.

use super::common::{command, finish, refused, run_of, said, text};
use evenpoise::store::Table;
use std::fs;
use std::io::Read;
use std::process::Stdio;

/// Whoever draws which shard, the points are the same, end to end; the file forms agree; the kept points of an estimate are these.
#[test]
fn shards_of_points_follow_each_other() {
    let folder = tempfile::tempdir().unwrap();
    let at = folder.path();
    for name in ["sill", "flood"] {
        let run = run_of(name).display().to_string();
        let whole = String::from_utf8(finish(at, &["draw", &run, "--draws", "3001"]).stdout).unwrap();
        let mut joined: Vec<String> = Vec::new();
        for shard in ["1/3", "2/3", "3/3"] {
            let out = finish(at, &["draw", &run, "--draws", "3001", "--shard", shard]);
            joined.extend(String::from_utf8(out.stdout).unwrap().lines().skip(1).map(str::to_owned));
        }
        assert!(whole.lines().skip(1).eq(joined.iter().map(String::as_str)), "{name}");
        finish(at, &["draw", &run, "--draws", "3001", "--out", "a.csv"]);
        finish(at, &["draw", &run, "--draws", "3001", "--out", "a.npy"]);
        assert_eq!(text(&at.join("a.csv")), whole);
        let [csv, npy] = ["a.csv", "a.npy"].map(|file| Table::read(&at.join(file)).unwrap());
        assert_eq!(csv.columns, npy.columns);
        finish(at, &["estimate", &run, "--draws", "3001", "--save-points", "kept.csv", "--out", name]);
        let kept = Table::read(&at.join("kept.csv")).unwrap();
        for column in [&csv.names[0], "log_proposal"] {
            assert_eq!(kept.column(column), csv.column(column), "{column}");
        }
        assert_ne!(
            whole,
            String::from_utf8(finish(at, &["draw", &run, "--draws", "3001", "--seed", "5"]).stdout).unwrap()
        );
    }
}

/// A proposal's file without its run says as much of the points, but for what the file cannot know.
#[test]
fn a_proposal_alone_can_be_drawn_from() {
    let folder = tempfile::tempdir().unwrap();
    for (name, same_columns) in [("flood", true), ("sill", false)] {
        let file = folder.path().join(format!("{name}.json"));
        fs::copy(run_of(name).join("proposal.json"), &file).unwrap();
        let of = |what: &str| {
            let out = finish(folder.path(), &["draw", what, "--draws", "200", "--out", "t.csv", "--seed", "3"]);
            assert!(out.stdout.is_empty());
            Table::read(&folder.path().join("t.csv")).unwrap()
        };
        let (alone, run) = (of(&file.display().to_string()), of(&run_of(name).display().to_string()));
        assert_eq!(alone.names == run.names, same_columns, "{:?} {:?}", alone.names, run.names);
        for (k, column) in alone.columns.iter().enumerate() {
            for (a, b) in column.iter().zip(&run.columns[k]) {
                assert!((a - b).abs() <= 1e-10 * b.abs().max(1.0), "{}: {a} {b}", alone.names[k]);
            }
        }
    }
}

/// The density of drawn points is the one written beside them, whatever the order of the columns.
#[test]
fn densities_are_those_of_the_draws() {
    let folder = tempfile::tempdir().unwrap();
    let at = folder.path();
    let run = run_of("sill").display().to_string();
    finish(at, &["draw", &run, "--draws", "500", "--out", "a.csv"]);
    finish(at, &["draw", &run, "--draws", "500", "--out", "a.npy"]);
    let drawn = Table::read(&at.join("a.csv")).unwrap();
    let mut turned = String::from("note,slope,depth\n");
    for i in 0..500 {
        turned.push_str(&format!("7,{:?},{:?}\n", drawn.columns[1][i], drawn.columns[0][i]));
    }
    turned.push_str("7,0.5,-1\n");
    fs::write(at.join("turned.csv"), turned).unwrap();
    for file in ["a.csv", "a.npy", "turned.csv"] {
        finish(at, &["density", &run, file, "--out", "d.csv"]);
        let found = Table::read(&at.join("d.csv")).unwrap();
        assert_eq!(found.names, ["log_proposal", "log_nominal"]);
        for name in ["log_proposal", "log_nominal"] {
            for (a, b) in found.column(name).unwrap().iter().zip(drawn.column(name).unwrap()) {
                assert!((a - b).abs() <= 1e-11 * b.abs().max(1.0), "{file} {name}: {a} {b}");
            }
        }
        if file == "turned.csv" {
            assert_eq!(found.columns[0][500], f64::NEG_INFINITY, "a depth below zero is outside");
        }
    }
    for (content, what) in [
        ("depth,slope\n1,2\n1,deep\n", "line 3"),
        ("depth,slope\n1,2\n,3\n", "line 3"),
        ("depth,tilt\n1,2\n", "no column is named \"slope\""),
    ] {
        fs::write(at.join("wrong.csv"), content).unwrap();
        let said = refused(at, &["density", &run, "wrong.csv"]);
        assert!(said.contains(what) && said.contains("wrong.csv"), "{said}");
    }
    let said = refused(at, &["density", &run_of("flood").display().to_string(), "a.csv"]);
    assert!(said.contains("`stuck` is discrete"), "{said}");
}

/// A reader that has read enough ends the command quietly; a full disk is told.
#[cfg(target_os = "linux")]
#[test]
fn pipes_may_break_and_full_disks_are_told() {
    let folder = tempfile::tempdir().unwrap();
    let run = run_of("sill").display().to_string();
    let mut command_ = command(folder.path(), &["draw", &run, "--draws", "1e9"]);
    let mut child = command_.stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
    let mut some = [0; 4096];
    child.stdout.take().unwrap().read_exact(&mut some).unwrap();
    let output = child.wait_with_output().unwrap();
    assert_eq!((output.status.code(), said(&output).as_str()), (Some(0), ""));
    let full = fs::File::options().write(true).open("/dev/full").unwrap();
    let output = command(folder.path(), &["draw", &run, "--draws", "1e5"]).stdout(full).output().unwrap();
    assert_eq!(output.status.code(), Some(1));
    assert!(said(&output).contains("No space left on device"), "{}", said(&output));
}
