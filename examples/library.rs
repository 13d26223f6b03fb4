//! The library called with a target in code: `cargo run --release --example library`.
//!
//! How many waves run over the parapet of the Ellenmere dam in a storm, before and after it was raised? Everything here is
//! invented: there is no such reservoir, and nobody has counted anything there. The counts are Poisson and the measure of
//! the two rates is flat, so every answer is known in closed form, and the example holds itself to them.

// An example prints.
#![allow(clippy::print_stdout)]

use evenpoise::adapt::{Settings, Silent, tune};
use evenpoise::model::Closure;
use evenpoise::problem::{Aim, Problem, Variable};
use evenpoise::weights::verdict::Word;

/// Storms and waves counted in them, before and after the parapet was raised.
const BEFORE: (f64, f64) = (12.0, 41.0);
const AFTER: (f64, f64) = (9.0, 11.0);

/// Log likelihood of a rate, without the factorials.
fn log_likelihood((storms, waves): (f64, f64), rate: f64) -> f64 {
    waves * libm::log(rate) - storms * rate
}

/// `ln` of the integral of the likelihood over all rates: `Gamma(waves + 1) / storms^(waves + 1)`.
fn exact_log_integral((storms, waves): (f64, f64)) -> f64 {
    libm::lgamma(waves + 1.0) - (waves + 1.0) * libm::log(storms)
}

fn main() -> Result<(), Box<dyn std::error::Error>> {
    // Values and slopes in the variables' own units: the library takes care of coordinates and Jacobians.
    let target =
        Closure::new(2, |x| log_likelihood(BEFORE, x[0]) + log_likelihood(AFTER, x[1])).with_gradient(|x, slope| {
            slope[0] = BEFORE.1 / x[0] - BEFORE.0;
            slope[1] = AFTER.1 / x[1] - AFTER.0;
            log_likelihood(BEFORE, x[0]) + log_likelihood(AFTER, x[1])
        });
    let variables = vec![
        Variable::range("before", 0.0, f64::INFINITY, 3.0, 3.0).with_unit("waves a storm"),
        Variable::range("after", 0.0, f64::INFINITY, 3.0, 3.0).with_unit("waves a storm"),
    ];
    let ratio = Closure::new(2, |x| x[1] / x[0]);
    let problem = Problem::from_model("Waves over the parapet", variables, Aim::Density, Box::new(target))?
        .with_estimates(&["ratio"], Box::new(ratio))?;

    let tuning = tune(&problem, &Settings::new(5000, 1), &mut Silent)?;
    let score = tuning.score.as_ref().ok_or("no draw met the target")?;
    let (name, estimate) = &tuning.estimates[0];
    println!("verdict       {}", tuning.verdict.word);
    println!("ESS fraction  {:.3} on {} report draws", score.ess_fraction, score.draws);
    println!("log integral  {:.4} +- {:.4}", score.log_normaliser, score.log_normaliser_se);
    println!("{name}         {:.4} +- {:.4}", estimate.value, estimate.se);

    // Each within 5 standard errors: false alarm 6e-7.
    let log_integral = exact_log_integral(BEFORE) + exact_log_integral(AFTER);
    let mean_ratio = (AFTER.1 + 1.0) / AFTER.0 * BEFORE.0 / BEFORE.1;
    assert_eq!(tuning.verdict.word, Word::Sound, "{:?}", tuning.verdict.reasons);
    assert!(score.ess_fraction > 0.8);
    assert!((score.log_normaliser - log_integral).abs() < 5.0 * score.log_normaliser_se);
    assert!((estimate.value - mean_ratio).abs() < 5.0 * estimate.se);
    println!("exact         {log_integral:.4} and {mean_ratio:.4}");
    Ok(())
}
