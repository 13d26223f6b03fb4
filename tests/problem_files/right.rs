//! Right problem files: what each feature means, against SciPy 1.17.1 (`st` is `scipy.stats`, `np` is NumPy 2.4.6).

use std::path::Path;

use evenpoise::numeric::Points;
use evenpoise::problem::Aim;
use evenpoise::problem::Coordinate;
use evenpoise::problem::Problem;

pub(crate) fn read(text: &str) -> Problem {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/problem_files/data");
    Problem::parse(text, "right.toml", &folder).unwrap_or_else(|errors| panic!("{errors}"))
}

/// Log target in natural units at a point in natural units.
pub(crate) fn log_target(problem: &Problem, natural: &[f64]) -> f64 {
    let z = problem.to_coordinates(&Points::from_rows(problem.dim(), natural));
    problem.evaluate(&z).unwrap().log_density[0] - problem.log_jacobian(&z)[0]
}

pub(crate) fn close(got: f64, want: f64, tolerance: f64) {
    assert!((got - want).abs() <= tolerance * want.abs().max(1.0), "got {got:?}, want {want:?}");
}

pub(crate) const TRACER: &str = r#"
title = "Dye tracer in the Ellenmere feeder canal (invented data)"

[constants]
mass = 2.5e3
reach = 850

[variables]
velocity = { distribution = "lognormal", mean = 0.6, sd = 0.3, unit = "m/s" }
dispersion = { range = [0.0, inf], near = 5.0, spread = 5.0, unit = "m2/s" }
offset = { range = [-inf, inf], near = 0.0, spread = 2.0 }
noise = { distribution = "half-normal", scale = 1.0 }

[data]
file = "readings.csv"

[formulas]
predicted = "offset + peak * exp(-(reach - velocity*time)^2 / (4*dispersion*time))"
peak = 'mass / sqrt(4*pi*dispersion*time)'

[target]
aim = "density"
log_factor = "sum(log_density_normal(concentration, predicted, noise))"

[estimates]
travel_time = "reach / velocity"
residual = "concentration - predicted"

[tuning]
budget = 5000
components = 3
df = 7.5
"#;

/// Source: `st.lognorm.logpdf(v, s, scale=np.exp(np.log(.6) - s*s/2)) + st.halfnorm.logpdf(noise) +
/// st.norm.logpdf(c, predicted, noise).sum()` with `s = np.sqrt(np.log(1.25))`, `v, D, offset, noise = .62, 9, .1, .4`.
#[test]
fn a_density_of_ranges_distributions_and_data() {
    let problem = read(TRACER);
    assert_eq!((problem.dim(), problem.aim()), (4, Aim::Density));
    let names: Vec<&str> = problem.variables().iter().map(|variable| variable.name.as_str()).collect();
    assert_eq!(names, ["velocity", "dispersion", "offset", "noise"]);
    let words: Vec<&str> = problem.variables().iter().map(|variable| variable.coordinate.word()).collect();
    assert_eq!(words, ["log", "log", "natural", "log"]);
    close(log_target(&problem, &[0.62, 9.0, 0.1, 0.4]), -47.542_241_742_637_75, 1e-13);
    assert_eq!(problem.variables()[0].unit.as_deref(), Some("m/s"));
    assert_eq!(problem.tuning().budget, Some(5000));
    assert_eq!((problem.tuning().components, problem.tuning().df), (Some(3), Some(7.5)));
    assert!(problem.unused_variables().is_empty());
}

/// Source: `predicted` of the recipe above at 600, 900, ... seconds.
#[test]
fn estimates_are_numbers_or_columns() {
    let problem = read(TRACER);
    let names = problem.estimate_names();
    assert_eq!(names[0], "travel_time");
    assert_eq!(names[5], "residual[5]");
    let z = problem.to_coordinates(&Points::from_rows(4, &[0.62, 9.0, 0.1, 0.4]));
    let estimates = problem.estimates(&z);
    assert_eq!(estimates.len(), 6);
    close(estimates[0][0], 850.0 / 0.62, 1e-14);
    close(estimates[3][0], 3.02 - 5.331_984_17, 1e-8);
}

