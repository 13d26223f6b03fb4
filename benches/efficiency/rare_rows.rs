//! The rare-event rows: problem files as a user would write them, exact answers, budgets, figures to reach.
//!
//! Definitions and exact answers: de Boer, Kroese, Mannor & Rubinstein 2005 (bridge); Katsuki & Frangopol 1994, Waarts 2000 (four
//! branches); Echard, Gayton & Lemaire 2011, 2013 (hat, oscillator); Borri & Speranzini 1997 (convex); Der Kiureghian & Dakessian 1998
//! (parabola); Rajashekhar & Ellingwood 1993 (cantilever, oscillator); Wu et al. 2001 (stress); Der Kiureghian & De Stefano 1991
//! (damped oscillator); El Masri, Morio & Simatos 2024 (100 dimensions, Asian payoff); Rozsas & Slobbe 2019 (rp rows). The answers
//! are exact sums, nested quadrature, or quasi-Monte Carlo with one variable integrated out, to more digits than any row needs.

#![allow(clippy::approx_constant, reason = "3.14 is a measured figure")]

use evenpoise::distribution::Distribution;
use evenpoise::model::Closure;
use evenpoise::numeric::{Points, exp};
use evenpoise::problem::{Aim, Problem, Variable};
use std::path::Path;

/// A row of the table.
pub struct Row {
    pub name: &'static str,
    pub budget: u64,
    pub exact: f64,
    /// Relative variance times evaluations to reach.
    pub goal: f64,
    /// That of the prototype, which took differences for gradients.
    pub before: f64,
    text: String,
}

impl Row {
    /// The row as a problem; without its gradients where `plain`.
    pub fn problem(&self, plain: bool) -> Problem {
        let problem = if self.text.is_empty() { asian() } else { parsed(&self.text) };
        if plain { without_gradient(problem) } else { problem }
    }
}

fn parsed(text: &str) -> Problem {
    Problem::parse(text, "row.toml", Path::new(".")).unwrap_or_else(|e| panic!("{e}\n{text}"))
}

/// The same problem answered by a model that gives values alone.
fn without_gradient(problem: Problem) -> Problem {
    let (aim, variables, d) = (problem.aim(), problem.variables().to_vec(), problem.dim());
    let title = problem.title().to_owned();
    let model = Closure::new(d, move |x| {
        let u = problem.to_coordinates(&Points::from_rows(d, x));
        problem.evaluate(&u).unwrap().value[0]
    });
    Problem::from_model(&title, variables, aim, Box::new(model)).unwrap()
}

fn asian() -> Problem {
    const N: usize = 100;
    let standard = Distribution::new("normal", &[("mean", 0.0), ("sd", 1.0)]).unwrap();
    let names: Vec<String> = (1..=N).map(|j| format!("u{j}")).collect();
    let variables = names.iter().map(|n| Variable::random(n, standard.clone())).collect();
    let (rate, time, sigma) = (0.05, 0.5, 0.1);
    let step = time / N as f64;
    let prices = move |u: &[f64]| -> Vec<f64> {
        let mut log = 0.0;
        u.iter()
            .map(|u| {
                log += (rate - 0.5 * sigma * sigma) * step + sigma * step.sqrt() * u;
                50.0 * exp(log)
            })
            .collect()
    };
    let payoff = move |s: &[f64]| exp(-rate * time) * (s.iter().sum::<f64>() / N as f64 - 55.0).max(0.0);
    let model = Closure::new(N, move |u| payoff(&prices(u))).with_gradient(move |u, g| {
        let s = prices(u);
        let value = payoff(&s);
        let mut after = 0.0;
        for j in (0..N).rev() {
            after += s[j];
            g[j] = if value > 0.0 { exp(-rate * time) * after / N as f64 * sigma * step.sqrt() } else { 0.0 };
        }
        value
    });
    Problem::from_model("asian", variables, Aim::Expectation, Box::new(model)).unwrap()
}

fn normal(name: &str, mean: &str, sd: &str) -> String {
    format!("{name} = {{ distribution = \"normal\", mean = {mean}, sd = {sd} }}\n")
}

fn standard(names: &[&str]) -> String {
    names.iter().map(|n| normal(n, "0.0", "1.0")).collect()
}

fn group(name: &str, n: usize, distribution: &str) -> String {
    format!("{name} = {{ each = {n}, distribution = {distribution} }}\n")
}

const NORMAL: &str = "\"normal\", mean = 0.0, sd = 1.0";

fn row(name: &'static str, budget: u64, exact: f64, goal: f64, before: f64, variables: &str, event: &str) -> Row {
    let text =
        format!("title = \"{name}\"\n[variables]\n{variables}[target]\naim = \"probability\"\nevent = \"{event}\"\n");
    Row { name, budget, exact, goal, before, text }
}

