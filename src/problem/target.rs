//! The `[target]` table: the aim, and the formula that is integrated.

use super::faults::Fault;
use super::foreign::meant_aim;
use super::names::listed;
use super::table::Entry;
use super::table::Reader;
use super::table::Table;
use super::text_value::Text;
use crate::expression::Wanted;
use crate::expression::nearest;

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

/// The table as far as it could be read.
#[derive(Debug, Default)]
pub(crate) struct TargetTable {
    /// All of it; none where something of it is wrong.
    pub(crate) spec: Option<TargetSpec>,
    /// The aim, where there is one.
    pub(crate) aim: Option<Aim>,
    /// Every formula with its key and what it must be, those included that do not belong to the aim.
    pub(crate) texts: Vec<(String, Text, Wanted)>,
}

pub(crate) const KEYS: [&str; 7] = ["aim", "log_factor", "log_density", "integrand", "event", "require", "failed"];
const FORMULAS: [TargetKey; 4] = [TargetKey::LogFactor, TargetKey::LogDensity, TargetKey::Integrand, TargetKey::Event];

/// Reads the table.
pub(crate) fn read(reader: &mut Reader<'_>, table: &Table<'_>) -> TargetTable {
    reader.only(table, &KEYS);
    let slip = |key: &str| table.entry_or_slip(key, &KEYS);
    let requirement = "require = [\"fast < slow\"]";
    let require = slip("require").map_or_else(Vec::new, |entry| {
        let texts = reader.texts(entry, requirement);
        texts.unwrap_or_else(|| {
            reader.mention(entry.value);
            Vec::new()
        })
    });
    let mut formulas: Vec<(TargetKey, &Entry<'_>, Option<Text>)> = Vec::new();
    for key in FORMULAS {
        if let Some(entry) = slip(key.word()) {
            let text = reader.text(entry, &format!("{} = \"...\", a formula in quotes", key.word()));
            reader.mention(entry.value);
            formulas.push((key, entry, text));
        }
    }
    let aim = slip("aim");
    let aim = match aim {
        Some(entry) => read_aim(reader, entry),
        None => no_aim(reader, table, &formulas),
    };
    let failed = aim.and_then(|aim| slip("failed").and_then(|entry| read_failed(reader, entry, aim)));
    let own = aim.zip(slip("aim")).and_then(|(aim, entry)| own_formula(reader, aim, entry, &formulas));
    let mut texts: Vec<(String, Text, Wanted)> = Vec::new();
    for (key, _, text) in &formulas {
        // What a formula of another aim must be is not known.
        let foreign = aim.is_some_and(|aim| !own_keys(aim).contains(key));
        let wanted = match key {
            _ if foreign => Wanted::NumberOrColumn,
            TargetKey::Event => Wanted::Margin,
            _ => Wanted::Number,
        };
        texts.extend(text.clone().map(|text| (format!("[target] {}", key.word()), text, wanted)));
    }
    for (k, text) in require.iter().enumerate() {
        texts.push((format!("[target] require {}", k + 1), text.clone(), Wanted::Margin));
    }
    let spec = own.zip(aim).zip(slip("aim")).map(|(((key, formula), aim), entry)| TargetSpec {
        aim,
        aim_span: entry.span.clone(),
        key,
        formula,
        require,
        failed,
    });
    TargetTable { spec, aim, texts }
}

/// There is no aim: the formula that is there says which one is meant.
fn no_aim(
    reader: &mut Reader<'_>,
    table: &Table<'_>,
    formulas: &[(TargetKey, &Entry<'_>, Option<Text>)],
) -> Option<Aim> {
    let meant = formulas.first().map(|(key, ..)| match key {
        TargetKey::LogFactor | TargetKey::LogDensity => Aim::Density,
        TargetKey::Integrand => Aim::Expectation,
        TargetKey::Event => Aim::Probability,
    });
    let help = match (meant, formulas.first()) {
        (Some(aim), Some((key, ..))) => format!("write aim = \"{}\", to which `{}` belongs", aim.word(), key.word()),
        _ => "write aim = \"density\", aim = \"expectation\" or aim = \"probability\"".into(),
    };
    reader.fault(Fault::new(table.span.clone(), "[target] has no `aim`").help(help));
    meant
}

fn read_aim(reader: &mut Reader<'_>, entry: &Entry<'_>) -> Option<Aim> {
    let known = [Aim::Density, Aim::Expectation, Aim::Probability];
    let foreign = entry.value.as_str().and_then(|text| Some((text, meant_aim(text)?)));
    if let Some((text, meant)) = foreign {
        let fault =
            Fault::new(entry.span.clone(), format!("`{}` knows no \"{text}\"", entry.key)).label("unknown word");
        reader.fault(fault.help(format!("write \"{meant}\"")));
        return known.into_iter().find(|aim| aim.word() == meant);
    }
    let word = reader.word(entry, &known.map(Aim::word));
    // A misspelt aim is taken as the one that is suggested.
    let meant = entry.value.as_str().and_then(|text| nearest(text, known.map(Aim::word)).map(str::to_owned));
    let word = word.or(meant)?;
    known.into_iter().find(|aim| aim.word() == word)
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

/// The keys that carry the target of an aim.
fn own_keys(aim: Aim) -> &'static [TargetKey] {
    match aim {
        Aim::Density => &[TargetKey::LogFactor, TargetKey::LogDensity],
        Aim::Expectation => &[TargetKey::Integrand],
        Aim::Probability => &[TargetKey::Event],
    }
}

/// The one key that carries the target of this aim; the keys of other aims are faults.
fn own_formula(
    reader: &mut Reader<'_>,
    aim: Aim,
    aim_entry: &Entry<'_>,
    formulas: &[(TargetKey, &Entry<'_>, Option<Text>)],
) -> Option<(TargetKey, Text)> {
    let own = own_keys(aim);
    let example = match aim {
        Aim::Density => {
            "log_factor = \"...\" (added to the log densities of the variables) or log_density = \"...\" (the whole)"
        }
        Aim::Expectation => "integrand = \"...\", the formula whose mean is wanted",
        Aim::Probability => "event = \"level > crest\", an inequality",
    };
    let words: Vec<&str> = own.iter().map(|key| key.word()).collect();
    let (found, foreign): (Vec<_>, Vec<_>) = formulas.iter().partition(|(key, ..)| own.contains(key));
    for (key, entry, _) in &foreign {
        reader.fault(
            Fault::new(entry.key_span.clone(), format!("`{}` is no key of the aim {}", key.word(), aim.word()))
                .also(aim_entry.span.clone(), "this aim")
                .help(format!("this aim wants {}: {example}", listed(&words))),
        );
    }
    match found.as_slice() {
        [(key, _, text)] => text.clone().map(|text| (*key, text)),
        [] if !foreign.is_empty() => None, // It was said what this aim wants.
        [] => {
            reader.fault(
                Fault::new(aim_entry.span.clone(), format!("the aim {} needs {}", aim.word(), listed(&words)))
                    .help(format!("write {example}")),
            );
            None
        }
        [(_, first, _), (_, second, _), ..] => {
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
