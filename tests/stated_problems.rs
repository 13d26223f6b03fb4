//! Three problems as people state them: a rating curve with an effect for each gauging station, six correlated inputs of
//! a reliability study, an evidence with a whole-number unknown. What the file says is what is evaluated, against SciPy.
//!
//! Reference values: `tests/reference/stated.py` (NumPy 2.4.6, SciPy 1.17.1), where the recipe is.
#![allow(clippy::unwrap_used)]

use evenpoise::numeric::Points;
use evenpoise::problem::Problem;
use std::path::Path;

fn read(text: &str, folder: &Path) -> Problem {
    Problem::parse(text, "stated.toml", folder).unwrap_or_else(|errors| panic!("{}", errors.render(false)))
}

const GAUGINGS: &str = "station,date,Stage (m),Flow (m3/s)\nAlder,3 May,0.52,2.9\nBirch,3 May,0.44,2.2\nAlder,9 June,0.81,7.4\n\
                        Cedar,9 June,0.9,\nBirch,1 July,1.02,11.3\nCedar,2 July,0.67,4.1\nAlder,4 July,1.3,NA\n";

const RATING: &str = r#"
title = "Rating curves of three stations (invented data)"

[variables]
coefficient = { distribution = "lognormal", log_mean = 2.302585092994046, log_sd = 0.5, unit = "m3/s" }
exponent = { distribution = "normal", mean = 1.5, sd = 0.3 }
noise = { distribution = "half-normal", scale = 0.2 }
between = { distribution = "half-cauchy", scale = 0.3 }
effect = { each = "station", distribution = "normal", mean = 0.0, sd = "between" }

[data]
file = "gaugings.csv"
names = { stage = "Stage (m)", flow = "Flow (m3/s)" }
missing = ["", "NA"]

[formulas]
log_flow = "log(coefficient) + effect[station] + exponent*log(stage)"

[target]
aim = "density"
log_factor = "sum(log_density_normal(log(flow), log_flow, noise))"

[estimates]
flow_at_one_metre = "coefficient*exp(effect)"
"#;

/// Names of stations in a text column, blank flows dropped: the log density in natural units is the sum of SciPy's.
#[test]
fn a_rating_curve_with_an_effect_for_each_station() {
    let folder = tempfile::tempdir().unwrap();
    std::fs::write(folder.path().join("gaugings.csv"), GAUGINGS).unwrap();
    let problem = read(RATING, folder.path());
    let names: Vec<&str> = problem.variables().iter().map(|variable| variable.name.as_str()).collect();
    assert_eq!(names[4..], ["effect[Alder]", "effect[Birch]", "effect[Cedar]"]);
    assert_eq!((problem.data_files()[0].rows, problem.data_files()[0].dropped), (7, 2));
    let natural = Points::from_rows(7, &[11.0, 1.6, 0.12, 0.2, 0.05, -0.11, 0.3]);
    let points = problem.to_coordinates(&natural);
    let log_density = problem.evaluate(&points).unwrap().log_density[0] - problem.log_jacobian(&points)[0];
    let want = -14.489_646_915_275_719;
    assert!((log_density - want).abs() < 1e-12, "{log_density}, not {want}");
    let estimates = problem.estimates(&points);
    assert_eq!(problem.estimate_names()[2], "flow_at_one_metre[Cedar]");
    assert!((estimates[2][0] - 11.0 * libm::exp(0.3)).abs() < 1e-12);
}

const CORRELATED: &str = r#"
title = "Seepage through the Ellenmere embankment (invented numbers)"

[variables]
inflow = { distribution = "gumbel", mean = 40.0, sd = 12.0 }
strength = { distribution = "lognormal", mean = 30.0, cv = 0.15 }
wear = { distribution = "gamma", mean = 2.0, sd = 0.5 }
seepage = { distribution = "exponential", mean = 1.5 }
opening = { distribution = "beta", a = 2.0, b = 3.0 }
depth = { distribution = "normal", mean = 5.0, sd = 0.4 }

[[correlation]]
among = ["inflow", "strength", "wear", "seepage", "opening", "depth"]
linear = [
  [1.0],
  [-0.30, 1.0],
  [0.25, -0.40, 1.0],
  [0.35, 0.10, 0.30, 1.0],
  [0.20, 0.05, -0.15, 0.10, 1.0],
  [0.50, -0.10, 0.15, 0.20, 0.30, 1.0],
]

[target]
aim = "probability"
event = "inflow*depth*(1 - opening)/100 + wear + seepage > strength/3"
"#;

