//! The verdict: one word about a set of report draws, and the reasons for it.
//!
//! Every check is a small function in [`checks`]: a number, its limit, a word, and a sentence that says what failed and
//! what to try. [`judge`] puts together those for a density, [`judge_rare`] those for a probability or an expectation;
//! the worst word decides. A check passes when its number is *inside* the limit, so a number that is not known (NaN)
//! never passes.

pub mod checks;
mod course;
mod density;
#[cfg(test)]
mod error_rates;
mod rare;

pub use course::{RoundFacts, SurveyFacts};
pub(crate) use density::tail_of;
pub use density::{DensityEvidence, judge};
pub use rare::{FailureFacts, RareEvidence, judge_rare};

use super::interval::no_hit_bound;
use serde::Serialize;

/// What the reader may do with the numbers.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Word {
    /// Report them.
    Sound,
    /// Usable with the stated caution.
    Strained,
    /// Do not report them.
    Unfit,
}

impl std::fmt::Display for Word {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str(match self {
            Self::Sound => "sound",
            Self::Strained => "strained",
            Self::Unfit => "unfit",
        })
    }
}

/// One check: its number, its limit, its word, and what it means.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Check {
    /// What was checked.
    pub name: &'static str,
    /// The number; NaN (`null`) when it is not known.
    pub value: f64,
    /// The limits in words, the one for "sound" first.
    pub limit: String,
    /// The word that the number earns.
    pub word: Word,
    /// A sentence: what was found, and, where the word is not "sound", what to try.
    pub detail: String,
}

/// The word and all that led to it.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Verdict {
    /// The worst word of all checks.
    pub word: Word,
    /// Every check that was made.
    pub checks: Vec<Check>,
    /// The sentences of the checks that are not sound, the worst first.
    pub reasons: Vec<String>,
    /// What no check can see, to be printed beside the word.
    pub caution: String,
}

impl Verdict {
    /// Puts checks together. Without any check nothing was shown, and the word is "unfit".
    #[must_use]
    pub fn of(checks: Vec<Check>, caution: String) -> Self {
        let word = checks.iter().map(|check| check.word).max().unwrap_or(Word::Unfit);
        let of_word = |word| checks.iter().filter(move |c| c.word == word).map(|c| c.detail.clone());
        let reasons = of_word(Word::Unfit).chain(of_word(Word::Strained)).collect();
        Self { word, checks, reasons, caution }
    }
}

/// What a survey of `starts` searches leaves unseen, in a sentence.
#[must_use]
pub fn unseen_caution(starts: usize) -> String {
    format!(
        "The verdict speaks of what the evaluations have touched. A separate region that none of them came near cannot be \
         seen by any check; the survey's {starts} searches would have found, with 95 %, one whose basin takes {} of the start \
         distribution.",
        percent(no_hit_bound(starts))
    )
}

/// A share as a percentage with up to three figures.
pub(crate) fn percent(share: f64) -> String {
    format!("{} %", figure(100.0 * share))
}

/// A number with three figures, for a sentence.
pub(crate) fn figure(x: f64) -> String {
    if x == 0.0 || !x.is_finite() {
        return if x.is_nan() { "not known".to_owned() } else { format!("{x}") };
    }
    if !(1e-4..1e6).contains(&x.abs()) {
        return format!("{x:.2e}");
    }
    let decimals = (2.0 - libm::log10(x.abs()).floor()).clamp(0.0, 7.0) as usize;
    let text = format!("{x:.decimals$}");
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').to_owned() } else { text }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn check(word: Word) -> Check {
        Check { name: "a check", value: 1.0, limit: "at most 2".into(), word, detail: format!("It is {word}.") }
    }

    #[test]
    fn the_worst_word_decides_and_speaks_first() {
        let verdict =
            Verdict::of(vec![check(Word::Sound), check(Word::Strained), check(Word::Unfit)], unseen_caution(60));
        assert_eq!(verdict.word, Word::Unfit);
        assert_eq!(verdict.reasons, ["It is unfit.", "It is strained."]);
        assert!(verdict.caution.contains("60 searches") && verdict.caution.contains("4.87 %"), "{}", verdict.caution);
        assert_eq!(Verdict::of(Vec::new(), String::new()).word, Word::Unfit);
        assert!(Word::Sound < Word::Strained && Word::Strained < Word::Unfit);
        assert_eq!(serde_json::to_string(&Word::Strained).unwrap(), "\"strained\"");
    }

    #[test]
    fn figures_read_well() {
        for (x, text) in [
            (0.0, "0"),
            (0.05, "0.05"),
            (12.345, "12.3"),
            (1234.5, "1234"),
            (0.000_123_4, "0.000123"),
            (-0.5, "-0.5"),
            (3e9, "3.00e9"),
            (f64::INFINITY, "inf"),
            (f64::NAN, "not known"),
            (100.0, "100"),
        ] {
            assert_eq!(figure(x), text);
        }
        assert_eq!(percent(0.02), "2 %");
    }
}
