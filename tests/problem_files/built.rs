//! Problems built in code.

use evenpoise::distribution::Distribution;
use evenpoise::model::Closure;
use evenpoise::numeric::Points;
use evenpoise::problem::Aim;
use evenpoise::problem::CorrelationKind;
use evenpoise::problem::EvaluateError;
use evenpoise::problem::Problem;
use evenpoise::problem::Variable;

use crate::right::close;
use crate::right::read;

fn normal(name: &str, mean: f64, sd: f64) -> Variable {
    Variable::random(name, Distribution::new("normal", &[("mean", mean), ("sd", sd)]).unwrap())
}

/// The same problem in code and in a file: a bowl in a half-line and an interval, with a distribution.
#[test]
fn a_model_and_a_formula_agree() {
    let variables = vec![
        Variable::range("a", 0.0, f64::INFINITY, 2.0, 1.0),
        Variable::range("b", -1.0, 3.0, 0.0, 0.5),
        normal("c", 1.0, 2.0),
    ];
    let model = Closure::new(3, |x| -x[0] * x[0] + x[1] * x[2]).with_gradient(|x, slope| {
        slope.copy_from_slice(&[-2.0 * x[0], x[2], x[1]]);
        -x[0] * x[0] + x[1] * x[2]
    });
    let built = Problem::from_model("Bowl", variables, Aim::Density, Box::new(model)).unwrap();
    let file = read(
        "title = \"Bowl\"\n[variables]\na = { range = [0.0, inf], near = 2.0, spread = 1.0 }\n\
         b = { range = [-1.0, 3.0], near = 0.0, spread = 0.5 }\nc = { distribution = \"normal\", mean = 1.0, sd = 2.0 }\n\
         [target]\naim = \"density\"\nlog_factor = \"-a*a + b*c\"\n",
    );
    assert_eq!(built.start(), file.start());
    let points = Points::from_rows(3, &[0.1, -0.4, 2.0, -3.0, 5.0, -1.0, 800.0, 0.0, 0.0]);
    let (one, slopes) = built.evaluate_with_gradient(&points).unwrap();
    let (two, exact) = file.evaluate_with_gradient(&points).unwrap();
    // Far out the half-line overflows: the model is not asked there.
    assert_eq!(one.log_density[2], f64::NEG_INFINITY);
    assert_eq!(two.log_density[2], f64::NEG_INFINITY);
    for i in 0..2 {
        close(one.log_density[i], two.log_density[i], 1e-14);
        (0..3).for_each(|j| close(slopes.get(i, j), exact.get(i, j), 1e-13));
    }
    assert_eq!(slopes.point(2), [0.0; 3]);
}

#[test]
fn a_failed_model_is_told_from_a_point_outside() {
    let model = Closure::new(1, |x| if x[0] > 1.0 { f64::NAN } else { f64::NEG_INFINITY });
    let variables = vec![Variable::range("x", f64::NEG_INFINITY, f64::INFINITY, 0.0, 1.0)];
    let problem = Problem::from_model("Failing", variables, Aim::Density, Box::new(model)).unwrap();
    let answer = problem.evaluate(&Points::from_rows(1, &[2.0, 0.0])).unwrap();
    assert!(answer.log_density[0].is_nan());
    assert_eq!(answer.log_density[1], f64::NEG_INFINITY);
    assert_eq!(problem.evaluate_with_gradient(&Points::zeros(1, 1)).unwrap_err(), EvaluateError::NoGradient);
    let refused = problem.evaluate(&Points::zeros(2, 1)).unwrap_err();
    assert_eq!(refused, EvaluateError::WrongDimension { expected: 1, given: 2 });
}

#[test]
fn estimates_and_correlations_can_be_added() {
    let model = Closure::new(2, |x| 3.0 - x[0] - x[1]);
    let problem = Problem::from_model(
        "Sum of two",
        vec![normal("a", 0.0, 1.0), normal("b", 0.0, 2.0)],
        Aim::Probability,
        Box::new(model),
    )
    .unwrap()
    .with_correlation(&["b", "a"], CorrelationKind::Score, &[1.0, 0.5, 0.5, 1.0])
    .unwrap()
    .with_estimates(&["total"], Box::new(Closure::new(2, |x| x[0] + x[1])))
    .unwrap();
    let z = Points::from_rows(2, &[2.0, 1.0]);
    // u = (2, 0.5*2 + sqrt(3)/2), x = (u1, 2 u2).
    let total = 2.0 + 2.0 * (1.0 + 0.75_f64.sqrt());
    close(problem.estimates(&z)[0][0], total, 1e-14);
    let answer = problem.evaluate(&z).unwrap();
    close(answer.value[0], 3.0 - total, 1e-14);
    assert_eq!(answer.hit, [true]);
    assert_eq!(problem.digest().len(), 32);
}

#[test]
fn what_cannot_be_built_says_why() {
    let any = |n: usize| Box::new(Closure::new(n, |x| x[0]));
    let refusal = |variables: Vec<Variable>, aim: Aim, n: usize| {
        Problem::from_model("Refused", variables, aim, any(n)).unwrap_err().to_string()
    };
    let range = |near: f64, spread: f64| Variable::range("x", 0.0, 1.0, near, spread);
    for (got, want) in [
        (refusal(vec![], Aim::Density, 1), "at least one variable"),
        (refusal(vec![normal("a", 0.0, 1.0)], Aim::Density, 2), "must take 1, one a variable"),
        (refusal(vec![normal("a", 0.0, 1.0), normal("a", 0.0, 1.0)], Aim::Density, 2), "is called `a`"),
        (refusal(vec![range(0.5, 0.1)], Aim::Probability, 1), "needs a distribution for every variable"),
        (refusal(vec![range(1.0, 0.1)], Aim::Density, 1), "outside the support"),
        (refusal(vec![range(0.5, -0.1)], Aim::Density, 1), "must be above zero"),
        (refusal(vec![Variable::range("x", 1.0, 1.0, 0.5, 0.1)], Aim::Density, 1), "is empty"),
    ] {
        assert!(got.contains(want), "{got}");
    }
    let problem =
        || Problem::from_model("Pair", vec![normal("a", 0.0, 1.0), range(0.5, 0.1)], Aim::Density, any(2)).unwrap();
    let pair = [1.0, 0.5, 0.5, 1.0];
    for (names, want) in [(["a", "x"], "no distribution"), (["a", "a"], "named twice"), (["a", "q"], "no variable")] {
        let got = problem().with_correlation(&names, CorrelationKind::Score, &pair).unwrap_err().to_string();
        assert!(got.contains(want), "{got}");
    }
}

#[test]
fn discrete_variables_have_masses() {
    let count = Variable::random("n", Distribution::new("poisson", &[("mean", 3.0)]).unwrap());
    let problem =
        Problem::from_model("Count", vec![count], Aim::Expectation, Box::new(Closure::new(1, |x| x[0]))).unwrap();
    let z = Points::from_rows(1, &[0.3]);
    let answer = problem.evaluate(&z).unwrap();
    assert_eq!(answer.value, [3.0]);
    // Source: SciPy 1.17.1, scipy.stats.poisson.logpmf(3, 3).
    close(answer.log_density[0] - problem.log_jacobian(&z)[0], -1.495_922_603_223_725_8, 1e-14);
}
