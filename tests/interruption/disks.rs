//! Disks that are full and folders that cannot be written to: told plainly, and nothing is lost.
//!
//! They are made by mounting small file systems in a name space of the test's own, which needs no rights on most machines. Where that
//! is not permitted, a counted line says what was skipped.

#![cfg(target_os = "linux")]
#![allow(clippy::print_stdout, reason = "what is skipped is said")]

use super::common::{Case, said};
use std::fs;
use std::process::{Command, Output};

/// Runs a script in which a folder of the case may be mounted over; none where that is not permitted. `$program` is the command.
fn with_mounts(case: &Case, script: &str) -> Option<Output> {
    let unshared = |script: &str| {
        let program = assert_cmd::cargo::cargo_bin!("evenpoise");
        let mut command = Command::new("unshare");
        command.args(["--map-root-user", "--mount", "bash", "-c", script]).env("program", program);
        command.current_dir(case.path("")).output().ok()
    };
    fs::create_dir_all(case.path("disk")).unwrap();
    let probe = unshared("mount -t tmpfs -o size=64k tmpfs disk");
    if probe.is_some_and(|probe| probe.status.success()) {
        return unshared(script);
    }
    println!("skipped 1 test of a disk: mounting is not permitted here");
    None
}

/// The message names the file and the reason; with more room the run goes on and ends as if nothing had happened.
#[test]
fn a_full_disk_is_told_by_its_name_and_loses_nothing() {
    let case = Case::new();
    let script = r#"
        mount -t tmpfs -o size=48k tmpfs disk
        "$program" tune canal.toml --out disk; first=$?
        mount -o remount,size=40m disk
        "$program" tune canal.toml --out disk --resume; second=$?
        cp -r disk full.run
        echo "statuses $first $second"
    "#;
    let Some(output) = with_mounts(&case, script) else { return };
    let (told, statuses) = (said(&output), String::from_utf8_lossy(&output.stdout).into_owned());
    assert!(told.contains("No space left on device") && told.contains("disk/"), "{told}");
    assert!(statuses.contains("statuses 1 0") || statuses.contains("statuses 1 3"), "{statuses} {told}");
    assert!(told.contains("are not made again"), "{told}");
    case.assert_whole("full.run");
}

#[test]
fn a_folder_on_a_read_only_disk_is_told() {
    let case = Case::new();
    let script = r#"
        mount -t tmpfs -o size=40m tmpfs disk
        cp -r whole.run gauge.csv disk
        mount -o remount,ro disk
        "$program" tune canal.toml --out disk/new.run; echo "status $?"
        "$program" tune disk/whole.run --resume --budget 4000; echo "status $?"
        "$program" figures disk/whole.run; echo "status $?"
    "#;
    let Some(output) = with_mounts(&case, script) else { return };
    let (told, statuses) = (said(&output), String::from_utf8_lossy(&output.stdout).into_owned());
    assert_eq!(statuses.matches("status 1").count(), 3, "{statuses} {told}");
    assert_eq!(told.matches("Read-only file system").count(), 3, "{told}");
    for name in ["disk/new.run", "disk/whole.run"] {
        assert!(told.contains(name), "{told}");
    }
}

/// A folder without the right to write. The superuser has it everywhere, so for it there is nothing to test.
#[test]
fn a_folder_without_the_right_to_write_is_told() {
    use std::os::unix::fs::PermissionsExt;
    let case = Case::new();
    let locked = case.path("locked");
    fs::create_dir(&locked).unwrap();
    fs::set_permissions(&locked, fs::Permissions::from_mode(0o555)).unwrap();
    if fs::write(locked.join("probe"), "").is_ok() {
        println!("skipped 1 test of a folder: this user may write everywhere");
        return;
    }
    let output = case.run(&["tune", "canal.toml", "--out", "locked/new.run"]);
    assert_eq!(output.status.code(), Some(1));
    assert!(
        said(&output).contains("locked/new.run") && said(&output).contains("Permission denied"),
        "{}",
        said(&output)
    );
}

/// A kernel's own folder takes no folder from anybody, the superuser included.
#[test]
fn a_folder_that_nobody_may_make_is_told() {
    let case = Case::new();
    let output = case.run(&["tune", "canal.toml", "--out", "/proc/evenpoise-test.run"]);
    assert_eq!(output.status.code(), Some(1));
    assert!(said(&output).contains("cannot create the folder /proc/evenpoise-test.run: "), "{}", said(&output));
}