/// All rows.
pub fn all() -> Vec<Row> {
    let two = standard(&["a", "b"]);
    let three = standard(&["a", "b", "c"]);
    let bridge: String = [(1, 0.25), (2, 0.4), (3, 0.1), (4, 0.3), (5, 0.2)]
        .iter()
        .map(|(i, m)| format!("x{i} = {{ distribution = \"exponential\", mean = {m} }}\n"))
        .collect();
    let four = |k: &str| {
        format!(
            "min(3 + 0.1*(a-b)^2 - (a+b)/sqrt(2), 3 + 0.1*(a-b)^2 + (a+b)/sqrt(2), a-b + {k}/sqrt(2), b-a + {k}/sqrt(2)) <= 0"
        )
    };
    let canti = normal("x1", "0.001", "0.0002") + &normal("x2", "250.0", "37.5");
    let stress = normal("r", "40000.0", "2000.0") + &normal("x", "500.0", "100.0") + &normal("y", "1000.0", "100.0");
    let truss = normal("q", "20000.0", "1400.0")
        + &normal("l", "12.0", "0.12")
        + &normal("As", "9.82e-4", "5.892e-5")
        + &normal("Ac", "0.04", "0.0048")
        + &normal("Es", "1e11", "6e9")
        + &normal("Ec", "2e10", "1.2e9");
    let osc = |mean: &str, sd: &str| {
        normal("m", "1.0", "0.05")
            + &normal("c1", "1.0", "0.1")
            + &normal("c2", "0.1", "0.01")
            + &normal("r", "0.5", "0.05")
            + &normal("t", "1.0", "0.2")
            + &normal("F", mean, sd)
    };
    let osc_event = "3*r <= abs(2*F/(c1+c2)*sin(sqrt(max((c1+c2)/m, 1e-9))*t/2))";
    let damp = |mean: &str| -> String {
        [
            ("mp", "1.5", "0.1"),
            ("ms", "0.01", "0.1"),
            ("kp", "1.0", "0.2"),
            ("ks", "0.01", "0.2"),
            ("zp", "0.05", "0.4"),
            ("zs", "0.02", "0.5"),
            ("S0", "100.0", "0.1"),
            ("Fs", mean, "0.1"),
        ]
        .iter()
        .map(|(n, m, c)| format!("{n} = {{ distribution = \"lognormal\", mean = {m}, cv = {c} }}\n"))
        .collect()
    };
    let mut rows = vec![
        row(
            "bridge",
            10_000,
            1.342_459_749_3e-5,
            3.5,
            3.14,
            &bridge,
            "min(x1 + x4, x1 + x3 + x5, x2 + x5, x2 + x3 + x4) >= 2",
        ),
        row("four7", 4_000, 2.222_795_066_2e-3, 1.0, 0.91, &two, &four("7")),
        row("four6", 4_000, 4.457_331_490_6e-3, 0.6, 0.45, &two, &four("6")),
        row("hat", 10_000, 2.874_537_609_2e-5, 0.3, 0.23, &two, "0.5*(a-2)^2 - 1.5*(b-5)^3 - 3 <= 0"),
        row("convex", 5_000, 4.207_305_511_3e-3, 0.4, 0.22, &two, "0.1*(a-b)^2 - (a+b)/sqrt(2) + 2.5 <= 0"),
        row("parab", 5_000, 3.016_311_901_3e-3, 0.4, 0.28, &two, "5 - b - 0.5*(a-0.1)^2 <= 0"),
        row("canti", 5_000, 9.513_809_8e-3, 0.4, 0.23, &canti, "7.476923e10*x1/x2^3 >= 18.46154"),
        row(
            "stress",
            5_000,
            1.349_139_3e-3,
            0.4,
            0.26,
            &stress,
            "r - 600*y/(2.4484*3.8884^2) - 600*x/(2.4484^2*3.8884) <= 0",
        ),
        row("truss", 5_000, 9.359_52e-3, 0.8, 0.75, &truss, "0.03 - (q*l*l/2)*(3.81/(Ac*Ec) + 1.13/(As*Es)) <= 0"),
        row("prod2", 5_000, 9.819_298_7e-3, 0.4, 0.33, &two, "3 - a*b <= 0"),
        row(
            "sum20",
            5_000,
            9.906_030_7e-4,
            2.5,
            2.84,
            &group("x", 20, "\"exponential\", mean = 1.0"),
            "sum(x) <= 8.951",
        ),
        row(
            "rp63",
            10_000,
            3.769_436_1e-4,
            7.5,
            7.33,
            &(standard(&["a"]) + &group("x", 99, NORMAL)),
            "0.1*sum(x^2) - a - 4.5 <= 0",
        ),
        row("rp33", 5_000, 2.575_597_790_8e-3, 0.6, 0.40, &three, "min(3*sqrt(3) - a - b - c, 3 - c) <= 0"),
        row("rp35", 5_000, 3.478_946_3e-3, 0.7, 0.68, &two, "min(2 - b + exp(-0.1*a^2) + (0.2*a)^4, 4.5 - a*b) <= 0"),
        row("rp31", 5_000, 3.226_681_209_6e-3, 0.6, 0.40, &two, "2 - b + (4*a)^4 <= 0"),
        row(
            "rp53",
            5_000,
            3.132_048_568_7e-2,
            0.8,
            0.54,
            &two,
            "sin(2.5*(1.5+a)) + 2 - ((1.5+a)^2 + 4)*(1.5+b)/20 <= 0",
        ),
        row(
            "rp28",
            5_000,
            1.452_376_62e-7,
            0.8,
            0.57,
            &(normal("x1", "78064.4", "11709.7") + &normal("x2", "0.0104", "0.00156")),
            "x1*x2 <= 146.14",
        ),
        row("osc1", 10_000, 2.859_559_3e-2, 0.7, 0.62, &osc("1.0", "0.2"), osc_event),
        row("osc6", 10_000, 9.130_967e-6, 0.7, 0.64, &osc("0.6", "0.1"), osc_event),
        row("osc45", 10_000, 1.514_424e-8, 0.7, 0.72, &osc("0.45", "0.075"), osc_event),
        row("damp15", 10_000, 4.772_8e-3, 1.3, 1.33, &damp("15.0"), DAMPED),
        row("damp21", 10_000, 4.413_12e-5, 2.0, 2.12, &damp("21.5"), DAMPED),
        row("damp27", 10_000, 3.783_35e-7, 2.8, 2.83, &damp("27.5"), DAMPED),
        row("hyp10", 10_000, 2.866_515_718_8e-7, 0.9, 0.91, &group("u", 10, NORMAL), "sum(u)/sqrt(10) >= 5"),
        row("lin100", 10_000, 1.349_898_031_6e-3, 0.1, 0.10, &group("u", 100, NORMAL), "sum(u)/10 >= 3"),
        row(
            "quad100",
            10_000,
            1.508_609_698_5e-3,
            0.8,
            0.72,
            &group("u", 100, NORMAL),
            "u[1] >= 25*u[2]^2 + 30*u[3]^2 + 1",
        ),
    ];
    rows.push(Row { name: "asian", budget: 10_000, exact: 0.018_774, goal: 0.09, before: 0.09, text: String::new() });
    rows
}

