//! The verdict on a density: normalising constant and means under the target.

use super::checks::{self, at_least};
use super::course::{self, RoundFacts, SurveyFacts};
use super::{Check, Verdict, Word, percent, unseen_caution};
use crate::weights::Estimate;
use crate::weights::Score;
use crate::weights::TailShape;

/// Below this ESS fraction a proposal has not settled (5 of the 8 runs so scored were wrong).
const FRACTION_UNFIT: f64 = 0.2;
/// A draw that carries ten times the average is ordinary unevenness.
const ORDINARY_SHARE: f64 = 10.0;

/// All that the verdict on a density rests on.
#[derive(Debug, Clone, Copy)]
pub struct DensityEvidence<'a> {
    /// Score of the report draws.
    pub score: &'a Score,
    /// Estimates from the report draws, by name.
    pub estimates: &'a [(&'a str, &'a Estimate)],
    /// Differences between two halves of the report draws in standard errors, by quantity
    /// ([`Strata::halves_z`](crate::weights::Strata::halves_z)).
    pub halves: &'a [(&'a str, f64)],
    /// ESS fraction that was predicted for the chosen proposal.
    pub predicted_ess_fraction: f64,
    /// Masses of the modes first met in the last two rounds or in later draws.
    pub late_modes: &'a [f64],
    /// Failed evaluations as a share of all.
    pub failed_share: f64,
    /// What the survey did.
    pub survey: SurveyFacts,
    /// The later half of the rounds, in order; the report draws are added to them here.
    pub rounds: &'a [RoundFacts],
    /// Whether Gaussian components alone stand for variables whose support ends.
    pub unguarded_tails: bool,
}

/// Judges a density run.
///
/// # Source
/// Checks and limits are this project's own, chosen on 261 runs of which 31 were wrong (a lost mode, a log normaliser off by more
/// than 4 standard errors, or a true efficiency of less than half the claimed one).
#[must_use]
pub fn judge(evidence: &DensityEvidence<'_>) -> Verdict {
    let score = evidence.score;
    let mut checks = vec![
        weights_tail(score),
        checks::effective_draws("the normalising constant", score.ess),
        checks::largest_share("the weight", score.largest_share, share_limit(score.draws)),
        efficiency(score.ess_fraction),
    ];
    checks.extend(estimate_checks(score, evidence.estimates));
    checks.extend(halves(evidence.halves));
    checks.extend([
        checks::against_prediction(score.ess_fraction, evidence.predicted_ess_fraction),
        checks::late_regions(evidence.late_modes),
        checks::failed(evidence.failed_share, false),
        course::rounds_agree(score, evidence.rounds),
        course::wandering(score, evidence.rounds),
        course::interior_maximum(&evidence.survey),
        course::guarded_tails(evidence.unguarded_tails),
        course::enough_climbs(&evidence.survey),
        course::hit_once(&evidence.survey),
    ]);
    Verdict::of(checks, unseen_caution(evidence.survey.climbs_finished))
}

/// Two limits meet: 2 % of any answer, and, for weights, `max(1 %, 10/n)`, which was measured. The tighter holds.
fn share_limit(draws: usize) -> f64 {
    (ORDINARY_SHARE / draws as f64).clamp(checks::TAIL_COUNTS_SHARE, checks::SHARE_SOUND)
}

/// The tail of `what`, as far as a heavy top matters: not at all in nearly even weights, as a strain in fairly even ones, else in full.
/// Written so that NaN counts in full.
pub(crate) fn tail_of(what: &str, tail: &TailShape, largest_share: f64, weight_variance: f64) -> Check {
    let light = largest_share <= checks::TAIL_COUNTS_SHARE;
    let counts = !(light && weight_variance <= checks::TAIL_MAY_COUNT_VARIANCE);
    let check = checks::tail(what, tail, tail.upper, counts);
    if check.word == Word::Unfit && light && weight_variance <= checks::TAIL_COUNTS_VARIANCE {
        let detail = format!(
            "The largest weights of {what} may have no finite variance, though none of them matters yet: its error may be too small; take \
             more draws, or give the proposal heavier tails."
        );
        return Check { word: Word::Strained, detail, ..check };
    }
    check
}

fn weights_tail(score: &Score) -> Check {
    tail_of("the normalising constant", &score.tail, score.largest_share, score.weight_variance)
}

fn efficiency(fraction: f64) -> Check {
    let word = at_least(fraction, FRACTION_UNFIT, FRACTION_UNFIT);
    let detail = match word {
        Word::Sound => format!("A draw is worth {} of an independent draw from the target.", percent(fraction)),
        _ => format!(
            "A draw is worth only {} of an independent draw from the target: the proposal has not settled; raise the budget, or state \
             the problem in coordinates in which it is less curved.",
            percent(fraction)
        ),
    };
    let limit = format!("at least {FRACTION_UNFIT}");
    Check { name: "effective sample size fraction", value: fraction, limit, word, detail }
}

