//! The verdict on production draws: the checks that these draws allow.

use super::job::Job;
use super::outcome::EstimateOutcome;
use super::outcome::FailuresOutcome;
use super::outcome::Main;
use super::outcome::ValueOutcome;
use super::sums::Sums;
use crate::weights::verdict::Check;
use crate::weights::verdict::Verdict;
use crate::weights::verdict::Word;
use crate::weights::verdict::checks;
use crate::weights::verdict::tail_of;

/// Claimed relative errors: beyond 15 % the answer is a size, beyond 50 % not even that.
const ERROR_SOUND: f64 = 0.15;
const ERROR_STRAINED: f64 = 0.5;
/// Below this ESS fraction a proposal for a density has not settled.
const FRACTION_UNFIT: f64 = 0.2;
/// A draw that carries ten times the average is ordinary unevenness.
const ORDINARY_SHARE: f64 = 10.0;
/// Within so many standard errors of zero a signed value is no measure of its own error.
const SIGNED: f64 = 5.0;

/// What is said beside the word.
const CAUTION: &str = "The verdict speaks of what these draws have touched. Where the proposal never goes, no draw can tell what is \
    missing: how small a separate region its survey could have missed stands in the report of the tuning.";

pub(super) fn judge(
    job: &Job,
    sums: &Sums,
    main: &Main,
    estimates: &[(String, EstimateOutcome)],
    value: Option<&ValueOutcome>,
    failures: Option<&FailuresOutcome>,
) -> Verdict {
    if sums.hits == 0 {
        return Verdict::of(vec![nothing_met(job, sums)], CAUTION.to_owned());
    }
    let fraction = main.evenness.effective_draws / sums.draws as f64;
    let mut made = if job.is_event() || job.signed() { of_value(job, main) } else { of_density(sums, main, fraction) };
    made.extend(of_estimates(main, estimates));
    made.extend(halves(main, estimates));
    if let Some(predicted) = job.predicted_ess_fraction {
        made.push(checks::against_prediction(fraction, predicted));
    }
    made.push(checks::failed(sums.failed as f64 / sums.draws as f64, job.failed.is_some()));
    made.extend(value.zip(failures).map(|(value, counted)| failures_move(job, value, counted)));
    made.extend(job.proposal_verdict.as_deref().map(of_tuning));
    Verdict::of(made, CAUTION.to_owned())
}

fn of_density(sums: &Sums, main: &Main, fraction: f64) -> Vec<Check> {
    let evenness = &main.evenness;
    let share = (ORDINARY_SHARE / sums.draws as f64).clamp(checks::TAIL_COUNTS_SHARE, checks::SHARE_SOUND);
    vec![
        tail_of("the normalising constant", &evenness.tail, evenness.largest_share, main.weight_variance),
        checks::effective_draws("the normalising constant", evenness.effective_draws),
        checks::largest_share("the weight", evenness.largest_share, share),
        efficiency(fraction),
    ]
}

fn of_value(job: &Job, main: &Main) -> Vec<Check> {
    let evenness = &main.evenness;
    let near_zero = job.signed() && main.mean.mean.abs() <= SIGNED * main.mean.se;
    let error = main.mean.se / if near_zero { main.size } else { main.mean.mean.abs() };
    let heavy = !(evenness.largest_share <= checks::TAIL_COUNTS_SHARE);
    vec![
        relative_error(error),
        checks::effective_draws("the answer", evenness.effective_draws),
        checks::largest_share("the answer", evenness.largest_share, checks::SHARE_SOUND),
        checks::tail("the answer", &evenness.tail, evenness.tail.shape, heavy),
    ]
}

fn efficiency(fraction: f64) -> Check {
    let word = if fraction >= FRACTION_UNFIT { Word::Sound } else { Word::Unfit };
    let percent = figure(100.0 * fraction);
    let detail = match word {
        Word::Sound => format!("A draw is worth {percent} % of an independent draw from the target."),
        _ => format!(
            "A draw is worth only {percent} % of an independent draw from the target: the proposal has not settled; tune it longer."
        ),
    };
    let limit = format!("at least {FRACTION_UNFIT}");
    Check { name: "effective sample size fraction", value: fraction, limit, word, detail }
}

fn relative_error(error: f64) -> Check {
    let word = if error <= ERROR_SOUND {
        Word::Sound
    } else if error <= ERROR_STRAINED {
        Word::Strained
    } else {
        Word::Unfit
    };
    let percent = figure(100.0 * error);
    let detail = match word {
        Word::Sound => format!("The claimed relative error is {percent} %."),
        _ => format!("The claimed relative error is {percent} %, too large to report as a value; take more draws."),
    };
    let limit = format!("at most {ERROR_SOUND}, strained to {ERROR_STRAINED}");
    Check { name: "relative error", value: error, limit, word, detail }
}