/// Events that hide a part of themselves. Exact answers: SciPy 1.17.1, `scipy.stats.norm.sf`, `scipy.stats.ncx2.cdf(r^2, 2, 9)` for a disc
/// of radius `r` at distance 3, `scipy.integrate.quad` over `a` for the strip.
pub fn traps() -> Vec<Row> {
    let two = standard(&["a", "b"]);
    let trap = |name, budget, exact, variables: &str, event: &str| row(name, budget, exact, 0.0, 0.0, variables, event);
    let branches = "3.6 - max(u[1] + 0.4, max(u[2] + 0.3, max(u[3] + 0.2, max(u[4] + 0.1, u[5])))) <= 0";
    // A disc of radius .25 holds 92 % of the probability, a half-plane on the other side the rest.
    let disc = "min(sqrt((a + 3)^2 + b^2) - 0.25, 4 - a) <= 0";
    let walls = "min(3 - a, max(3.8 - b, abs(a) - 0.5)) <= 0";
    vec![
        trap("disc2", 2_000, DISC, &two, disc),
        trap("disc10", 10_000, DISC, &two, disc),
        trap("multi10", 5_000, MULTI, &group("u", 10, NORMAL), branches),
        trap("multi20", 5_000, MULTI, &group("u", 20, NORMAL), branches),
        trap("multi50", 5_000, MULTI, &group("u", 50, NORMAL), branches),
        trap("opp20", 5_000, OPPOSITE, &group("u", 20, NORMAL), "abs(sum(u)/sqrt(20)) >= 3.5"),
        trap("opp100", 5_000, OPPOSITE, &group("u", 100, NORMAL), "abs(sum(u)/10) >= 3.5"),
        trap("strip", 5_000, STRIP, &two, "max(3 - a, abs(b - 0.3*a^2) - 0.05) <= 0"),
        trap("walls2", 5_000, WALLS, &two, walls),
        trap("walls6", 5_000, WALLS, &standard(&["a", "b", "c", "d", "e", "f"]), walls),
    ]
}

const DISC: f64 = 3.979313685439e-04;
const MULTI: f64 = 1.897875337322e-03;
const OPPOSITE: f64 = 4.652581580711e-04;
const STRIP: f64 = 5.426715330550e-07;
const WALLS: f64 = 1.377601900747e-03;

const DAMPED: &str = "Fs - 3*ks*sqrt(pi*S0/(4*zs*sqrt(ks/ms)^3) * ((zp+zs)/2*zs/(zp*zs*(4*((zp+zs)/2)^2 + \
((sqrt(kp/mp)-sqrt(ks/ms))/((sqrt(kp/mp)+sqrt(ks/ms))/2))^2) + ms/mp*((zp+zs)/2)^2)) * \
(zp*sqrt(kp/mp)^3 + zs*sqrt(ks/ms)^3)*sqrt(kp/mp)/(4*(zp+zs)/2*((sqrt(kp/mp)+sqrt(ks/ms))/2)^4)) <= 0";