/// Six inputs that are not normal with a matrix of linear correlations: the correlations of their scores are those of an
/// independent quadrature, and lead back to the matrix.
#[test]
fn six_correlated_inputs() {
    let problem = read(CORRELATED, Path::new("."));
    let group = &problem.correlations()[0];
    let scores: [&[f64]; 6] = [
        &[],
        &[-0.3137189925],
        &[0.2577309845, -0.4070879251],
        &[0.3826167164, 0.1107323179, 0.3285089769],
        &[0.2072916563, 0.0507028593, -0.1526144468, 0.1112274414],
        &[0.5157487325, -0.1005588524, 0.1510415975, 0.2214355636, 0.3026618517],
    ];
    let linear = [
        &[][..],
        &[-0.30],
        &[0.25, -0.40],
        &[0.35, 0.10, 0.30],
        &[0.20, 0.05, -0.15, 0.10],
        &[0.50, -0.10, 0.15, 0.20, 0.30],
    ];
    let back = group.linear(problem.variables());
    for i in 0..6 {
        for j in 0..i {
            let (score, again) = (group.score[i * 6 + j], back[i * 6 + j]);
            assert!((score - scores[i][j]).abs() < 2e-8, "scores of {i}, {j}: {score}, not {}", scores[i][j]);
            assert!((again - linear[i][j]).abs() < 1e-10, "linear of {i}, {j}: {again}, not {}", linear[i][j]);
        }
    }
    // Seen by themselves the variables start with their own central 95 %, whatever they are correlated with.
    let [_, low, high] = problem.start_of(5);
    // SciPy 1.17.1: norm.ppf([.025, .975], 5, .4)
    assert!((low - 4.216_014_406_183_978).abs() < 1e-12 && (high - 5.783_985_593_816_022).abs() < 1e-12);
}

/// Closed forms of Liu & Der Kiureghian (Probab. Eng. Mech. 1 (1986) 105-112): a normal and a lognormal variable have
/// `score = linear sqrt(exp(s^2) - 1) / s`, two lognormal ones
/// `score = ln(1 + linear sqrt((exp(s^2) - 1)(exp(t^2) - 1))) / (s t)`.
#[test]
fn linear_correlations_follow_the_closed_forms() {
    for (s, t, linear) in [(0.1_f64, 0.4_f64, 0.3_f64), (0.5, 0.25, -0.45), (0.9, 1.1, 0.6), (0.3, 0.3, 0.95)] {
        let text = |first: &str| {
            format!(
                "title = \"A pair\"\n[variables]\na = {first}\n\
                 b = {{ distribution = \"lognormal\", log_mean = 1.0, log_sd = {t} }}\n[[correlation]]\namong = [\"a\", \"b\"]\n\
                 linear = {linear}\n[target]\naim = \"probability\"\nevent = \"a > b\"\n"
            )
        };
        let score = |first: &str| read(&text(first), Path::new(".")).correlations()[0].score[1];
        let grown = |s: f64| libm::expm1(s * s).sqrt();
        let mixed = linear * grown(t) / t;
        if mixed < 1.0 {
            let got = score("{ distribution = \"normal\", mean = 2.0, sd = 3.0 }");
            assert!((got - mixed).abs() < 1e-10, "normal and lognormal {t}: {got}, not {mixed}");
        }
        let both = libm::log1p(linear * grown(s) * grown(t)) / (s * t);
        let got = score(&format!("{{ distribution = \"lognormal\", log_mean = -0.5, log_sd = {s} }}"));
        assert!((got - both).abs() < 1e-10, "lognormal {s} and {t}: {got}, not {both}");
    }
}

/// A whole number that is not known: over all its values the evidence is a sum, here by 60 terms and Simpson's rule.
#[test]
fn a_whole_number_is_summed_over() {
    let text = r#"
title = "Leaks of the feeder canal (invented numbers)"
[variables]
leaks = { distribution = "poisson", mean = 6.0 }
chance = { distribution = "beta", a = 2.0, b = 2.0 }
[target]
aim = "density"
log_factor = "if(leaks >= 4, log_mass_binomial(4, leaks, chance), -inf)"
"#;
    let problem = read(text, Path::new("."));
    let panels = 2000;
    let mut evidence = 0.0;
    for k in 4..60 {
        let rows: Vec<f64> = (1..panels).flat_map(|i| [f64::from(k), i as f64 / panels as f64]).collect();
        let points = problem.to_coordinates(&Points::from_rows(2, &rows));
        let (answers, jacobian) = (problem.evaluate(&points).unwrap().log_density, problem.log_jacobian(&points));
        let terms = answers.iter().zip(&jacobian).enumerate();
        let inner: f64 = terms.map(|(i, (l, j))| if i % 2 == 0 { 4.0 } else { 2.0 } * libm::exp(l - j)).sum();
        evidence += inner / (3.0 * panels as f64);
    }
    // tests/reference/evidence.py: the log of the sum of beta-binomial terms.
    assert!((libm::log(evidence) - (-2.011_015_953_4)).abs() < 1e-9, "{}", libm::log(evidence));
}
