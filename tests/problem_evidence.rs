//! Evidences of problems that use groups and whole-number unknowns, tuned end to end against quadrature and exact sums.
//!
//! Reference values: `tests/reference/evidence.py` (SciPy 1.17.1). Bounds are 4.5 claimed standard errors: a false alarm of 7e-6
//! each, were the claims exact.
#![allow(clippy::unwrap_used)]

use evenpoise::adapt::{Settings, Silent, Tuning, tune};
use evenpoise::problem::Problem;
use std::path::Path;

fn tuned(text: &str, folder: &Path, budget: u64) -> Tuning {
    let problem =
        Problem::parse(text, "trial.toml", folder).unwrap_or_else(|errors| panic!("{}", errors.render(false)));
    tune(&problem, &Settings::new(budget, 2), &mut Silent).unwrap()
}

fn check(tuning: &Tuning, log_z: f64, estimate: f64) {
    let score = tuning.score.as_ref().unwrap();
    let off = (score.log_normaliser - log_z) / score.log_normaliser_se;
    assert!(off.abs() < 4.5, "log Z {} is {off:.1} standard errors off {log_z}", score.log_normaliser);
    let (name, found) = &tuning.estimates[0];
    let off = (found.value - estimate) / found.se;
    assert!(off.abs() < 4.5, "{name} {} is {off:.1} standard errors off {estimate}", found.value);
}

/// Four stations of three readings: the effects and their mean integrate out to a multivariate normal, the spread by quadrature.
#[test]
fn one_way_random_effects() {
    let folder = tempfile::tempdir().unwrap();
    let rows = "station,level\nAlder,2.1\nAlder,2.6\nAlder,1.9\nBirch,3.4\nBirch,3.0\nBirch,3.7\nCedar,0.8\nCedar,1.3\nCedar,1.1\n\
                Dogwood,2.2\nDogwood,2.9\nDogwood,2.5\n";
    std::fs::write(folder.path().join("levels.csv"), rows).unwrap();
    let text = r#"
title = "Levels at four stations"
[variables]
centre = { distribution = "normal", mean = 0.0, sd = 10.0 }
between = { distribution = "half-normal", scale = 1.0 }
effect = { each = "station", distribution = "normal", mean = 0.0, sd = "between" }
[data]
file = "levels.csv"
[target]
aim = "density"
log_factor = "sum(log_density_normal(level, centre + effect[station], 0.5))"
[estimates]
spread = "between"
"#;
    check(&tuned(text, folder.path(), 6_000), -14.586_762_256_0, 1.014_235_946_6);
}

/// Four leaks found of an unknown whole number, each found with an unknown chance: a sum of beta-binomial terms.
#[test]
fn a_whole_number_unknown() {
    let text = r#"
title = "Leaks in a pipe"
[variables]
leaks = { distribution = "poisson", mean = 6.0 }
chance = { distribution = "beta", a = 2.0, b = 2.0 }
[target]
aim = "density"
log_factor = "if(leaks >= 4, log_mass_binomial(4, leaks, chance), -inf)"
[estimates]
number = "leaks"
"#;
    check(&tuned(text, Path::new("."), 8_000), -2.011_015_953_4, 6.451_061_628_0);
}
