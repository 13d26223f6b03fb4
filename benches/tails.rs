//! How often a comparison recommends which tails, where the answer is known: `cargo bench --bench tails -- [--seeds N] [--first S] [--budget N] [--say]`.
#![allow(clippy::print_stdout, clippy::unwrap_used, missing_docs, unreachable_pub)]

use evenpoise::adapt::compare::{Tails, Wanted, compare};
use evenpoise::adapt::{Settings, Silent};
use evenpoise::model::Closure;
use evenpoise::problem::{Aim, Problem, Variable};

/// Seeds start here: none of them was used to choose a limit (those had 1000 to 1019).
const FIRST_SEED: u64 = 5000;
const SEEDS: u64 = 20;
const BUDGET: u64 = 20_000;

/// A Student-t density in `dim` dimensions, spread 1 and correlated by a half; infinite `df`: Gaussian.
fn target(dim: usize, df: f64) -> Problem {
    let density = move |x: &[f64]| {
        // Differences of neighbours: a linear map, so the tails stay what they are.
        let mut square = x[0] * x[0];
        for pair in x.windows(2) {
            let z = (pair[1] - 0.5 * pair[0]) / 0.75_f64.sqrt();
            square += z * z;
        }
        if df.is_finite() { -0.5 * (df + dim as f64) * libm::log1p(square / df) } else { -0.5 * square }
    };
    let variables =
        (0..dim).map(|j| Variable::range(&format!("x{j}"), f64::NEG_INFINITY, f64::INFINITY, 0.5, 2.0)).collect();
    Problem::from_model("tails", variables, Aim::Density, Box::new(Closure::new(dim, density))).unwrap()
}

fn main() {
    let args: Vec<String> = std::env::args().collect();
    let value = |name: &str, or: u64| {
        let place = args.iter().position(|a| a == name);
        place.map_or(or, |i| args[i + 1].parse().unwrap())
    };
    let (seeds, first, budget) = (value("--seeds", SEEDS), value("--first", FIRST_SEED), value("--budget", BUDGET));
    let say = args.iter().any(|a| a == "--say");
    println!("| target | budget | seeds | heavy | light | undecided |\n|---|---:|---:|---:|---:|---:|");
    for (name, dim, df) in [
        ("t, df 3, d = 2", 2, 3.0),
        ("t, df 3, d = 5", 5, 3.0),
        ("Gaussian, d = 2", 2, f64::INFINITY),
        ("Gaussian, d = 5", 5, f64::INFINITY),
    ] {
        let problem = target(dim, df);
        let mut counts = [0; 3];
        for seed in first..first + seeds {
            let wanted = Wanted { settings: Settings::new(budget, seed), df: vec![], given: vec![] };
            let comparison = compare(&problem, &wanted, &mut Silent).unwrap();
            let tails = comparison.recommendation.tails;
            counts[[Tails::Heavy, Tails::Light, Tails::Undecided].iter().position(|&t| t == tails).unwrap()] += 1;
            if say {
                println!("  seed {seed}: {}", comparison.recommendation.sentence);
            }
        }
        println!("| {name} | {budget} | {seeds} | {} | {} | {} |", counts[0], counts[1], counts[2]);
    }
}
