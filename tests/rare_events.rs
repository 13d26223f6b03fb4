//! Probabilities and means against exact and published answers, through the public door.
//!
//! Every bound is a multiple of the claimed standard error, the false-alarm rate beside it: over three seeds a run beyond 4.5 standard
//! errors has a chance below 3e-5.
#![allow(clippy::unwrap_used, missing_docs)]

use evenpoise::adapt::rare::{RareAnswer, RareStep, RareTuning, tune_rare};
use evenpoise::adapt::{Settings, Silent, TuneError};
use evenpoise::numeric::normal::upper_tail;
use evenpoise::problem::Problem;
use evenpoise::weights::verdict::Word;
use std::path::Path;

const STANDARD: &str = "{ distribution = \"normal\", mean = 0.0, sd = 1.0 }";

fn event(variables: &str, event: &str) -> Problem {
    problem(&format!("[variables]\n{variables}[target]\naim = \"probability\"\nevent = \"{event}\"\n"))
}

fn mean(variables: &str, integrand: &str) -> Problem {
    problem(&format!("[variables]\n{variables}[target]\naim = \"expectation\"\nintegrand = \"{integrand}\"\n"))
}

fn problem(body: &str) -> Problem {
    Problem::parse(&format!("title = \"A test\"\n{body}"), "test.toml", Path::new("."))
        .unwrap_or_else(|e| panic!("{e}"))
}

fn pair() -> String {
    format!("a = {STANDARD}\nb = {STANDARD}\n")
}

fn tuned(problem: &Problem, budget: u64, seed: u64) -> RareTuning {
    tune_rare(problem, &Settings::new(budget, seed), &mut Silent).unwrap()
}

/// Three seeds: each within 4.5 claimed standard errors (and rounding) of the exact answer, and the claimed relative error below `cv`.
fn check(problem: &Problem, budget: u64, exact: f64, cv: f64) -> Vec<RareTuning> {
    (1..=3)
        .map(|seed| {
            let tuning = tuned(problem, budget, seed);
            let value = tuning.answer.value().unwrap();
            let z = (value.value - exact) / value.se;
            assert!(z.abs() < 4.5, "seed {seed}: {} instead of {exact}, z = {z}", value.value);
            assert!(value.cv < cv, "seed {seed}: claimed relative error {}", value.cv);
            assert_eq!(tuning.evaluations, budget);
            assert!(value.interval_95[0] < value.value && value.value < value.interval_95[1]);
            tuning
        })
        .collect()
}

/// Source: the normal table, P(N > 3), P(N > 5).
#[test]
fn hyperplanes_in_few_and_many_dimensions() {
    for (n, beta, budget) in [(2, 5.0, 2000), (10, 5.0, 4000), (100, 3.0, 4000)] {
        let group = format!("u = {{ each = {n}, distribution = \"normal\", mean = 0.0, sd = 1.0 }}\n");
        let problem = event(&group, &format!("sum(u)/sqrt({n}) >= {beta}"));
        for tuning in check(&problem, budget, upper_tail(beta), 0.02) {
            let nearest = &tuning.survey.points[0];
            assert!((nearest.distance - beta).abs() < 0.02, "{}", nearest.distance);
            assert!((nearest.first_order_probability.unwrap() / upper_tail(beta) - 1.0).abs() < 0.2);
            assert!(nearest.importance.iter().all(|a| (a * f64::from(n) - 1.0).abs() < 0.1));
            assert!(nearest.importance.iter().all(|&a| a > 0.0));
        }
    }
}

/// Source: the exact integrals `2 Phi(-k/2) + 4 int_0^{k/2} phi(t) Phi(-(3 + .2 t^2)) dt`, mpmath 1.3.0.
#[test]
fn all_four_branches_are_found() {
    for (k, exact) in [(7, 2.222_795_066_2e-3), (6, 4.457_331_490_6e-3)] {
        let branches = format!(
            "min(3 + 0.1*(a-b)^2 - (a+b)/sqrt(2), 3 + 0.1*(a-b)^2 + (a+b)/sqrt(2), a-b + {k}/sqrt(2), b-a + {k}/sqrt(2)) <= 0"
        );
        for tuning in check(&event(&pair(), &branches), 4000, exact, 0.025) {
            // Points at 3 along the diagonal, at k/2 across it.
            for (x, y, distance) in
                [(1.0, 1.0, 3.0), (-1.0, -1.0, 3.0), (1.0, -1.0, 0.5 * f64::from(k)), (-1.0, 1.0, 0.5 * f64::from(k))]
            {
                let at = distance / 2.0_f64.sqrt();
                let near = |p: &[f64]| (p[0] - x * at).hypot(p[1] - y * at) < 0.1;
                assert!(tuning.survey.points.iter().any(|p| near(&p.scores)), "no point near ({x}, {y}) times {at}");
            }
        }
    }
}

