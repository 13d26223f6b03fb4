//! Journals that were cut or damaged, and disks that refuse.

use super::common::{Case, FLOOD, parts, said};
use std::fs;
use std::process::Command;

#[test]
fn a_journal_that_was_cut_is_gone_on_with() {
    let case = Case::new();
    for (k, part) in parts(6).enumerate() {
        let run = format!("cut-{k}.run");
        let journal = case.journal_alone(&run);
        let bytes = fs::read(&journal).unwrap();
        // The header is about a kilobyte long; cuts within it are below.
        let at = 2000 + (part * (bytes.len() - 2000) as f64) as usize;
        fs::write(&journal, &bytes[..at]).unwrap();
        let output = case.run(&["tune", &run, "--resume"]);
        assert!(output.status.success() && said(&output).contains("dropped"), "{}", said(&output));
        case.assert_whole(&run);
    }
}

/// Margins and hits are in the journal too.
#[test]
fn a_probability_is_gone_on_with() {
    let case = Case::of(FLOOD);
    for (k, part) in parts(4).enumerate() {
        let run = format!("flood-{k}.run");
        let journal = case.journal_alone(&run);
        let bytes = fs::read(&journal).unwrap();
        let at = 2000 + (part * (bytes.len() - 2000) as f64) as usize;
        fs::write(&journal, &bytes[..at]).unwrap();
        let output = case.run(&["tune", &run, "--resume"]);
        assert!(output.status.success(), "{}", said(&output));
        case.assert_whole(&run);
    }
}

#[test]
fn a_damaged_journal_is_never_believed() {
    let case = Case::new();
    for (k, part) in parts(6).chain([0.0, 0.00001, 0.0002]).enumerate() {
        let run = format!("damaged-{k}.run");
        let journal = case.journal_alone(&run);
        let mut bytes = fs::read(&journal).unwrap();
        let at = (part * bytes.len() as f64) as usize;
        bytes[at] ^= 0x10;
        fs::write(&journal, bytes).unwrap();
        let output = case.run(&["tune", &run, "--resume"]);
        if output.status.success() {
            assert!(said(&output).contains("damaged"), "{}", said(&output));
            case.assert_whole(&run);
        } else {
            assert_eq!(output.status.code(), Some(1));
            assert!(said(&output).contains("journal") && said(&output).contains("--force"), "{}", said(&output));
        }
    }
}

/// A disk that takes no more: the message names the file and the reason, and with more room the run goes on.
#[cfg(unix)]
#[test]
fn a_full_disk_is_told_and_loses_nothing() {
    let case = Case::new();
    let program = assert_cmd::cargo::cargo_bin!("evenpoise");
    // Files of at most 40 blocks; the signal that would end the process is ignored, so that writing fails as on a full disk.
    let command = format!("trap '' XFSZ; ulimit -f 40; exec {} tune canal.toml --out full.run", program.display());
    let output = Command::new("bash").args(["-c", &command]).current_dir(case.path("")).output().unwrap();
    assert_eq!(output.status.code(), Some(1), "{}", said(&output));
    assert!(
        said(&output).contains("full.run/evaluations/journal") && said(&output).contains("too large"),
        "{}",
        said(&output)
    );
    case.complete("full.run");
    case.assert_whole("full.run");
}

#[test]
fn a_folder_that_cannot_be_made_is_told() {
    let case = Case::new();
    let output = case.run(&["tune", "canal.toml", "--out", "gauge.csv/run"]);
    assert_eq!(output.status.code(), Some(1));
    assert!(said(&output).contains("gauge.csv/run"), "{}", said(&output));
}
