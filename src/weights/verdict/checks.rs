//! The checks, one small function each, and their limits, one named constant each.

use super::{Check, Word, figure, percent};
use crate::numeric::exp;
use crate::numeric::normal::quantile_of_tail;
use crate::numeric::special::gamma_log_tails;
use crate::weights::TailReason;
use crate::weights::TailShape;

/// Tail shape up to which the variance is finite and intervals keep their coverage (.92 at 0.5 with nominal .95).
pub const TAIL_SOUND: f64 = 0.5;
/// A heavy top counts once one draw carries this share: weights of variance .1 may have a tiny top of any shape.
pub const TAIL_COUNTS_SHARE: f64 = 0.01;
/// ... or, for a density, once the weights are this uneven.
pub const TAIL_COUNTS_VARIANCE: f64 = 0.1;
/// ... and makes strained, never unfit, from here: a pole that can be integrated left weights of variance .08, and an answer six errors off.
pub const TAIL_MAY_COUNT_VARIANCE: f64 = 0.05;
/// Effective draws: a relative error of 10 % of the spread; and the least that a standard error can be read from.
pub const DRAWS_SOUND: f64 = 100.0;
/// Below this not even the standard error is known to 30 %.
pub const DRAWS_STRAINED: f64 = 25.0;
/// Largest share of one draw in an answer.
pub const SHARE_SOUND: f64 = 0.02;
/// One draw that carries a tenth is the answer's coin toss.
pub const SHARE_STRAINED: f64 = 0.10;
/// False alarm of two halves that differ, and of two halves beyond doubt: 3.3 and 4.5 standard errors.
pub const HALVES_SOUND: f64 = 1e-3;
/// See [`HALVES_SOUND`].
pub const HALVES_STRAINED: f64 = 6.8e-6;
/// Fresh against predicted ESS fraction.
pub const PREDICTED_SOUND: f64 = 0.7;
/// A proposal that keeps less than this of what its pool promised has met something the pool had not.
pub const PREDICTED_STRAINED: f64 = 0.4;
/// A region met late that holds more than this makes the earlier rounds speak of another target.
pub const LATE_MASS: f64 = 0.2;
/// Failed evaluations.
pub const FAILED_SOUND: f64 = 0.01;
/// See [`FAILED_SOUND`].
pub const FAILED_STRAINED: f64 = 0.05;

/// "sound" up to the first limit, "strained" up to the second, "unfit" beyond and for NaN.
pub(super) fn at_most(value: f64, sound: f64, strained: f64) -> Word {
    if value <= sound {
        Word::Sound
    } else if value <= strained {
        Word::Strained
    } else {
        Word::Unfit
    }
}

/// "sound" from the first limit upwards, "strained" from the second, "unfit" below and for NaN.
pub(super) fn at_least(value: f64, sound: f64, strained: f64) -> Word {
    at_most(-value, -sound, -strained)
}

/// "sound" when the condition holds, else `otherwise`.
pub(super) fn passes(holds: bool, otherwise: Word) -> Word {
    if holds { Word::Sound } else { otherwise }
}

