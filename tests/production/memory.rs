//! Memory does not grow with the number of draws.

use super::common::{command, run_of};
use std::path::Path;
use std::process::Stdio;
use std::time::Duration;

/// Largest resident size of a command, kibibytes, as the system counts it.
#[cfg(target_os = "linux")]
fn peak(folder: &Path, arguments: &[&str]) -> u64 {
    let mut child = command(folder, arguments).stdout(Stdio::null()).stderr(Stdio::null()).spawn().unwrap();
    let mut peak = 0;
    while child.try_wait().unwrap().is_none() {
        // The peak is the kernel's own, so that looking seldom misses nothing but the very end.
        if let Ok(status) = std::fs::read_to_string(format!("/proc/{}/status", child.id())) {
            let line = status.lines().find(|line| line.starts_with("VmHWM:"));
            let size = line.and_then(|line| line.split_whitespace().nth(1)).and_then(|size| size.parse().ok());
            peak = peak.max(size.unwrap_or(0));
        }
        std::thread::sleep(Duration::from_millis(5));
    }
    peak
}

/// Five times the draws take no more than 20 megabytes more, and never 200.
#[cfg(target_os = "linux")]
#[test]
fn five_times_the_draws_take_no_more_memory() {
    let folder = tempfile::tempdir().unwrap();
    let run = run_of("sill").display().to_string();
    for command in ["draw", "estimate"] {
        let of = |draws: &str| {
            let mut arguments = vec![command, &run, "--draws", draws];
            arguments.extend(if command == "estimate" { &["--force", "--out", "e"][..] } else { &[] });
            peak(folder.path(), &arguments)
        };
        let (few, many) = (of("2e5"), of("1e6"));
        assert!(few > 1000 && many < few + 20_000 && many < 200_000, "{command}: {few} kB, {many} kB");
    }
}
