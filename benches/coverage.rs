//! How often 95 % intervals of production hold the truth, and how well a plan predicts the error of a run:
//! `cargo bench --bench coverage -- [--seeds N] [--only pond|gates|cost|balance|wide|plans] [--write FILE]`.
#![allow(clippy::print_stdout, clippy::print_stderr, clippy::unwrap_used, missing_docs)]

use evenpoise::adapt::rare::tune_rare;
use evenpoise::adapt::{Settings, Silent, tune};
use evenpoise::numeric::normal;
use evenpoise::numeric::special::{chi_squared_quantile, ln_gamma};
use evenpoise::problem::{Aim, Problem};
use evenpoise::production::{EstimateJob, Job, Outcome, Production, Sequence, Sums, borders, pilot_draws};
use evenpoise::proposal::Mixture;
use evenpoise::report::{DrawsTable, plan_of};
use std::path::Path;

/// Seeds of production start here, those of tunings there.
const FIRST_SEED: u64 = 9000;
const FIRST_TUNING: u64 = 7000;
const SEEDS: u64 = 400;
/// Tunings whose plan is held against production.
const PLANS: u64 = 40;
/// Draws of the runs that a plan is held against.
const PLANNED: u64 = 20_000;

const POND: &str = r#"
title = "Depth of a pond"
[variables]
depth = { distribution = "gamma", shape = 3.0, rate = 1.5 }
slope = { distribution = "normal", mean = 0.0, sd = 1.0 }
[target]
aim = "density"
log_factor = "4*log(depth) - 2.5*depth - 2*(slope - 0.3)^2"
[estimates]
depth = "depth"
square = "slope^2"
[tuning]
budget = 3000
"#;

const GATES: &str = r#"
title = "Two gates"
[variables]
a = { distribution = "normal", mean = 0.0, sd = 1.0 }
b = { distribution = "normal", mean = 0.0, sd = 1.0 }
[target]
aim = "probability"
event = "a + b > 5"
[estimates]
level = "a + b"
[tuning]
budget = 3000
"#;

const COST: &str = r#"
title = "A cost"
[variables]
a = { distribution = "normal", mean = 0.0, sd = 1.0 }
b = { distribution = "normal", mean = 0.0, sd = 1.0 }
[target]
aim = "expectation"
integrand = "max(0, a + b - 3)"
[tuning]
budget = 3000
"#;

const SIGNED: &str = r#"
title = "A balance"
[variables]
a = { distribution = "normal", mean = 0.0, sd = 1.0 }
[target]
aim = "expectation"
integrand = "(a - 0.5)^3"
[tuning]
budget = 3000
"#;

/// A problem with its proposal, tuned once, and the truths.
struct Case {
    problem: Problem,
    mixture: Mixture,
    draws: DrawsTable,
    log_scale: f64,
    evaluations: u64,
}

impl Case {
    fn tuned(text: &str, seed: u64) -> Self {
        let problem = Problem::parse(text, "case.toml", Path::new(".")).unwrap();
        let settings = Settings { seed, ..Settings::from_keys(problem.tuning()) };
        if problem.aim() == Aim::Density {
            let tuning = tune(&problem, &settings, &mut Silent).unwrap();
            let draws = DrawsTable::of(&problem, &tuning);
            let log_scale = tuning.score.as_ref().unwrap().log_normaliser;
            return Self { draws, log_scale, evaluations: tuning.evaluations, mixture: tuning.chosen, problem };
        }
        let tuning = tune_rare(&problem, &settings, &mut Silent).unwrap();
        let draws = DrawsTable::of_rare(&problem, &tuning.draws);
        let log_scale = evenpoise::numeric::ln(tuning.answer.value().unwrap().value.abs());
        Self { draws, log_scale, evaluations: tuning.evaluations, mixture: tuning.chosen, problem }
    }