/// Source: `st.gamma.logpdf(1.3, 2, scale=1/1.5) + st.beta.logpdf(.62, 2, 3, loc=.5, scale=1.5) +
/// st.truncnorm.logpdf(2.9, -2, 2, loc=2, scale=.5) + st.gumbel_r.logpdf(-.4, .3, 1.2) +
/// st.lognorm.logpdf(3.1, .5, scale=np.exp(.8)) + st.t.logpdf(1.2, 4) + st.uniform.logpdf(17.5, 10, 20)`.
#[test]
fn distributions_of_every_support() {
    let problem = read(
        r#"
title = "A bit of everything"
[variables]
a = { distribution = "gamma", shape = 2.0, rate = 1.5 }
b = { distribution = "beta", a = 2.0, b = 3.0, low = 0.5, high = 2.0 }
c = { distribution = "normal", mean = 2.0, sd = 0.5, between = [1.0, 3.0] }
d = { distribution = "gumbel", location = 0.3, scale = 1.2 }
e = { distribution = "lognormal", log_mean = 0.8, log_sd = 0.5, shift = 1.0 }
f = { distribution = "student-t", df = 4.0 }
g = { distribution = "uniform", low = 10, high = 30 }
[target]
aim = "density"
log_factor = "0*(a + b + c + d + e + f + g)"
"#,
    );
    let words: Vec<&str> = problem.variables().iter().map(|variable| variable.coordinate.word()).collect();
    assert_eq!(words, ["log", "logit", "logit", "natural", "log", "natural", "logit"]);
    assert_eq!(problem.variables()[4].coordinate, Coordinate::Log { end: 1.0, upward: true });
    close(log_target(&problem, &[1.3, 0.62, 2.9, -0.4, 4.1, 1.2, 17.5]), -11.002_090_788_364_38, 1e-13);
}

pub(crate) const EFFECTS: &str = r#"
title = "Floods at three invented stations"
[variables]
level = { distribution = "normal", mean = 30.0, sd = 20.0 }
effect = { each = "station", distribution = "normal", mean = 0.0, sd = "between", unit = "m3/s" }
between = { distribution = "half-cauchy", scale = 10.0 }
within = { distribution = "half-cauchy", scale = 5.0 }
[data]
file = "floods.csv"
names = { flow = "Peak flow (m3/s)" }
missing = ["", "NA"]
[target]
aim = "density"
log_factor = "sum(log_density_normal(flow, level + effect[station], within))"
[estimates]
typical = "level + effect"
difference = "effect['Birch'] - effect[1]"
"#;

/// Source: `st.norm.logpdf(flow, 30 + e, 2.5).sum() + st.norm.logpdf(30, 30, 20) + st.halfcauchy.logpdf(9, scale=10) +
/// st.halfcauchy.logpdf(2.5, scale=5) + st.norm.logpdf([-1, 11, -15], 0, 9).sum()`, `e` the effect of each of the five
/// rows with a flow.
#[test]
fn random_effects_with_an_unknown_spread() {
    let problem = read(EFFECTS);
    let names: Vec<&str> = problem.variables().iter().map(|variable| variable.name.as_str()).collect();
    assert_eq!(names, ["level", "effect[Alder]", "effect[Birch]", "effect[Cedar]", "between", "within"]);
    let natural = [30.0, -1.0, 11.0, -15.0, 9.0, 2.5];
    close(log_target(&problem, &natural), -32.532_140_585_016_46, 1e-13);
    let z = problem.to_coordinates(&Points::from_rows(6, &natural));
    // The score of an effect is its value over the spread between stations.
    close(z.get(0, 2), 11.0 / 9.0, 1e-14);
    let back = problem.to_natural(&z).point(0);
    back.iter().zip(natural).for_each(|(&got, want)| close(got, want, 1e-13));
    assert_eq!(problem.data_files()[0].dropped, 1);
    let names = problem.estimate_names();
    assert_eq!(names, ["typical[Alder]", "typical[Birch]", "typical[Cedar]", "difference"]);
    let estimates: Vec<f64> = problem.estimates(&z).iter().map(|column| column[0]).collect();
    estimates.iter().zip([29.0, 41.0, 15.0, 12.0]).for_each(|(&got, want)| close(got, want, 1e-13));
}

