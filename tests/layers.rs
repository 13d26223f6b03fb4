//! A module uses only modules above it: the order in which the house is read is the order in which it stands.

#![allow(clippy::unwrap_used, reason = "a test that cannot go on has failed")]

use std::fs;
use std::path::Path;
use std::path::PathBuf;

const ORDER: [&str; 14] = [
    "numeric",
    "distribution",
    "expression",
    "model",
    "problem",
    "proposal",
    "weights",
    "refit",
    "adapt",
    "production",
    "store",
    "figures",
    "report",
    "cli",
];

#[test]
fn modules_use_only_modules_above_them() {
    for (rank, module) in ORDER.iter().enumerate() {
        for file in rust_files(&source().join(module)) {
            let text = fs::read_to_string(&file).unwrap();
            for later in &ORDER[rank + 1..] {
                let used =
                    text.contains(&format!("crate::{later}::")) || text.contains(&format!("use crate::{later};"));
                assert!(!used, "{} uses `{later}`, which comes after `{module}`", file.display());
            }
            assert!(!text.contains("crate::{"), "{}: one module a line, no `crate::{{...}}`", file.display());
        }
    }
}

/// A new module has to take its place in the order.
#[test]
fn every_module_has_its_place() {
    for entry in fs::read_dir(source()).unwrap() {
        let entry = entry.unwrap();
        let name = entry.file_name().into_string().unwrap();
        let known = ["lib.rs", "main.rs"].contains(&name.as_str()) || ORDER.contains(&name.as_str());
        assert!(known, "{name} is not in the order of tests/layers.rs");
    }
}

fn source() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("src")
}

/// All Rust files below a folder; none where it does not exist.
fn rust_files(folder: &Path) -> Vec<PathBuf> {
    let Ok(entries) = fs::read_dir(folder) else { return Vec::new() };
    let mut files = Vec::new();
    for entry in entries {
        let path = entry.unwrap().path();
        if path.is_dir() {
            files.extend(rust_files(&path));
        } else if path.extension().is_some_and(|ending| ending == "rs") {
            files.push(path);
        }
    }
    files
}