    fn job(&self, seed: u64, draws: Option<u64>, stage: u32) -> Job {
        let weights = self.draws.weights();
        let estimates = self.draws.estimates().map(|(name, values)| EstimateJob {
            name: name.to_owned(),
            centre: values.iter().zip(weights).map(|(x, w)| x * w).sum(),
            borders: borders(values, weights),
        });
        Job {
            program: "bench".into(),
            title: self.problem.title().into(),
            aim: self.problem.aim().word().into(),
            problem: self.problem.digest(),
            proposal: "tuned".into(),
            seed,
            stage,
            draws,
            failed: None,
            log_scale: self.log_scale,
            predicted_ess_fraction: None,
            proposal_verdict: None,
            strata: 1 + Sequence::new(&self.mixture, 0, 0, draws).strata().into_iter().max().unwrap(),
            quantiles: vec![0.05, 0.5, 0.95],
            estimates: estimates.collect(),
        }
    }

    fn produce(&self, seed: u64, draws: u64) -> Outcome {
        let job = self.job(seed, Some(draws), 1);
        let mut production = Production::new(&self.problem, &self.mixture, &job, Sums::new(&job));
        production.advance(0..draws).unwrap();
        Outcome::of(&job, production.sums())
    }

    /// Two stages for a relative error, as the command has them.
    fn aimed(&self, seed: u64, relative_error: f64) -> Outcome {
        let job = self.job(seed, None, 0x0080_0001);
        let mut production = Production::new(&self.problem, &self.mixture, &job, Sums::new(&job));
        let mut until = 1000;
        loop {
            production.advance(production.sums().draws..until).unwrap();
            if let Some(number) = pilot_draws(&job, production.sums(), relative_error) {
                return self.produce(seed, number.draws);
            }
            until *= 2;
        }
    }
}

/// Value, error and interval of a quantity, where it is given.
type Read = fn(&Outcome) -> Option<(f64, f64, [f64; 2])>;
/// A name, a problem and its rows.
type Named = (&'static str, &'static str, fn() -> Vec<Row>);

/// A row: a quantity, its truth, and how it is read from an outcome as value, error and interval.
struct Row {
    name: String,
    truth: f64,
    read: Read,
}

fn row(name: &str, truth: f64, read: Read) -> Row {
    Row { name: name.to_owned(), truth, read }
}

fn answer(outcome: &Outcome) -> Option<(f64, f64, [f64; 2])> {
    outcome.value().map(|v| (v.value, v.se, v.interval_95))
}

fn constant(outcome: &Outcome) -> Option<(f64, f64, [f64; 2])> {
    Some((outcome.log_normaliser.value, outcome.log_normaliser.se, outcome.log_normaliser.interval_95))
}

fn estimate<const K: usize>(outcome: &Outcome) -> Option<(f64, f64, [f64; 2])> {
    let e = &outcome.estimates[K].1;
    Some((e.value, e.se, e.interval_95))
}

fn quantile<const K: usize>(outcome: &Outcome) -> Option<(f64, f64, [f64; 2])> {
    let q = outcome.estimates[0].1.quantiles[K];
    let [low, high] = q.interval_95?;
    Some((q.value?, (high - low) / 3.92, [low, high]))
}

/// The line of a row over all outcomes.
fn line(case: &str, draws: &str, row: &Row, outcomes: &[Outcome]) -> String {
    let given: Vec<_> = outcomes.iter().filter_map(row.read).collect();
    let inside = given.iter().filter(|(_, _, [low, high])| *low <= row.truth && row.truth <= *high).count();
    let n = given.len() as f64;
    let rms = (given.iter().map(|(v, _, _)| (v - row.truth) * (v - row.truth)).sum::<f64>() / n).sqrt();
    let bias = given.iter().map(|(v, _, _)| v - row.truth).sum::<f64>() / n / (rms / n.sqrt());
    let mut errors: Vec<f64> = given.iter().map(|(_, se, _)| *se).collect();
    errors.sort_by(f64::total_cmp);
    let claimed = errors[errors.len() / 2] / rms;
    let verdict = if inside * 400 >= 363 * outcomes.len() { "yes" } else { "NO" };
    format!(
        "| {case}, {} | {draws} | {inside} of {} | {verdict} | {claimed:.2} | {bias:+.1} |",
        row.name,
        outcomes.len()
    )
}

