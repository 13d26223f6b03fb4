//! Whole runs with a program: workers that are killed, runs that are interrupted, changed programs.

use crate::common::{WEIR, evenpoise, there, tune, weir};
use std::fs;
use std::path::Path;
use std::process::{Command, Stdio};
use std::thread::sleep;
use std::time::{Duration, Instant};

fn program(more: &str) -> String {
    weir(&format!("[program]\nrun = [\"python3\", \"weir.py\"]\nreturns = [\"flow\"]\n{more}"))
}

/// The weir with a pause at each point, and the numbers of its processes in a file.
fn slow_weir(pause: f64) -> String {
    let loop_begins = "for line in sys.stdin:";
    WEIR.replace(
        "import sys\n",
        &format!("import os, sys, time\nopen('pids', 'a').write(f'{{os.getpid()}}\\n')\n{loop_begins}\n"),
    )
    .replacen(&format!("{loop_begins}\n{loop_begins}\n"), &format!("{loop_begins}\n"), 1)
    .replace("    if line.split():\n", &format!("    if line.split():\n        time.sleep({pause})\n"))
}

fn proposal(folder: &Path, run: &str) -> Vec<u8> {
    fs::read(folder.join(run).join("proposal.json")).unwrap()
}

fn folder_with(text: &str) -> tempfile::TempDir {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("weir.py"), text).unwrap();
    folder
}

#[test]
fn workers_and_batches_change_no_byte() {
    if !there("python3") {
        return;
    }
    let folder = folder_with(WEIR);
    let folder = folder.path();
    for (name, more) in [("a", "workers = 1\n"), ("b", "workers = 3\n"), ("c", "workers = 2\nbatch = 7\n")] {
        fs::write(folder.join(format!("{name}.toml")), program(more)).unwrap();
        tune(folder, &[&format!("{name}.toml")]);
    }
    for other in ["b.run", "c.run"] {
        assert!(proposal(folder, "a.run") == proposal(folder, other));
        let read = |run: &str, file: &str| fs::read(folder.join(run).join(file)).unwrap();
        assert!(read("a.run", "summary.json") == read(other, "summary.json"));
        assert!(read("a.run", "points.csv") == read(other, "points.csv"));
    }
    // The program's estimates come out of the journal: a finished run is written again without asking a single point.
    fs::remove_file(folder.join("a.run/points.csv")).unwrap();
    fs::remove_file(folder.join("a.run/proposal.json")).unwrap();
    tune(folder, &["a.toml", "--resume"]);
    assert!(proposal(folder, "a.run") == proposal(folder, "b.run"));
    let log = fs::read_to_string(folder.join("a.run/timings.json")).unwrap();
    assert!(log.contains("\"model_seconds\"") && log.contains("\"tool_seconds\""));
}

#[test]
fn killed_workers_change_no_byte() {
    if !there("python3") {
        return;
    }
    let folder = folder_with(WEIR);
    let folder = folder.path();
    fs::write(folder.join("weir.toml"), program("workers = 2\n")).unwrap();
    tune(folder, &["weir.toml", "--out", "whole.run"]);
    // Another file would be another program: the run below is a new one, of the same answers.
    fs::write(folder.join("weir.py"), slow_weir(0.004)).unwrap();
    let mut run = start(folder, &["tune", "weir.toml"]);
    let mut killed = Vec::new();
    let until = Instant::now() + Duration::from_secs(60);
    while killed.len() < 4 && Instant::now() < until && run.try_wait().unwrap().is_none() {
        sleep(Duration::from_millis(150));
        let pids = fs::read_to_string(folder.join("pids")).unwrap_or_default();
        if let Some(pid) = pids.lines().last().filter(|pid| !killed.iter().any(|known| known == pid)) {
            let done = Command::new("kill").args(["-KILL", pid]).status().unwrap();
            killed.extend(done.success().then(|| pid.to_owned()));
        }
    }
    let status = run.wait().unwrap();
    assert!(matches!(status.code(), Some(0 | 3)), "{status:?}");
    assert!(killed.len() >= 2, "the run was over before anything could be killed");
    assert!(proposal(folder, "whole.run") == proposal(folder, "weir.run"));
    let log = fs::read_to_string(folder.join("weir.run/log.txt")).unwrap();
    assert!(log.contains("ended by signal 9"), "{log}");
}

