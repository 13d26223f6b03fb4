//! Words, numbers and calls from elsewhere in problem files: several in one file, told at once.

use crate::wrong::file;
use crate::wrong::gallery;
use crate::wrong::snapshot;

const DENSITY: &str = "[target]\naim = \"density\"\nlog_factor = \"-depth^2\"";
const DEPTH: &str = "depth = { distribution = \"normal\", mean = 2.0, sd = 0.5 }";
const PUMP: &str = "depth = { distribution = \"normal\", mean = 2.0, sd = 0.5 }\n\
                    pump_out = { distribution = \"bernoulli\", p = 0.1 }";

fn event(text: &str) -> String {
    file("", PUMP, &format!("[target]\naim = \"probability\"\nevent = \"{text}\""))
}

fn formula(text: &str) -> String {
    file("", DEPTH, &format!("[target]\naim = \"density\"\nlog_factor = \"{text}\""))
}

#[test]
fn words_from_elsewhere() {
    let gumbel = |name: &str| format!("{name} = {{ distribution = \"gumbel\", mean = 2.0, sd = 0.5 }}\n");
    let matrix = |kind: &str| {
        file(
            "",
            &["a", "b", "c"].map(gumbel).concat(),
            &format!(
                "[[correlation]]\namong = [\"a\", \"b\", \"c\"]\n{kind} = [[1.0, 0.9, 0.9], [0.9, 1.0, -0.8], \
                 [0.9, -0.8, 1.0]]\n\n[target]\naim = \"density\"\nlog_factor = \"-a*b*c\""
            ),
        )
    };
    snapshot(
        "words_from_elsewhere",
        &gallery(&[
            ("groups of thousands", {
                file(
                    "fine = 1,250.0\nlarge = 1,250,000\nother = 1.250,00",
                    "depth = { distribution = \"normal\", mean = 1,250.0, sd = 0.5 }",
                    "[target]\naim = \"density\"\nlog_factor = \"-depth^2*fine*large*other\"",
                )
            }),
            ("parameters of a logarithm", {
                file(
                    "",
                    "depth = { distribution = \"lognormal\", mu = -1.0, sigma = 0.5 }\n\
                     width = { distribution = \"lognormal\", meanlog = 1.0, sdlog = 0.5 }\n\
                     load = { distribution = \"normal\", mu = 1.0, sigma = 0.5 }",
                    "[target]\naim = \"density\"\nlog_factor = \"-depth^2*width*load\"",
                )
            }),
            ("a lognormal by its mean", {
                file("", "depth = { distribution = \"lognormal\", mu = 2.0, cv = 0.5 }", DENSITY)
            }),
            ("an equal sign in an event", event("depth > 2.5 and pump_out = 1")),
            ("equality in an event", event("pump_out == 0 or depth != 2")),
            ("a spreadsheet's conditions", event("AND(depth > 2.5; pump_out = 1)")),
            ("calls of and and or", event("OR(depth > 2.5, AND(pump_out > 0, depth > 2 or depth < 0))")),
            ("capital letters and a misspelt name", event("depth > 1 AND dept < 9 Or NOT(depth < 1)")),
            ("a capital if", formula("IF(depth > 1; -depth; 2*dept)")),
            ("a matrix that contradicts itself, of the variables", matrix("linear")),
            ("a matrix that contradicts itself, of the ranks", matrix("rank")),
            ("censored readings", {
                file(
                    "",
                    DEPTH,
                    "[data]\nfile = \"censored.csv\"\n\n[target]\naim = \"density\"\n\
                     log_factor = \"sum(log_density_normal(flow, depth, 1))\"",
                )
            }),
            ("arguments with names", formula("log_density_normal(depth, mean=0, sd=1, log=TRUE)")),
        ]),
    );
}

#[test]
fn habits_of_other_trades() {
    snapshot(
        "habits_of_other_trades",
        &gallery(&[
            ("parameters without names", { file("", "depth = { distribution = \"uniform\", 0.5, 1.5 }", DENSITY) }),
            ("a posterior and its likelihood", {
                file("", "depth ~ normal(2.0, 0.5)", "[target]\naim = \"posterior\"\nlog_likelihood = \"-depht^2\"")
            }),
            ("the probability of an event as a call", event("P(depth > 2.5)")),
            ("the mean of an integrand as a call", {
                file("", DEPTH, "[target]\naim = \"mean\"\nfunction = \"E(depth^2)\"")
            }),
            ("a constant with its unit", {
                file("g = 9.81 m/s2", DEPTH, "[target]\naim = \"probability\"\nlimit_state = \"g*depth > 20\"")
            }),
            ("a variable in two places", { file("", &format!("{DEPTH}\n[variables.depth]\nunit = \"m\""), DENSITY) }),
            ("keys of another sampler", {
                file("", DEPTH, &format!("{DENSITY}\n\n[tuning]\nsamples = 1e4\niterations = 10\nrandom_seed = 3.5"))
            }),
            ("a correlation in other words", {
                let both = format!("{DEPTH}\nlead = {{ distribution = \"normal\", mean = 1.0, sd = 0.5 }}");
                let table = "[[correlation]]\nvariables = [\"depth\", \"leed\"]\nrho = 1.4";
                file("", &both, &format!("{table}\n\n{}", DENSITY.replace("-depth^2", "-depth^2*lead")))
            }),
            ("a table of probabilities", {
                let table = "depth = { distribution = \"discrete\", values = [1, 2, 3], probs = [0.2, 0.5, 0.3] }";
                file("", table, DENSITY)
            }),
            ("a triangle and its peak", {
                file("", "depth = { distribution = \"triangular\", min = 1.0, peak = 2.0, max = 3.0 }", DENSITY)
            }),
        ]),
    );
}
