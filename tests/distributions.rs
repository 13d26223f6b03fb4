//! Every distribution against its definition in mpmath, and the laws that tie its functions together.
//!
//! `reference/distributions.csv` is written by `reference/distributions.py` (mpmath 1.3.0), where the recipe is.
#![allow(clippy::unwrap_used, reason = "a test stops at the first surprise")]

use evenpoise::distribution::{Distribution, DistributionError};
use evenpoise::numeric::normal;
use evenpoise::numeric::quadrature::gauss_legendre;

/// A name in the reference table, the distribution and its parameters.
type Case = (&'static str, &'static str, &'static [(&'static str, f64)]);

const CASES: &[Case] = &[
    ("normal", "normal", &[("mean", 3.0), ("sd", 2.0)]),
    ("lognormal", "lognormal", &[("log_mean", 0.4), ("log_sd", 0.75)]),
    ("uniform", "uniform", &[("low", -2.0), ("high", 3.0)]),
    ("exponential", "exponential", &[("rate", 0.5)]),
    ("gamma", "gamma", &[("shape", 2.5), ("rate", 3.0)]),
    ("gamma-small", "gamma", &[("shape", 0.25), ("rate", 1.0)]),
    ("gamma-large", "gamma", &[("shape", 5000.0), ("rate", 100.0)]),
    ("inverse-gamma", "inverse-gamma", &[("shape", 3.0), ("scale", 2.0)]),
    ("chi-squared", "chi-squared", &[("df", 7.0)]),
    ("beta", "beta", &[("a", 2.5), ("b", 1.5)]),
    ("beta-wide", "beta", &[("a", 4.0), ("b", 6.0), ("low", 2.0), ("high", 10.0)]),
    ("weibull", "weibull", &[("shape", 1.75), ("scale", 4.0)]),
    ("gumbel", "gumbel", &[("location", 1.0), ("scale", 2.0)]),
    ("gumbel-min", "gumbel-min", &[("location", 1.0), ("scale", 2.0)]),
    ("gev-heavy", "gev", &[("location", 1.0), ("scale", 2.0), ("shape", 0.25)]),
    ("gev-bounded", "gev", &[("location", 1.0), ("scale", 2.0), ("shape", -0.5)]),
    ("pareto", "pareto", &[("minimum", 2.0), ("shape", 1.5)]),
    ("student-t", "student-t", &[("df", 4.5), ("location", 1.0), ("scale", 2.0)]),
    ("student-t-million", "student-t", &[("df", 1e6)]),
    ("cauchy", "cauchy", &[("location", 1.0), ("scale", 2.0)]),
    ("half-normal", "half-normal", &[("scale", 3.0)]),
    ("half-cauchy", "half-cauchy", &[("scale", 3.0)]),
    ("logistic", "logistic", &[("location", 1.0), ("scale", 2.0)]),
    ("triangular", "triangular", &[("low", 1.0), ("mode", 2.0), ("high", 5.0)]),
    ("bernoulli", "bernoulli", &[("p", 0.3)]),
    ("binomial", "binomial", &[("n", 60.0), ("p", 0.3)]),
    ("binomial-rare", "binomial", &[("n", 2000.0), ("p", 0.001_953_125)]),
    ("poisson", "poisson", &[("mean", 7.5)]),
    ("poisson-large", "poisson", &[("mean", 900.0)]),
    ("geometric", "geometric", &[("p", 0.25)]),
    ("integers", "integers", &[("low", -7.0), ("high", 12.0)]),
];

fn distribution(case: &str) -> Distribution {
    let (_, name, parameters) = CASES.iter().find(|(known, _, _)| *known == case).unwrap();
    Distribution::new(name, parameters).unwrap()
}

fn continuous() -> impl Iterator<Item = (&'static str, Distribution)> {
    CASES.iter().map(|(case, _, _)| (*case, distribution(case))).filter(|(_, law)| !law.is_discrete())
}

/// How far the log of a tail or density moves when `x` moves by a rounding and the parameters by one each: what no
/// implementation in doubles can be asked to undercut. `x - origin` has a rounding of `x`'s own size.
fn conditioning(law: &Distribution, x: f64, log_value: f64) -> f64 {
    let (low, high) = law.support();
    let spread =
        x.abs() + if low.is_finite() { low.abs() } else { 0.0 } + if high.is_finite() { high.abs() } else { 0.0 };
    f64::EPSILON * (spread + 3.0) * (libm::exp(law.log_density(x) - log_value)).min(1e12)
}

