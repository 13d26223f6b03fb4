//! What holds for every problem: gradients and Jacobians against differences, maps inverse to each other, a text
//! that reads back to the same problem, the same bits on any number of threads.

use evenpoise::numeric::Points;
use evenpoise::numeric::Purpose;
use evenpoise::numeric::normal;
use evenpoise::numeric::stream;
use evenpoise::problem::Aim;
use evenpoise::problem::Problem;
use evenpoise::problem::TuningKeys;

use crate::right::EFFECTS;
use crate::right::TRACER;
use crate::right::read;

pub(crate) const SUPPORTS: &str = r#"
title = "Every support, correlated"
[variables]
a = { distribution = "gamma", shape = 2.0, rate = 1.5 }
b = { distribution = "beta", a = 2.0, b = 3.0, low = 0.5, high = 2.0 }
c = { distribution = "normal", mean = 2.0, sd = 0.5, between = [1.0, 3.0] }
d = { distribution = "gumbel", location = 0.3, scale = 1.2, label = "a \"quoted\" label", note = "back\\slash" }
e = { distribution = "lognormal", log_mean = 0.8, log_sd = 0.5, shift = 1.0 }
f = { range = [-inf, 2.0], near = 0.5, spread = 1.0 }
g = { range = [-1.0, 2.0], near = 0.5, spread = 1.0 }
[[correlation]]
among = ["a", "c", "d"]
score = [[1.0], [0.4, 1.0], [-0.3, 0.2, 1.0]]
[target]
aim = "density"
log_factor = "-(a*b - c)^2 + sin(d)*e - f^2 + g*a - log(e)^2"
require = ["a + b > 0.1"]
"#;

/// Dependent parameters of every way of differentiating: moved, stretched, by shape, truncated, in a chain.
pub(crate) const CHAIN: &str = r#"
title = "Parameters that depend on others"
[constants]
crest = 4.0
[variables]
m = { distribution = "normal", mean = "log(s)", sd = 0.7 }
s = { distribution = "gamma", shape = 3.0, rate = 2.0 }
t = { distribution = "normal", mean = "m", sd = "0.5 + s", between = [-6.0, 9.0] }
w = { distribution = "weibull", shape = "1 + s", scale = "exp(m/4)" }
g = { each = 2, distribution = "gamma", shape = "1.5 + s/4", rate = "1 + s^2" }
u = { distribution = "uniform", low = "m - 1 - s", high = "crest + s" }
l = { distribution = "lognormal", mean = "1 + s", cv = 0.4 }
h = { distribution = "lognormal", log_mean = "m/3", log_sd = "0.3*s", shift = 2.0 }
k = { distribution = "student-t", df = 5.0, location = "m", scale = "s" }
[target]
aim = "density"
log_factor = "-(t - m)^2/9 - w^2 + sum(g)*s/5 - u^2/8 - log(l)^2 + sin(h) - log(1 + k^2)"
[estimates]
spread = "s"
"#;

pub(crate) const SCORES: &str = r#"
title = "Correlated scores"
[variables]
load = { distribution = "gumbel", mean = 30.0, cv = 0.2 }
strength = { distribution = "lognormal", mean = 60.0, cv = 0.15 }
wear = { distribution = "beta", a = 2.0, b = 5.0 }
[[correlation]]
among = ["load", "strength", "wear"]
linear = [[1.0], [0.3, 1.0], [0.1, -0.2, 1.0]]
[target]
aim = "probability"
event = "load + 10*wear > strength and wear > 0.1"
require = ["strength > 20"]
failed = "inside"
"#;

const EXPECTATION: &str = r#"
title = "Cost of a shortfall"
[variables]
storage = { distribution = "logistic", mean = 10.0, sd = 2.0 }
inflow = { distribution = "pareto", minimum = 1.0, shape = 2.5 }
[target]
aim = "expectation"
integrand = "exp(-storage/4) * inflow"
"#;

fn problems() -> Vec<Problem> {
    let mut all: Vec<Problem> =
        [TRACER, EFFECTS, SUPPORTS, CHAIN, SCORES, EXPECTATION].iter().map(|text| read(text)).collect();
    all.push(read(&format!("{SUPPORTS}\n[tuning]\ncoordinates = \"standard-normal\"\n")));
    all
}

