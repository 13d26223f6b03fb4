//! Which tails: proposals of several families, scored on fresh draws with common random numbers.
//!
//! Three fifths of the budget make the contestants (`contestants`), all that is left scores them (`scored`), in equal parts;
//! `judgement` compares them pair by pair and says which tails the evidence is for. Evaluations are counted, and never above the
//! budget.
//!
//! **What is shared.** For a density every contestant is tuned by itself with an equal share of evaluations, the same seed and the same
//! plan; the survey asks for the same points each time, which are paid once. For a probability or an expectation one tuning is paid,
//! and the contestants are fits of different tails to its draws. Fresh draws come from the same streams of random numbers.

mod contestants;
mod intervals;
mod judgement;
mod ledger;
mod scored;
mod sentences;

pub use contestants::Kind;
pub use intervals::Interval;
pub use judgement::{Difference, Recommendation, Tails};
pub use scored::{Contestant, FreshDraws, Merits, Yardstick};

use super::TuneError;
use super::observer::Observer;
use super::settings::Settings;
use crate::problem::{Aim, Problem};
use crate::proposal::Mixture;
use ledger::Ledger;

/// What is compared.
#[derive(Debug, Clone)]
pub struct Wanted {
    /// Budget, seed and all else that is the same for every contestant; its family, degrees of freedom and method are not looked at.
    pub settings: Settings,
    /// Degrees of freedom that stand beside the fitted ones.
    pub df: Vec<f64>,
    /// Proposals made before, in the problem's coordinates, with their names.
    pub given: Vec<(String, Mixture)>,
}

/// The whole of a comparison.
#[derive(Debug, Clone)]
pub struct Comparison {
    /// The contestants: the Gaussian mixture first, the Student-t mixture with fitted degrees of freedom second.
    pub contestants: Vec<Contestant>,
    /// What plain draws from the distributions of the variables would do; none where there are no such distributions.
    pub yardstick: Option<Yardstick>,
    /// ESS fraction of every contestant less that of the Gaussian mixture.
    pub differences: Vec<Difference>,
    /// Which tails.
    pub recommendation: Recommendation,
    /// Evaluations of the survey, paid once for all; 0 where one tuning served all.
    pub survey_evaluations: u64,
    /// Evaluations that made the contestants.
    pub tuning_evaluations: u64,
    /// All evaluations.
    pub evaluations: u64,
    /// Those that failed on fresh draws.
    pub failed: u64,
}

/// Share of the budget that makes the contestants.
const TUNING: f64 = 0.6;

/// Compares proposals of several families for a problem.
///
/// Same problem, wishes and seed give the same bits, whatever the number of threads.
///
/// # Errors
/// [`TuneError`]; [`TuneError::Budget`] names the least budget for so many contestants.
///
/// ```
/// use evenpoise::adapt::{Settings, Silent};
/// use evenpoise::adapt::compare::{Tails, Wanted, compare};
/// use evenpoise::model::Closure;
/// use evenpoise::problem::{Aim, Problem, Variable};
/// // A Student-t density with three degrees of freedom: a Gaussian proposal cannot have weights of finite variance.
/// let target = Closure::new(1, |x| -2.0 * (x[0] * x[0] / 3.0).ln_1p());
/// let level = Variable::range("level", f64::NEG_INFINITY, f64::INFINITY, 0.0, 3.0);
/// let problem = Problem::from_model("A level", vec![level], Aim::Density, Box::new(target)).unwrap();
/// let wanted = Wanted { settings: Settings::new(8000, 1), df: vec![], given: vec![] };
/// let comparison = compare(&problem, &wanted, &mut Silent).unwrap();
/// assert!(comparison.evaluations <= 8000);
/// assert_ne!(comparison.recommendation.tails, Tails::Light);
/// ```
pub fn compare(problem: &Problem, wanted: &Wanted, observer: &mut dyn Observer) -> Result<Comparison, TuneError> {
    let budget = wanted.settings.budget;
    let mut ledger = Ledger::new(problem, observer);
    let tuning_budget = (TUNING * budget as f64) as u64;
    let made = match problem.aim() {
        Aim::Density => contestants::tuned(problem, wanted, tuning_budget, &mut ledger)?,
        Aim::Expectation | Aim::Probability => contestants::refitted(problem, wanted, tuning_budget, &mut ledger)?,
    };
    let tuning_evaluations = ledger.paid();
    let draws = (budget.saturating_sub(tuning_evaluations) / made.len() as u64) as usize;
    let seed = wanted.settings.seed;
    let mut scored = Vec::with_capacity(made.len());
    for made in made {
        ledger.begin(&made.name);
        scored.push(scored::on_fresh_draws(problem, made, draws, seed, &mut ledger)?);
    }
    let differences = judgement::differences(&scored);
    let recommendation = judgement::recommend(&scored, &differences);
    let yardstick = (problem.aim() != Aim::Density).then(|| scored::yardstick(&scored, seed)).flatten();
    Ok(Comparison {
        failed: scored.iter().map(|c| c.draws.failed as u64).sum(),
        contestants: scored,
        yardstick,
        differences,
        recommendation,
        survey_evaluations: ledger.survey(),
        tuning_evaluations,
        evaluations: ledger.paid(),
    })
}
