//! The `[target]` table: the aim, and the formula that is integrated.

use super::faults::Fault;
use super::names::listed;
use super::table::Entry;
use super::table::Reader;
use super::table::Table;
use super::text_value::Text;

/// What is asked of the integral.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Aim {
    /// The normalising constant of a density, and expectations under it.
    Density,
    /// `E[f(x)]` under the variables' distributions.
    Expectation,
    /// `P(event)` under the variables' distributions.
    Probability,
}

impl Aim {
    /// The word of the problem file.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            Self::Density => "density",
            Self::Expectation => "expectation",
            Self::Probability => "probability",
        }
    }
}

/// How failed model runs count in a probability, when the analyst knows.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Failed {
    /// As outside the event.
    Outside,
    /// As inside the event.
    Inside,
}

/// The key that carries the target.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum TargetKey {
    LogFactor,
    LogDensity,
    Integrand,
    Event,
}

impl TargetKey {
    pub(crate) fn word(self) -> &'static str {
        match self {
            Self::LogFactor => "log_factor",
            Self::LogDensity => "log_density",
            Self::Integrand => "integrand",
            Self::Event => "event",
        }
    }
}

/// The table as it was read.
#[derive(Debug, Clone)]
pub(crate) struct TargetSpec {
    pub(crate) aim: Aim,
    pub(crate) aim_span: std::ops::Range<usize>,
    pub(crate) key: TargetKey,
    pub(crate) formula: Text,
    pub(crate) require: Vec<Text>,
    pub(crate) failed: Option<Failed>,
}

const KEYS: [&str; 7] = ["aim", "log_factor", "log_density", "integrand", "event", "require", "failed"];

/// Reads the table.
pub(crate) fn read(reader: &mut Reader<'_>, table: &Table<'_>) -> Option<TargetSpec> {
    reader.only(table, &KEYS);
    let require =
        table.entry("require").and_then(|entry| reader.texts(entry, "require = [\"fast < slow\"]")).unwrap_or_default();
    let Some(aim_entry) = table.entry("aim") else {
        reader.fault(
            Fault::new(table.span.clone(), "[target] has no `aim`")
                .help("write aim = \"density\", aim = \"expectation\" or aim = \"probability\""),
        );
        return None;
    };
    let aim = match reader.word(aim_entry, &["density", "expectation", "probability"])?.as_str() {
        "density" => Aim::Density,
        "expectation" => Aim::Expectation,
        _ => Aim::Probability,
    };
    let failed = table.entry("failed").and_then(|entry| read_failed(reader, entry, aim));
    let (key, formula) = read_formula(reader, table, aim, aim_entry)?;
    Some(TargetSpec { aim, aim_span: aim_entry.span.clone(), key, formula, require, failed })
}

fn read_failed(reader: &mut Reader<'_>, entry: &Entry<'_>, aim: Aim) -> Option<Failed> {
    let word = reader.word(entry, &["outside", "inside"])?;
    if aim != Aim::Probability {
        reader.fault(
            Fault::new(entry.key_span.clone(), format!("`failed` has no meaning for the aim {}", aim.word()))
                .help("drop it: it says how failed model runs count in a probability"),
        );
        return None;
    }
    Some(if word == "inside" { Failed::Inside } else { Failed::Outside })
}

/// The one key that carries the target of this aim; the keys of other aims are faults.
fn read_formula(
    reader: &mut Reader<'_>,
    table: &Table<'_>,
    aim: Aim,
    aim_entry: &Entry<'_>,
) -> Option<(TargetKey, Text)> {
    let (own, example): (&[TargetKey], &str) = match aim {
        Aim::Density => (
            &[TargetKey::LogFactor, TargetKey::LogDensity],
            "log_factor = \"...\" (added to the log densities of the variables) or log_density = \"...\" (the whole)",
        ),
        Aim::Expectation => (&[TargetKey::Integrand], "integrand = \"...\", the formula whose mean is wanted"),
        Aim::Probability => (&[TargetKey::Event], "event = \"level > crest\", an inequality"),
    };
    let words: Vec<&str> = own.iter().map(|key| key.word()).collect();
    for key in [TargetKey::LogFactor, TargetKey::LogDensity, TargetKey::Integrand, TargetKey::Event] {
        if let Some(entry) = table.entry(key.word()).filter(|_| !own.contains(&key)) {
            reader.fault(
                Fault::new(entry.key_span.clone(), format!("`{}` is no key of the aim {}", key.word(), aim.word()))
                    .also(aim_entry.span.clone(), "this aim")
                    .help(format!("this aim wants {}", listed(&words))),
            );
        }
    }
    let found: Vec<(TargetKey, &Entry<'_>)> =
        own.iter().filter_map(|&key| table.entry(key.word()).map(|entry| (key, entry))).collect();
    match found.as_slice() {
        [(key, entry)] => {
            reader.text(entry, &format!("{} = \"...\", a formula in quotes", key.word())).map(|text| (*key, text))
        }
        [] => {
            reader.fault(
                Fault::new(aim_entry.span.clone(), format!("the aim {} needs {}", aim.word(), listed(&words)))
                    .help(format!("write {example}")),
            );
            None
        }
        [(_, first), (_, second), ..] => {
            reader.fault(
                Fault::new(second.key_span.clone(), "`log_factor` and `log_density` exclude each other")
                    .also(first.key_span.clone(), "and this one")
                    .help(
                        "keep `log_factor` where variables have distributions, `log_density` where the formula is the whole",
                    ),
            );
            None
        }
    }
}
