//! Checks on how a density run went: whether its rounds agree and have settled, and what its survey found.

use super::checks::{at_least, chi_squared_tail, passes};
use super::{Check, Word, figure, percent};
use crate::weights::Score;

/// Probability, under agreement, of the limit on disagreeing rounds: 4 per degree of freedom at the five degrees where
/// it was measured (caught 16 of 31 bad runs, 3 false alarms in 230).
const ROUNDS_AGREE: f64 = 1.25e-3;
/// Errors of a round's log normaliser below this are rounded up to it: no model is that exact.
const LEAST_LOG_SE: f64 = 1e-4;
/// Lowest ESS fraction of the later rounds against their median (caught 23 of 31, 23 false alarms in 230).
const WANDERING: f64 = 0.6;
/// With 60 finished climbs a basin of 4.9 % of the start is found with 95 %.
const CLIMBS_SOUND: usize = 60;
/// After so many climbs a mode that was hit once suggests that others were hit never.
const CLIMBS_FOR_ONCE: usize = 10;
/// What the survey did.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct SurveyFacts {
    /// Climbs that came to an end (at a mode or running away), not cut off by the budget.
    pub climbs_finished: usize,
    /// Modes found.
    pub modes: usize,
    /// Climbs that ended where the support ends.
    pub walls: usize,
    /// Modes that a single climb ended at.
    pub modes_hit_once: usize,
}

/// One of the later rounds, scored on its own fresh draws.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RoundFacts {
    /// ESS fraction of its draws.
    pub ess_fraction: f64,
    /// Log normaliser of its draws, nats.
    pub log_normaliser: f64,
    /// Its standard error, nats.
    pub log_normaliser_se: f64,
}

/// Log normalisers of the later rounds and of the report draws against their weighted mean.
pub(super) fn rounds_agree(score: &Score, rounds: &[RoundFacts]) -> Check {
    let name = "agreement of the rounds";
    let limit = format!("at least {}", figure(ROUNDS_AGREE));
    if rounds.is_empty() {
        let detail = "There is no round to hold the report draws against; tune with at least two rounds.".to_owned();
        return Check { name, value: f64::NAN, limit, word: Word::Strained, detail };
    }
    let report = (score.log_normaliser, score.log_normaliser_se);
    let all: Vec<(f64, f64)> = rounds.iter().map(|r| (r.log_normaliser, r.log_normaliser_se)).chain([report]).collect();
    let precision = |se: f64| {
        // f64::max drops a NaN, which must not become a small error.
        let se = if se.is_nan() { se } else { se.max(LEAST_LOG_SE) };
        1.0 / (se * se)
    };
    // Relative to the report draws, so that a target shifted by 5000 nats loses no digit.
    let sum: f64 = all.iter().map(|(_, se)| precision(*se)).sum();
    let mean = all.iter().map(|(log, se)| precision(*se) / sum * (log - report.0)).sum::<f64>();
    let chi_square: f64 =
        all.iter().map(|(log, se)| precision(*se) * (log - report.0 - mean) * (log - report.0 - mean)).sum();
    let value = chi_squared_tail(chi_square, all.len() - 1);
    let word = at_least(value, ROUNDS_AGREE, ROUNDS_AGREE);
    let detail = match word {
        Word::Sound => "The later rounds and the report draws agree on the normalising constant.".to_owned(),
        _ => "The later rounds and the report draws disagree on the normalising constant beyond their errors: weight was still being \
              found; raise the budget, or widen the start."
            .to_owned(),
    };
    Check { name, value, limit, word, detail }
}

/// The lowest ESS fraction of the later rounds and the report draws against their median.
pub(super) fn wandering(score: &Score, rounds: &[RoundFacts]) -> Check {
    let mut fractions: Vec<f64> = rounds.iter().map(|r| r.ess_fraction).collect();
    fractions.push(score.ess_fraction);
    let known = fractions.iter().all(|f| f.is_finite());
    fractions.sort_unstable_by(f64::total_cmp);
    let half = fractions.len() / 2;
    let median = if fractions.len() % 2 == 1 { fractions[half] } else { 0.5 * (fractions[half - 1] + fractions[half]) };
    let value = if known { fractions[0] / median } else { f64::NAN };
    let word = passes(value >= WANDERING, Word::Strained);
    let detail = match word {
        Word::Sound => "The efficiency of the later rounds is steady.".to_owned(),
        _ => format!(
            "The efficiency of the later rounds wanders (the lowest is {} of the median): the proposal has not settled; raise the \
             budget.",
            percent(value)
        ),
    };
    Check { name: "steadiness of the rounds", value, limit: format!("at least {WANDERING}"), word, detail }
}

/// Whether the target has a top at all: weights cannot show what lies in the neck of a funnel.
pub(super) fn interior_maximum(survey: &SurveyFacts) -> Check {
    let word = passes(survey.modes > 0 || survey.walls > 0, Word::Strained);
    let detail = match word {
        Word::Sound if survey.modes == 0 => "The survey ended at the walls of the support: the target is highest there.".to_owned(),
        Word::Sound => format!("The survey found {} inside the support.", modes(survey.modes)),
        _ => "Every climb of the survey ran away: the target may be unbounded or narrow like a funnel, and weights cannot show what \
              lies in its neck; state the problem in other coordinates, for one a scale times standard scores."
            .to_owned(),
    };
    let limit = "at least 1".to_owned();
    Check { name: "a maximum", value: (survey.modes + survey.walls) as f64, limit, word, detail }
}

