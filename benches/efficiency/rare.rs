//! The rare-event rows over their seeds: `-- --rare [--traps] [--rows a,b] [--seeds N] [--first S] [--plain] [--rounds]`.

use crate::rare_rows::{Row, all, traps};
use evenpoise::adapt::rare::{RareTuning, tune_rare};
use evenpoise::adapt::{Settings, Silent};
use evenpoise::weights::verdict::Word;
use std::time::Instant;

struct Outcome {
    tuning: RareTuning,
    seconds: f64,
}

/// Runs the rows that the arguments ask for and prints a line each.
pub fn run(args: &[String]) {
    let value = |name: &str| args.iter().position(|a| a == name).map(|i| args[i + 1].clone());
    let wanted = value("--rows");
    let seeds: u64 = value("--seeds").map_or(20, |v| v.parse().unwrap());
    let first: u64 = value("--first").map_or(7000, |v| v.parse().unwrap());
    let plain = args.iter().any(|a| a == "--plain");
    let verbose = args.iter().any(|a| a == "--rounds");
    let rows = if args.iter().any(|a| a == "--traps") { traps() } else { all() };
    for row in rows {
        if wanted.as_ref().is_some_and(|w| !w.split(',').any(|n| n == row.name)) {
            continue;
        }
        let problem = row.problem(plain);
        let outcomes: Vec<Outcome> = (0..seeds)
            .map(|s| {
                let begin = Instant::now();
                let tuning = tune_rare(&problem, &Settings::new(row.budget, first + s), &mut Silent).unwrap();
                Outcome { tuning, seconds: begin.elapsed().as_secs_f64() }
            })
            .collect();
        for (s, outcome) in outcomes.iter().enumerate() {
            if verbose {
                detail(&row, first + s as u64, &outcome.tuning);
            }
        }
        println!("{}", line(&row, &outcomes));
    }
}

/// Relative error and claimed relative error.
fn errors(row: &Row, tuning: &RareTuning) -> (f64, f64) {
    tuning.answer.value().map_or((-1.0, f64::NAN), |v| (v.value / row.exact - 1.0, v.se / row.exact))
}

/// Runs that are off by more than a factor of two; those of them that call themselves sound.
fn off(row: &Row, outcomes: &[Outcome], sound: bool) -> usize {
    let far = |o: &&Outcome| {
        let ratio = 1.0 + errors(row, &o.tuning).0;
        !(0.5..=2.0).contains(&ratio) && (!sound || o.tuning.verdict.word == Word::Sound)
    };
    outcomes.iter().filter(far).count()
}

fn line(row: &Row, outcomes: &[Outcome]) -> String {
    let n = outcomes.len() as f64;
    let pairs: Vec<(f64, f64)> = outcomes.iter().map(|o| errors(row, &o.tuning)).collect();
    let rmse = (pairs.iter().map(|(e, _)| e * e).sum::<f64>() / n).sqrt();
    let mut claimed: Vec<f64> = pairs.iter().map(|(_, s)| *s).collect();
    claimed.sort_by(f64::total_cmp);
    let evaluations = outcomes.iter().map(|o| o.tuning.evaluations).max().unwrap();
    let covered = outcomes
        .iter()
        .filter(|o| {
            o.tuning.answer.value().is_some_and(|v| v.interval_95[0] <= row.exact && row.exact <= v.interval_95[1])
        })
        .count();
    let mean = |f: &dyn Fn(&RareTuning) -> f64| outcomes.iter().map(|o| f(&o.tuning)).sum::<f64>() / n;
    let kappa = rmse * rmse * evaluations as f64;
    format!(
        "{:8} ev {:5} survey {:4.0} to event {:4.0} points {:.1} rmse {:.4} kappa {:5.2} (goal {:.2}, before {:.2}) claimed kappa {:5.2} claimed/true {:.2} bias {:+.4} cov {:.2} range {:.3}-{:.3} flagged {} off 2x {} (sound {}) last ess {:.2} {:.2} s",
        row.name,
        evaluations,
        mean(&|t| t.survey.evaluations as f64),
        mean(&|t| t
            .rounds
            .iter()
            .find(|r| r.counted)
            .map_or(f64::NAN, |r| (r.evaluations - u64::from(r.draws)) as f64)),
        mean(&|t| t.survey.points.len() as f64),
        rmse,
        kappa,
        row.goal,
        row.before,
        mean(&|t| t.kappa_claimed.unwrap_or(f64::NAN)),
        claimed[claimed.len() / 2] / rmse,
        pairs.iter().map(|(e, _)| e).sum::<f64>() / n,
        covered as f64 / n,
        1.0 + pairs.iter().map(|(e, _)| *e).fold(f64::INFINITY, f64::min),
        1.0 + pairs.iter().map(|(e, _)| *e).fold(f64::NEG_INFINITY, f64::max),
        outcomes.iter().filter(|o| o.tuning.verdict.word > Word::Sound).count(),
        off(row, outcomes, false),
        off(row, outcomes, true),
        mean(&|t| t.rounds.last().map_or(0.0, |r| r.ess_fraction)),
        outcomes.iter().map(|o| o.seconds).sum::<f64>() / n,
    )
}

fn detail(row: &Row, seed: u64, tuning: &RareTuning) {
    let (error, claimed) = errors(row, tuning);
    let rounds: Vec<String> = tuning
        .rounds
        .iter()
        .map(|r| {
            format!(
                "{}:{:?}{} n{} {:.3} ({:.3}) ess {:.2}/{} max {:.3}",
                if r.counted { "*" } else { "" },
                r.step,
                r.components,
                r.draws,
                r.value / row.exact,
                r.cv,
                r.ess_fraction,
                r.predicted_ess_fraction.map_or("-".into(), |p| format!("{p:.2}")),
                r.largest_share
            )
        })
        .collect();
    let distances: Vec<String> = tuning.survey.points.iter().map(|p| format!("{:.2}", p.distance)).collect();
    println!(
        "  {seed} error {error:+.4} claimed {claimed:.4} z {:+.2} searches {} points [{}] k {} {}",
        error / claimed,
        tuning.survey.searches,
        distances.join(" "),
        tuning.survey.directions,
        tuning.verdict.word
    );
    for round in rounds {
        println!("      {round}");
    }
    for reason in &tuning.verdict.reasons {
        println!("      ! {reason}");
    }
}