/// The tail of `what`: whether its error can be believed at all.
///
/// `counts`: whether a heavy top matters, [`TAIL_COUNTS_SHARE`] or [`TAIL_COUNTS_VARIANCE`] being exceeded. `number` is
/// what is held against the limit for "sound": the upper bound of the shape, or the shape itself where that was
/// measured. "Unfit" needs the shape itself beyond its limit: at 500 draws the upper bound lies beyond it in 27 of 100
/// samples of shape 0.3, whose intervals cover as they should (the shape itself: in 1).
#[must_use]
pub fn tail(what: &str, tail: &TailShape, number: f64, counts: bool) -> Check {
    let known = tail.reason != TailReason::TooFew;
    let word = if !counts || number <= TAIL_SOUND {
        Word::Sound
    } else if known && tail.shape <= tail.limit {
        Word::Strained
    } else {
        Word::Unfit
    };
    let detail = match (word, counts, known) {
        (Word::Sound, true, _) => format!("The largest weights of {what} fall off fast enough for a finite variance."),
        (Word::Sound, false, _) => format!("No draw of {what} is heavy enough for the shape of the tail to matter."),
        (_, _, false) => format!(
            "Fewer than five draws stand in the tail of {what}, so nothing is known of its error; take more report draws."
        ),
        (Word::Strained, ..) => format!(
            "The largest weights of {what} may be too heavy for a finite variance (shape {}, at most {} with nine chances in \
             ten), so its interval may be too short; take more draws, or give the proposal heavier tails.",
            figure(tail.shape),
            figure(tail.upper)
        ),
        _ => format!(
            "The largest weights of {what} are too heavy (shape {} above {}): a few draws decide the answer and its error means \
             nothing; give the proposal heavier tails (Student-t, a larger defensive share) and tune longer.",
            figure(tail.shape),
            figure(tail.limit)
        ),
    };
    Check {
        name: "tail shape",
        value: number,
        limit: format!("at most {TAIL_SOUND}, strained while the shape is at most {}", figure(tail.limit)),
        word,
        detail,
    }
}

/// Effective draws behind `what`.
#[must_use]
pub fn effective_draws(what: &str, draws: f64) -> Check {
    let word = at_least(draws, DRAWS_SOUND, DRAWS_STRAINED);
    let detail = match word {
        Word::Sound => format!("{} effective draws stand behind {what}.", figure(draws)),
        Word::Strained => format!(
            "Only {} effective draws stand behind {what}: a weak answer, whose error is itself uncertain; raise the budget.",
            figure(draws)
        ),
        Word::Unfit => format!(
            "{} effective draws stand behind {what}, too few for a standard error; raise the budget several times, or start \
             nearer to the region that matters.",
            figure(draws)
        ),
    };
    let limit = format!("at least {DRAWS_SOUND}, strained from {DRAWS_STRAINED}");
    Check { name: "effective draws", value: draws, limit, word, detail }
}

/// Share of the heaviest draw in `what`.
#[must_use]
pub fn largest_share(what: &str, share: f64, sound: f64) -> Check {
    let word = at_most(share, sound, SHARE_STRAINED);
    let detail = match word {
        Word::Sound => format!("No draw carries more than {} of {what}.", percent(share)),
        _ => format!(
            "One draw carries {} of {what}: the proposal is too thin where that draw lies; tune longer so that the place is \
             covered, or take more draws.",
            percent(share)
        ),
    };
    let limit = format!("at most {}, strained to {SHARE_STRAINED}", figure(sound));
    Check { name: "largest share of one draw", value: share, limit, word, detail }
}

/// The two halves of the draws, in standard errors; `compared` pairs were looked at and `what` is the worst.
///
/// The limits are those of one comparison, 3.3 and 4.5 standard errors, moved so that all comparisons together raise a
/// false alarm as rarely as one.
#[must_use]
pub fn halves(what: &str, z: f64, compared: usize) -> Check {
    let limit = |false_alarm: f64| quantile_of_tail(0.5 * false_alarm / compared.max(1) as f64, true);
    let (sound, strained) = (limit(HALVES_SOUND), limit(HALVES_STRAINED));
    let word = at_most(z.abs(), sound, strained);
    let detail = match word {
        Word::Sound => format!("The two halves of the draws agree on {what}."),
        _ => format!(
            "The two halves of the draws differ by {} standard errors on {what}: its error is larger than claimed, as when rare \
             heavy draws are still to come; take more draws, or give the proposal heavier tails.",
            figure(z.abs())
        ),
    };
    let limit = format!("at most {}, strained to {}", figure(sound), figure(strained));
    Check { name: "two halves of the draws", value: z.abs(), limit, word, detail }
}