/// Source: the gamma distribution: SciPy 1.17.1, `gamma.cdf(8.951, 20)` and `gamma.sf(12, 2)`.
#[test]
fn sums_of_exponentials_follow_the_gamma_distribution() {
    let twenty = event("x = { each = 20, distribution = \"exponential\", mean = 1.0 }\n", "sum(x) <= 8.951");
    check(&twenty, 5000, 9.906_030_7e-4, 0.06);
    let two = event("x = { each = 2, distribution = \"exponential\", mean = 1.0 }\n", "x[1] + x[2] >= 12");
    check(&two, 3000, 13.0 * (-12.0_f64).exp(), 0.03);
}

/// The bridge network of de Boer, Kroese, Mannor & Rubinstein (Ann. Oper. Res. 134 (2005) 19-67); exact value by nested
/// Gauss-Legendre quadrature.
#[test]
fn the_bridge_network() {
    let variables: String = [0.25, 0.4, 0.1, 0.3, 0.2]
        .iter()
        .enumerate()
        .map(|(i, m)| format!("x{} = {{ distribution = \"exponential\", mean = {m} }}\n", i + 1))
        .collect();
    let problem = event(&variables, "min(x1 + x4, x1 + x3 + x5, x2 + x5, x2 + x3 + x4) >= 2");
    check(&problem, 10_000, 1.342_459_749_3e-5, 0.04);
}

/// Exact values by quadrature over one variable (mpmath 1.3.0): two-variable limit states of Borri & Speranzini 1997, Der Kiureghian &
/// Dakessian 1998, Echard et al. 2013, and of the reliability challenge of Rozsas & Slobbe 2019.
#[test]
fn bent_and_divided_events() {
    for (condition, budget, exact, cv) in [
        ("0.1*(a-b)^2 - (a+b)/sqrt(2) + 2.5 <= 0", 5000, 4.207_305_511_3e-3, 0.02),
        ("5 - b - 0.5*(a-0.1)^2 <= 0", 5000, 3.016_311_901_3e-3, 0.02),
        ("0.5*(a-2)^2 - 1.5*(b-5)^3 - 3 <= 0", 5000, 2.874_537_609_2e-5, 0.03),
        ("3 - a*b <= 0", 5000, 9.819_298_7e-3, 0.02),
        ("2 - b + (4*a)^4 <= 0", 5000, 3.226_681_209_6e-3, 0.03),
        ("a^2 >= 16", 3000, 2.0 * upper_tail(4.0), 0.03),
    ] {
        check(&event(&pair(), condition), budget, exact, cv);
    }
}

/// `E max(exp(s u) - K, 0) = exp(s^2/2) Phi(s - d) - K Phi(-d)`, `d = ln(K)/s` (Black & Scholes 1973), deep out of reach; and a
/// signed integrand, `E (u - 2) 1{u > 1} = phi(1) - 2 Phi(-1)`.
#[test]
fn means_against_closed_forms() {
    let one = format!("a = {STANDARD}\n");
    let (s, k) = (0.25_f64, 2.5_f64);
    let d = k.ln() / s;
    let exact = (0.5 * s * s).exp() * upper_tail(d - s) - k * upper_tail(d);
    for tuning in check(&mean(&one, &format!("max(exp({s}*a) - {k}, 0)")), 3000, exact, 0.02) {
        assert!((tuning.survey.points[0].scores[0] - 3.9).abs() < 0.6, "{:?}", tuning.survey.points);
    }
    let phi_one = 0.241_970_724_519_143_37; // SciPy 1.17.1, norm.pdf(1)
    check(&mean(&one, "if(a > 1, a - 2, 0)"), 4000, phi_one - 2.0 * upper_tail(1.0), 0.1);
}

