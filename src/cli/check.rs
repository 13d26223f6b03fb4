//! `evenpoise check`: the problem as it was understood, trial evaluations, and what looks wrong.

use super::check_model;
use super::check_report;
use super::ending::Ending;
use super::output;
use super::problem_file;
use evenpoise::problem::TuningKeys;
use evenpoise::report::trial::Trial;
use evenpoise::report::trial::findings;
use evenpoise::report::trial::start_points;
use std::path::PathBuf;
use std::time::Instant;

/// Trial evaluations.
const TRIALS: usize = 200;

/// Read PROBLEM, show how it was understood, try it, and say what looks wrong.
#[derive(Debug, clap::Args)]
pub(crate) struct Args {
    /// Problem file.
    problem: PathBuf,
}

pub(crate) fn run(args: &Args) -> anyhow::Result<Ending> {
    let problem = problem_file::read(&args.problem, TuningKeys::clone)?;
    output::say(&check_report::understood(&problem))?;
    let Some(trials) = check_model::tried_before(&problem, TRIALS)? else { return Ok(Ending::Done) };
    let points = start_points(&problem, trials, problem.tuning().seed.unwrap_or(TuningKeys::SEED));
    let began = Instant::now();
    let answers = problem.evaluate(&points)?;
    let took = began.elapsed();
    let trial = Trial::new(&problem, points, answers)?;
    let found = findings(&problem, &trial)?;
    output::say(&check_report::tried(&problem, &trial, took))?;
    output::say(&check_report::found(&found))?;
    check_model::measured(&problem)?;
    Ok(Ending::Done)
}