/// The worst of the estimates in each respect, and whether all of them are defined.
fn estimate_checks(score: &Score, estimates: &[(&str, &Estimate)]) -> Vec<Check> {
    if estimates.is_empty() {
        return Vec::new();
    }
    let mut checks = vec![defined(estimates)];
    let given: Vec<_> = estimates.iter().filter(|(_, e)| e.share_undefined == 0.0).collect();
    let each = |check: &dyn Fn(&str, &Estimate) -> Check| -> Option<Check> {
        worst(given.iter().map(|(name, estimate)| check(name, estimate)).collect())
    };
    checks.extend(each(&|name, e| {
        tail_of(&format!("estimate {name}"), &e.answer.tail, e.answer.largest_share, score.weight_variance)
    }));
    checks.extend(each(&|name, e| checks::effective_draws(&format!("estimate {name}"), e.answer.effective_draws)));
    checks.extend(each(&|name, e| {
        checks::largest_share(&format!("estimate {name}"), e.answer.largest_share, checks::SHARE_SOUND)
    }));
    checks
}

/// The check with the worst word, the first of equals.
fn worst(checks: Vec<Check>) -> Option<Check> {
    checks.into_iter().reduce(|a, b| if b.word > a.word { b } else { a })
}

fn defined(estimates: &[(&str, &Estimate)]) -> Check {
    let mut check = Check {
        name: "estimates defined",
        value: 0.0,
        limit: "undefined nowhere".to_owned(),
        word: Word::Sound,
        detail: "Every estimate is defined wherever there is weight.".to_owned(),
    };
    for (name, estimate) in estimates {
        let share = estimate.share_undefined;
        let known = share <= check.value;
        if !known {
            check.value = share;
            check.word = Word::Strained;
            check.detail = format!(
                "Estimate {name} is undefined on {} of the weight and is not given; mend its formula there, or say with `if` what \
                 it is.",
                percent(share)
            );
        }
    }
    check
}

