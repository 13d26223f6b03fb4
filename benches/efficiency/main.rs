//! The loop on every row, over its seeds: evaluations, ESS fraction on fresh draws, errors against exact answers.
#![allow(clippy::print_stdout, clippy::unwrap_used, missing_docs, unreachable_pub, clippy::pedantic)]

mod rare;
mod rare_rows;
mod targets;

use evenpoise::adapt::{Settings, Silent, tune};
use evenpoise::numeric::{Purpose, exp, log_sum_exp};
use evenpoise::problem::Family;
use evenpoise::weights::{LogWeights, score};
use std::time::Instant;
use targets::Row;

struct Outcome {
    evaluations: u64,
    ess: f64,
    reported_ess: f64,
    log_z_error: f64,
    log_z_se: f64,
    worst_mean: f64,
    modes: usize,
    df: f64,
    components: usize,
    seconds: f64,
    survey: u64,
    starts: u32,
    steps: String,
    word: String,
    reasons: Vec<String>,
}

fn run(row: &Row, seed: u64) -> Outcome {
    let mut settings = Settings::new(row.budget, seed);
    if row.gaussian {
        settings.family = Some(Family::Gaussian);
    }
    let begin = Instant::now();
    let tuning = tune(&row.problem(), &settings, &mut Silent).unwrap();
    let seconds = begin.elapsed().as_secs_f64();
    let n = 100_000;
    let fresh = tuning.chosen.draw(n, seed + 900, Purpose::Compare, 0);
    let log_q = tuning.chosen.log_density(&fresh.points);
    let mut log_w = Vec::with_capacity(n);
    for i in 0..n {
        log_w.push((row.function)(&fresh.points.point(i), &mut []) - log_q[i]);
    }
    let weights = LogWeights::new(log_w.clone()).unwrap();
    let total = log_sum_exp(&log_w);
    let shares: Vec<f64> = log_w.iter().map(|l| exp(l - total)).collect();
    let worst_mean = (0..row.mean.len())
        .map(|j| {
            let m: f64 = (0..n).map(|i| shares[i] * fresh.points.get(i, j)).sum();
            (m - row.mean[j]).abs() / row.sd[j]
        })
        .fold(0.0, f64::max);
    let modes = row
        .modes
        .iter()
        .filter(|(at, radius, mass)| {
            let found: f64 = (0..n)
                .filter(|&i| {
                    let x = fresh.points.point(i);
                    x.iter().zip(at).map(|(a, b)| (a - b) * (a - b)).sum::<f64>() < radius * radius
                })
                .map(|i| shares[i])
                .sum();
            found > 0.3 * mass
        })
        .count();
    let reported = tuning.score.as_ref();
    if std::env::args().any(|a| a == "--candidates") {
        for r in &tuning.rounds {
            let list: Vec<String> =
                r.candidates.iter().map(|c| format!("{:?}k{}:{:+.3}", c.step, c.components, c.gain)).collect();
            println!(
                "    round {} g {:.2} halo {:.3} wide {:.3} {}",
                r.index,
                r.exponent,
                r.halo_share,
                r.wide_share,
                list.join(" ")
            );
        }
    }
    Outcome {
        evaluations: tuning.evaluations,
        ess: score(&weights, &[]).ess_fraction,
        reported_ess: reported.map_or(0.0, |s| s.ess_fraction),
        log_z_error: reported.map_or(f64::NAN, |s| s.log_normaliser - row.log_z),
        log_z_se: reported.map_or(f64::NAN, |s| s.log_normaliser_se),
        worst_mean,
        modes,
        df: tuning.df,
        components: tuning.chosen.len(),
        seconds,
        survey: tuning.survey.evaluations,
        starts: tuning.survey.starts,
        word: format!("{:?}", tuning.verdict.word),
        reasons: tuning
            .verdict
            .checks
            .iter()
            .filter(|c| c.word > evenpoise::weights::verdict::Word::Sound)
            .map(|c| format!("{}={:.3}", c.name, c.value))
            .collect(),
        steps: tuning
            .rounds
            .iter()
            .map(|r| {
                format!(
                    "{}:{:.2}/{}k{}b{}",
                    r.step,
                    r.score.as_ref().map_or(0.0, |s| s.ess_fraction),
                    r.predicted_ess_fraction.map_or("-".into(), |p| format!("{p:.2}")),
                    r.components,
                    r.births
                )
            })
            .collect::<Vec<_>>()
            .join(" "),
    }
}

fn main() {
    let args: Vec<String> = std::env::args().collect();
    if args.iter().any(|a| a == "--rare") {
        return rare::run(&args);
    }
    let value = |name: &str| args.iter().position(|a| a == name).map(|i| args[i + 1].clone());
    let wanted = value("--rows");
    let seeds: u64 = value("--seeds").map_or(4, |v| v.parse().unwrap());
    let first: u64 = value("--first").map_or(1000, |v| v.parse().unwrap());
    let verbose = args.iter().any(|a| a == "--rounds");
    for row in targets::all() {
        if wanted.as_ref().is_some_and(|w| !w.split(',').any(|n| n == row.name)) {
            continue;
        }
        let mut out: Vec<Outcome> = Vec::new();
        for s in 0..seeds {
            let o = run(&row, first + s);
            if verbose {
                println!(
                    "  {} ess {:.3} conf {:.3} dz {:+.4} ({:.4}) df {:.1} K {} survey {} starts {} | {}",
                    first + s,
                    o.ess,
                    o.reported_ess,
                    o.log_z_error,
                    o.log_z_se,
                    o.df,
                    o.components,
                    o.survey,
                    o.starts,
                    o.steps
                );
            }
            out.push(o);
        }
        let mut ess: Vec<f64> = out.iter().map(|o| o.ess).collect();
        ess.sort_by(f64::total_cmp);
        let n = out.len() as f64;
        let rms = (out.iter().map(|o| o.log_z_error * o.log_z_error).sum::<f64>() / n).sqrt();
        let mut se: Vec<f64> = out.iter().map(|o| o.log_z_se).collect();
        se.sort_by(f64::total_cmp);
        let median = |v: &[f64]| v[v.len() / 2];
        let mut dfs: Vec<f64> = out.iter().map(|o| o.df).collect();
        dfs.sort_by(f64::total_cmp);
        println!(
            "{:16} ev {:6} ess {:.3} low {:.3} (before {:.3} goal {:.3}) report {:.3} logZ rms {:.4} claimed/true {:.2} mean {:.3} modes {:.2} df {:.1} K {} survey {} starts {} sound {:.2} {:.2} s",
            row.name,
            out[0].evaluations,
            median(&ess),
            ess[0],
            row.before,
            row.goal,
            out.iter().map(|o| o.reported_ess).sum::<f64>() / n,
            rms,
            median(&se) / rms,
            out.iter().map(|o| o.worst_mean).fold(0.0, f64::max),
            out.iter().map(|o| o.modes as f64).sum::<f64>() / n,
            median(&dfs),
            out.iter().map(|o| o.components).max().unwrap(),
            out.iter().map(|o| o.survey).sum::<u64>() / seeds,
            out.iter().map(|o| o.starts).sum::<u32>() / seeds as u32,
            out.iter().filter(|o| o.word == "Sound").count() as f64 / n,
            out.iter().map(|o| o.seconds).sum::<f64>() / n
        );
    }
}
