//! Compiled code: C made by the system's compiler.

use crate::common::{evenpoise, there, tune, weir};
use evenpoise::model::{LibraryError, LibraryModel, LibrarySpec, Model, ModelError};
use evenpoise::numeric::Points;
use std::fs;
use std::path::Path;
use std::process::Command;

const INCLUDES: &str = "#include <math.h>\n#include <stddef.h>\n#include <stdint.h>\n";
const VERSION: &str = "int32_t evenpoise_model_version(void) { return 1; }\n";
const WEIR: &str = "int32_t weir(const double *x, size_t n, size_t d, double *out, size_t r) {\n\
    if (d != 2 || r != 1) return 4;\n\
    for (size_t i = 0; i < n; i++) out[i] = 1.7 * x[2 * i + 1] * pow(x[2 * i], 1.5);\n    return 0;\n}\n";

fn compile(folder: &Path, text: &str) {
    fs::write(folder.join("weir.c"), format!("{INCLUDES}{text}")).unwrap();
    let made = Command::new("cc")
        .current_dir(folder)
        .args(["-O1", "-shared", "-fPIC", "-o", "libweir.so", "weir.c", "-lm"])
        .output()
        .unwrap();
    assert!(made.status.success(), "{}", String::from_utf8_lossy(&made.stderr));
}

fn spec(folder: &Path, n_inputs: usize, any_thread: bool) -> LibrarySpec {
    LibrarySpec { file: folder.join("libweir.so"), symbol: "weir".into(), n_inputs, n_outputs: 1, any_thread }
}

#[test]
fn a_library_answers_every_point() {
    if !there("cc") {
        return;
    }
    let folder = tempfile::tempdir().unwrap();
    compile(folder.path(), &format!("{VERSION}{WEIR}"));
    let mut inputs = Points::new(2);
    (0..2000).for_each(|i| inputs.push(&[f64::from(i) / 100.0, f64::from(i % 7)]));
    for any_thread in [true, false] {
        let model = LibraryModel::open(spec(folder.path(), 2, any_thread)).unwrap();
        let mut outputs = Points::zeros(1, 2000);
        model.evaluate(&inputs, &mut outputs).unwrap();
        for i in 0..2000 {
            let want = 1.7 * inputs.get(i, 1) * inputs.get(i, 0).powf(1.5);
            assert!((outputs.get(i, 0) - want).abs() <= 1e-13 * want.abs());
        }
    }
}

#[test]
fn what_a_library_lacks_is_told() {
    if !there("cc") {
        return;
    }
    let folder = tempfile::tempdir().unwrap();
    let open = |n| LibraryModel::open(spec(folder.path(), n, true));
    assert!(matches!(open(2), Err(LibraryError::NotLoaded { .. })));
    fs::write(folder.path().join("libweir.so"), "no library").unwrap();
    let error = open(2).unwrap_err();
    assert!(matches!(&error, LibraryError::NotLoaded { reason, .. } if !reason.is_empty()), "{error}");
    for (text, want) in [
        (WEIR.to_owned(), "has no function `evenpoise_model_version`"),
        (VERSION.to_owned(), "has no function `weir`"),
        (format!("{}{WEIR}", VERSION.replace('1', "2")), "made for version 2 of the interface"),
    ] {
        fs::remove_file(folder.path().join("libweir.so")).unwrap();
        compile(folder.path(), &text);
        let error = open(2).unwrap_err().to_string();
        assert!(error.contains(want), "{error}");
    }
    fs::remove_file(folder.path().join("libweir.so")).unwrap();
    compile(folder.path(), &format!("{VERSION}{WEIR}"));
    let model = open(3).unwrap();
    let refused = model.evaluate(&Points::from_rows(3, &[0.5, 2.0, 3.0]), &mut Points::zeros(1, 1)).unwrap_err();
    assert!(matches!(&refused, ModelError::Library(LibraryError::Refused { code: 4, points: 1, .. })), "{refused}");
    assert!(refused.to_string().contains("(0.5, 2, 3)"), "{refused}");
}

#[test]
fn a_run_with_a_library_cannot_go_on_with_another_one() {
    if !there("cc") {
        return;
    }
    let folder = tempfile::tempdir().unwrap();
    compile(folder.path(), &format!("{VERSION}{WEIR}"));
    let table = "[library]\nfile = \"libweir.so\"\nsymbol = \"weir\"\nreturns = [\"flow\"]\nthreads = 1\n";
    fs::write(folder.path().join("weir.toml"), weir(table)).unwrap();
    tune(folder.path(), &["weir.toml"]);
    tune(folder.path(), &["weir.run", "--resume"]);
    fs::remove_file(folder.path().join("libweir.so")).unwrap();
    compile(folder.path(), &format!("{VERSION}{}", WEIR.replace("1.7", "1.8")));
    evenpoise(folder.path())
        .args(["tune", "weir.toml", "--resume"])
        .assert()
        .code(1)
        .stderr(predicates::str::contains("the library file libweir.so is not what the run"));
}