/// Two gates that may be stuck and a load: an exact sum over the number stuck.
#[test]
fn discrete_variables_are_summed_over() {
    let variables = format!("gates = {{ distribution = \"binomial\", n = 2, p = 0.05 }}\na = {STANDARD}\n");
    let exact = 0.9025 * upper_tail(4.5) + 0.095 * upper_tail(3.0) + 0.0025 * upper_tail(1.5);
    check(&event(&variables, "a + 1.5*gates >= 4.5"), 5000, exact, 0.04);
}

/// Counts and a gate together, events and means, against sums over all their values (the Poisson sum to 40 terms, the rest below 1e-60).
#[test]
fn counts_and_gates_against_exact_sums() {
    let (rate, stuck) = (0.4_f64, 0.1);
    let variables = format!(
        "n = {{ distribution = \"poisson\", mean = {rate} }}\ng = {{ distribution = \"bernoulli\", p = {stuck} }}\na = {STANDARD}\n"
    );
    let (mut exact, mut mass) = (0.0, (-rate).exp());
    for n in 0..40 {
        for (gate, p) in [(0.0, 1.0 - stuck), (1.0, stuck)] {
            exact += mass * p * upper_tail(5.0 - 0.8 * f64::from(n) - 1.5 * gate);
        }
        mass *= rate / f64::from(n + 1);
    }
    check(&event(&variables, "a + 0.8*n + 1.5*g >= 5"), 6000, exact, 0.06);
    // E (n - 2)+ = rate - 2 + 2 P(0) + P(1); E exp(a/2) = exp(1/8).
    let excess = rate - 2.0 + (2.0 + rate) * (-rate).exp();
    let mean_exact = excess * 0.125_f64.exp() * stuck;
    check(&mean(&variables, "g * max(n - 2, 0) * exp(0.5*a)"), 6000, mean_exact, 0.06);
}

/// A model that fails on a strip: P(a > 3) with 20 % of the draws beyond lost; both ways of counting are given.
#[test]
fn failures_are_counted_both_ways() {
    use evenpoise::distribution::Distribution;
    use evenpoise::model::Closure;
    use evenpoise::problem::{Aim, Variable};
    let standard = Distribution::new("normal", &[("mean", 0.0), ("sd", 1.0)]).unwrap();
    let variables = ["a", "b"].map(|n| Variable::random(n, standard.clone())).to_vec();
    let margin = |x: &[f64]| if x[0] > 2.5 && x[1] > 0.841_621_233_572_914_3 { f64::NAN } else { 3.0 - x[0] };
    let problem =
        Problem::from_model("A strip", variables, Aim::Probability, Box::new(Closure::new(2, margin))).unwrap();
    for seed in 1..=3 {
        let tuning = tuned(&problem, 4000, seed);
        let both = tuning.failures_counted.unwrap();
        let outside = 0.8 * upper_tail(3.0);
        let inside = outside + 0.2 * upper_tail(2.5);
        assert!(((both.outside.value - outside) / both.outside.se).abs() < 4.5);
        assert!(((both.inside.value - inside) / both.inside.se).abs() < 4.5);
        let value = tuning.answer.value().unwrap();
        assert!(value.interval_95[0] < outside && inside < value.interval_95[1] + 4.0 * both.inside.se);
        assert!(tuning.failed > 0 && tuning.verdict.word > Word::Sound);
    }
}

#[test]
fn an_event_that_never_happens_gets_a_bound_and_no_number() {
    let tuning = tuned(&event(&pair(), "a^2 + b^2 < -1"), 1000, 1);
    let RareAnswer::NoHit { upper_bound, nominal_draws } = tuning.answer else { panic!("a number") };
    assert!(nominal_draws > 20 && (upper_bound - (1.0 - 0.05_f64.powf(1.0 / nominal_draws as f64))).abs() < 1e-12);
    assert_eq!(tuning.verdict.word, Word::Unfit);
    assert_eq!(tuning.kappa_claimed, None);
}

