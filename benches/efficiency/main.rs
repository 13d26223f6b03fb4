//! The loops on every row of the table, over their seeds: `cargo bench --bench efficiency -- [--quick] [--rare] [--rows A,B] [--seeds N] [--first S] [--rounds] [--write FILE]`.
#![allow(clippy::print_stdout, clippy::print_stderr, clippy::unwrap_used, missing_docs, unreachable_pub)]

mod density;
mod rare;
mod rare_rows;
mod targets;

/// Seeds start here: none of them was used to choose a constant (those had 1000 to 1015).
const FIRST_SEED: u64 = 5000;
const SEEDS: u64 = 20;
const QUICK_SEEDS: u64 = 4;
/// `--quick` leaves out rows above this many evaluations.
const QUICK_BUDGET: u64 = 30_000;

fn main() {
    let args: Vec<String> = std::env::args().collect();
    let flag = |name: &str| args.iter().any(|a| a == name);
    if flag("--rare") {
        return rare::run(&args);
    }
    let value = |name: &str| args.iter().position(|a| a == name).map(|i| args[i + 1].clone());
    let quick = flag("--quick");
    let seeds = value("--seeds").map_or(if quick { QUICK_SEEDS } else { SEEDS }, |v| v.parse().unwrap());
    let first: u64 = value("--first").map_or(FIRST_SEED, |v| v.parse().unwrap());
    let wanted = value("--rows");
    let mut table = vec![density::header()];
    println!("{}", table[0]);
    for row in targets::all() {
        let named = wanted.as_ref().is_none_or(|w| w.split(',').any(|n| n == row.name));
        if named && !(quick && row.budget > QUICK_BUDGET) {
            let line = density::bench(&row, first..first + seeds, flag("--rounds"));
            println!("{line}");
            table.push(line);
        }
    }
    if let Some(file) = value("--write") {
        std::fs::write(&file, table.join("\n") + "\n").unwrap();
        eprintln!("written to {file}");
    }
}