/// Log densities, and both tails in logs, at 1e-13 relative (1e-14 absolute for values of order one and less), beyond
/// what the rounding of `x` itself does. Tails near one are minus the other tail, whose relative error is
/// 2e-15 times its logarithm.
#[test]
fn densities_and_tails_match_mpmath() {
    let table =
        std::fs::read_to_string(concat!(env!("CARGO_MANIFEST_DIR"), "/tests/reference/distributions.csv")).unwrap();
    let mut checked = std::collections::BTreeMap::new();
    for line in table.lines().skip(1) {
        let fields: Vec<&str> = line.split(',').collect();
        let number = |i: usize| fields[i].parse::<f64>().unwrap();
        let (law, x) = (distribution(fields[0]), number(1));
        let slope = law.log_density_slope(x).abs() * (x.abs() + 10.0) * f64::EPSILON;
        check(law.log_density(x), number(2), 1e-14 + slope, &format!("{} log density at {x:e}", fields[0]));
        for (got, want, name) in
            [(law.log_lower_tail(x), number(3), "lower"), (law.log_upper_tail(x), number(4), "upper")]
        {
            let rounding = if law.is_discrete() { 0.0 } else { conditioning(&law, x, want) };
            let what = format!("{} log {name} tail at {x:e}", fields[0]);
            if want.abs() > 0.1 {
                check(got, want, 1e-14 + rounding, &what);
            } else if want.abs() < 1e-300 {
                assert!(got <= 0.0 && got.abs() < 2e-300, "{what} is {got:e}, not {want:e}");
            } else {
                let bound = 2e-15 * (8.0 - libm::log(want.abs())) * want.abs() + rounding;
                assert!((got - want).abs() <= bound, "{what} is {got:e}, not {want:e}");
            }
        }
        *checked.entry(fields[0].to_owned()).or_insert(0) += 1;
    }
    assert_eq!(checked.len(), CASES.len(), "every case has rows: {checked:?}");
    assert!(checked.iter().all(|(case, &rows)| rows >= if case == "bernoulli" { 1 } else { 12 }), "{checked:?}");
}

fn check(got: f64, want: f64, absolute: f64, what: &str) {
    if got == want {
        return; // both -inf, at the last value of a discrete distribution
    }
    assert!((got - want).abs() <= 1e-13 * want.abs() + absolute, "{what} is {got:e}, not {want:e}");
}

/// The tail of the quantile is the tail asked for, at 1e-13 of its logarithm, from 1e-300 to the median on both sides, but
/// for the rounding of the quantile.
#[test]
fn quantiles_invert_both_tails() {
    for (case, law) in continuous() {
        for tail in [1e-300, 1e-200, 1e-50, 1e-12, 1e-3, 0.1, 0.4, 0.5] {
            for upper in [false, true] {
                let x = law.quantile_of_tail(tail, upper);
                let end = if upper { law.support().1 } else { law.support().0 };
                if x == end || x.is_infinite() || (x - end).abs() < 1e-307 {
                    continue; // nearer to the end, or farther out, than a double can be
                }
                let got = if upper { law.log_upper_tail(x) } else { law.log_lower_tail(x) };
                let want = libm::log(tail);
                let bound = 1e-13 * want.abs() + 2.0 * conditioning(&law, x, want);
                assert!(
                    (got - want).abs() <= bound,
                    "{case}: tail {tail:e}, upper {upper}, x = {x:e}: {got} for {want}"
                );
            }
        }
        assert!(law.quantile_of_tail(1.5, true).is_nan());
        assert_eq!(law.quantile_of_tail(0.0, true), law.support().1, "{case}");
        assert_eq!(law.quantile_of_tail(1.0, true), law.support().0, "{case}");
    }
}

/// `from_score` and `score` are inverse to each other, and the slope between them is that of a difference quotient.
#[test]
fn scores_go_there_and_back() {
    for (case, law) in continuous() {
        for u in [-8.0, -3.0, -1.0, -0.2, 0.3, 1.4, 4.0, 7.0] {
            let x = law.from_score(u);
            let back = law.score(x);
            let rounding = 4.0 * f64::EPSILON * (x.abs() + 10.0) / law.score_slope(u, x);
            assert!((back - u).abs() <= 2e-14 * (1.0 + u.abs()) + rounding, "{case}: score {u} came back as {back}");
            let h = 1e-4;
            let difference = (law.from_score(u + h) - law.from_score(u - h)) / (2.0 * h);
            let slope = law.score_slope(u, x);
            let noise = 1e-6 * slope + 4.0 * f64::EPSILON * (x.abs() + 10.0) / h;
            assert!((slope - difference).abs() <= noise, "{case}: slope {slope} or {difference} at {u}");
        }
    }
}

