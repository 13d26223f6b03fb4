//! Killed, stopped, gone on with: the same bytes.

use super::common::{command, done, finish, run_of, said, text};
use std::fs;
use std::path::Path;
use std::process::Command;
use std::process::Stdio;
use std::time::Duration;
use std::time::Instant;

const ARGUMENTS: [&str; 7] = ["--draws", "150000", "--quantiles", "0.5", "--save-points", "points.csv", "--out"];

fn arguments<'a>(run: &'a str, out: &'a str) -> Vec<&'a str> {
    [&["estimate", run][..], &ARGUMENTS, &[out]].concat()
}

/// The run that nothing interrupts.
fn whole(folder: &Path, run: &str) {
    finish(folder, &arguments(run, "whole"));
    fs::rename(folder.join("points.csv"), folder.join("whole.csv")).unwrap();
}

/// Waits until a run has saved its state for the first time, and then for a while.
fn wait_for_state(folder: &Path, out: &str, then: Duration) {
    let state = folder.join(out).join("state.json");
    let began = Instant::now();
    while !state.is_file() && began.elapsed() < Duration::from_secs(60) {
        std::thread::sleep(Duration::from_millis(5));
    }
    std::thread::sleep(then);
}

fn assert_whole(folder: &Path, out: &str) {
    for name in ["estimate.json", "figures/course.csv", "figures/course.png"] {
        let [a, b] = ["whole", out].map(|part| fs::read(folder.join(part).join(name)).unwrap());
        assert!(a == b, "{name} differs after {out}");
    }
    let same = fs::read(folder.join("whole.csv")).unwrap() == fs::read(folder.join("points.csv")).unwrap();
    assert!(same, "the points differ after {out}");
}

/// Killed without warning at several moments, after its first state was saved, and resumed.
#[cfg(unix)]
#[test]
fn a_killed_run_ends_as_if_nothing_had_happened() {
    let folder = tempfile::tempdir().unwrap();
    let run = run_of("sill").display().to_string();
    whole(folder.path(), &run);
    let mut resumed = 0;
    for (k, more) in [0, 50, 200].into_iter().enumerate() {
        let out = format!("killed-{k}");
        let mut child =
            command(folder.path(), &arguments(&run, &out)).stdout(Stdio::null()).stderr(Stdio::null()).spawn().unwrap();
        wait_for_state(folder.path(), &out, Duration::from_millis(more));
        child.kill().unwrap();
        child.wait().unwrap();
        if folder.path().join(&out).join("estimate.json").exists() {
            continue;
        }
        let mut again = arguments(&run, &out);
        again.push("--resume");
        let said = said(&finish(folder.path(), &again));
        resumed += i32::from(said.contains("are not made again"));
        assert_whole(folder.path(), &out);
    }
    assert!(resumed > 0, "no kill fell between the first saved state and the end");
}

/// Ctrl-C and a polite kill: the status says which, and the command that is shown goes on.
#[cfg(unix)]
#[test]
fn a_stopped_run_says_how_to_go_on() {
    let folder = tempfile::tempdir().unwrap();
    let run = run_of("sill").display().to_string();
    whole(folder.path(), &run);
    for (signal, status) in [("INT", 130), ("TERM", 143)] {
        let out = format!("stopped-{signal}");
        let mut command = command(folder.path(), &arguments(&run, &out));
        let child = command.stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
        wait_for_state(folder.path(), &out, Duration::ZERO);
        Command::new("kill").args([format!("-{signal}"), child.id().to_string()]).status().unwrap();
        let output = child.wait_with_output().unwrap();
        assert_eq!(output.status.code(), Some(status), "{}", said(&output));
        let message = said(&output);
        let shown = message.lines().last().unwrap().trim();
        let again: Vec<&str> = shown.split(' ').skip(1).collect();
        assert!(shown.starts_with("evenpoise estimate") && again.contains(&"--resume"), "{message}");
        finish(folder.path(), &again);
        assert_whole(folder.path(), &out);
    }
}

/// A run is gone on with as it was begun, or not at all.
#[cfg(unix)]
#[test]
fn another_run_is_not_gone_on_with() {
    let folder = tempfile::tempdir().unwrap();
    let run = run_of("sill").display().to_string();
    let started = ["estimate", &run, "--draws", "1e8", "--out", "e"];
    let child = command(folder.path(), &started).stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
    wait_for_state(folder.path(), "e", Duration::ZERO);
    let state = folder.path().join("e/state.json");
    Command::new("kill").args(["-INT", &child.id().to_string()]).status().unwrap();
    assert_eq!(child.wait_with_output().unwrap().status.code(), Some(130));
    for (changed, what) in [
        (vec!["--draws", "2e8"], "the number of draws"),
        (vec!["--draws", "1e8", "--seed", "77"], "the seed"),
        (vec!["--draws", "1e8", "--stage", "2"], "the stage"),
        (vec!["--draws", "1e8", "--quantiles", "0.3"], "the list of quantiles"),
    ] {
        let output = command(folder.path(), &[&["estimate", &run, "--out", "e", "--resume"][..], &changed].concat())
            .output()
            .unwrap();
        assert!(!done(&output) && said(&output).contains(what), "{}", said(&output));
    }
    let output = command(folder.path(), &started).output().unwrap();
    assert!(said(&output).contains("go on with it (--resume)"), "{}", said(&output));
    let text = text(&state).replacen("\"draws\": ", "\"draws\": 1", 1);
    fs::write(&state, text).unwrap();
    let output = command(folder.path(), &[&started[..], &["--resume"]].concat()).output().unwrap();
    assert!(said(&output).contains("damaged"), "{}", said(&output));
}
