//! What is told about formulas that are wrong: the place, the reason, and what to write instead.

use evenpoise::expression::{FormulaError, Wanted};

use crate::world::scope;

/// All errors of `text` as an output.
fn errors(text: &str, wanted: Wanted) -> Vec<FormulaError> {
    match scope().compile(&[("target", text, wanted)]) {
        Ok(_) => panic!("{text} is accepted"),
        Err(errors) => errors,
    }
}

/// One error, at the bytes of `place`, whose message and help contain these parts.
fn check_as(wanted: Wanted, text: &str, place: &str, message: &str, help: &str) {
    let errors = errors(text, wanted);
    assert_eq!(errors.len(), 1, "{text}: {errors:?}");
    let error = &errors[0];
    assert_eq!(error.key, "target");
    assert_eq!(&text[error.span.clone()], place, "{text}: {error:?}");
    assert!(error.message.contains(message), "{text}: {}", error.message);
    assert!(error.help.as_deref().unwrap_or_default().contains(help), "{text}: {:?}", error.help);
}

fn check(text: &str, place: &str, message: &str, help: &str) {
    check_as(Wanted::Number, text, place, message, help);
}

#[test]
fn names_and_functions_are_looked_up() {
    check("x + velocity", "velocity", "nothing is called `velocity`", "");
    check("x + crset", "crset", "nothing is called", "did you mean `crest`?");
    check("exp + 1", "exp", "`exp` is a function", "exp(x)");
    check("x(2)", "x", "`x` is no function", "x*(...)");
    check("sqrt(1) + sqtr(x)", "sqtr", "no function", "did you mean `sqrt`?");
    check("ln(x)", "ln", "no function", "write log(...)");
    check("pow(x, 2)", "pow", "no function", "a^b");
    check("log(x, 10)", "log(x, 10)", "takes 1 argument, not 2", "log(x)");
    check("log_density_normal(x, 1)", "log_density_normal(x, 1)", "takes 3 arguments, not 2", "(x, mean, sd)");
    check("min()", "min()", "at least one", "min(column) or min(a, b, ...)");
    check("e^x", "e", "nothing is called", "exp(1)");
}

#[test]
fn kinds_are_kept_apart() {
    check("x + (y > 1)", "(y > 1)", "is a condition", "if(condition, 1, 0)");
    check("if(x, 1, 2)", "x", "is a number, and a condition is wanted", "compare");
    check("if(x > 1 and y, 1, 2)", "y", "is a number", "compare");
    check("if(not x, 1, 2)", "x", "is a number", "compare");
    check("sum(station)", "station", "column of labels", "station == 'Alder'");
    check("x*'Alder'", "'Alder'", "is a label", "compare");
    check("count(station == 'Aldr')", "'Aldr'", "no row has the label", "did you mean 'Alder'?");
    check("count(station == 'Rowan tree')", "'Rowan tree'", "no row has the label", "'Alder', 'Birch', 'Cedar'");
    check("count(flow == 'Alder')", "flow == 'Alder'", "column of labels", "without quotes");
    check_as(Wanted::Condition, "x + 1", "x + 1", "is a number", "compare");
    check_as(Wanted::Condition, "flow > 1", "flow > 1", "the rows of readings.csv", "count(...)");
    check_as(Wanted::Column, "x", "x", "must be a column", "");
}

#[test]
fn columns_need_rows_in_common_and_targets_are_numbers() {
    let text = "sum(2*flow + rain.depth)";
    check(text, "2*flow + rain.depth", "`2*flow` runs over the rows of readings.csv", "sum(...)");
    check(text, "2*flow + rain.depth", "`rain.depth` over the rows of rain.csv", "sum(...)");
    check("sum(max(flow, x, effect))", "flow, x, effect", "the members of effect", "write effect[station]");
    check("sum(if(flow > 1, effect, x))", "flow > 1, effect", "no rows in common", "");
    check("flow*2", "flow*2", "`target` must be one number, and this is a column", "wrap it in sum(...)");
    check("sum(x)", "x", "`sum` works on a column", "");
    check("lag(x, 0)", "x", "`lag` works on a column", "");
    check("sum(lag(flow, level))", "level", "one number", "lag(x, 0)");
    check("sum(present(flow*x))", "flow*x", "no column of data", "");
}