/// Complete rows look at the columns that formulas use: `stage` is not, so its gap drops no row. With `rows = "all"`
/// the gap stays, and `present` tells.
#[test]
fn rows_are_dropped_or_kept() {
    let file = |data: &str, formula: &str| {
        read(&format!(
            "title = \"Rows\"\n[variables]\nx = {{ distribution = \"normal\", mean = 0.0, sd = 1.0 }}\n[data]\n\
             file = \"floods.csv\"\nmissing = [\"\", \"NA\"]\n{data}\n[target]\naim = \"density\"\n\
             log_factor = \"-x^2\"\n[estimates]\nanswer = \"{formula} + 0*x\"\n"
        ))
    };
    let answer = |problem: &Problem| problem.estimates(&Points::zeros(1, 1))[0][0];
    let complete = file("", "sum(stage)");
    assert_eq!(complete.data_files()[0].dropped, 1);
    close(answer(&complete), 2.10 + 1.96 + 2.48 + 1.22 + 1.30, 1e-14);
    let all = file("rows = \"all\"", "sum(if(present(stage), stage, 0))");
    assert_eq!(all.data_files()[0].dropped, 0);
    close(answer(&all), 2.10 + 1.96 + 2.48 + 1.22 + 1.30, 1e-14);
    assert_eq!(answer(&file("rows = \"all\"", "count(present(stage)) + 0*count(year)")), 5.0);
}

#[test]
fn several_data_files_run_over_their_own_rows() {
    let problem = read(
        r#"
title = "Two files"
[variables]
x = { distribution = "normal", mean = 0.0, sd = 1.0 }
[data.gauge]
file = "readings.csv"
[data.flood]
file = "floods.csv"
[target]
aim = "density"
log_factor = "-x^2*sum(gauge.concentration)"
[estimates]
alders = "sum(if(flood.station == 'Alder', 1, 0)) + 0*x"
last = "max(gauge.time) + x"
"#,
    );
    let estimates = problem.estimates(&Points::from_rows(1, &[0.5]));
    assert_eq!((estimates[0][0], estimates[1][0]), (2.0, 1800.5));
    close(log_target(&problem, &[0.5]), -0.25 * 9.29 - 0.5 * 0.25 - 0.918_938_533_204_672_8, 1e-13);
}

/// Source: `u = np.linalg.cholesky([[1, .3], [.3, 1]]) @ [1.1, -.7]`, `inflow = np.exp(np.log(40) - s2/2 +
/// np.sqrt(s2)*u[0])` with `s2 = np.log1p(.04)`, `gate = st.weibull_min.ppf(st.norm.cdf(u[1]), 3, scale=60)`.
#[test]
fn a_probability_lives_in_independent_scores() {
    let problem = read(
        r#"
title = "A gate and its inflow"
[variables]
inflow = { distribution = "lognormal", mean = 40.0, cv = 0.2 }
gate = { distribution = "weibull", shape = 3.0, scale = 60.0 }
[[correlation]]
among = ["inflow", "gate"]
score = 0.3
[target]
aim = "probability"
event = "inflow >= gate or inflow > 500"
require = ["gate > 20"]
failed = "outside"
"#,
    );
    let z = Points::from_rows(2, &[1.1, -0.7, 0.0, 0.0, 0.0, -4.0]);
    let answer = problem.evaluate(&z).unwrap();
    let x = problem.to_natural(&z);
    close(x.get(0, 0), 48.770_007_232_310_42, 1e-13);
    close(x.get(0, 1), 46.266_484_126_578_29, 1e-13);
    close(answer.value[0], -2.503_523_105_732_128_3, 1e-12);
    // A gate below 20 is in the event but not in the requirement, whose margin is then the larger.
    assert!(x.get(2, 1) < 20.0 && answer.value[2] > 0.0);
    assert_eq!(answer.hit, [true, false, false]);
    close(answer.log_density[0], -0.5 * (1.21 + 0.49) - 2.0 * 0.918_938_533_204_672_8, 1e-14);
    assert_eq!(problem.start().near, [0.0, 0.0]);
    assert_eq!(problem.start().spread, [1.0, 1.0]);
    let back = problem.to_coordinates(&x);
    (0..3).for_each(|i| (0..2).for_each(|j| close(back.get(i, j), z.get(i, j), 1e-11)));
}

