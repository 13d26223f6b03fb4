//! Regressions on public data, with certified values or closed forms.

use super::{Known, check};
use evenpoise::weights::verdict::Word;

/// Norris, NIST Statistical Reference Datasets (linear regression, 36 observations, public domain), with a conjugate prior:
/// s2 ~ inverse-gamma(2, 1), b0 ~ N(0, 100 s2), b1 ~ N(1, s2).
///
/// Source: the closed form of the normal-inverse-gamma evidence and means,
/// `Z = (2 pi)^-18 sqrt(|Vn|/|V0|) b0^a0/bn^an Gamma(an)/Gamma(a0)`, in mpmath at 50 digits.
#[test]
fn norris_with_a_conjugate_prior_has_its_closed_form() {
    let text = r#"
title = "Norris, conjugate"
[variables]
s2 = { distribution = "inverse-gamma", shape = 2.0, scale = 1.0 }
b0 = { distribution = "normal", mean = 0.0, sd = "10 * sqrt(s2)" }
b1 = { distribution = "normal", mean = 1.0, sd = "sqrt(s2)" }
[data]
file = "norris.csv"
[target]
aim = "density"
log_factor = "sum(log_density_normal(y, b0 + b1 * x, sqrt(s2)))"
[estimates]
intercept = "b0"
slope = "b1"
variance = "s2"
"#;
    check(&Known {
        text,
        budget: 8000,
        seed: 1,
        log_normaliser: Some((-58.684_231_508_465_71, 0.01)),
        estimates: &[
            ("intercept", -0.262_141_36, 0.007),
            ("slope", 1.002_116_56, 1.5e-5),
            ("variance", 0.753_107_649_1, 0.007),
        ],
        ess_fraction: 0.85,
    });
}

/// The same data with the reference prior 1/s: the posterior of the coefficients is Student-t with 34 degrees of freedom about
/// the least squares fit.
///
/// Source: certified values of NIST StRD Norris: b0 = -0.262323073774029 (standard deviation 0.232818234301152), b1 =
/// 1.00211681802045 (0.429796848199937E-03), residual standard deviation 0.884796396144373. The posterior's variances are
/// (34/32) times the squared standard deviations, and E[s^2] = 34/32 times the squared residual one.
#[test]
fn norris_with_a_flat_prior_has_its_certified_fit() {
    let text = r#"
title = "Norris, flat"
[variables]
b0 = { range = [-inf, inf], near = 0.0, spread = 1.0 }
b1 = { range = [-inf, inf], near = 1.0, spread = 0.1 }
s = { range = [0.0, inf], near = 1.0, spread = 1.0 }
[data]
file = "norris.csv"
[target]
aim = "density"
log_factor = "sum(log_density_normal(y, b0 + b1 * x, s)) - log(s)"
[estimates]
intercept = "b0"
slope = "b1"
intercept_square = "(b0 + 0.262323073774029)^2"
slope_square = "1e6 * (b1 - 1.00211681802045)^2"
variance = "s^2"
"#;
    let widened = 34.0 / 32.0;
    let (se0, se1, s) = (0.232_818_234_301_152_f64, 0.429_796_848_199_937e-3_f64, 0.884_796_396_144_373_f64);
    let tuning = check(&Known {
        text,
        budget: 8000,
        seed: 2,
        log_normaliser: None,
        estimates: &[
            ("intercept", -0.262_323_073_774_029, 0.007),
            ("slope", 1.002_116_818_020_45, 1.5e-5),
            ("intercept_square", widened * se0 * se0, 0.003),
            ("slope_square", 1e6 * widened * se1 * se1, 0.01),
            ("variance", widened * s * s, 0.007),
        ],
        ess_fraction: 0.85,
    });
    assert_eq!(tuning.survey.modes.len(), 1);
}

/// Misra1a, NIST Statistical Reference Datasets (nonlinear regression, 14 observations, public domain), prior 1/s: a ridge
/// with correlation -0.998.
///
/// Source: with s integrated out the density is RSS(b1, b2)^-7; means and standard deviations by quadrature over b1 in
/// (150, 400), mpmath. Its maximum is the certified fit b1 = 2.3894212918E+02, b2 = 5.5015643181E-04.
#[test]
fn misra1a_has_its_ridge() {
    let text = r#"
title = "Misra1a"
[variables]
b1 = { range = [0.0, inf], near = 250.0, spread = 50.0 }
b2 = { range = [0.0, inf], near = 5e-4, spread = 2e-4 }
s = { range = [0.0, inf], near = 0.2, spread = 0.2 }
[data]
file = "misra1a.csv"
[target]
aim = "density"
log_factor = "sum(log_density_normal(y, b1 * (1 - exp(-b2 * x)), s)) - log(s)"
[estimates]
first = "b1"
second = "1e4 * b2"
first_square = "(b1 - 239.0172071734)^2"
"#;
    check(&Known {
        text,
        budget: 8000,
        seed: 3,
        log_normaliser: None,
        estimates: &[
            ("first", 239.017_207_173_4, 0.1),
            ("second", 5.500_708_117, 0.003),
            ("first_square", 2.974_350_630_7 * 2.974_350_630_7, 0.6),
        ],
        ess_fraction: 0.8,
    });
}

