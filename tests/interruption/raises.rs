//! A finished run under a larger budget: nothing is asked twice, the old report draws become a round, and the end is the
//! same to the last byte however it was reached.

use super::common::{Case, FLOOD, done, parts, said};
use evenpoise::store::{Journal, JournalBatch, Table};
use serde_json::Value;
use std::fs;

/// Points of all records, each of which was asked for once: answers that were recorded are never recorded again.
fn asked(batches: &[JournalBatch]) -> usize {
    batches.iter().map(|batch| batch.points.len()).sum()
}

fn journal(case: &Case, run: &str) -> Vec<JournalBatch> {
    let (_, replay) = Journal::read(&case.path(run)).unwrap();
    assert_eq!(replay.dropped, None);
    replay.batches
}

fn summary(case: &Case, run: &str) -> Value {
    serde_json::from_slice(&fs::read(case.path(run).join("summary.json")).unwrap()).unwrap()
}

/// A copy of a whole run, everything included.
fn copy(case: &Case, from: &str, to: &str) {
    let copied = std::process::Command::new("cp").arg("-r").args([case.path(from), case.path(to)]).status().unwrap();
    assert!(copied.success());
}

/// Raises the run in `run`, and asserts that it says so.
fn raise(case: &Case, run: &str, budget: &str) {
    let output = case.run(&["tune", run, "--resume", "--budget", budget]);
    assert!(done(&output), "{}", said(&output));
    assert!(said(&output).contains("The budget is raised from"), "{}", said(&output));
}

#[test]
fn old_evaluations_count_as_rounds_and_new_draws_carry_the_answer() {
    let case = Case::new();
    copy(&case, "whole.run", "more.run");
    raise(&case, "more.run", "4e3");
    let (before, after) = (journal(&case, "whole.run"), journal(&case, "more.run"));
    assert_eq!((asked(&before), asked(&after)), (2000, 4000));
    assert!(after.starts_with(&before), "what was paid for stands as it was");

    let (old, new) = (summary(&case, "whole.run"), summary(&case, "more.run"));
    let raised = &new["extended_from"][0];
    assert_eq!((&raised["budget"], &raised["report_draws"]), (&old["evaluations"], &old["draws"]));
    // A quarter of the new total, and more where the rounds ended early.
    assert_eq!(new["evaluations"].as_u64(), Some(4000));
    assert!((1000..2000).contains(&new["draws"].as_u64().unwrap()));
    assert!(old["extended_from"].is_null());
    // A survey that had made too few climbs goes on.
    let climbs = |summary: &Value| summary["survey"]["finished"].as_u64().unwrap();
    assert!(climbs(&old) < 60 && climbs(&new) > climbs(&old), "{} {}", climbs(&old), climbs(&new));
    let points = |run: &str| Table::read(&case.path(run).join("points.csv")).unwrap();
    let (old_points, new_points) = (points("whole.run"), points("more.run"));
    let known: Vec<u64> = old_points.columns[0].iter().map(|x| x.to_bits()).collect();
    assert!(
        new_points.columns[0].iter().all(|x| !known.contains(&x.to_bits())),
        "an old report draw is reported again"
    );
    // The row of the round that the old report draws became.
    let rounds = fs::read_to_string(case.path("more.run/rounds.csv")).unwrap();
    let row = rounds.lines().nth(raised["rounds"].as_u64().unwrap() as usize).unwrap();
    assert!(row.contains(&format!(",{},", raised["report_draws"])), "{row}");
    // Both values are those of one integral: 5 standard errors, 1 in 10^6.
    let normaliser = |summary: &Value, key: &str| summary["log_normaliser"][key].as_f64().unwrap();
    let apart = normaliser(&old, "value") - normaliser(&new, "value");
    assert!(apart.abs() < 5.0 * normaliser(&old, "se").hypot(normaliser(&new, "se")), "{apart}");
    for file in ["report.html", "report.md"] {
        let report = fs::read_to_string(case.path("more.run").join(file)).unwrap();
        assert!(report.contains("the budget was raised to 4,000") && report.contains("count as rounds"), "{file}");
    }
}

#[test]
fn a_raise_ends_with_the_same_bytes_however_it_is_reached() {
    let case = Case::new();
    copy(&case, "whole.run", "more.run");
    raise(&case, "more.run", "4000");
    // At once, from the problem that the run keeps.
    let again = case.run(&["tune", "more.run/problem.toml", "--out", "again.run"]);
    assert!(done(&again), "{}", said(&again));
    case.assert_same("more.run", "again.run");
    // From a run that had not come to its end.
    let journal = case.journal_alone("half.run");
    let bytes = fs::read(&journal).unwrap();
    fs::write(&journal, &bytes[..bytes.len() / 2]).unwrap();
    let output = case.run(&["tune", "canal.toml", "--out", "half.run", "--resume", "--budget", "4000"]);
    let told = said(&output).split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(done(&output) && told.contains("had not come to its end"), "{told}");
    case.assert_same("more.run", "half.run");
    // Cut anywhere, also within what was there before; gone on with by either name, without saying the budget again.
    for (k, part) in parts(6).enumerate() {
        let run = format!("cut-{k}.run");
        let journal = case.journal_of("more.run", &run);
        let bytes = fs::read(&journal).unwrap();
        fs::write(&journal, &bytes[..2000 + (part * (bytes.len() - 2000) as f64) as usize]).unwrap();
        let by = if k % 2 == 0 { run.as_str() } else { "canal.toml" };
        let output = case.run(&["tune", by, "--out", &run, "--resume"]);
        assert!(done(&output), "{}", said(&output));
        case.assert_same("more.run", &run);
    }
    // Killed after the journal was raised and before the copy of the problem was.
    case.journal_of("more.run", "between.run");
    fs::copy(case.path("whole.run/problem.toml"), case.path("between.run/problem.toml")).unwrap();
    case.complete("between.run");
    case.assert_same("more.run", "between.run");
}

