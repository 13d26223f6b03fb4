//! What a resume refuses: other settings, another problem, other data, no run at all, a run that somebody else holds.

use super::common::{Case, said};
use std::fs;

#[test]
fn a_changed_beginning_is_refused_by_name() {
    let case = Case::new();
    case.journal_alone("a.run");
    let refused = |arguments: &[&str], name: &str| {
        let output = case.run(arguments);
        assert_eq!(output.status.code(), Some(1), "{}", said(&output));
        assert!(said(&output).contains(name), "{}", said(&output));
    };
    refused(&["tune", "canal.toml", "--out", "a.run", "--resume", "--seed", "2"], "the setting seed");
    refused(&["tune", "canal.toml", "--out", "a.run", "--resume", "--family", "gaussian"], "the setting family");
    refused(&["tune", "canal.toml", "--out", "none.run", "--resume"], "holds no run");
    let problem = fs::read_to_string(case.path("canal.toml")).unwrap();
    fs::write(case.path("canal.toml"), problem.replace("0.05 * depth", "0.06 * depth")).unwrap();
    refused(&["tune", "canal.toml", "--out", "a.run", "--resume"], "the problem");
    let mut data = fs::read_to_string(case.path("gauge.csv")).unwrap();
    data.push_str("3.0,10.0\n");
    fs::write(case.path("gauge.csv"), data).unwrap();
    refused(&["tune", "a.run", "--resume"], "the data file gauge.csv");
}

#[test]
fn one_process_at_a_time_holds_a_run() {
    let case = Case::new();
    let mut child = case.start(&["tune", "canal.toml", "--out", "held.run"]);
    while !case.path("held.run/evaluations/journal").exists() {
        std::thread::sleep(std::time::Duration::from_millis(5));
    }
    let output = case.run(&["tune", "canal.toml", "--out", "held.run", "--force"]);
    assert_eq!(output.status.code(), Some(1));
    assert!(
        said(&output).contains("in use by") && said(&output).contains(&child.id().to_string()),
        "{}",
        said(&output)
    );
    assert!(child.wait().unwrap().success());
    case.assert_whole("held.run");
}

/// A finished run that is resumed asks the model nothing, and writes what is there.
#[test]
fn resuming_a_finished_run_changes_nothing() {
    let case = Case::new();
    case.journal_alone("b.run");
    case.complete("b.run");
    let journal = fs::read(case.path("b.run/evaluations/journal")).unwrap();
    assert!(journal == fs::read(case.path("whole.run/evaluations/journal")).unwrap());
    case.assert_whole("b.run");
}
