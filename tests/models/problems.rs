//! Problem files with a model: what they mean, and how they are refused.

use crate::common::{Script, there};
use evenpoise::numeric::Points;
use evenpoise::problem::Problem;
use std::fs;
use std::path::Path;

fn read(text: &str, folder: &Path) -> Problem {
    Problem::parse(text, "weir.toml", folder).unwrap_or_else(|errors| panic!("{}", errors.render(false)))
}

const GROUPS: &str = r#"
title = "Two sluices of the Ellenmere feeder (invented)"
[constants]
scale = 2.0
[variables]
gate = { each = 2, distribution = "normal", mean = 0.0, sd = 1.0 }
head = { range = [-inf, inf], near = 0.0, spread = 1.0 }
[data]
file = "gauge.csv"
missing = [""]
[formulas]
doubled = "scale * head"
[program]
run = ["python3", "model.py"]
takes = ["doubled", "gate", "scale"]
returns = ["flow"]
returns_rows = ["level"]
[target]
aim = "density"
log_factor = "-flow - sum((level - reading)^2)"
require = ["head < 5"]
[estimates]
twice = "2 * flow"
"#;

/// Inputs are what `takes` says, groups as their members; a column has a value for every row, dropped ones ignored.
#[test]
fn names_go_in_and_come_out() {
    if !there("python3") {
        return;
    }
    let script = Script::new(
        "import sys\nfor line in sys.stdin:\n    if line.split():\n        doubled, one, two, scale = map(float, line.split())\n        \
         if one > 8: print('nan nan nan nan', flush=True); continue\n        \
         print(doubled + one + 10 * two, 100 * scale, 7e7, doubled, flush=True)\n",
    );
    fs::write(script.folder.path().join("gauge.csv"), "reading\n199\n\"\"\n3\n").unwrap();
    let problem = read(GROUPS, script.folder.path());
    assert!(problem.asks_in_batches() && !problem.has_gradient() && problem.unused_variables().is_empty());
    let (takes, returns) = problem.model_names().unwrap();
    assert_eq!(takes, ["doubled", "gate[1]", "gate[2]", "scale"]);
    assert_eq!(returns, ["flow", "level[1]", "level[2]", "level[3]"]);
    // Whole line, so coordinates are the natural values. Point 1 fails; point 2 is ruled out whether it fails or not.
    let points = Points::from_rows(3, &[0.5, 0.25, 1.0, 9.0, 0.0, 1.0, 9.0, 0.0, 6.0]);
    let answer = problem.evaluate(&points).unwrap();
    let normal = |x: f64| -0.5 * x * x - 0.5 * (2.0 * std::f64::consts::PI).ln();
    // flow = 2 + 0.5 + 2.5 = 5; level = 200 and 2 against 199 and 3.
    assert!((answer.log_density[0] - (normal(0.5) + normal(0.25) - 5.0 - 2.0)).abs() < 1e-12);
    assert!(answer.log_density[1].is_nan() && answer.log_density[2] == f64::NEG_INFINITY);
    let twice = &problem.estimates(&points)[0];
    assert!(twice[0] == 10.0 && twice[1].is_nan());
    assert_eq!(problem.fulfils(&points).unwrap(), [true, true, false]);
    // What is written out is the same problem, wherever it lies.
    let inside = script.folder.path().join("weir.run");
    fs::create_dir(&inside).unwrap();
    let copy = read(&problem.text_for(&inside), &inside);
    assert_eq!((copy.digest(), copy.model_digests()), (problem.digest(), problem.model_digests()));
    assert_eq!(copy.evaluate(&points).unwrap().log_density[0], answer.log_density[0]);
}

/// The derivative of the target goes through the model's own: checked against the same problem as a formula.
#[test]
fn gradients_of_a_program_are_led_through() {
    if !there("python3") {
        return;
    }
    let script = Script::new(
        "import sys\nfor line in sys.stdin:\n    if line.split():\n        u, v = map(float, line.split())\n        \
         print(u * u * v, 2 * u * v, u * u, flush=True)\n",
    );
    let text = |model: &str, flow: &str| {
        format!(
            "title = \"A weir\"\n[variables]\ndepth = {{ range = [0.0, inf], near = 1.0, spread = 1.0 }}\nwidth = {{ range = [-inf, inf], \
             near = 3.0, spread = 1.0 }}\n[formulas]\nhead = \"depth + 0.5 * width\"\n{flow}\n{model}\n[target]\naim = \"density\"\n\
             log_factor = \"-(flow - 3)^2 - depth^2\"\n"
        )
    };
    let table = "[program]\nrun = [\"python3\", \"model.py\"]\ntakes = [\"head\", \"width\"]\nreturns = [\"flow\"]\ngradient = true\n";
    let outside = read(&text(table, ""), script.folder.path());
    let formula = read(&text("", "flow = \"head^2 * width\""), script.folder.path());
    assert!(outside.has_gradient() && !outside.asks_in_batches());
    let points = Points::from_rows(2, &[0.1, 2.0, -1.0, 0.5, 0.7, -1.5]);
    let (a, slopes) = outside.evaluate_with_gradient(&points).unwrap();
    let (b, wanted) = formula.evaluate_with_gradient(&points).unwrap();
    for i in 0..3 {
        assert!((a.log_density[i] - b.log_density[i]).abs() < 1e-12 * b.log_density[i].abs());
        for j in 0..2 {
            let (found, want) = (slopes.get(i, j), wanted.get(i, j));
            assert!((found - want).abs() <= 1e-12 * want.abs(), "{found} {want}");
        }
    }
}

