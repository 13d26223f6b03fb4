//! Tunings of published problems against values from outside: certified regressions, closed forms, quadrature.
//!
//! Every problem is a problem file, tuned end to end with a fixed seed. An answer must lie within 4.5 of its own standard
//! errors of the exact value (false alarm of each: 7e-6; of all some forty together: 3e-4), and that error must itself be
//! as small as the budget allows, so that a test cannot pass by claiming to know little.

// Helpers of tests.
#![allow(clippy::unwrap_used)]

mod densities;
mod regressions;

use evenpoise::adapt::{Settings, Silent, Tuning, tune};
use evenpoise::problem::Problem;
use std::path::Path;

/// Standard errors within which an answer must lie.
const Z: f64 = 4.5;

/// What is known about a problem.
struct Known<'a> {
    /// The problem file, its data beside this one.
    text: &'a str,
    budget: u64,
    seed: u64,
    /// Exact log of the normalising constant, where it is known, and the largest error that may be claimed.
    log_normaliser: Option<(f64, f64)>,
    /// Estimates by name: exact value and the largest error that may be claimed.
    estimates: &'a [(&'a str, f64, f64)],
    /// Least ESS fraction.
    ess_fraction: f64,
}

/// Tunes and compares.
fn check(known: &Known<'_>) -> Tuning {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/published");
    let problem = Problem::parse(known.text, "problem.toml", &folder).unwrap_or_else(|e| panic!("{}", e.render(false)));
    let tuning = tune(&problem, &Settings::new(known.budget, known.seed), &mut Silent).unwrap();
    let score = tuning.score.as_ref().unwrap();
    assert_eq!(tuning.evaluations, known.budget);
    assert!(score.ess_fraction >= known.ess_fraction, "ESS fraction {}", score.ess_fraction);
    if let Some((exact, most)) = known.log_normaliser {
        near("log normaliser", score.log_normaliser, score.log_normaliser_se, exact, most);
    }
    assert_eq!(tuning.estimates.len(), known.estimates.len());
    for (name, exact, most) in known.estimates {
        let estimate = &tuning.estimates.iter().find(|(n, _)| n == name).unwrap().1;
        near(name, estimate.value, estimate.se, *exact, *most);
    }
    tuning
}

fn near(name: &str, value: f64, se: f64, exact: f64, most: f64) {
    assert!(se > 0.0 && se <= most, "{name}: claimed error {se:e}, at most {most:e}");
    assert!((value - exact).abs() <= Z * se, "{name}: {value} +- {se}, exact {exact}: z = {:.2}", (value - exact) / se);
}
