//! The derivative of every function of the language, in each of its arguments, against differences of its values.

use evenpoise::expression::{Scope, Wanted, is_reserved};
use evenpoise::numeric::Points;

/// Calls with the places at which they are looked at; `a`, `b`, `c` are variables, `row` is a column of data.
const CALLS: &[(&str, [f64; 3])] = &[
    ("exp(a)", [0.7, 0.0, 0.0]),
    ("log(a)", [1.3, 0.0, 0.0]),
    ("log10(a)", [1.3, 0.0, 0.0]),
    ("log1p(a)", [0.4, 0.0, 0.0]),
    ("expm1(a)", [0.4, 0.0, 0.0]),
    ("sqrt(a)", [1.7, 0.0, 0.0]),
    ("abs(a)", [-1.7, 0.0, 0.0]),
    ("min(a, b, c)", [1.0, 0.4, 2.0]),
    ("max(a, b, c)", [1.0, 0.4, 2.0]),
    ("floor(a)", [1.4, 0.0, 0.0]),
    ("ceil(a)", [1.4, 0.0, 0.0]),
    ("round(a)", [1.4, 0.0, 0.0]),
    ("sin(a)", [0.9, 0.0, 0.0]),
    ("cos(a)", [0.9, 0.0, 0.0]),
    ("tan(a)", [0.9, 0.0, 0.0]),
    ("asin(a)", [0.4, 0.0, 0.0]),
    ("acos(a)", [0.4, 0.0, 0.0]),
    ("atan(a)", [1.4, 0.0, 0.0]),
    ("atan2(a, b)", [0.8, -1.1, 0.0]),
    ("sinh(a)", [0.8, 0.0, 0.0]),
    ("cosh(a)", [0.8, 0.0, 0.0]),
    ("tanh(a)", [0.8, 0.0, 0.0]),
    ("hypot(a, b)", [0.8, -1.1, 0.0]),
    ("lgamma(a)", [2.6, 0.0, 0.0]),
    ("erf(a)", [0.6, 0.0, 0.0]),
    ("erfc(a)", [1.6, 0.0, 0.0]),
    ("normal_cdf(a)", [-0.6, 0.0, 0.0]),
    ("normal_quantile(a)", [0.2, 0.0, 0.0]),
    ("logistic(a)", [0.6, 0.0, 0.0]),
    ("logit(a)", [0.6, 0.0, 0.0]),
    ("log_normal_tail(a)", [5.6, 0.0, 0.0]),
    ("log_normal_below(a)", [-5.6, 0.0, 0.0]),
    ("log_density_normal(a, b, c)", [1.2, 0.5, 0.8]),
    ("log_density_student_t(a, b, c, 0.8)", [1.2, 4.5, 0.3]),
    ("log_density_student_t(a, 4.5, b, c)", [1.2, 0.3, 0.8]),
    ("log_density_lognormal(a, b, c)", [1.2, 0.5, 0.8]),
    ("log_density_gamma(a, b, c)", [1.2, 2.5, 0.8]),
    ("log_density_beta(a, b, c)", [0.3, 2.5, 1.8]),
    ("log_density_exponential(a, b)", [1.2, 0.5, 0.0]),
    ("log_density_cauchy(a, b, c)", [1.2, 0.5, 0.8]),
    ("log_mass_poisson(3, a)", [2.2, 0.0, 0.0]),
    ("log_mass_binomial(3, 7, a)", [0.35, 0.0, 0.0]),
    ("log_mass_bernoulli(1, a)", [0.35, 0.0, 0.0]),
    ("log_mass_bernoulli_odds(0, a)", [0.35, 0.0, 0.0]),
    ("log_mass_negative_binomial(3, a, b)", [2.2, 0.4, 0.0]),
    ("sum(a*row + b)", [1.2, 0.5, 0.0]),
    ("mean(a*row^2 + b)", [1.2, 0.5, 0.0]),
    ("logsumexp(a*row)", [1.2, 0.0, 0.0]),
    ("logsumexp(a, b, c)", [1.2, 0.5, 1.9]),
    ("min(a*row + b)", [1.2, 0.5, 0.0]),
    ("a*count(row)", [1.2, 0.0, 0.0]),
    ("sum(lag(a*row^2, b)*row)", [1.2, 0.5, 0.0]),
    ("sum(present(row)*a)", [1.2, 0.0, 0.0]),
    ("if(a > b, a^2*c, b)", [1.2, 0.5, 0.7]),
    ("if(a > b, a, b^2*c)", [0.2, 0.5, 0.7]),
];

fn scope() -> Scope {
    let mut scope = Scope::new();
    ["a", "b", "c"].iter().for_each(|name| {
        scope.variable(name);
    });
    let rows = scope.rows(evenpoise::expression::Rows { description: "the rows".into(), len: 3 });
    scope.column("row", rows, vec![0.5, -1.25, 2.0]);
    scope
}

/// Differences of fourth order with steps of 1e-3: their error is about 1e-12 of the fifth derivative.
#[test]
fn derivatives_are_those_of_the_values() {
    for (text, at) in CALLS {
        let program = scope().compile(&[("f", text, Wanted::Number)]).unwrap_or_else(|errors| panic!("{errors:?}"));
        let value = |x: [f64; 3]| program.values(&Points::from_rows(3, &x))[0].get(0, 0);
        let (found, gradient) = program.value_and_gradient(0, &Points::from_rows(3, at));
        assert_eq!(found[0].to_bits(), value(*at).to_bits(), "{text}");
        for j in 0..3 {
            let moved = |steps: f64| {
                let mut x = *at;
                x[j] += steps * 1e-3;
                value(x)
            };
            let difference = (8.0 * (moved(1.0) - moved(-1.0)) - (moved(2.0) - moved(-2.0))) / 12e-3;
            let slope = gradient.get(0, j);
            assert!((slope - difference).abs() < 1e-9 * (1.0 + slope.abs()), "{text}, {j}: {slope} or {difference}");
        }
    }
}

/// The guide's list of functions and the list above are the same.
#[test]
fn every_function_of_the_guide_is_looked_at() {
    let guide = include_str!("../../docs/problem-file.md");
    let section = guide.split("## Formulas").nth(1).unwrap().split("\n## ").next().unwrap();
    let words = section.split(|c: char| !(c.is_alphanumeric() || c == '_'));
    let keywords = ["pi", "inf", "and", "or", "not"];
    let named: std::collections::BTreeSet<&str> =
        words.filter(|word| is_reserved(word) && !keywords.contains(word)).collect();
    assert!(named.len() > 45, "{named:?}");
    for name in named {
        assert!(CALLS.iter().any(|(text, _)| text.contains(&format!("{name}("))), "{name} has no case");
    }
}