/// Fresh ESS fraction against the one predicted from the pool the proposal was fitted to.
#[must_use]
pub fn against_prediction(fresh: f64, predicted: f64) -> Check {
    // A prediction above one is a poor one, not a promise.
    let ratio = if predicted > 0.0 { fresh / predicted.min(1.0) } else { f64::NAN };
    let word = at_least(ratio, PREDICTED_SOUND, PREDICTED_STRAINED);
    let detail = match word {
        Word::Sound => format!("Fresh draws reach {} of the predicted efficiency.", percent(ratio)),
        _ if ratio.is_nan() => {
            "How the proposal would do could not be predicted from the evaluations it was fitted to; tune longer."
                .to_owned()
        }
        _ => format!(
            "Fresh draws reach only {} of the predicted efficiency: they met weight where the earlier evaluations had none; tune \
             longer, or start wider.",
            percent(ratio)
        ),
    };
    let limit = format!("at least {PREDICTED_SOUND}, strained from {PREDICTED_STRAINED}");
    Check { name: "fresh against predicted efficiency", value: ratio, limit, word, detail }
}

/// Modes or regions first met in the last two rounds or later, by the mass of each.
#[must_use]
pub fn late_regions(masses: &[f64]) -> Check {
    let light = masses.iter().all(|&mass| mass <= LATE_MASS);
    let word = match masses.len() {
        0 => Word::Sound,
        1 => passes(light, Word::Unfit).max(Word::Strained),
        _ => Word::Unfit,
    };
    let heaviest =
        masses.iter().copied().fold(0.0, |a: f64, b| if b.is_nan() || a.is_nan() { f64::NAN } else { a.max(b) });
    let detail = match word {
        Word::Sound => "No region was met for the first time in the last two rounds or later.".to_owned(),
        _ => format!(
            "{} first met in the last two rounds or later, the heaviest with {} of the mass: there may be more; raise the budget, \
             or widen the start so that the survey finds them.",
            if masses.len() == 1 { "A region was".to_owned() } else { format!("{} regions were", masses.len()) },
            percent(heaviest)
        ),
    };
    let limit = format!("none, strained with one of at most {}", percent(LATE_MASS));
    Check { name: "regions met late", value: masses.len() as f64, limit, word, detail }
}

/// Failed evaluations as a share of all. `declared`: the problem says how they count, so any number is as meant.
#[must_use]
pub fn failed(share: f64, declared: bool) -> Check {
    let word = if declared { passes(share <= 1.0, Word::Unfit) } else { at_most(share, FAILED_SOUND, FAILED_STRAINED) };
    let detail = match word {
        Word::Sound if declared => {
            format!("{} of the evaluations failed; the problem says how they count.", percent(share))
        }
        Word::Sound => format!("{} of the evaluations failed.", percent(share)),
        _ => format!(
            "{} of the evaluations failed, and the answer is silent about the places where they did; mend the model there, or say \
             in the problem how failures count.",
            percent(share)
        ),
    };
    let limit = format!("at most {FAILED_SOUND}, strained to {FAILED_STRAINED}");
    Check { name: "failed evaluations", value: share, limit, word, detail }
}

/// Probability that chi-squared with `df` degrees of freedom exceeds `x`; one for `df = 0`, NaN for NaN.
pub(super) fn chi_squared_tail(x: f64, df: usize) -> f64 {
    if df == 0 {
        return 1.0;
    }
    if x.is_nan() {
        return x;
    }
    exp(gamma_log_tails(0.5 * df as f64, 0.5 * x).upper)
}

#[cfg(test)]
mod tests {
    use super::*;
    use Word::{Sound, Strained, Unfit};

    fn shape(values: &[f64]) -> TailShape {
        TailShape::of(values, 0.0)
    }

