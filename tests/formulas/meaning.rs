//! What formulas mean: operators, columns, conditions, groups, margins, and where they are undefined.

use evenpoise::expression::{Rows, Scope, Wanted, names_used};
use evenpoise::numeric::Points;

use crate::world::{FLOW, LEVEL, MEMBERS, gradient, program, scope, value};

const AT: [f64; 5] = [2.0, 3.0, 0.5, -1.0, 0.25];

/// Equal within the rounding of some ten operations.
fn close(got: f64, want: f64) -> bool {
    got == want || (got - want).abs() <= 1e-14 * want.abs().max(1.0) || (got.is_nan() && want.is_nan())
}

fn check(text: &str, want: f64) {
    let got = value(text, AT);
    assert!(close(got, want), "{text}: {got}, wanted {want}");
}

fn check_gradient(text: &str, at: [f64; 5], want: [f64; 5]) {
    let (_, got) = gradient(text, at);
    for (i, (&got, &want)) in got.iter().zip(&want).enumerate() {
        assert!(close(got, want), "{text}: derivative {i} is {got}, wanted {want}");
    }
}

#[test]
fn algebra_is_that_of_the_blackboard() {
    for (text, want) in [
        ("-x^2", -4.0),
        ("2^3^2", 512.0),
        ("2^-x", 0.25),
        ("-2^2*3", -12.0),
        ("x - y - 1", -2.0),
        ("12/x/y", 2.0),
        ("x*y + 1e-3*.5 - 2.", 4.0005),
        ("if(x < y, crest, 1/0)", 4.5),
        ("if(not x < y and 1 < 2 or x == 2, 1, 0)", 1.0),
        ("if(x != y, 1, 0) + if(x <= 2, 10, 0) + if(y >= 4, 100, 0) + if(y > x, 1000, 0)", 1011.0),
        ("min(x, y, 1.5) + max(x, y) * 10", 31.5),
        ("round(2.5) + 10*floor(-0.5) + 100*ceil(0.2)", 93.0),
        ("x^3 + x^-1 + x^0.5 - sqrt(x) + 9^1.5", 35.5),
        ("abs(-x) + hypot(3, 4) + inf*0*0 + 1", f64::NAN),
        ("pi", std::f64::consts::PI),
        ("logsumexp(log(x), log(y), log(5))", 10.0_f64.ln()),
    ] {
        check(text, want);
    }
}

#[test]
fn columns_become_numbers() {
    let sum: f64 = FLOW.iter().sum();
    let mean = sum / 5.0;
    for (text, want) in [
        ("sum(flow)", sum),
        ("mean(flow*x)", 2.0 * mean),
        ("sum((flow - mean(flow))^2)", FLOW.iter().map(|f| (f - mean).powi(2)).sum()),
        ("min(flow) + max(flow - x) + min(x*level)", 0.25 + 1.0 - 2.5),
        ("logsumexp(x*flow)", FLOW.iter().map(|f| (2.0 * f).exp()).sum::<f64>().ln()),
        ("logsumexp(flow - inf)", f64::NEG_INFINITY),
        ("count(flow) + count(station) + count(rain.depth) + count(effect)", 16.0),
        ("count(flow > 1) + 10*count(flow > x)", 3.0 + 10.0),
        ("sum(lag(flow, x)*level)", 2.0 * 0.5 + 1.5 * -1.25 + 0.25 * 2.0 + 3.0 * 0.1 + 2.0),
        ("sum(lag(lag(level*x, y), crest))", 4.5 + 3.0 + 2.0 * (0.5 - 1.25 + 2.0)),
        ("sum(present(gap)) + count(present(gap) and flow > 1) + count(present(station))", 12.0),
        ("sum(if(present(gap), gap*x, 0))", 26.0),
        ("sum(gap)", f64::NAN),
        ("sum(if(station == 'Alder', flow, 0)) + count(\"Birch\" != station)", 4.5 + 3.0),
        ("sum(effect)", -0.25),
        ("effect['Birch'] + 10*effect[3] + 100*effect[\"Alder\"]", -1.0 + 2.5 + 50.0),
        ("sum(max(flow, level, 1))", 1.5 + 1.0 + 3.0 + 2.0 + 1.0),
        ("sum(2 + 0*flow)", 10.0),
        ("sum(x/flow^0 - flow*0)", 10.0),
    ] {
        check(text, want);
    }
    let effects: f64 = FLOW.iter().zip(MEMBERS).map(|(f, member)| f * AT[2 + member]).sum();
    check("sum(effect[station]*flow)", effects);
    check(
        "sum(effect[station] * x / y - level)",
        2.0 / 3.0 * (0.5 - 1.0 + 0.5 + 0.25 - 1.0) - LEVEL.iter().sum::<f64>(),
    );
}

