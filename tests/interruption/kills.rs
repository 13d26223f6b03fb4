//! Killed without warning, and stopped politely.

use super::common::{Case, parts, said};
use std::process::Command;

/// Killed at 30 moments spread over the whole run, writing of files included, and resumed.
#[cfg(unix)]
#[test]
fn a_killed_run_ends_as_if_nothing_had_happened() {
    let case = Case::new();
    for (k, part) in parts(30).enumerate() {
        let run = format!("killed-{k}.run");
        let mut child = case.start(&["tune", "canal.toml", "--out", &run]);
        std::thread::sleep(case.took.mul_f64(part));
        child.kill().unwrap();
        child.wait().unwrap();
        case.complete(&run);
        case.assert_whole(&run);
        std::fs::remove_dir_all(case.path(&run)).unwrap();
    }
}

/// Ctrl-C and a polite kill: the status says which, the message how to go on, and both ways of naming the run work.
#[cfg(unix)]
#[test]
fn a_stopped_run_says_how_to_go_on() {
    let case = Case::new();
    for (signal, status, resumed_by) in [("INT", 130, "canal.toml"), ("TERM", 143, "stopped.run")] {
        let mut stopped = None;
        for part in [0.2, 0.1, 0.05, 0.3] {
            let child = case.start(&["tune", "canal.toml", "--out", "stopped.run", "--force"]);
            std::thread::sleep(case.took.mul_f64(part));
            let kill = Command::new("kill").args([format!("-{signal}"), child.id().to_string()]).status().unwrap();
            assert!(kill.success());
            let output = child.wait_with_output().unwrap();
            // A signal that came before anybody listened ends the process at once; one that came after the last batch is late.
            if output.status.code() == Some(status) {
                stopped = Some(output);
                break;
            }
        }
        let message = said(&stopped.expect("one of the moments lies within the tuning"));
        assert!(message.contains("evenpoise tune stopped.run --resume"), "{message}");
        let output = case.run(&["tune", resumed_by, "--out", "stopped.run", "--resume"]);
        assert!(output.status.success() && said(&output).contains("are not made again"), "{}", said(&output));
        case.assert_whole("stopped.run");
    }
}
