//! The names that the formulas of these tests use: gauges of the invented Ellenmere reservoir.

use evenpoise::expression::{Program, Rows, Scope, Wanted};
use evenpoise::numeric::Points;

pub(crate) const STATIONS: [&str; 5] = ["Alder", "Birch", "Alder", "Cedar", "Birch"];
pub(crate) const MEMBERS: [usize; 5] = [0, 1, 0, 2, 1];
pub(crate) const FLOW: [f64; 5] = [1.5, 0.25, 3.0, 2.0, 0.75];
pub(crate) const LEVEL: [f64; 5] = [0.5, -1.25, 2.0, 0.1, 1.0];
pub(crate) const RAIN: [f64; 3] = [0.0, 4.0, 1.5];

/// Variables `x`, `y` (inputs 0 and 1), the group `effect` over Alder, Birch, Cedar (2, 3, 4), the constant `crest`,
/// and the columns `flow`, `level`, `gap` (with a missing cell) and `station` of one file, `rain.depth` of another.
pub(crate) fn scope() -> Scope {
    let mut scope = Scope::new();
    let readings = scope.rows(Rows { description: "the rows of readings.csv".into(), len: 5 });
    let members = scope.rows(Rows { description: "the members of effect".into(), len: 3 });
    let rain = scope.rows(Rows { description: "the rows of rain.csv".into(), len: 3 });
    scope.constant("crest", 4.5);
    scope.variable("x");
    scope.variable("y");
    scope.group("effect", members, &["Alder".into(), "Birch".into(), "Cedar".into()]);
    scope.column("flow", readings, FLOW.to_vec());
    scope.column("level", readings, LEVEL.to_vec());
    scope.column("gap", readings, vec![1.0, f64::NAN, 3.0, 4.0, 5.0]);
    scope.texts("station", readings, STATIONS.iter().map(|&name| name.into()).collect());
    scope.member_column("effect", "station", &MEMBERS);
    scope.column("rain.depth", rain, RAIN.to_vec());
    scope
}

/// The program of one text in [`scope`].
pub(crate) fn program(text: &str, wanted: Wanted) -> Program {
    scope().compile(&[("target", text, wanted)]).unwrap_or_else(|errors| panic!("{text}: {errors:?}"))
}

/// Value of a number at `x`, `y` and the three effects.
pub(crate) fn value(text: &str, at: [f64; 5]) -> f64 {
    program(text, Wanted::Number).values(&Points::from_rows(5, &at))[0].get(0, 0)
}

/// Value and gradient of a number at `x`, `y` and the three effects.
pub(crate) fn gradient(text: &str, at: [f64; 5]) -> (f64, Vec<f64>) {
    let (value, gradient) = program(text, Wanted::Number).value_and_gradient(0, &Points::from_rows(5, &at));
    (value[0], gradient.point(0))
}