/// Whether Gaussian tails alone stand against the exponential tails that ends of supports make in log and logit coordinates.
pub(super) fn guarded_tails(unguarded: bool) -> Check {
    let word = passes(!unguarded, Word::Strained);
    let detail = match word {
        Word::Sound => "The proposal has heavy-tailed components or no variable whose support ends.".to_owned(),
        _ => "All components are Gaussian, and a variable's support ends: a density that is finite at that end has an exponential tail in \
              the proposal's coordinates, so the weights have no bound and may have no variance, whatever these draws show; \
              allow Student-t components or keep a defensive share."
            .to_owned(),
    };
    Check {
        name: "tails at the ends of supports",
        value: f64::from(u8::from(unguarded)),
        limit: "0".to_owned(),
        word,
        detail,
    }
}

/// Whether the survey looked often enough for separate modes.
pub(super) fn enough_climbs(survey: &SurveyFacts) -> Check {
    let word = passes(survey.climbs_finished >= CLIMBS_SOUND, Word::Strained);
    let detail = match word {
        Word::Sound => format!("{} climbs looked for separate modes.", survey.climbs_finished),
        _ => format!(
            "Only {} climbs looked for separate modes, too few to rule out another; raise the budget.",
            survey.climbs_finished
        ),
    };
    let limit = format!("at least {CLIMBS_SOUND}");
    Check { name: "climbs of the survey", value: survey.climbs_finished as f64, limit, word, detail }
}

/// Whether a mode was found by luck.
pub(super) fn hit_once(survey: &SurveyFacts) -> Check {
    let word = passes(survey.modes_hit_once == 0 || survey.climbs_finished <= CLIMBS_FOR_ONCE, Word::Strained);
    let detail = match word {
        Word::Sound => "No mode hangs on a single climb.".to_owned(),
        _ => format!(
            "{} by one climb only, so others may have been found by none; raise the budget, or widen the start.",
            if survey.modes_hit_once == 1 {
                "A mode was found".to_owned()
            } else {
                format!("{} modes were found", survey.modes_hit_once)
            }
        ),
    };
    let limit = format!("none after more than {CLIMBS_FOR_ONCE} climbs");
    Check { name: "modes found once", value: survey.modes_hit_once as f64, limit, word, detail }
}

/// The number of modes in words.
fn modes(n: usize) -> String {
    if n == 1 { "one mode".to_owned() } else { format!("{n} modes") }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::weights::LogWeights;
    use crate::weights::score;

    fn report() -> Score {
        Score { log_normaliser_se: 0.01, ..score(&LogWeights::new(vec![2.0; 1000]).unwrap(), &[]) }
    }

    fn round(log_normaliser: f64, log_normaliser_se: f64) -> RoundFacts {
        RoundFacts { ess_fraction: 0.9, log_normaliser, log_normaliser_se }
    }

    /// Two values 2 and 2.04 with errors .01 and .03: weights .9 and .1, mean 2.004, chi-square .16 + 1.44 = 1.6.
    /// Source: SciPy 1.17.1, scipy.stats.chi2.sf(1.6, 1).
    #[test]
    fn disagreement_is_measured_in_errors() {
        let check = rounds_agree(&report(), &[round(2.04, 0.03)]);
        assert!((check.value - 0.205_903_210_732_068_3).abs() < 1e-11, "{check:?}");
        assert_eq!(rounds_agree(&report(), &[round(2.2, 0.03)]).word, Word::Unfit);
        // An error of zero is not believed: 1e-4 nats at least.
        assert_eq!(rounds_agree(&report(), &[round(2.0, 0.0), round(2.0001, 0.0)]).word, Word::Sound);
    }

    #[test]
    fn no_round_is_no_agreement() {
        let check = rounds_agree(&report(), &[]);
        assert!(check.value.is_nan() && check.word == Word::Strained);
    }

    #[test]
    fn the_median_counts_the_report_draws() {
        let rounds: Vec<RoundFacts> =
            [0.8, 0.5].iter().map(|&ess_fraction| RoundFacts { ess_fraction, ..round(2.0, 0.1) }).collect();
        let check = wandering(&report(), &rounds);
        assert_eq!((check.value, check.word), (0.625, Word::Sound));
        assert_eq!(wandering(&report(), &rounds[1..]).value, 0.5 / 0.75);
    }

    #[test]
    fn few_climbs_make_no_case_against_a_mode_hit_once() {
        let facts =
            |climbs_finished, modes_hit_once| SurveyFacts { climbs_finished, modes: 2, walls: 0, modes_hit_once };
        assert_eq!(hit_once(&facts(10, 1)).word, Word::Sound);
        assert_eq!(hit_once(&facts(11, 2)).word, Word::Strained);
        assert_eq!(enough_climbs(&facts(60, 0)).word, Word::Sound);
        assert_eq!(enough_climbs(&facts(59, 0)).word, Word::Strained);
        assert!(interior_maximum(&facts(60, 0)).detail.contains("2 modes"));
    }
}