#[test]
fn gradients_of_columns_reach_every_input() {
    let first_after: f64 = FLOW[..4].iter().zip(&LEVEL[1..]).map(|(f, l)| f * l).sum();
    check_gradient("sum(lag(flow*y, x)*level)", AT, [LEVEL[0], first_after, 0.0, 0.0, 0.0]);
    // Of a lag of a lag: rows 2, 3 and 4 see the first three rows.
    check_gradient(
        "sum(lag(lag(level*x, y), x)*flow)",
        AT,
        [FLOW[0] + (FLOW[2] * LEVEL[0] + FLOW[3] * LEVEL[1] + FLOW[4] * LEVEL[2]), FLOW[1], 0.0, 0.0, 0.0],
    );
    check_gradient("sum(effect[station]*flow)", AT, [0.0, 0.0, 4.5, 1.0, 2.0]);
    check_gradient("max(effect) + 10*min(effect) + 100*effect[3]", AT, [0.0, 0.0, 1.0, 10.0, 100.0]);
    check_gradient("sum(effect^2)*x", AT, [1.3125, 0.0, 2.0, -4.0, 1.0]);
    let e = [0.5_f64.exp(), (-1.0_f64).exp(), 0.25_f64.exp()];
    let all: f64 = e.iter().sum();
    check_gradient("logsumexp(effect)", AT, [0.0, 0.0, e[0] / all, e[1] / all, e[2] / all]);
    check_gradient("sum(lag(effect, x)*effect)", AT, [0.5, 0.0, 2.0 - 1.0, 0.5 + 0.25, -1.0]);
    check_gradient("x*y + 3", AT, [3.0, 2.0, 0.0, 0.0, 0.0]);
    check_gradient("2", AT, [0.0; 5]);
}

#[test]
fn lags_over_many_rows_keep_exact_gradients() {
    // sum_r (x r + lag) over 1000 rows in which everything is linear: the gradient is known in closed form.
    let mut scope = Scope::new();
    let n = 1000;
    let rows = scope.rows(Rows { description: "the rows of hours.csv".into(), len: n });
    scope.column("hour", rows, (0..n).map(|r| r as f64).collect());
    scope.variable("x");
    scope.variable("start");
    let text = "sum(lag(x*hour*lag(hour*x, start), start))";
    let program = scope.compile(&[("target", text, Wanted::Number)]).unwrap();
    let (value, gradient) = program.value_and_gradient(0, &Points::from_rows(2, &[0.5, 3.0]));
    // Row r > 0 sees x (r - 1) x (r - 2) for r >= 2, and 0 for r = 1; row 0 sees the start.
    let products: f64 = (2..n).map(|r| ((r - 1) * (r - 2)) as f64).sum();
    assert!(close(value[0] / (0.25 * products + 3.0), 1.0));
    assert!(close(gradient.get(0, 0) / products, 1.0), "{}", gradient.get(0, 0));
    assert_eq!(gradient.get(0, 1), 1.0);
}

/// The branch not taken is infinite or undefined in value and in derivative, by itself, within a row and in a sum.
#[test]
fn the_branch_not_taken_leaves_no_trace() {
    let at = [0.0, -1.0, 0.5, -1.0, 0.25];
    for (text, want, slopes) in [
        ("if(x > 0, log(x), y)", -1.0, [0.0, 1.0]),
        ("if(x > 0, y/x, 2*y)", -2.0, [0.0, 2.0]),
        ("if(y < 0, x, sqrt(y)*x)", 0.0, [1.0, 0.0]),
        ("if(x == 0, y, sqrt(x)/x + log(y)^x)", -1.0, [0.0, 1.0]),
        ("sum(if(flow > 9, log(y*flow)/x, y))", -5.0, [0.0, 5.0]),
        ("if(x > 1, sum(log(y*flow)/x), y*3)", -3.0, [0.0, 3.0]),
        ("sum(if(present(gap), y*gap, 7))", -6.0, [0.0, 13.0]),
        ("if(log(y) > 0, x, y)", -1.0, [0.0, 1.0]),
    ] {
        let (value, gradient) = gradient(text, at);
        assert_eq!(value, want, "{text}");
        assert_eq!(gradient[..2], slopes, "{text}");
    }
}