/// The worst of the estimates in each respect, and whether all of them are defined.
fn of_estimates(main: &Main, estimates: &[(String, EstimateOutcome)]) -> Vec<Check> {
    let undefined = estimates.iter().max_by(|a, b| a.1.share_undefined.total_cmp(&b.1.share_undefined));
    let Some((name, worst_defined)) = undefined else { return Vec::new() };
    let mut made = vec![defined(name, worst_defined.share_undefined)];
    let given: Vec<_> = estimates.iter().filter(|(_, e)| e.value.is_finite()).collect();
    let each = |check: &dyn Fn(&str, &EstimateOutcome) -> Check| {
        worst(given.iter().map(|(name, e)| check(&format!("estimate {name}"), e)).collect())
    };
    made.extend(each(&|what, e| tail_of(what, &e.evenness.tail, e.evenness.largest_share, main.weight_variance)));
    made.extend(each(&|what, e| checks::effective_draws(what, e.evenness.effective_draws)));
    made.extend(each(&|what, e| checks::largest_share(what, e.evenness.largest_share, checks::SHARE_SOUND)));
    made
}

fn defined(name: &str, share: f64) -> Check {
    let holds = share <= 0.0;
    let detail = if holds {
        "Every estimate is defined wherever there is weight.".to_owned()
    } else {
        format!(
            "Estimate {name} is undefined on {} % of the weight and is not given; mend its formula there, or say with `if` what it is.",
            figure(100.0 * share)
        )
    };
    let word = if holds { Word::Sound } else { Word::Strained };
    Check { name: "estimates defined", value: share, limit: "undefined nowhere".to_owned(), word, detail }
}

fn halves(main: &Main, estimates: &[(String, EstimateOutcome)]) -> Option<Check> {
    let given = estimates.iter().filter(|(_, e)| e.value.is_finite());
    let mut compared = vec![("the answer".to_owned(), main.halves_z)];
    compared.extend(given.map(|(name, e)| (format!("estimate {name}"), e.halves_z)));
    worst(compared.iter().map(|(what, z)| checks::halves(what, *z, compared.len())).collect())
}

/// The check with the worst word, the first of equals.
fn worst(checks: Vec<Check>) -> Option<Check> {
    checks.into_iter().reduce(|a, b| if b.word > a.word { b } else { a })
}

/// The answer with failures counted the other way, against the interval without them.
fn failures_move(job: &Job, value: &ValueOutcome, counted: &FailuresOutcome) -> Check {
    let other = if job.failures_are_inside() { counted.outside } else { counted.inside };
    let away = (other.value - value.value).abs();
    let holds = job.failed.is_some() || away <= 1.96 * value.se;
    let detail = if holds {
        "How failed evaluations count does not move the answer out of its interval.".to_owned()
    } else {
        format!(
            "Counted the other way, the failed evaluations move the answer from {} to {}, out of its interval; mend the model where it \
             fails, or say in the problem how failures count.",
            figure(value.value),
            figure(other.value)
        )
    };
    Check {
        name: "answer with failures counted the other way",
        value: other.value,
        limit: "within 1.96 standard errors of the answer".to_owned(),
        word: if holds { Word::Sound } else { Word::Strained },
        detail,
    }
}

/// A proposal that its own tuning called unfit may have missed what no production draw can show.
fn of_tuning(word: &str) -> Check {
    let unfit = word == "unfit";
    let detail = if unfit {
        "The tuning called its own result unfit, and these draws can show only a part of what was wrong; tune again before the numbers \
         are relied on."
            .to_owned()
    } else {
        format!("The tuning that made the proposal ended {word}.")
    };
    Check {
        name: "verdict of the tuning",
        value: f64::from(u8::from(unfit)),
        limit: "not unfit".to_owned(),
        word: if unfit { Word::Strained } else { Word::Sound },
        detail,
    }
}

fn nothing_met(job: &Job, sums: &Sums) -> Check {
    let what = if job.is_event() { "the event" } else { "the target" };
    Check {
        name: "draws that met the target",
        value: 0.0,
        limit: "at least 1".to_owned(),
        word: Word::Unfit,
        detail: format!(
            "None of the {} draws met {what}, so there is no value; take more draws, or tune a proposal that reaches it.",
            sums.draws
        ),
    }
}

/// A number with three figures, for a sentence.
fn figure(x: f64) -> String {
    crate::weights::verdict::figure(x)
}