fn start(folder: &Path, arguments: &[&str]) -> std::process::Child {
    let mut command = Command::new(assert_cmd::cargo::cargo_bin!("evenpoise"));
    command.current_dir(folder).args(arguments).stdin(Stdio::null()).stdout(Stdio::null()).stderr(Stdio::null());
    command.spawn().unwrap()
}

/// An interruption in the middle of a batch ends the run at once; what was answered is not asked again.
#[test]
fn an_interruption_in_mid_batch_loses_nothing() {
    if !there("python3") {
        return;
    }
    let count = "open('asked', 'a').write(line)";
    let text = slow_weir(0.01).replace("        time.sleep", &format!("        {count}\n        time.sleep"));
    let folder = folder_with(&text);
    let folder = folder.path();
    fs::write(folder.join("weir.toml"), program("workers = 2\n")).unwrap();
    for (run, signal) in [("polite.run", "-INT"), ("rude.run", "-KILL")] {
        let _ = fs::remove_file(folder.join("asked"));
        let mut tuning = start(folder, &["tune", "weir.toml", "--out", run]);
        sleep(Duration::from_millis(3000));
        let before = Instant::now();
        Command::new("kill").args([signal, &tuning.id().to_string()]).status().unwrap();
        let status = tuning.wait().unwrap();
        assert!(before.elapsed() < Duration::from_secs(4), "it must not wait for the batch");
        if signal == "-INT" {
            assert_eq!(status.code(), Some(130));
        }
        sleep(Duration::from_millis(300));
        tune(folder, &["weir.toml", "--out", run, "--resume"]);
        assert!(!folder.join(run).join("evaluations/unfinished").exists());
        let asked = fs::read_to_string(folder.join("asked")).unwrap();
        let mut lines: Vec<&str> = asked.lines().collect();
        let all = lines.len();
        lines.sort_unstable();
        lines.dedup();
        // A batch of each of the two workers, and what a kill leaves unwritten of a fifth of a second.
        assert!(all - lines.len() <= 80, "{} of {all} points were asked twice", all - lines.len());
    }
    assert!(proposal(folder, "polite.run") == proposal(folder, "rude.run"));
}

#[test]
fn a_run_cannot_go_on_with_another_program() {
    if !there("python3") {
        return;
    }
    let folder = folder_with(WEIR);
    let folder = folder.path();
    fs::write(folder.join("weir.toml"), program("")).unwrap();
    tune(folder, &["weir.toml"]);
    fs::write(folder.join("weir.py"), WEIR.replace("1.7", "1.8")).unwrap();
    let refused = evenpoise(folder).args(["tune", "weir.toml", "--resume"]).assert().code(1);
    refused.stderr(predicates::str::contains("the program file weir.py is not what the run"));
}

/// What goes wrong with a program ends a command with a message that says so, and leaves no folder in the way.
#[test]
fn the_command_tells_what_went_wrong() {
    if !there("python3") {
        return;
    }
    let folder = folder_with("import sys\nprint('the tank is empty', file=sys.stderr)\nsys.exit(5)\n");
    let folder = folder.path();
    fs::write(folder.join("weir.toml"), program("")).unwrap();
    let output = evenpoise(folder).args(["tune", "weir.toml"]).output().unwrap();
    let said = String::from_utf8_lossy(&output.stderr).into_owned();
    assert_eq!(output.status.code(), Some(1));
    for part in ["exit status 5", "depth = ", "| python3 weir.py", "| the tank is empty"] {
        assert!(said.contains(part), "{said}");
    }
    assert!(!folder.join("weir.run").exists());
}