/// Slopes of log densities against central differences; densities integrate to one between the scores -8 and 8 (in cells of
/// a tenth of a score; the kink of the triangular one and the pole of the small gamma bound the accuracy).
#[test]
fn log_density_slopes_and_normalisation() {
    for (case, law) in continuous() {
        for u in [-2.5, -0.7, 0.4, 1.9] {
            let x = law.from_score(u);
            let h = 1e-5 * law.score_slope(u, x);
            let difference = (law.log_density(x + h) - law.log_density(x - h)) / (2.0 * h);
            let slope = law.log_density_slope(x);
            let bound = 1e-6 * (slope.abs() + 1.0 / law.score_slope(u, x)) + 1e-5 / law.score_slope(u, x);
            assert!((slope - difference).abs() <= bound, "{case}: slope {slope} or {difference} at {x}");
        }
        let total: f64 = (-80..80)
            .map(|k| {
                let (a, b) = (law.from_score(0.1 * f64::from(k)), law.from_score(0.1 * f64::from(k + 1)));
                gauss_legendre(a, b).map(|(x, weight)| weight * libm::exp(law.log_density(x))).sum::<f64>()
            })
            .sum();
        assert!((total - 1.0).abs() < 1e-6, "{case}: the density integrates to {total}");
        let xs: Vec<f64> = (-6..7).map(|k| law.from_score(f64::from(k))).chain([law.support().0 - 1.0]).collect();
        let mut column = vec![0.0; xs.len()];
        law.log_density_column(&xs, &mut column);
        assert!(xs.iter().zip(&column).all(|(&x, &value)| law.log_density(x).to_bits() == value.to_bits()), "{case}");
    }
}

/// Parameters from moments give those moments back.
#[test]
fn moments_round_trip() {
    for name in ["normal", "lognormal", "gamma", "weibull", "gumbel", "gumbel-min", "logistic", "beta"] {
        for (mean, cv) in [(0.3, 0.25), (0.8, 0.01), (0.5, 0.9), (0.6, 1e-4)] {
            for form in ["sd", "cv"] {
                let value = if form == "sd" { cv * mean } else { cv };
                let law = Distribution::new(name, &[("mean", mean), (form, value)]).unwrap();
                let (m, s) = (law.mean().unwrap(), law.sd().unwrap());
                assert!((m / mean - 1.0).abs() < 1e-13, "{name}: mean {m}, not {mean}");
                assert!((s / (cv * mean) - 1.0).abs() < 1e-11, "{name}: sd {s}, not {}", cv * mean);
            }
        }
    }
    // Source: closed forms. Gamma with mean 2 and cv 1/2 has shape 4 and rate 2; Weibull with cv 1 is exponential.
    let gamma = Distribution::new("gamma", &[("mean", 2.0), ("cv", 0.5)]).unwrap();
    assert_eq!(gamma.parameters(), vec![("shape", 4.0), ("rate", 2.0)]);
    let weibull = Distribution::new("weibull", &[("mean", 3.0), ("sd", 3.0)]).unwrap();
    assert!(weibull.parameters().iter().zip([1.0, 3.0]).all(|((_, got), want)| (got / want - 1.0).abs() < 1e-13));
    // Moments of every family by the integral over scores agree with its formulas; a kink costs some digits.
    for (case, law) in continuous() {
        let (Some(mean), Some(sd)) = (law.mean(), law.sd()) else { continue };
        let bound = if case == "triangular" { 1e-6 } else { 1e-9 };
        let whole = law.truncated(f64::NEG_INFINITY, f64::INFINITY).unwrap();
        assert!(
            (whole.mean().unwrap() - mean).abs() < bound * (mean.abs() + sd),
            "{case}: mean {:?} or {mean}",
            whole.mean()
        );
        assert!((whole.sd().unwrap() / sd - 1.0).abs() < bound, "{case}: sd {:?} or {sd}", whole.sd());
    }
}