/// Source: `st.poisson.ppf(st.norm.cdf([-1.2, .3, 1.7]), 3)` is 1, 3, 6; `st.poisson.logpmf` of these sums to
/// -6.384887794557059; the log density in coordinates is that of three standard normal scores.
#[test]
fn discrete_variables_live_in_their_scores() {
    let problem = read(
        r#"
title = "Counts"
[variables]
n = { each = 3, distribution = "poisson", mean = 3.0 }
[target]
aim = "density"
log_factor = "-0.1*sum(n)"
"#,
    );
    let z = Points::from_rows(3, &[-1.2, 0.3, 1.7]);
    assert_eq!(problem.to_natural(&z).point(0), [1.0, 3.0, 6.0]);
    let normal = -0.5 * (1.44 + 0.09 + 2.89) - 3.0 * 0.918_938_533_204_672_8;
    close(problem.evaluate(&z).unwrap().log_density[0], normal - 1.0, 1e-14);
    close(log_target(&problem, &[1.0, 3.0, 6.0]), -6.384_887_794_557_059 - 1.0, 1e-12);
}

#[test]
fn an_expectation_has_an_integrand() {
    let problem = read(
        r#"
title = "Cost of a shortfall"
[variables]
storage = { distribution = "normal", mean = 10.0, sd = 2.0 }
[formulas]
shortfall = "max(0, 8 - storage)"
[target]
aim = "expectation"
integrand = "log(storage - 5) + 0*shortfall"
require = ["storage < 14"]
"#,
    );
    let answer = problem.evaluate(&Points::from_rows(1, &[0.5, 3.0, -4.0])).unwrap();
    close(answer.value[0], 6.0_f64.ln(), 1e-15);
    // Outside the requirement, and outside the domain of the logarithm, nothing is added.
    assert_eq!(answer.value[1..], [0.0, 0.0]);
    assert!(answer.hit.is_empty());
    close(answer.log_density[0], -0.125 - 0.918_938_533_204_672_8, 1e-15);
}

#[test]
fn outside_is_no_density() {
    let problem = read(
        r#"
title = "Outside"
[variables]
x = { range = [-inf, inf], near = 0.0, spread = 1.0 }
[target]
aim = "density"
log_density = "log(x) - x"
require = ["x < 5"]
"#,
    );
    let answer = problem.evaluate(&Points::from_rows(1, &[1.0, -1.0, 6.0, 0.0])).unwrap();
    assert_eq!(answer.log_density, [-1.0, f64::NEG_INFINITY, f64::NEG_INFINITY, f64::NEG_INFINITY]);
}

#[test]
fn problems_cross_threads_and_may_have_no_points() {
    fn crosses<T: Send + Sync>(_: &T) {}
    let problem = read(TRACER);
    crosses(&problem);
    assert!(problem.evaluate(&Points::zeros(4, 0)).unwrap().log_density.is_empty());
    assert_eq!(problem.evaluate_with_gradient(&Points::zeros(4, 0)).unwrap().1.len(), 0);
}

#[test]
fn requirements_can_be_asked_alone() {
    let problem = read(
        "title = \"Require\"\n[variables]\nx = { distribution = \"normal\", mean = 0.0, sd = 1.0 }\n[target]\n\
         aim = \"density\"\nlog_factor = \"0*x\"\nrequire = [\"x > 0\", \"x < 1 or x > 2\"]\n",
    );
    let points = Points::from_rows(1, &[-1.0, 0.5, 1.5, 2.5]);
    assert_eq!(problem.fulfils(&points).unwrap(), [false, true, false, true]);
}

#[test]
fn formulas_of_constants_are_parameters() {
    let problem = read(
        r#"
title = "Constants in parameters"
[constants]
crest = 4.0
[variables]
level = { distribution = "uniform", low = 1.0, high = "crest - 0.5" }
[target]
aim = "density"
log_factor = "0*level"
"#,
    );
    assert_eq!(problem.variables()[0].coordinate, Coordinate::Logit { low: 1.0, high: 3.5 });
    close(log_target(&problem, &[2.0]), -(2.5_f64.ln()), 1e-14);
}

#[test]
fn order_is_that_of_the_text() {
    let problem = read(
        "title = \"Order\"\n[variables.zeta]\ndistribution = \"normal\"\nmean = 0.0\nsd = 1.0\n\
         [variables.alpha]\ndistribution = \"normal\"\nmean = 0.0\nsd = 1.0\n[target]\naim = \"density\"\n\
         log_factor = \"-zeta^2 + alpha\"\n[estimates]\nz = \"zeta\"\na = \"alpha\"\n\"größe\" = \"zeta + alpha\"\n",
    );
    let names: Vec<&str> = problem.variables().iter().map(|variable| variable.name.as_str()).collect();
    assert_eq!(names, ["zeta", "alpha"]);
    assert_eq!(problem.estimate_names(), ["z", "a", "größe"]);
}