#[test]
fn the_same_seed_gives_the_same_bits_on_any_number_of_threads() {
    let problem = event(&pair(), "0.5*(a-2)^2 - 1.5*(b-5)^3 - 3 <= 0");
    let on = |threads: usize| {
        rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap().install(|| tuned(&problem, 2000, 9))
    };
    let (one, three) = (on(1), on(3));
    let value = |t: &RareTuning| t.answer.value().unwrap().clone();
    assert_eq!(value(&one).value.to_bits(), value(&three).value.to_bits());
    assert_eq!(one.chosen, three.chosen);
    assert_eq!(one.draws.points, three.draws.points);
    let sum: f64 = one.draws.contributions.iter().sum();
    assert!((sum / value(&one).value - 1.0).abs() < 1e-12);
}

#[test]
fn what_cannot_be_asked_is_refused() {
    let density = problem(
        "[variables]\na = { distribution = \"normal\", mean = 0.0, sd = 1.0 }\n[target]\naim = \"density\"\nlog_factor = \"-a^4\"\n",
    );
    assert!(matches!(tune_rare(&density, &Settings::new(1000, 1), &mut Silent), Err(TuneError::Aim { .. })));
    let small = event(&pair(), "a > 3");
    assert!(matches!(tune_rare(&small, &Settings::new(50, 1), &mut Silent), Err(TuneError::Budget { .. })));
}

/// What a problem file may say about a tuning either works here or is refused with its key and the reason.
#[test]
fn tuning_keys_work_or_are_refused() {
    let hat = |keys: &str| {
        problem(&format!(
            "[variables]\n{}[target]\naim = \"probability\"\nevent = \"0.5*(a-2)^2 - 1.5*(b-5)^3 - 3 <= 0\"\n[tuning]\nbudget = 4000\n{keys}\n",
            pair()
        ))
    };
    let run = |keys: &str| {
        let problem = hat(keys);
        tune_rare(&problem, &Settings::from_keys(problem.tuning()), &mut Silent)
    };
    for (keys, key) in [
        ("family = \"student-t\"", "family"),
        ("df = 5", "df"),
        ("report_share = 0.4", "report_share"),
        ("method = \"moments\"", "method"),
    ] {
        let refusal = run(keys).unwrap_err();
        assert!(matches!(refusal, TuneError::Setting { key: named, .. } if named == key), "{keys}: {refusal}");
        assert!(refusal.to_string().starts_with(&format!("`{key}` cannot be set")), "{refusal}");
    }
    let auto = run("").unwrap();
    for keys in [
        "family = \"gaussian\"",
        "structure = \"diagonal\"",
        "structure = \"full\"",
        "method = \"variance\"",
        "method = \"cross-entropy\"",
    ] {
        let tuning = run(keys).unwrap();
        let value = tuning.answer.value().unwrap();
        assert!((value.value - 2.874_537_609_2e-5).abs() < 4.5 * value.se, "{keys}: {value:?}");
        let diagonal = tuning.chosen.components().iter().all(|c| c.scale()[1] == 0.0);
        assert_eq!(diagonal, keys.contains("diagonal"), "{keys}");
        let steps: Vec<RareStep> = tuning.rounds.iter().filter(|r| r.counted).map(|r| r.step).collect();
        assert!(!keys.contains("cross-entropy") || !steps.contains(&RareStep::Variance));
        assert!(tuning.chosen == auto.chosen || !(keys.contains("gaussian") || keys.contains("full")), "{keys}");
    }
}

/// The examples in `examples/`, as they stand: sound at their own budget. Source of the values: plain Monte Carlo, 4e7 draws with NumPy
/// 2.4.6 (`default_rng(5)`), its standard error beside each; 4.5 joint standard errors, false alarm 1e-5.
#[test]
fn the_examples_end_sound() {
    for (file, monte_carlo, its_error) in
        [("spillway.toml", 2.0525e-4, 2.27e-6), ("shortfall.toml", 1.768_580e-3, 5.51e-6)]
    {
        let problem = Problem::read(&Path::new(env!("CARGO_MANIFEST_DIR")).join("examples").join(file)).unwrap();
        let tuning = tuned(&problem, 10_000, 1);
        let value = tuning.answer.value().unwrap();
        assert_eq!(tuning.verdict.word, Word::Sound, "{file}: {value:?} {:?}", tuning.verdict.reasons);
        assert!(value.cv < 0.02, "{file}: {value:?}");
        let joint = value.se.hypot(its_error);
        assert!((value.value - monte_carlo).abs() < 4.5 * joint, "{file}: {} instead of {monte_carlo}", value.value);
    }
}