/// Closed forms of the pond: a gamma posterior of shape 7 and rate 4 for the depth, a normal one for the slope.
fn pond_rows() -> Vec<Row> {
    let (shape, rate): (f64, f64) = (7.0, 4.0);
    let log_depth = ln_gamma(shape) - ln_gamma(3.0) + 3.0 * 1.5_f64.ln() - shape * rate.ln();
    // N(0, 1) times exp(-2 (s - 0.3)^2): precision 5, mean 0.24, constant sqrt(1/5) exp(-0.5 * 4 * 0.09 * (1 - 4/5)).
    let log_slope = -0.5 * 5.0_f64.ln() - 2.0 * 0.09 * 0.2;
    let quantile_at = |p: f64| {
        let upper = p > 0.5;
        chi_squared_quantile(2.0 * shape, (if upper { 1.0 - p } else { p }).ln(), upper) / (2.0 * rate)
    };
    vec![
        row("log normalising constant", log_depth + log_slope, constant),
        row("mean", shape / rate, estimate::<0>),
        row("second moment", 0.2 + 0.24 * 0.24, estimate::<1>),
        row("quantile .05", quantile_at(0.05), quantile::<0>),
        row("quantile .5", quantile_at(0.5), quantile::<1>),
        row("quantile .95", quantile_at(0.95), quantile::<2>),
    ]
}

fn gates_rows() -> Vec<Row> {
    let b = 5.0 / 2.0_f64.sqrt();
    let p = normal::upper_tail(b);
    vec![
        row("probability", p, answer),
        row("mean within the event", 2.0_f64.sqrt() * normal::log_density(b).exp() / p, estimate::<0>),
    ]
}

fn cost_rows() -> Vec<Row> {
    let (s, c) = (2.0_f64.sqrt(), 3.0);
    vec![row("expectation", s * normal::log_density(c / s).exp() - c * normal::upper_tail(c / s), answer)]
}

fn signed_rows() -> Vec<Row> {
    vec![row("signed expectation", -1.625, answer)]
}

fn coverage(seeds: u64, wanted: &dyn Fn(&str) -> bool, out: &mut Vec<String>) {
    let cases: [Named; 4] = [
        ("pond", POND, pond_rows),
        ("gates", GATES, gates_rows),
        ("cost", COST, cost_rows),
        ("balance", SIGNED, signed_rows),
    ];
    for (name, text, rows) in cases.into_iter().filter(|(name, ..)| wanted(name)) {
        let case = Case::tuned(text, FIRST_TUNING);
        let mut sizes = vec![1000, 8000];
        if name == "gates" {
            sizes.insert(0, 40);
        }
        for draws in sizes {
            let outcomes: Vec<Outcome> = (0..seeds).map(|s| case.produce(FIRST_SEED + s, draws)).collect();
            for row in rows() {
                let is_few = draws < 1000;
                if !is_few || row.name == "probability" {
                    push(out, line(name, &draws.to_string(), &row, &outcomes));
                }
            }
        }
        let outcomes: Vec<Outcome> = (0..seeds).map(|s| case.aimed(FIRST_SEED + s, 0.05)).collect();
        push(out, line(name, "to 5 %", &rows()[0], &outcomes));
    }
    if !wanted("wide") {
        return;
    }
    // A poor proposal, for which 5 % takes far more than the least number of draws.
    let mut poor = Case::tuned(GATES, FIRST_TUNING);
    poor.mixture = poor.mixture.map(|c| c.widened(400.0)).unwrap();
    let outcomes: Vec<Outcome> = (0..seeds).map(|s| poor.aimed(FIRST_SEED + s, 0.05)).collect();
    let within = outcomes.iter().filter(|o| o.value().is_some_and(|v| v.cv <= 0.05)).count();
    let draws: u64 = outcomes.iter().map(|o| o.draws).sum::<u64>() / seeds;
    push(
        out,
        line(
            "gates, a proposal twenty times too wide",
            &format!("to 5 % ({draws} in the mean)"),
            &gates_rows()[0],
            &outcomes,
        ),
    );
    push(out, format!("\nOf those {seeds} runs {within} reached the 5 % that they aimed at."));
}