/// Points about the start, `width` scales wide, by a fixed stream.
fn points_about_start(problem: &Problem, n: usize, width: f64) -> Points {
    let mut rng = stream(5, Purpose::Trial, 0, 0);
    let start = problem.start();
    let mut points = Points::new(problem.dim());
    for _ in 0..n {
        let draw = |(near, spread): (&f64, &f64)| near + width * spread * normal::draw(&mut rng);
        let point: Vec<f64> = start.near.iter().zip(&start.spread).map(draw).collect();
        points.push(&point);
    }
    points
}

/// The value whose gradient a problem gives.
fn followed(problem: &Problem, points: &Points) -> Vec<f64> {
    let answer = problem.evaluate(points).unwrap();
    if problem.aim() == Aim::Density { answer.log_density } else { answer.value }
}

fn moved(points: &Points, j: usize, step: f64) -> Points {
    let mut other = points.clone();
    (0..points.len()).for_each(|i| other.set(i, j, points.get(i, j) + step));
    other
}

/// Differences of fourth order with step 1e-3 are right to about 1e-9 of the function's own size here.
#[test]
fn gradients_match_differences() {
    for problem in problems() {
        let points = points_about_start(&problem, 40, 0.7);
        let (answer, gradient) = problem.evaluate_with_gradient(&points).unwrap();
        assert_eq!(answer, problem.evaluate(&points).unwrap());
        let h = 1e-3;
        let mut compared = 0;
        for j in 0..problem.dim() {
            let at = |step: f64| followed(&problem, &moved(&points, j, step));
            let (a, b, c, d) = (at(h), at(-h), at(2.0 * h), at(-2.0 * h));
            for i in 0..points.len() {
                let difference = (8.0 * (a[i] - b[i]) - (c[i] - d[i])) / (12.0 * h);
                let size = a[i].abs().max(difference.abs()).max(1.0);
                if difference.is_finite() {
                    compared += 1;
                    let error = (gradient.get(i, j) - difference).abs();
                    assert!(
                        error <= 1e-6 * size,
                        "{}: point {i}, `{}`: {} against {difference}",
                        problem.title(),
                        problem.variables()[j].name,
                        gradient.get(i, j)
                    );
                }
            }
        }
        assert!(compared > 30 * problem.dim(), "{}: only {compared} compared", problem.title());
    }
}

/// The determinant of the matrix of differences `dx/dz`, by elimination.
fn log_abs_determinant(mut a: Vec<Vec<f64>>) -> f64 {
    let d = a.len();
    let mut sum = 0.0;
    for k in 0..d {
        let best = (k..d).max_by(|&i, &j| a[i][k].abs().total_cmp(&a[j][k].abs())).unwrap();
        a.swap(k, best);
        sum += a[k][k].abs().ln();
        for i in k + 1..d {
            let factor = a[i][k] / a[k][k];
            let pivot = a[k].clone();
            a[i].iter_mut().zip(pivot).for_each(|(entry, above)| *entry -= factor * above);
        }
    }
    sum
}

#[test]
fn jacobians_match_differences() {
    for problem in problems() {
        let points = points_about_start(&problem, 10, 0.7);
        let got = problem.log_jacobian(&points);
        let h = 1e-4;
        let sides: Vec<(Points, Points)> = (0..problem.dim())
            .map(|j| (problem.to_natural(&moved(&points, j, h)), problem.to_natural(&moved(&points, j, -h))))
            .collect();
        for (i, got) in got.into_iter().enumerate() {
            let column = |(up, down): &(Points, Points)| -> Vec<f64> {
                (0..problem.dim()).map(|k| (up.get(i, k) - down.get(i, k)) / (2.0 * h)).collect()
            };
            let want = log_abs_determinant(sides.iter().map(column).collect());
            assert!((got - want).abs() <= 1e-5, "{}: {got} against {want}", problem.title());
        }
    }
}

#[test]
fn maps_are_inverse_to_each_other() {
    for problem in problems() {
        let points = points_about_start(&problem, 200, 1.5);
        let back = problem.to_coordinates(&problem.to_natural(&points));
        for i in 0..points.len() {
            for j in 0..problem.dim() {
                let (got, want) = (back.get(i, j), points.get(i, j));
                assert!((got - want).abs() <= 1e-8 * want.abs().max(1.0), "{}: {got} {want}", problem.title());
            }
        }
    }
}