#[test]
fn what_is_undefined_is_told_by_nan_and_log_of_zero_is_not() {
    for text in
        ["log(-x)", "sqrt(-x)", "0/0*x", "asin(x)", "log_density_normal(x, y, -1)", "log_density_gamma(x, -2, 1)"]
    {
        assert!(value(text, AT).is_nan(), "{text}");
    }
    for text in [
        "log(x - 2)",
        "log_density_exponential(-x, 1)",
        "log_mass_poisson(x + 0.5, y)",
        "log_mass_binomial(5, y, 0.5)",
        "log_density_beta(x, 2, 2)",
        "log_density_lognormal(-x, 0, 1)",
        "log_mass_bernoulli(x, 0.5)",
    ] {
        assert_eq!(value(text, AT), f64::NEG_INFINITY, "{text}");
    }
    assert_eq!(value("log_mass_poisson(0, x - 2)", AT), 0.0);
    assert_eq!(value("log_mass_bernoulli(1, x - 1)", AT), 0.0);
    assert!(value("log_mass_bernoulli(1, x)", AT).is_nan());
}

#[test]
fn margins_guide_and_truths_count() {
    let scope = scope();
    let margin = |text: &str, at: [f64; 5]| {
        let program = scope.compile(&[("event", text, Wanted::Margin)]).unwrap_or_else(|e| panic!("{text}: {e:?}"));
        assert_eq!((program.n_outputs(), program.output("event")), (2, Some(0)));
        let values = program.values(&Points::from_rows(5, &at));
        (values[0].get(0, 0), values[1].get(0, 0))
    };
    for (text, want) in [
        ("x > crest", (2.5, 0.0)),
        ("x <= crest", (-2.5, 1.0)),
        ("x >= 2", (0.0, 1.0)),
        ("x > 2", (0.0, 0.0)),
        ("x < y and y < 10", (-1.0, 1.0)),
        ("x < y or y < 1", (-1.0, 1.0)),
        ("(x > 3 or y > 2) and sum(flow) < 8", (-0.5, 1.0)),
        ("log(-x) > 1 or y > 2", (-1.0, 1.0)),
    ] {
        assert_eq!(margin(text, AT), want, "{text}");
    }
    let (undefined, holds) = margin("log(-x) > 1", AT);
    assert!(undefined.is_nan() && holds == 0.0);
    let (undefined, holds) = margin("log(-x) > 1 and y > 2", AT);
    assert!(undefined.is_nan() && holds == 0.0);
}

#[test]
fn names_of_any_script_and_formulas_in_any_order() {
    let mut scope = Scope::new();
    scope.variable("größe");
    scope.constant("重力", 9.81);
    scope.formula("сумма", "половина * 2 + 重力");
    scope.formula("половина", "größe / 2");
    let program = scope.compile(&[("target", "сумма^2", Wanted::Number)]).unwrap();
    assert!(close(program.values(&Points::from_rows(1, &[1.0]))[0].get(0, 0), 10.81_f64.powi(2)));
    assert_eq!(names_used("f", "größe*exp(重力) + pi - größe + e[a.b]").unwrap(), ["größe", "重力", "e", "a.b"]);
}