    /// Weights `(i - 1/2)^-k`, a Pareto tail of shape `k` at its plotting positions.
    fn pareto(k: f64, n: usize) -> TailShape {
        shape(&(0..n).map(|i| libm::pow(i as f64 + 0.5, -k)).collect::<Vec<_>>())
    }

    #[test]
    fn tails_count_only_where_they_matter() {
        for (k, counts, word) in [(0.2, true, Sound), (0.55, true, Strained), (0.9, true, Unfit), (0.9, false, Sound)] {
            let t = pareto(k, 4000);
            let check = tail("a test", &t, t.upper, counts);
            assert_eq!(check.word, word, "k {k}: {check:?}");
            assert_eq!(check.detail.contains("heavier tails"), word != Sound);
        }
        let even = shape(&[1.0; 100]);
        assert_eq!(tail("a test", &even, even.upper, true).word, Sound);
        let few = shape(&[1.0, 2.0, 3.0]);
        let check = tail("a test", &few, few.upper, true);
        assert_eq!(check.word, Unfit);
        assert!(check.detail.contains("Fewer than five"));
    }

    #[test]
    fn limits_belong_to_the_better_word() {
        for (check, word) in [
            (effective_draws("x", 100.0), Sound),
            (effective_draws("x", 99.9), Strained),
            (effective_draws("x", 25.0), Strained),
            (effective_draws("x", 24.9), Unfit),
            (effective_draws("x", f64::NAN), Unfit),
            (largest_share("x", 0.02, SHARE_SOUND), Sound),
            (largest_share("x", 0.1, SHARE_SOUND), Strained),
            (largest_share("x", 0.11, SHARE_SOUND), Unfit),
            (largest_share("x", f64::NAN, SHARE_SOUND), Unfit),
            (halves("x", -3.2, 1), Sound),
            (halves("x", -3.4, 1), Strained),
            (halves("x", 4.6, 1), Unfit),
            (halves("x", 3.4, 10), Sound),
            (halves("x", f64::NAN, 1), Unfit),
            (against_prediction(0.7, 1.5), Sound),
            (against_prediction(0.5, 1.0), Strained),
            (against_prediction(0.1, 0.9), Unfit),
            (against_prediction(f64::NAN, 0.9), Unfit),
            (against_prediction(0.9, f64::NAN), Unfit),
            (against_prediction(0.9, 0.0), Unfit),
            (late_regions(&[]), Sound),
            (late_regions(&[0.1]), Strained),
            (late_regions(&[0.3]), Unfit),
            (late_regions(&[0.01, 0.01]), Unfit),
            (late_regions(&[f64::NAN]), Unfit),
            (failed(0.01, false), Sound),
            (failed(0.05, false), Strained),
            (failed(0.06, false), Unfit),
            (failed(0.5, true), Sound),
            (failed(f64::NAN, false), Unfit),
            (failed(f64::NAN, true), Unfit),
        ] {
            assert_eq!(check.word, word, "{check:?}");
            assert!(check.detail.ends_with('.') && !check.limit.is_empty());
        }
    }

    /// Source: SciPy 1.17.1, `scipy.stats.chi2.sf(x, df)`.
    #[test]
    fn chi_squared_tail_matches_scipy() {
        for (x, df, want) in [
            (20.0, 5, 0.0012497305630313773),
            (3.0, 1, 0.08326451666355042),
            (15.0, 2, 0.0005530843701478337),
            (40.0, 7, 1.258790387371308e-06),
            (0.5, 3, 0.9188914116546758),
        ] {
            let got = chi_squared_tail(x, df);
            assert!((got / want - 1.0).abs() < 1e-12, "x {x}, df {df}: {got:e}");
        }
        assert_eq!(chi_squared_tail(3.0, 0), 1.0);
        assert_eq!(chi_squared_tail(0.0, 4), 1.0);
        assert_eq!(chi_squared_tail(f64::INFINITY, 4), 0.0);
        assert!(chi_squared_tail(f64::NAN, 4).is_nan());
    }
}