fn halves(halves: &[(&str, f64)]) -> Option<Check> {
    worst(halves.iter().map(|(what, z)| checks::halves(what, *z, halves.len())).collect())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::normal;
    use crate::numeric::{Purpose, stream};
    use crate::weights::LogWeights;
    use crate::weights::Strata;
    use crate::weights::ratio_estimate;
    use crate::weights::score;

    /// A healthy run, to be spoilt in one respect at a time.
    struct Run {
        score: Score,
        estimate: Estimate,
        halves: f64,
        predicted: f64,
        late: Vec<f64>,
        failed: f64,
        survey: SurveyFacts,
        rounds: Vec<RoundFacts>,
        unguarded: bool,
    }

    fn healthy() -> Run {
        let mut rng = stream(1, Purpose::Trial, 0, 0);
        let x: Vec<f64> = (0..3000).map(|_| normal::draw(&mut rng)).collect();
        let weights = LogWeights::new(x.iter().map(|x| 0.2 * x.clamp(-2.0, 2.0)).collect()).unwrap();
        let score = score(&weights, &[]);
        let round = RoundFacts {
            ess_fraction: score.ess_fraction,
            log_normaliser: score.log_normaliser + 0.004,
            log_normaliser_se: 0.005,
        };
        Run {
            estimate: ratio_estimate(&weights, &x, &Strata::single(3000)),
            halves: 1.0,
            predicted: 0.97,
            late: Vec::new(),
            failed: 0.0,
            survey: SurveyFacts { climbs_finished: 60, modes: 1, walls: 0, modes_hit_once: 0 },
            rounds: vec![round; 5],
            unguarded: false,
            score,
        }
    }

    fn judged(spoil: impl Fn(&mut Run)) -> Verdict {
        let mut run = healthy();
        spoil(&mut run);
        judge(&DensityEvidence {
            score: &run.score,
            estimates: &[("level", &run.estimate)],
            halves: &[("the normalising constant", 0.5), ("estimate level", run.halves)],
            predicted_ess_fraction: run.predicted,
            late_modes: &run.late,
            failed_share: run.failed,
            survey: run.survey,
            rounds: &run.rounds,
            unguarded_tails: run.unguarded,
        })
    }

    #[test]
    fn a_healthy_run_is_sound() {
        let verdict = judged(|_| ());
        assert_eq!(verdict.word, Word::Sound, "{:?}", verdict.reasons);
        assert!(verdict.reasons.is_empty());
        assert_eq!(verdict.checks.len(), 18);
        assert!(verdict.checks.iter().all(|check| check.word == Word::Sound && check.value.is_finite()));
    }

    #[test]
    fn each_fault_earns_its_word_and_its_reason() {
        type Spoil = fn(&mut Run);
        let cases: [(Spoil, Word, &str); 20] = [
            (|r| r.unguarded = true, Word::Strained, "exponential tail"),
            (|r| r.score.ess_fraction = 0.19, Word::Unfit, "not settled"),
            (|r| r.score.ess = 60.0, Word::Strained, "weak answer"),
            (|r| r.score.largest_share = 0.015, Word::Strained, "One draw carries 1.5 %"),
            (|r| r.score.largest_share = 0.2, Word::Unfit, "One draw carries 20 %"),
            (
                |r| (r.score.tail.shape, r.score.tail.upper, r.score.weight_variance) = (0.6, 0.8, 0.2),
                Word::Strained,
                "finite variance",
            ),
            (
                |r| (r.score.tail.shape, r.score.tail.upper, r.score.weight_variance) = (0.8, 1.0, 0.2),
                Word::Unfit,
                "too heavy",
            ),
            (
                |r| {
                    (r.estimate.answer.tail.shape, r.estimate.answer.tail.upper, r.estimate.answer.largest_share) =
                        (0.8, 1.0, 0.015)
                },
                Word::Unfit,
                "estimate level",
            ),
            (|r| r.estimate.answer.effective_draws = 30.0, Word::Strained, "estimate level"),
            (|r| r.estimate.share_undefined = 0.01, Word::Strained, "is undefined on 1 %"),
            (|r| r.halves = 4.0, Word::Strained, "two halves"),
            (|r| r.predicted = 1.9, Word::Sound, ""),
            (|r| (r.predicted, r.score.ess_fraction) = (0.9, 0.3), Word::Unfit, "predicted efficiency"),
            (|r| r.late.push(0.1), Word::Strained, "A region was first met"),
            (|r| r.failed = 0.02, Word::Strained, "failed"),
            (|r| r.rounds[0].log_normaliser += 0.1, Word::Unfit, "disagree"),
            (|r| r.rounds[2].ess_fraction = 0.5, Word::Strained, "wanders"),
            (|r| (r.survey.walls, r.survey.modes) = (0, 0), Word::Strained, "ran away"),
            (|r| r.survey.climbs_finished = 59, Word::Strained, "Only 59 climbs"),
            (|r| r.survey.modes_hit_once = 1, Word::Strained, "by one climb only"),
        ];
        for (i, (spoil, word, reason)) in cases.into_iter().enumerate() {
            let verdict = judged(spoil);
            assert_eq!(verdict.word, word, "case {i}: {:?}", verdict.reasons);
            assert!(
                verdict.word == Word::Sound || verdict.reasons[0].contains(reason),
                "case {i}: {:?}",
                verdict.reasons
            );
        }
    }

    /// A tiny heavy top over nearly even weights is no reason to doubt them.
    #[test]
    fn a_heavy_tail_of_even_weights_is_noise() {
        let verdict = judged(|r| {
            (r.score.tail.shape, r.score.tail.upper, r.score.weight_variance, r.score.largest_share) =
                (0.9, 1.2, 0.04, 0.003);
        });
        assert_eq!(verdict.word, Word::Sound);
    }

    #[test]
    fn an_unknown_number_is_never_sound() {
        type Spoil = fn(&mut Run);
        let cases: [Spoil; 18] = [
            |r| r.score.ess = f64::NAN,
            |r| r.score.ess_fraction = f64::NAN,
            |r| r.score.largest_share = f64::NAN,
            |r| (r.score.weight_variance, r.score.tail.upper, r.score.tail.shape) = (f64::NAN, f64::NAN, f64::NAN),
            |r| (r.score.weight_variance, r.score.tail.upper) = (f64::NAN, 0.9),
            |r| r.score.log_normaliser = f64::NAN,
            |r| r.score.log_normaliser_se = f64::NAN,
            |r| r.estimate.answer.effective_draws = f64::NAN,
            |r| r.estimate.answer.largest_share = f64::NAN,
            |r| r.estimate.share_undefined = f64::NAN,
            |r| r.halves = f64::NAN,
            |r| r.predicted = f64::NAN,
            |r| r.late.push(f64::NAN),
            |r| r.failed = f64::NAN,
            |r| r.rounds[0].log_normaliser = f64::NAN,
            |r| r.rounds[1].log_normaliser_se = f64::NAN,
            |r| r.rounds[3].ess_fraction = f64::NAN,
            |r| r.rounds.clear(),
        ];
        for (i, spoil) in cases.into_iter().enumerate() {
            assert!(judged(spoil).word > Word::Sound, "case {i}");
        }
    }

    #[test]
    fn a_shifted_target_gets_the_same_word() {
        for shift in [5000.0, -5000.0] {
            let verdict = judged(|r| {
                r.score.log_normaliser += shift;
                r.rounds.iter_mut().for_each(|round| round.log_normaliser += shift);
            });
            assert_eq!(verdict.word, Word::Sound, "{:?}", verdict.reasons);
        }
    }

    #[test]
    fn the_share_limit_is_the_tighter_of_two() {
        assert_eq!(share_limit(100), 0.02);
        assert_eq!(share_limit(800), 0.0125);
        assert_eq!(share_limit(5000), 0.01);
    }
}