#[test]
fn programs_know_what_they_use() {
    let mut scope = scope();
    scope.constant("spare", 1.0);
    scope.formula("used", "x*crest");
    scope.formula("idle", "spare + y");
    let program = scope
        .compile(&[
            ("a", "used", Wanted::Number),
            ("b", "effect[station] + flow", Wanted::NumberOrColumn),
            ("c", "x > 1", Wanted::Condition),
        ])
        .unwrap();
    assert_eq!(program.unused_formulas(), ["idle"]);
    assert_eq!(program.unused_constants(), ["spare"]);
    let used: Vec<bool> = (0..5).map(|i| program.uses_input(i)).collect();
    assert_eq!(used, [true, false, true, true, true]);
    assert!(program.output_uses_input(0, 0) && !program.output_uses_input(0, 2) && !program.output_uses_input(1, 0));
    assert_eq!((program.output_len(0), program.output_len(1), program.output_len(2)), (1, 5, 1));
    let values = program.values(&Points::from_rows(5, &AT));
    assert_eq!(values[1].point(0), FLOW.iter().zip(MEMBERS).map(|(f, m)| f + AT[2 + m]).collect::<Vec<_>>());
    assert_eq!(values[2].point(0), [1.0]);
}

#[test]
fn columns_of_models_are_inputs() {
    let mut scope = Scope::new();
    let rows = scope.rows(Rows { description: "the rows of readings.csv".into(), len: 3 });
    scope.variable("x");
    assert_eq!(scope.model_value("peak"), 1);
    assert_eq!(scope.model_column("level", rows), 2);
    scope.column("measured", rows, vec![1.0, 2.0, 3.0]);
    assert_eq!(scope.n_inputs(), 5);
    let program = scope.compile(&[("target", "peak*x + sum((measured - level)^2)", Wanted::Number)]).unwrap();
    let (value, gradient) = program.value_and_gradient(0, &Points::from_rows(5, &[2.0, 10.0, 1.5, 2.0, 1.0]));
    assert_eq!(value, [20.0 + 0.25 + 4.0]);
    assert_eq!(gradient.point(0), [10.0, 2.0, 1.0, 0.0, -4.0]);
}

/// Neither the other points of a call nor the number of threads changes a bit.
#[test]
fn every_point_stands_for_itself() {
    let text = "sum(log_density_student_t(flow, 4, x + effect[station]*level, exp(y))) - lgamma(abs(x) + 1)*x^y";
    let program = program(text, Wanted::Number);
    let mut rows = Vec::new();
    for i in 0..300 * 5 {
        rows.push(f64::from(i * 7919 % 1009) / 250.0 - 1.0);
    }
    let all = Points::from_rows(5, &rows);
    let values = program.values(&all);
    let (again, gradient) = program.value_and_gradient(0, &all);
    for i in (0..300).step_by(13) {
        let (value, slopes) = program.value_and_gradient(0, &Points::from_rows(5, &all.point(i)));
        assert_eq!(value[0].to_bits(), values[0].get(i, 0).to_bits());
        assert_eq!(value[0].to_bits(), again[i].to_bits());
        let bits = |row: Vec<f64>| row.into_iter().map(f64::to_bits).collect::<Vec<_>>();
        assert_eq!(bits(slopes.point(0)), bits(gradient.point(i)));
    }
    let one = rayon_pool(1, || program.value_and_gradient(0, &all));
    let three = rayon_pool(3, || program.value_and_gradient(0, &all));
    assert_eq!(format!("{one:?}"), format!("{three:?}"));
    assert!(program.values(&Points::new(5))[0].is_empty());
}

fn rayon_pool<R: Send>(threads: usize, run: impl FnOnce() -> R + Send) -> R {
    rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap().install(run)
}

#[test]
fn programs_without_inputs_and_powers_at_zero_are_no_special_case() {
    let mut scope = Scope::new();
    scope.constant("two", 2.0);
    let program = scope.compile(&[("four", "two^2", Wanted::Number)]).unwrap();
    let points = Points::zeros(0, 3);
    assert_eq!(program.values(&points)[0].coordinate(0), [4.0; 3]);
    let (values, gradient) = program.value_and_gradient(0, &points);
    assert_eq!((values, gradient.len(), gradient.dim()), (vec![4.0; 3], 3, 0));
    let at_zero = [0.0, 0.0, 0.5, -1.0, 0.25];
    check_gradient("x^0 + x^1 + x^1.5 + x^(y + 2) + sum(flow^0*x)", at_zero, [6.0, 0.0, 0.0, 0.0, 0.0]);
    fn travels<T: Send + Sync>(_: &T) {}
    travels(&program);
}