#[test]
fn groups_know_their_members() {
    check("effect[0]", "0", "no member 0", "from 1 to 3");
    check("effect[1.5]", "1.5", "no member 1.5", "from 1 to 3");
    check("effect['Brich']", "'Brich'", "no member 'Brich'", "did you mean 'Birch'?");
    check("x[1]", "x", "no variable made with `each`", "");
    check("sum(effect[flow])", "flow", "which member of `effect`", "station");
    check("sum(effect[statoin])", "statoin", "nothing is called", "did you mean `station`?");
    check("efect[1]", "efect", "nothing is called", "did you mean `effect`?");
    check("effect[]", "]", "which one", "a position from 1");
}

#[test]
fn events_are_inequalities() {
    let check = |text, place, message, help| check_as(Wanted::Margin, text, place, message, help);
    check("x", "x", "no inequality", "x > crest".trim_start_matches("x "));
    check("x > 1 and not y > 2", "not y > 2", "no `not`", "");
    check("x == 1", "x == 1", "equality", "");
    check("if(x > 1, y > 1, y > 2)", "if(x > 1, y > 1, y > 2)", "no `if`", "");
    check("flow > 1 or x > 2", "flow > 1", "for each of the rows of readings.csv", "max(level) > crest");
    let both = errors("x and y", Wanted::Margin);
    assert_eq!(both.len(), 2, "{both:?}");
}

#[test]
fn texts_that_are_no_formulas() {
    check("x +", "", "ends where", "");
    check("(x", "(", "never closed", ")");
    check("2x", "x", "follows a number", "*");
    check_as(Wanted::Condition, "x ≤ y", "≤", "no part of a formula", "<=");
    check("", "", "empty", "");
}

#[test]
fn all_independent_errors_come_at_once_in_order() {
    let mut scope = scope();
    scope.formula("a", "b + unknwn");
    scope.formula("b", "sqrtt(x) + c");
    scope.formula("c", "x + + )");
    scope.formula("d", "b + 1 + yy");
    let errors = scope
        .compile(&[("first", "a*d + nothing", Wanted::Number), ("second", "log(x, 2) + flow", Wanted::Number)])
        .unwrap_err();
    let told: Vec<(&str, usize)> = errors.iter().map(|error| (error.key.as_str(), error.span.start)).collect();
    assert_eq!(
        told,
        [("a", 4), ("b", 0), ("c", 6), ("d", 8), ("first", 6), ("second", 0), ("second", 0)],
        "{errors:#?}"
    );
    assert!(errors[0].to_string().starts_with("a: nothing is called `unknwn`"));
}

#[test]
fn circles_are_told_with_their_names() {
    let mut scope = scope();
    scope.formula("inflow", "2*gate + x");
    scope.formula("level", "inflow + 1");
    scope.formula("gate", "level*crest");
    scope.formula("self", "self + 1");
    scope.formula("apart", "inflow + missing");
    let errors = scope.compile(&[("target", "level + apart", Wanted::Number)]).unwrap_err();
    let told: Vec<(&str, &str)> = errors.iter().map(|error| (error.key.as_str(), error.message.as_str())).collect();
    assert_eq!(
        told,
        [
            ("level", "a circle: inflow uses gate uses level uses inflow"),
            ("self", "`self` uses itself"),
            ("apart", "nothing is called `missing`"),
        ]
    );
}

#[test]
fn size_is_no_danger() {
    let mut scope = scope();
    let deep = format!("{}x{}", "(".repeat(5000), ")".repeat(5000));
    let error = &scope.compile(&[("target", &deep, Wanted::Number)]).unwrap_err()[0];
    assert!(error.message.contains("nested more than 200"), "{error}");
    let long = vec!["x*y"; 3000].join(" + ");
    assert!(scope.compile(&[("target", &long, Wanted::Number)]).is_ok());
    // Each formula uses the next: the last one is reached first.
    for k in 0..3000 {
        scope.formula(&format!("f{k}"), &format!("f{} + x", k + 1));
    }
    scope.formula("f3000", "y");
    let program = scope.compile(&[("target", "f0", Wanted::Number)]).unwrap();
    let points = evenpoise::numeric::Points::from_rows(5, &[2.0, 1.0, 0.0, 0.0, 0.0]);
    let (value, gradient) = program.value_and_gradient(0, &points);
    assert_eq!((value[0], gradient.get(0, 0)), (6001.0, 3000.0));
}