/// `from_score` gives the `k` with `F(k - 1) < Phi(u) <= F(k)`, and `score` a score inside the step of its value.
#[test]
fn discrete_scores_follow_the_steps() {
    for (case, _, _) in CASES {
        let law = distribution(case);
        if !law.is_discrete() {
            continue;
        }
        let mut total = 0.0;
        let mut previous = f64::NEG_INFINITY;
        for step in -350..350 {
            let u = f64::from(step) * 0.1 + 0.037;
            let k = law.from_score(u);
            assert!(k >= previous && k == k.floor(), "{case}");
            if u > 0.0 {
                let tail = normal::log_upper_tail(u);
                assert!(law.log_upper_tail(k) <= tail && law.log_upper_tail(k - 1.0) > tail, "{case} at {u}: {k}");
            } else {
                let tail = normal::log_lower_tail(u);
                assert!(law.log_lower_tail(k) >= tail && law.log_lower_tail(k - 1.0) < tail, "{case} at {u}: {k}");
            }
            assert_eq!(law.from_score(law.score(k)), k, "{case} at {u}");
            let mut j = previous.max(law.from_score(-9.0) - 1.0) + 1.0;
            while j <= k && u < 9.0 {
                total += libm::exp(law.log_density(j));
                j += 1.0;
            }
            previous = k;
        }
        assert!((total - 1.0).abs() < 1e-12, "{case}: masses sum to {total}");
        assert_eq!(law.log_density(law.median() + 0.5), f64::NEG_INFINITY);
        assert_eq!(law.score_slope(0.3, law.from_score(0.3)), 0.0);
    }
}

/// Truncation: to the half-line above the mean (a half-normal), far out in a tail (40 standard deviations), to a sliver,
/// and of a discrete law; tails and quantiles agree with each other everywhere.
#[test]
fn truncation_is_renormalised_everywhere() {
    let normal = Distribution::new("normal", &[("mean", 0.0), ("sd", 1.0)]).unwrap();
    let half = Distribution::new("half-normal", &[("scale", 1.0)]).unwrap();
    let above = normal.truncated(0.0, f64::INFINITY).unwrap();
    for x in [1e-200, 1e-9, 0.3, 1.0, 5.0, 37.0] {
        assert!((above.log_density(x) - half.log_density(x)).abs() < 1e-14);
        assert!(
            (above.log_lower_tail(x) - half.log_lower_tail(x)).abs() < 1e-13 * (1.0 + half.log_lower_tail(x).abs()),
            "{x}"
        );
        assert!(
            (above.log_upper_tail(x) - half.log_upper_tail(x)).abs() < 1e-13 * (1.0 + half.log_upper_tail(x).abs()),
            "{x}"
        );
    }
    for tail in [1e-300, 1e-20, 0.01, 0.4] {
        for upper in [false, true] {
            let (got, want) = (above.quantile_of_tail(tail, upper), half.quantile_of_tail(tail, upper));
            assert!((got / want - 1.0).abs() < 1e-12, "tail {tail:e}: {got:e} or {want:e}");
        }
    }
    // Source: mpmath 1.3.0 at 500 digits, erfc(x/sqrt 2)/erfc(40/sqrt 2) at x = 40.01.
    let far = normal.truncated(40.0, f64::INFINITY).unwrap();
    assert!((far.log_upper_tail(40.01) - (-0.4002996573437427)).abs() < 1e-12, "{}", far.log_upper_tail(40.01));
    for law in [far, normal.truncated(2.0, 2.0001).unwrap(), normal.truncated(-1.0, 1.5).unwrap()] {
        for u in [-6.0, -2.0, 0.0, 1.0, 5.0] {
            let x = law.from_score(u);
            let rounding = 4.0 * f64::EPSILON * x.abs() / law.score_slope(u, x);
            assert!((law.score(x) - u).abs() < 1e-12 + rounding, "{u} came back as {} by {x}", law.score(x));
        }
        assert_eq!(law.log_density(law.support().0 - 1e-3), f64::NEG_INFINITY);
        assert!(law.lower_tail(law.median()) - 0.5 < 1e-12);
    }
    let events = Distribution::new("poisson", &[("mean", 7.5)]).unwrap().truncated(2.5, 11.0).unwrap();
    assert_eq!(events.support(), (3.0, 11.0));
    let total: f64 = (0..30).map(|k| libm::exp(events.log_density(f64::from(k)))).sum();
    assert!((total - 1.0).abs() < 1e-14);
    for k in 3..12 {
        let below: f64 = (3..=k).map(|j| libm::exp(events.log_density(f64::from(j)))).sum();
        assert!((events.lower_tail(f64::from(k)) - below).abs() < 1e-14);
        assert_eq!(events.from_score(events.score(f64::from(k))), f64::from(k));
    }
    assert_eq!((events.quantile_of_tail(1e-300, false), events.quantile_of_tail(1e-300, true)), (3.0, 11.0));
    // A flat law cut to an inner interval is flat there.
    let flat = Distribution::new("uniform", &[("low", 0.0), ("high", 10.0)]).unwrap().truncated(2.0, 4.0).unwrap();
    assert_eq!(flat, flat.truncated(0.0, 4.0).unwrap());
    assert!((flat.log_density(3.0) + libm::log(2.0)).abs() < 1e-15 && (flat.mean().unwrap() - 3.0).abs() < 1e-12);
    assert!((flat.sd().unwrap() - 2.0 / 12.0_f64.sqrt()).abs() < 1e-12);
}

