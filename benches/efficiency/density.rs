//! Density rows: tune over the seeds, judge each on 100,000 fresh draws of its chosen proposal and against exact answers.

use crate::targets::Row;
use evenpoise::adapt::{Settings, Silent, Tuning, tune};
use evenpoise::numeric::{Purpose, exp, log_sum_exp};
use evenpoise::problem::Family;
use evenpoise::weights::verdict::Word;
use evenpoise::weights::{LogWeights, score};
use rayon::prelude::*;
use std::time::Instant;

/// One seed of a row.
pub struct Outcome {
    pub seed: u64,
    pub evaluations: u64,
    pub ess: f64,
    pub perplexity: f64,
    pub reported_ess: f64,
    pub log_z_error: f64,
    pub log_z_se: f64,
    /// Largest error of a mean on the fresh draws, in posterior standard deviations.
    pub worst_mean: f64,
    pub modes: usize,
    pub df: f64,
    pub components: usize,
    pub seconds: f64,
    pub starts: u32,
    pub word: Word,
    pub reasons: Vec<String>,
    pub rounds: String,
}

const FRESH: usize = 100_000;

pub fn run(row: &Row, seed: u64) -> Outcome {
    let mut settings = Settings::new(row.budget, seed);
    if row.gaussian {
        settings.family = Some(Family::Gaussian);
    }
    let problem = row.problem();
    let begin = Instant::now();
    let tuning = tune(&problem, &settings, &mut Silent).unwrap();
    let seconds = begin.elapsed().as_secs_f64();
    let fresh = tuning.chosen.draw(FRESH, seed + 900, Purpose::Compare, 0);
    let log_q = tuning.chosen.log_density(&fresh.points);
    let log_w: Vec<f64> = (0..FRESH).map(|i| (row.function)(&fresh.points.point(i), &mut []) - log_q[i]).collect();
    let total = log_sum_exp(&log_w);
    let shares: Vec<f64> = log_w.iter().map(|l| exp(l - total)).collect();
    let weighed = score(&LogWeights::new(log_w).unwrap(), &[]);
    let worst_mean = (0..row.mean.len())
        .map(|j| {
            let m: f64 = (0..FRESH).map(|i| shares[i] * fresh.points.get(i, j)).sum();
            (m - row.mean[j]).abs() / row.sd[j]
        })
        .fold(0.0, f64::max);
    let modes = row
        .modes
        .iter()
        .filter(|(at, radius, mass)| {
            let inside = |i: usize| {
                let x = fresh.points.point(i);
                x.iter().zip(at).map(|(a, b)| (a - b) * (a - b)).sum::<f64>() < radius * radius
            };
            (0..FRESH).filter(|&i| inside(i)).map(|i| shares[i]).sum::<f64>() > 0.3 * mass
        })
        .count();
    let reported = tuning.score.as_ref();
    Outcome {
        seed,
        evaluations: tuning.evaluations,
        ess: weighed.ess_fraction,
        perplexity: weighed.perplexity,
        reported_ess: reported.map_or(0.0, |s| s.ess_fraction),
        log_z_error: reported.map_or(f64::NAN, |s| s.log_normaliser - row.log_z),
        log_z_se: reported.map_or(f64::NAN, |s| s.log_normaliser_se),
        worst_mean,
        modes,
        df: tuning.df,
        components: tuning.chosen.len(),
        seconds,
        starts: tuning.survey.starts,
        word: tuning.verdict.word,
        reasons: tuning
            .verdict
            .checks
            .iter()
            .filter(|c| c.word > Word::Sound)
            .map(|c| format!("{} {:.3}", c.name, c.value))
            .collect(),
        rounds: rounds_of(&tuning),
    }
}

/// Round by round: refit, fresh over predicted ESS fraction, components, births.
fn rounds_of(tuning: &Tuning) -> String {
    let one = |r: &evenpoise::adapt::Round| {
        let fresh = r.score.as_ref().map_or(0.0, |s| s.ess_fraction);
        let predicted = r.predicted_ess_fraction.map_or("-".into(), |p| format!("{p:.2}"));
        format!("{}:{fresh:.2}/{predicted}k{}b{}", r.step, r.components, r.births)
    };
    tuning.rounds.iter().map(one).collect::<Vec<_>>().join(" ")
}

pub fn header() -> String {
    "| problem | d | evaluations | seeds | ESS fraction (median) | lowest | to reach | prototype | perplexity | log Z rms error | claimed/true | within 95 % | modes found | worst mean (sd) | sound / strained / unfit | off by > 4 s.e. and sound | seconds |\n\
     |---|---|---|---|---|---|---|---|---|---|---|---|---|---|---|---|---|"
        .into()
}

/// Runs a row over its seeds (side by side on the cores) and gives its line of the table.
pub fn bench(row: &Row, seeds: std::ops::Range<u64>, verbose: bool) -> String {
    let out: Vec<Outcome> = seeds.into_par_iter().map(|s| run(row, s)).collect();
    if verbose {
        for o in &out {
            println!(
                "  {} ess {:.3} report {:.3} dz {:+.4} ({:.4}) df {:.1} K {} starts {} {:?} {:?} | {}",
                o.seed,
                o.ess,
                o.reported_ess,
                o.log_z_error,
                o.log_z_se,
                o.df,
                o.components,
                o.starts,
                o.word,
                o.reasons,
                o.rounds
            );
        }
    }
    line(row, &out)
}

fn line(row: &Row, out: &[Outcome]) -> String {
    let n = out.len() as f64;
    let median = |f: &dyn Fn(&Outcome) -> f64| {
        let mut v: Vec<f64> = out.iter().map(f).collect();
        v.sort_by(f64::total_cmp);
        0.5 * (v[v.len() / 2] + v[(v.len() - 1) / 2])
    };
    let share = |f: &dyn Fn(&Outcome) -> bool| out.iter().filter(|o| f(o)).count() as f64 / n;
    let count = |w: Word| out.iter().filter(|o| o.word == w).count();
    let rms = (out.iter().map(|o| o.log_z_error * o.log_z_error).sum::<f64>() / n).sqrt();
    let lowest = out.iter().map(|o| o.ess).fold(f64::INFINITY, f64::min);
    let modes = if row.modes.is_empty() {
        "-".into()
    } else {
        format!("{:.2} of {}", out.iter().map(|o| o.modes as f64).sum::<f64>() / n, row.modes.len())
    };
    let figure = |v: f64| if v.is_finite() { format!("{v:.3}") } else { "-".into() };
    let bad = out.iter().filter(|o| o.log_z_error.abs() > 4.0 * o.log_z_se && o.word == Word::Sound).count();
    format!(
        "| {} | {} | {} | {} | {:.3} | {:.3} | {} | {} | {:.3} | {:.4} | {:.2} | {:.2} | {} | {:.3} | {} / {} / {} | {} | {:.2} |",
        row.name,
        row.near.len(),
        out[0].evaluations,
        out.len(),
        median(&|o| o.ess),
        lowest,
        figure(row.goal),
        figure(row.before),
        median(&|o| o.perplexity),
        rms,
        median(&|o| o.log_z_se) / rms,
        share(&|o| o.log_z_error.abs() < 1.959_964 * o.log_z_se),
        modes,
        out.iter().map(|o| o.worst_mean).fold(0.0, f64::max),
        count(Word::Sound),
        count(Word::Strained),
        count(Word::Unfit),
        bad,
        median(&|o| o.seconds),
    )
}