#[test]
fn the_text_reads_back_to_the_same_problem() {
    for problem in problems() {
        let again = read(&problem.text());
        assert_eq!(again.text(), problem.text());
        assert_eq!(again.digest(), problem.digest());
        assert_eq!(again.variables(), problem.variables());
        assert_eq!(again.start(), problem.start());
        assert_eq!(again.estimate_names(), problem.estimate_names());
        let points = points_about_start(&problem, 150, 1.0);
        assert_eq!(again.evaluate(&points).unwrap(), problem.evaluate(&points).unwrap());
        assert_eq!(again.estimates(&points), problem.estimates(&points));
    }
}

#[test]
fn the_number_of_threads_changes_no_bit() {
    for problem in problems() {
        let points = points_about_start(&problem, 700, 1.0);
        let on = |threads: usize| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
            pool.install(|| problem.evaluate_with_gradient(&points).unwrap())
        };
        let (one, four) = (on(1), on(4));
        let bits = |values: &[f64]| values.iter().map(|value| value.to_bits()).collect::<Vec<u64>>();
        assert_eq!(bits(&one.0.log_density), bits(&four.0.log_density));
        (0..problem.dim()).for_each(|j| assert_eq!(bits(&one.1.coordinate(j)), bits(&four.1.coordinate(j))));
    }
}

#[test]
fn a_block_of_points_and_a_single_one_agree() {
    for problem in problems() {
        let points = points_about_start(&problem, 150, 1.0);
        let all = problem.evaluate(&points).unwrap();
        for i in [0, 127, 128, 149] {
            let one = problem.evaluate(&points.select(&[i])).unwrap();
            assert_eq!(one.log_density[0].to_bits(), all.log_density[i].to_bits());
        }
    }
}

#[test]
fn a_digest_sees_the_data_and_the_seed_not_the_place() {
    let problem = read(EFFECTS);
    let other = read(&EFFECTS.replace("scale = 5.0", "scale = 5.5"));
    assert_ne!(problem.digest(), other.digest());
    let seeded = read(EFFECTS).with_tuning(&TuningKeys { seed: Some(2), ..TuningKeys::default() }).unwrap();
    assert_ne!(problem.digest(), seeded.digest());

    let folder = tempfile::tempdir().unwrap();
    let data = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/problem_files/data/floods.csv");
    let copy = folder.path().join("floods.csv");
    std::fs::copy(&data, &copy).unwrap();
    let moved = Problem::parse(EFFECTS, "moved.toml", folder.path()).unwrap();
    assert_eq!(problem.digest(), moved.digest());
    let text = std::fs::read_to_string(&copy).unwrap().replace("31.5", "31.6");
    std::fs::write(&copy, text).unwrap();
    let changed = Problem::parse(EFFECTS, "moved.toml", folder.path()).unwrap();
    assert_ne!(problem.digest(), changed.digest());
}

/// A copy in a run folder names its data from there.
#[test]
fn a_copy_finds_its_data() {
    let folder = tempfile::tempdir().unwrap();
    let data = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/problem_files/data/floods.csv");
    std::fs::copy(&data, folder.path().join("floods.csv")).unwrap();
    let path = folder.path().join("floods.toml");
    std::fs::write(&path, EFFECTS).unwrap();
    let problem = Problem::read(&path).unwrap();
    let run = folder.path().join("floods.run");
    std::fs::create_dir(&run).unwrap();
    let text = problem.text_for(&run);
    assert!(text.contains("file = \"../floods.csv\""), "{text}");
    let copy = run.join("problem.toml");
    std::fs::write(&copy, text).unwrap();
    assert_eq!(Problem::read(&copy).unwrap().digest(), problem.digest());
}

#[test]
fn tuning_keys_of_the_command_come_first() {
    let over = TuningKeys { budget: Some(900), ..TuningKeys::default() };
    let problem = read(TRACER).with_tuning(&over).unwrap();
    assert_eq!((problem.tuning().budget, problem.tuning().components), (Some(900), Some(3)));
    let natural =
        TuningKeys { coordinates: Some(evenpoise::problem::CoordinateChoice::Natural), ..TuningKeys::default() };
    let refused = read(TRACER).with_tuning(&natural).unwrap_err();
    assert!(refused.to_string().contains("`velocity` lives on [0.0, inf]"), "{refused}");
}
