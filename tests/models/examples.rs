//! The examples of models agree with each other and do what their comments say.

use crate::common::{evenpoise, there};
use evenpoise::model::{LibraryModel, LibrarySpec, Model, ProgramModel, ProgramSpec};
use evenpoise::numeric::Points;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

fn tank() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("examples/tank")
}

/// The commands at the head of `tank.c`, carried out in a folder of their own.
fn compiled(folder: &Path) {
    let text = fs::read_to_string(tank().join("tank.c")).unwrap();
    fs::copy(tank().join("tank.c"), folder.join("tank.c")).unwrap();
    let commands: Vec<&str> = text
        .lines()
        .filter_map(|line| line.strip_prefix(" *   cc "))
        .map(|rest| rest.split("     ").next().unwrap().split("  ").next().unwrap())
        .collect();
    assert_eq!(commands.len(), 2);
    for command in commands {
        let made = Command::new("cc").current_dir(folder).args(command.split_whitespace()).output().unwrap();
        assert!(made.status.success(), "{}", String::from_utf8_lossy(&made.stderr));
    }
}

#[test]
fn three_tanks_agree() {
    if !there("python3") || !there("cc") {
        return;
    }
    let folder = tempfile::tempdir().unwrap();
    compiled(folder.path());
    let takes = ["inflow", "hours", "start", "blocked"];
    let spec = LibrarySpec {
        file: folder.path().join("libtank.so"),
        symbol: "tank_peak".into(),
        n_inputs: 4,
        n_outputs: 1,
        any_thread: true,
    };
    let models: [Box<dyn Model>; 3] = [
        Box::new(ProgramModel::new(ProgramSpec::new(&["python3", "tank.py"], &tank(), &takes, 1))),
        Box::new(ProgramModel::new(ProgramSpec::new(&["./tank"], folder.path(), &takes, 1))),
        Box::new(LibraryModel::open(spec).unwrap()),
    ];
    let mut points = Points::new(4);
    for i in 0..60_u32 {
        let part = |k: u32| f64::from(i * k % 61) / 61.0;
        points.push(&[20.0 + 500.0 * part(7), 1.0 + 14.0 * part(11), 20.0 + 6.0 * part(13), part(17)]);
    }
    let answers: Vec<Vec<f64>> = models
        .iter()
        .map(|model| {
            let mut answers = Points::zeros(1, 60);
            model.evaluate(&points, &mut answers).unwrap();
            answers.coordinate(0)
        })
        .collect();
    for i in 0..60 {
        assert!(answers[0][i] >= points.get(i, 2), "the level never falls below the one before the flood");
        assert!((answers[0][i] - answers[1][i]).abs() < 1e-9 && (answers[0][i] - answers[2][i]).abs() < 1e-9);
    }
}

/// The file of the Python model, and the one of the library, tune to the same probability.
#[test]
fn the_tanks_tune() {
    if !there("python3") || !there("cc") {
        return;
    }
    let folder = tempfile::tempdir().unwrap();
    compiled(folder.path());
    let mut values = Vec::new();
    for file in ["tank.py", "tank.toml", "tank-library.toml"] {
        fs::copy(tank().join(file), folder.path().join(file)).unwrap();
        if file.ends_with(".toml") {
            let output = evenpoise(folder.path()).args(["tune", file, "--json"]).output().unwrap();
            assert_eq!(output.status.code(), Some(0), "{}", String::from_utf8_lossy(&output.stderr));
            let text = String::from_utf8(output.stdout).unwrap();
            let summary: serde_json::Value = serde_json::from_str(&text).unwrap();
            values.push((
                summary["probability"]["value"].as_f64().unwrap(),
                summary["probability"]["se"].as_f64().unwrap(),
            ));
        }
    }
    let [(a, a_se), (b, b_se)] = values[..] else { panic!("two runs") };
    assert!((a - b).abs() < 4.0 * (a_se * a_se + b_se * b_se).sqrt(), "{a} {b}");
}

/// The model of the README, as it is written there.
#[test]
fn the_readme_has_a_model() {
    if !there("python3") {
        return;
    }
    let readme = fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("README.md")).unwrap();
    let text = readme.split_once("```python\n").unwrap().1.split_once("```").unwrap().0;
    let table = readme.split("```toml\n").find(|part| part.contains("[program]")).unwrap().split_once("```").unwrap().0;
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("weir.py"), text).unwrap();
    let problem = format!(
        "title = \"A weir\"\n[variables]\ndepth = {{ distribution = \"normal\", mean = 1.0, sd = 0.2 }}\nwidth = {{ distribution = \"normal\", \
         mean = 3.0, sd = 0.1 }}\n{table}\n[target]\naim = \"density\"\nlog_factor = \"-(flow - 5)^2\"\n"
    );
    let problem = evenpoise::problem::Problem::parse(&problem, "weir.toml", folder.path())
        .unwrap_or_else(|errors| panic!("{}", errors.render(false)));
    let start = Points::from_rows(2, &problem.start().near);
    let answer = problem.evaluate(&start).unwrap();
    assert!(answer.log_density[0].is_finite());
    let flow = problem.model_values(&start).unwrap().get(0, 0);
    assert!((flow - 1.7 * 3.0).abs() < 1e-12, "{flow}");
}
