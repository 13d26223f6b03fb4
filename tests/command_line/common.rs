//! A small problem, the command, and folders compared byte for byte.

use assert_cmd::Command;
use std::collections::BTreeMap;
use std::fs;
use std::path::Path;

/// Two variables; some seconds to tune, even unoptimised.
pub(crate) const SILL: &str = r#"
title = "Sill of the Ellenmere feeder canal (invented)"
[variables]
depth = { distribution = "gamma", mean = 2.0, sd = 0.6, unit = "m" }
slope = { range = [-inf, inf], near = 0.0, spread = 2.0 }
[target]
aim = "density"
log_factor = "-2 * (slope - 0.4 * depth)^2"
[estimates]
head = "depth * depth"
weight = "exp(slope)"
[tuning]
budget = 3000
"#;

pub(crate) fn evenpoise(folder: &Path) -> Command {
    let mut command = Command::new(assert_cmd::cargo::cargo_bin!("evenpoise"));
    command.current_dir(folder).env_remove("NO_COLOR");
    command
}

/// A folder with `sill.toml`.
pub(crate) fn folder() -> tempfile::TempDir {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("sill.toml"), SILL).unwrap();
    folder
}

/// Files of a run whose bytes do not depend on clocks, with their contents.
pub(crate) fn contents(run: &Path) -> BTreeMap<String, Vec<u8>> {
    let mut files = BTreeMap::new();
    for folder in ["", "figures"] {
        for entry in fs::read_dir(run.join(folder)).unwrap() {
            let path = entry.unwrap().path();
            let name = path.strip_prefix(run).unwrap().display().to_string();
            if path.is_file() && !["timings.json", "log.txt"].contains(&name.as_str()) {
                files.insert(name, fs::read(&path).unwrap());
            }
        }
    }
    files
}

/// Asserts that two runs left the same files with the same bytes.
pub(crate) fn assert_same(a: &Path, b: &Path) {
    let (a, b) = (contents(a), contents(b));
    assert_eq!(a.keys().collect::<Vec<_>>(), b.keys().collect::<Vec<_>>());
    for (name, bytes) in &a {
        assert!(bytes == &b[name], "{name} differs");
    }
}