/// Killed while the raise goes on, at moments spread over it.
#[cfg(unix)]
#[test]
fn a_killed_raise_is_gone_on_with() {
    let case = Case::new();
    copy(&case, "whole.run", "more.run");
    let began = std::time::Instant::now();
    raise(&case, "more.run", "4000");
    let took = began.elapsed();
    for (k, part) in parts(8).enumerate() {
        let run = format!("killed-{k}.run");
        copy(&case, "whole.run", &run);
        let mut child = case.start(&["tune", &run, "--resume", "--budget", "4000"]);
        std::thread::sleep(took.mul_f64(part));
        child.kill().unwrap();
        child.wait().unwrap();
        // What it had come to is not known: the same command goes on, or refuses because all is done.
        let output = case.run(&["tune", &run, "--resume", "--budget", "4000"]);
        assert!(done(&output) || said(&output).contains("has spent its budget of 4,000"), "{}", said(&output));
        case.complete(&run);
        case.assert_same("more.run", &run);
    }
}

#[test]
fn a_second_raise_works_as_well() {
    let case = Case::new();
    copy(&case, "whole.run", "more.run");
    raise(&case, "more.run", "3000");
    raise(&case, "more.run", "5000");
    assert_eq!(asked(&journal(&case, "more.run")), 5000);
    let budgets: Vec<u64> = summary(&case, "more.run")["extended_from"]
        .as_array()
        .unwrap()
        .iter()
        .map(|raise| raise["budget"].as_u64().unwrap())
        .collect();
    assert_eq!(budgets, [2000, 3000]);
    let journal = case.journal_of("more.run", "cut.run");
    let bytes = fs::read(&journal).unwrap();
    fs::write(&journal, &bytes[..bytes.len() * 3 / 4]).unwrap();
    case.complete("cut.run");
    case.assert_same("more.run", "cut.run");
}

/// The rounds of a probability simply go on, and those that counted go on counting.
#[test]
fn a_probability_is_raised() {
    let case = Case::of(FLOOD);
    copy(&case, "whole.run", "more.run");
    raise(&case, "more.run", "6000");
    let (before, after) = (journal(&case, "whole.run"), journal(&case, "more.run"));
    assert_eq!(asked(&after), 6000);
    assert!(after.starts_with(&before));
    let (old, new) = (summary(&case, "whole.run"), summary(&case, "more.run"));
    assert_eq!(new["extended_from"][0]["report_draws"], old["draws"]);
    assert_eq!(new["draws"].as_u64().unwrap(), old["draws"].as_u64().unwrap() + 3000);
    let cv = |summary: &Value| summary["probability"]["cv"].as_f64().unwrap();
    assert!(cv(&new) < cv(&old), "{} {}", cv(&new), cv(&old));
    let journal = case.journal_of("more.run", "cut.run");
    let bytes = fs::read(&journal).unwrap();
    fs::write(&journal, &bytes[..bytes.len() * 3 / 4]).unwrap();
    case.complete("cut.run");
    case.assert_same("more.run", "cut.run");
}

#[test]
fn budgets_that_do_not_rise_are_refused_and_change_nothing() {
    let case = Case::new();
    copy(&case, "whole.run", "same.run");
    let refused = |budget: &str, status: i32, words: &str| {
        let output = case.run(&["tune", "same.run", "--resume", "--budget", budget]);
        assert_eq!(output.status.code(), Some(status), "{}", said(&output));
        assert!(said(&output).contains(words), "{}", said(&output));
        case.assert_whole("same.run");
    };
    refused("2000", 2, "has spent its budget of 2,000 evaluations");
    refused("1000", 2, "give a --budget above 2,000");
    refused("2100", 1, "raise it to 2480 or more");
    // With its end still to come, the budget that it has is a resume like any other, and a lower one is refused.
    case.journal_alone("half.run");
    let output = case.run(&["tune", "half.run", "--resume", "--budget", "1500"]);
    assert_eq!(output.status.code(), Some(2));
    assert!(said(&output).contains("evenpoise tune half.run --resume"), "{}", said(&output));
    let output = case.run(&["tune", "half.run", "--resume", "--budget", "2000"]);
    assert!(done(&output), "{}", said(&output));
    case.assert_whole("half.run");
}
