//! A run that is gone on with under a larger budget.
//!
//! The journal's header is what a run is: it is replaced first, whole, and the copy of the problem follows it. Whatever
//! happens between, the next resume reads the header and puts the copy right.

use super::ending::Misuse;
use super::header;
use super::layout::hanging;
use super::numbers::count;
use super::problem_file;
use super::problem_file::Located;
use super::tune::Args;
use evenpoise::adapt;
use evenpoise::adapt::Settings;
use evenpoise::problem::Aim;
use evenpoise::problem::Problem;
use evenpoise::problem::TuningKeys;
use evenpoise::report::read_evaluations;
use evenpoise::store::Journal;
use std::path::Path;

/// The budgets of a run that is gone on with.
#[derive(Debug)]
pub(crate) struct Budgets {
    /// Those that its journal was written under, the last one last.
    before: Vec<u64>,
    /// The one that it is raised to.
    raised: Option<u64>,
    /// Whether the run had come to its end.
    finished: bool,
}

impl Budgets {
    /// The budgets of the run in a folder, which this process holds, and what the command asks for.
    pub(crate) fn of(args: &Args, located: &Located) -> anyhow::Result<Self> {
        let before = header::budgets(&Journal::header(&located.run)?);
        let asked = problem_file::read(&located.file, |keys| args.tuning.over(keys))?;
        let asked = asked.tuning().budget.unwrap_or(TuningKeys::BUDGET);
        let last = before.last().copied().unwrap_or(asked);
        let spent = read_evaluations(&located.run.join("summary.json")).map_or(0, |evaluations| evaluations.all);
        let finished = spent >= last;
        // A problem file goes on stating the budget that the run began with, or was raised to before.
        let stands = args.tuning.budget.is_none() && before.contains(&asked);
        let asked = if stands { last } else { asked };
        let typed = args.tuning.budget.is_some();
        if asked < last || (typed && finished && asked == last) {
            return Err(refusal(&located.run, last, finished).into());
        }
        Ok(Self { before, raised: Some(asked).filter(|&asked| asked > last), finished })
    }

    /// The keys of a problem as the run had them before.
    fn of_before(&self, keys: &TuningKeys) -> TuningKeys {
        let (budget, extended_from) = match self.before.split_last() {
            Some((&last, earlier)) => (Some(last), earlier.to_vec()),
            None => (keys.budget, Vec::new()),
        };
        TuningKeys { budget, extended_from, ..keys.clone() }
    }

    /// The keys of a problem as the run has them from now on.
    pub(crate) fn over(&self, keys: &TuningKeys) -> TuningKeys {
        match self.raised {
            Some(_) => TuningKeys { budget: self.raised, extended_from: self.before.clone(), ..keys.clone() },
            None => self.of_before(keys),
        }
    }

    /// Writes a raise down, where there is one, and gives what the screen says of it.
    pub(crate) fn write(&self, args: &Args, located: &Located, problem: &Problem) -> anyhow::Result<Option<String>> {
        let Some(raised) = self.raised else { return Ok(None) };
        adapt::check_budget(problem, &Settings::from_keys(problem.tuning()))?;
        let before = problem_file::read(&located.file, |keys| self.of_before(&args.tuning.over(keys)))?;
        Journal::replace_header(&located.run, &header::facts(&before), &header::facts(problem))?;
        let last = count(self.before.last().copied().unwrap_or_default());
        let kept = match problem.aim() {
            Aim::Density => {
                "What was spent, the report draws included, counts as rounds; new report draws alone carry the answer."
            }
            _ => "The rounds go on, and those that counted go on counting.",
        };
        let first = if self.finished {
            String::new()
        } else {
            format!(" The run had not come to its end: it first spends its {last} evaluations as planned.")
        };
        let text = format!("The budget is raised from {last} to {} evaluations.{first} {kept}", count(raised));
        Ok(Some(hanging("Raised    ", &text)))
    }
}

fn refusal(run: &Path, last: u64, finished: bool) -> Misuse {
    let (run, last) = (run.display(), count(last));
    let (has, or) = if finished {
        ("has spent its budget of", String::new())
    } else {
        ("has a budget of", format!(", or resume it as it was planned:\n  evenpoise tune {run} --resume"))
    };
    Misuse(format!("the run {run} {has} {last} evaluations; to go on with it, give a --budget above {last}{or}"))
}
