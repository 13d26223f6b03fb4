//! The Python of `docs/proposal-format.md`, run as it stands there against the library.

// Helpers of tests; the one line that tells of a skipped comparison is meant to be seen.
#![allow(clippy::unwrap_used, clippy::print_stderr)]

use evenpoise::numeric::{Points, Purpose};
use evenpoise::problem::Problem;
use evenpoise::proposal::{Component, Mixture};
use evenpoise::store::{MadeBy, ProposalFile};
use std::path::Path;
use std::process::Command;

/// Every kind of coordinate, and two correlated scores.
const TEXT: &str = r#"
title = "Every coordinate"
[variables]
level = { range = [-inf, inf], near = 0.0, spread = 2.0 }
depth = { range = [0.5, inf], near = 1.5, spread = 1.0 }
deficit = { range = [-inf, 3.0], near = 1.0, spread = 1.0 }
opening = { range = [-1.0, 4.0], near = 1.0, spread = 1.0 }
inflow = { distribution = "gumbel", location = 40.0, scale = 8.0 }
loss = { distribution = "gamma", shape = 2.5, rate = 0.5 }
wind = { distribution = "normal", mean = 10.0, sd = 3.0 }
[[correlation]]
among = ["inflow", "wind"]
score = 0.6
[target]
aim = "density"
log_factor = "-(level^2 + (depth - 1)^2 + (deficit + opening)^2 + (inflow/40)^2 + loss + wind/10)"
[tuning]
coordinates = "standard-normal"
"#;

const LAWS: &str = "from scipy.stats import gumbel_r, gamma\n\
                    laws = {'inflow': gumbel_r(40, 8), 'loss': gamma(2.5, scale=2), 'wind': norm(10, 3)}\n";

/// A mixture of one Student-t and one Gaussian component with full scales.
fn mixture(d: usize) -> Mixture {
    let component = |shift: f64, width: f64, df: f64| {
        let location: Vec<f64> = (0..d).map(|j| shift + 0.1 * j as f64).collect();
        let mut scale = vec![0.0; d * d];
        for (i, j) in (0..d * d).map(|at| (at / d, at % d)) {
            scale[at(i, j, d)] = if i == j { width * (1.0 + 0.2 * i as f64) } else { 0.1 * width };
        }
        Component::new(location, &scale, df).unwrap()
    };
    Mixture::new(&[0.7, 0.3], vec![component(-0.2, 0.5, 5.5), component(0.3, 0.8, f64::INFINITY)]).unwrap()
}

fn at(i: usize, j: usize, d: usize) -> usize {
    i * d + j
}

/// The first block of Python of the page.
fn page_code() -> String {
    let page = std::fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("docs/proposal-format.md")).unwrap();
    let (_, rest) = page.split_once("```python\n").unwrap();
    rest.split_once("```").unwrap().0.to_owned()
}

/// What a script prints, a number a line; nothing where there is no Python with NumPy and SciPy.
fn python(script: &str, folder: &Path) -> Option<Vec<f64>> {
    let able = Command::new("python3").args(["-c", "import numpy, scipy"]).output();
    if !able.is_ok_and(|output| output.status.success()) {
        eprintln!("skipped 1 comparison: python3 with NumPy and SciPy is not there");
        return None;
    }
    let path = folder.join("script.py");
    std::fs::write(&path, script).unwrap();
    let output = Command::new("python3").arg(&path).current_dir(folder).output().unwrap();
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    Some(String::from_utf8(output.stdout).unwrap().lines().map(|line| line.parse().unwrap()).collect())
}

fn write_proposal(problem: &Problem, mixture: &Mixture, folder: &Path) {
    let made_by = MadeBy { program: "test".into(), digests: [].into(), seed: 1, evaluations: 0 };
    ProposalFile::new(problem, mixture, made_by).write(&folder.join("proposal.json")).unwrap();
}

/// Log densities in natural units, 500 points, agree to 1e-12 (relative to their size where that is above one).
#[test]
fn the_page_evaluates_what_the_library_evaluates() {
    let problem = Problem::parse(TEXT, "all.toml", Path::new(".")).unwrap();
    let words: Vec<&str> = problem.variables().iter().map(|v| v.coordinate.word()).collect();
    assert_eq!(words, ["natural", "log", "log", "logit", "standard-normal", "standard-normal", "standard-normal"]);
    let mixture = mixture(problem.dim());
    let folder = tempfile::tempdir().unwrap();
    write_proposal(&problem, &mixture, folder.path());
    // The same points on both sides: those that come back from natural units as they are written.
    let drawn = mixture.draw(500, 3, Purpose::Trial, 0).points;
    let natural = problem.to_natural(&drawn);
    let z = problem.to_coordinates(&natural);
    let want: Vec<f64> =
        mixture.log_density(&z).iter().zip(problem.log_jacobian(&z)).map(|(q, jacobian)| q - jacobian).collect();
    let mut points = String::new();
    for i in 0..natural.len() {
        let row: Vec<String> = natural.point(i).iter().map(|x| format!("{x:?}")).collect();
        points.push_str(&format!("{}\n", row.join(",")));
    }
    std::fs::write(folder.path().join("points.csv"), points).unwrap();
    let script = format!(
        "{}\nimport json\n{LAWS}proposal = json.load(open('proposal.json'))\nx = np.loadtxt('points.csv', delimiter=',')\n\
         print(*map(repr, map(float, log_density(proposal, x, laws))), sep='\\n')\n",
        page_code()
    );
    let Some(got) = python(&script, folder.path()) else { return };
    assert_eq!(got.len(), want.len());
    for (i, (got, want)) in got.iter().zip(&want).enumerate() {
        assert!((got - want).abs() <= 1e-12 * want.abs().max(1.0), "point {i}: {got} instead of {want}");
    }
}

/// 40,000 draws of the page have the mixture's means of every coordinate, within 5 standard errors (false alarm of all
/// seven: 4e-6).
#[test]
fn the_page_draws_what_it_says() {
    let problem = Problem::parse(TEXT, "all.toml", Path::new(".")).unwrap();
    let mixture = mixture(problem.dim());
    let folder = tempfile::tempdir().unwrap();
    write_proposal(&problem, &mixture, folder.path());
    let script = format!(
        "{}\nimport json\n{LAWS}proposal = json.load(open('proposal.json'))\n\
         x = draw(proposal, 40_000, np.random.default_rng(7), laws)\n\
         print(*map(repr, map(float, x.ravel())), sep='\\n')\n",
        page_code()
    );
    let Some(drawn) = python(&script, folder.path()) else { return };
    let z = problem.to_coordinates(&Points::from_rows(problem.dim(), &drawn));
    for j in 0..problem.dim() {
        let column: Vec<f64> = (0..z.len()).map(|i| z.point(i)[j]).collect();
        let n = column.len() as f64;
        let mean = column.iter().sum::<f64>() / n;
        let variance = column.iter().map(|x| (x - mean) * (x - mean)).sum::<f64>() / (n - 1.0);
        let exact: f64 = mixture.shares().iter().zip(mixture.components()).map(|(a, c)| a * c.location()[j]).sum();
        assert!((mean - exact).abs() < 5.0 * (variance / n).sqrt(), "coordinate {j}: {mean} instead of {exact}");
    }
}