/// Distress of O-rings against temperature in 23 flights (Dalal, Fowlkes & Hoadley, JASA 84 (1989) 945-957): logistic
/// regression on the standardised temperature, a ~ N(0, 10^2), c ~ N(0, 2.5^2).
///
/// Source of the values: quadrature in two dimensions, mpmath.
#[test]
fn rings_have_their_posterior_and_their_prediction() {
    let text = r#"
title = "O-rings"
[variables]
a = { distribution = "normal", mean = 0.0, sd = 10.0 }
c = { distribution = "normal", mean = 0.0, sd = 2.5 }
[data]
file = "rings.csv"
[target]
aim = "density"
log_factor = "sum(log_mass_bernoulli_odds(distress, a + c * (temperature - 69.5652173913) / 7.0570795335))"
[estimates]
level = "a"
slope = "c"
level_square = "(a + 1.1900447625)^2"
at_31 = "logistic(a + c * (31 - 69.5652173913) / 7.0570795335)"
"#;
    let tuning = check(&Known {
        text,
        budget: 8000,
        seed: 4,
        log_normaliser: Some((-14.496_805_971_463, 0.006)),
        estimates: &[
            ("level", -1.190_044_762_5, 0.015),
            ("slope", -1.804_307_332_7, 0.02),
            ("level_square", 0.604_121_475 * 0.604_121_475, 0.015),
            ("at_31", 0.985_592_925_3, 0.002),
        ],
        ess_fraction: 0.9,
    });
    assert_eq!(tuning.verdict.word, Word::Sound, "{:?}", tuning.verdict.reasons);
}

/// Coaching in eight schools (Rubin, Journal of Educational Statistics 6 (1981) 377-401), hierarchical, flat in the mean
/// and in the spread of the effects: the effects are given these, so their funnel is no obstacle.
///
/// Source of the values: effects and mean integrated out in closed form, the spread by quadrature, mpmath.
#[test]
fn coaching_with_a_flat_prior() {
    let text = coaching(
        "mu = { range = [-inf, inf], near = 5.0, spread = 10.0 }\ntau = { range = [0.0, inf], near = 5.0, spread = 10.0 }",
    );
    check(&Known {
        text: &text,
        budget: 12_000,
        seed: 5,
        log_normaliser: Some((-25.078_415_109_2, 0.02)),
        estimates: &[
            ("mean", 7.932_375_018_2, 0.2),
            ("log_spread", 1.436_383_1, 0.05),
            ("first", 11.400_26, 0.35),
            ("last", 8.456_82, 0.35),
        ],
        ess_fraction: 0.6,
    });
}

/// The same with mu ~ N(0, 5^2) and tau ~ half-Cauchy(5).
#[test]
fn coaching_with_a_proper_prior() {
    let text = coaching(
        "mu = { distribution = \"normal\", mean = 0.0, sd = 5.0 }\ntau = { distribution = \"half-cauchy\", scale = 5.0 }",
    );
    check(&Known {
        text: &text,
        budget: 6000,
        seed: 6,
        log_normaliser: Some((-31.311_347_352_3, 0.02)),
        estimates: &[
            ("mean", 4.396_820_713_8, 0.15),
            ("log_spread", 0.802_142_263_9, 0.07),
            ("first", 6.211_88, 0.25),
            ("last", 4.854_25, 0.25),
        ],
        ess_fraction: 0.6,
    });
}

fn coaching(hyper: &str) -> String {
    format!(
        r#"
title = "Coaching"
[variables]
{hyper}
effect = {{ each = "school", distribution = "normal", mean = "mu", sd = "tau" }}
[data]
file = "coaching.csv"
[target]
aim = "density"
log_factor = "sum(log_density_normal(effect_seen, effect[school], error))"
[estimates]
mean = "mu"
log_spread = "log(tau)"
first = "effect['A']"
last = "effect['H']"
"#
    )
}