/// The error that plans predict for a run of 20,000 draws against the one that the run claims, over tunings.
fn plans(out: &mut Vec<String>) {
    let folder = std::env::temp_dir().join(format!("evenpoise-coverage-{}", std::process::id()));
    std::fs::create_dir_all(&folder).unwrap();
    for (name, text) in [("pond", POND), ("gates", GATES), ("cost", COST)] {
        let mut ratios: Vec<Vec<f64>> = Vec::new();
        let mut names: Vec<String> = Vec::new();
        let mut enough = 0;
        for seed in 0..PLANS {
            let case = Case::tuned(text, FIRST_TUNING + seed);
            case.draws.write(&folder.join("points.csv")).unwrap();
            let plan = plan_of(&folder, &case.problem, &case.mixture, case.evaluations).unwrap();
            let outcome = case.produce(FIRST_SEED + seed, PLANNED);
            let shown = |k: usize| match k {
                0 => outcome.value().map_or(outcome.log_normaliser.se, |v| v.cv),
                k => outcome.estimates[k - 1].1.se / outcome.estimates[k - 1].1.value.abs(),
            };
            ratios.push(
                plan.quantities
                    .iter()
                    .enumerate()
                    .map(|(k, q)| q.sized.relative_error(PLANNED as f64) / shown(k))
                    .collect(),
            );
            let error = shown(0);
            enough += u64::from(plan.quantities[0].draws(error)[1] >= PLANNED as f64);
            names = plan.quantities.into_iter().map(|q| q.name).collect();
        }
        for (k, quantity) in names.iter().enumerate() {
            let mut column: Vec<f64> = ratios.iter().map(|r| r[k]).collect();
            column.sort_by(f64::total_cmp);
            let at = |p: f64| column[(p * (column.len() - 1) as f64) as usize];
            let word = if (0.8..=1.2).contains(&at(0.5)) { "yes" } else { "NO" };
            let bound = if k == 0 { format!("{enough} of {PLANS}") } else { "-".to_owned() };
            push(
                out,
                format!(
                    "| {name}, {quantity} | {:.2} | {:.2} to {:.2} | {word} | {bound} |",
                    at(0.5),
                    at(0.1),
                    at(0.9)
                ),
            );
        }
    }
    std::fs::remove_dir_all(&folder).unwrap();
}

fn push(out: &mut Vec<String>, line: String) {
    println!("{line}");
    out.push(line);
}

fn main() {
    let args: Vec<String> = std::env::args().collect();
    let value = |name: &str| args.iter().position(|a| a == name).map(|i| args[i + 1].clone());
    let seeds = value("--seeds").map_or(SEEDS, |v| v.parse().unwrap());
    let mut out = Vec::new();
    push(&mut out, "| estimate | draws | 95 % intervals that hold the truth | at least 363 of 400 | claimed / true error | bias, standard errors |".into());
    push(&mut out, "|---|---|---|---|---|---|".into());
    let only = value("--only");
    let wanted = |name: &str| only.as_ref().is_none_or(|only| only == name);
    coverage(seeds, &wanted, &mut out);
    if wanted("plans") {
        push(&mut out, "\n| quantity | predicted / shown error (median of 40 tunings) | 10 to 90 % of them | within 20 % | bound at least the draws needed |".into());
        push(&mut out, "|---|---|---|---|---|".into());
        plans(&mut out);
    }
    if let Some(file) = value("--write") {
        std::fs::write(&file, out.join("\n") + "\n").unwrap();
        eprintln!("written to {file}");
    }
}