#[test]
fn shifts_move_what_lives_on_a_half_line() {
    let plain = Distribution::new("gamma", &[("shape", 2.0), ("rate", 1.0)]).unwrap();
    let moved = plain.shifted(10.0).unwrap().truncated(f64::NEG_INFINITY, 15.0).unwrap();
    assert_eq!(moved.support(), (10.0, 15.0));
    let inner = plain.truncated(0.0, 5.0).unwrap();
    assert!((moved.log_density(12.5) - inner.log_density(2.5)).abs() < 1e-15);
    assert!((moved.mean().unwrap() - 10.0 - inner.mean().unwrap()).abs() < 1e-12);
    let normal = Distribution::new("normal", &[("mean", 0.0), ("sd", 1.0)]).unwrap();
    assert!(matches!(normal.shifted(1.0), Err(DistributionError::Shift { distribution: "normal", .. })));
    assert!(matches!(plain.shifted(f64::NAN), Err(DistributionError::Shift { .. })));
}

/// Each error carries its numbers, and says what to write instead.
#[test]
fn errors_say_what_to_write() {
    for (name, parameters, text) in [
        ("norml", &[][..], "there is no distribution `norml`; did you mean `normal`?"),
        (
            "gamma",
            &[("shap", 1.0), ("rate", 1.0)],
            "gamma has no parameter `shap` (did you mean `shape`?); it takes shape, rate; or mean, sd; or mean, cv",
        ),
        (
            "gamma",
            &[("shape", 1.0), ("sd", 1.0)],
            "gamma takes shape, rate; or mean, sd; or mean, cv; given: shape, sd",
        ),
        ("gamma", &[("shape", 1.0), ("rate", -1.0)], "gamma: rate = -1 is not allowed; give a number above 0"),
        ("gamma", &[("shape", f64::NAN), ("rate", 1.0)], "gamma: shape = NaN is not allowed; give a number above 0"),
        ("uniform", &[("low", 1.0), ("high", 1.0)], "uniform: high = 1 is not allowed; give a number above low = 1"),
        (
            "beta",
            &[("mean", 0.5), ("sd", 0.5)],
            "beta: sd = 0.5 is not allowed; give less than 0.5, the most that a mean of 0.5 leaves room for",
        ),
        ("binomial", &[("n", 2.5), ("p", 0.5)], "binomial: n = 2.5 is not allowed; give a whole number from 1 on"),
        (
            "normal",
            &[("mean", 0.0), ("cv", 0.5)],
            "normal: mean = 0 is not allowed; give a mean other than 0 with cv, or sd instead of cv",
        ),
        ("poisson", &[("mean", 1.0), ("mean", 2.0)], "poisson: `mean` is given twice; leave one out"),
        ("student-t", &[], "student-t takes df, location (otherwise 0), scale (otherwise 1); given: none"),
    ] {
        assert_eq!(Distribution::new(name, parameters).unwrap_err().to_string(), text);
    }
    let beta = Distribution::new("beta", &[("a", 1.0), ("b", 1.0)]).unwrap();
    let none = beta.truncated(2.0, 3.0).unwrap_err();
    assert_eq!(none.to_string(), "beta has no probability in [2, 3]; its values lie in [0, 1]");
    assert!(matches!(beta.truncated(0.5, 0.2), Err(DistributionError::Between { .. })));
    assert!(matches!(beta.truncated(f64::NAN, 0.2), Err(DistributionError::Between { .. })));
    assert_eq!(Distribution::NAMES.len(), 24);
    for name in Distribution::NAMES {
        assert!(!Distribution::parameters_of(name).unwrap().is_empty());
        assert!(CASES.iter().any(|(_, known, _)| known == name), "{name} is tested");
    }
}