/// By whatever means a model is asked, the problem is the same one.
#[test]
fn the_means_are_no_part_of_the_problem() {
    let text =
        |table: &str| crate::common::weir(&format!("{table}takes = [\"depth\", \"width\"]\nreturns = [\"flow\"]\n"));
    let folder = Path::new(".");
    let program = read(&text("[program]\nrun = [\"sh\"]\nworkers = 3\n"), folder);
    let exchange = read(&text("[exchange]\n"), folder);
    assert_eq!(program.digest(), exchange.digest());
    let other = read(&text("[exchange]\n").replace("takes = [\"depth\", \"width\"]\n", ""), folder);
    assert_ne!(other.digest(), exchange.digest(), "all variables are said in another way");
}

#[test]
fn what_is_wrong_is_told_at_its_place() {
    let wrong = |table: &str, part: &str| {
        let text = crate::common::weir(table);
        let errors = Problem::parse(&text, "weir.toml", Path::new(".")).unwrap_err().render(false);
        assert!(errors.contains(part), "{part}:\n{errors}");
    };
    wrong("[program]\nreturns = [\"flow\"]\n", "[program] does not say what to run");
    wrong("[program]\nrun = \"weir.py\"\nreturns = [\"flow\"]\n", "`run` wants a list");
    wrong("[program]\nrun = []\nreturns = [\"flow\"]\n", "`run` names no program");
    wrong("[program]\nrun = [\"sh\"]\n", "does not say what the model returns");
    wrong("[program]\nrun = [\"sh\"]\nreturn = [\"flow\"]\nreturns = [\"flow\"]\n", "did you mean `returns`?");
    wrong("[program]\nrun = [\"sh\"]\ntakes = [\"dept\"]\nreturns = [\"flow\"]\n", "did you mean `depth`?");
    wrong("[program]\nrun = [\"sh\"]\nreturns = [\"depth\"]\n", "share a name");
    wrong("[program]\nrun = [\"sh\"]\nreturns = [\"sum\"]\n", "takes a name of the formula language");
    wrong(
        "[program]\nrun = [\"sh\"]\nreturns = [\"flow\"]\nreturns_rows = [\"level\"]\n",
        "runs over the rows of data, and there are none",
    );
    wrong("[program]\nrun = [\"sh\"]\nreturns = [\"flow\"]\ntimeout = 0\n", "`timeout` must be above zero");
    wrong("[program]\nrun = [\"sh\"]\nreturns = [\"flow\"]\nworkers = 0\n", "a whole number, 1 or more");
    wrong("[program]\nrun = [\"sh\"]\nreturns = [\"flow\"]\nformat = \"f32\"\n", "`format` knows no \"f32\"");
    wrong(
        "[program]\nrun = [\"sh\"]\nreturns = [\"flow\", \"level\"]\ngradient = true\n",
        "derivatives belong to one value",
    );
    wrong(
        "[program]\nrun = [\"sh\"]\nreturns = [\"flow\"]\n[exchange]\nreturns = [\"flow\"]\n",
        "a problem has one model",
    );
    wrong("[library]\nfile = \"none.so\"\nsymbol = \"weir\"\nreturns = [\"flow\"]\n", "there is no such file");
    wrong("[library]\nsymbol = \"weir\"\nreturns = [\"flow\"]\n", "[library] has no `file`");
    wrong("[library]\nfile = \"a\"\nsymbol = \"weir\"\nthreads = 2\nreturns = [\"flow\"]\n", "\"any\" or 1");
    wrong(
        "[formulas]\nlate = \"flow + depth\"\n[program]\nrun = [\"sh\"]\ntakes = [\"late\"]\nreturns = [\"flow\"]\n",
        "this depends on what the model returns",
    );
}
