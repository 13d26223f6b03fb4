//! The `[tuning]` table: what a problem file says about how it is to be tuned.

use super::faults::Fault;
use super::table::Entry;
use super::table::Reader;
use super::table::Table;
use super::table::plain_number;

/// Family of the proposal's components.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Family {
    /// Gaussian components.
    Gaussian,
    /// Student-t components.
    StudentT,
}

/// Structure of the components' scales.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Structure {
    /// A full scale matrix.
    Full,
    /// A diagonal one.
    Diagonal,
    /// The identity, changed along a few directions.
    Directions,
}

/// How a refit is made.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Method {
    /// Minimising the cross-entropy from the target.
    CrossEntropy,
    /// Matching moments.
    Moments,
    /// Minimising the variance of the weights.
    Variance,
}

/// Which coordinates the proposal lives in, where the problem's own choice is overridden.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum CoordinateChoice {
    /// Standard normal scores for every variable with a distribution.
    StandardNormal,
    /// The variables as they are.
    Natural,
}

/// The keys of `[tuning]`. `None` is "auto", or a key that the file does not have.
///
/// ```
/// use evenpoise::problem::{Problem, Family};
/// let text = "title = \"Depth\"\n[variables]\ndepth = { distribution = \"normal\", mean = 2.0, sd = 0.1 }\n\
///             [target]\naim = \"density\"\nlog_factor = \"-depth^4\"\n[tuning]\nbudget = 5000\nfamily = \"gaussian\"\ndf = \"auto\"\n";
/// let problem = Problem::parse(text, "depth.toml", std::path::Path::new(".")).unwrap();
/// assert_eq!(problem.tuning().budget, Some(5000));
/// assert_eq!(problem.tuning().family, Some(Family::Gaussian));
/// assert_eq!(problem.tuning().df, None);
/// ```
#[derive(Debug, Clone, Default, PartialEq)]
pub struct TuningKeys {
    /// Evaluations in all: survey, rounds, confirm and report draws.
    pub budget: Option<u64>,
    /// Earlier budgets, ascending, that were raised to this one; empty for most.
    pub extended_from: Vec<u64>,
    /// Draws of a round.
    pub round_draws: Option<u64>,
    /// Rounds, at most.
    pub rounds: Option<u64>,
    /// Share of the budget for report draws, in (0, 1).
    pub report_share: Option<f64>,
    /// Family of the components.
    pub family: Option<Family>,
    /// Degrees of freedom of Student-t components, above 0 (and finite: infinitely many are the Gaussian family).
    pub df: Option<f64>,
    /// Number of components.
    pub components: Option<u64>,
    /// Structure of the scales.
    pub structure: Option<Structure>,
    /// How refits are made.
    pub method: Option<Method>,
    /// Which coordinates the proposal lives in.
    pub coordinates: Option<CoordinateChoice>,
    /// Share of the wide start (density) or of the nominal density (otherwise) kept in the proposal, in [0, 1).
    pub defensive: Option<f64>,
    /// Threads.
    pub threads: Option<u64>,
    /// Seed of every draw.
    pub seed: Option<u64>,
}

/// The keys in the order in which the problem is written out.
const KEYS: [&str; 14] = [
    "budget",
    "extended_from",
    "round_draws",
    "rounds",
    "report_share",
    "family",
    "df",
    "components",
    "structure",
    "method",
    "coordinates",
    "defensive",
    "threads",
    "seed",
];

const FAMILIES: [(&str, Family); 2] = [("gaussian", Family::Gaussian), ("student-t", Family::StudentT)];
const STRUCTURES: [(&str, Structure); 3] =
    [("full", Structure::Full), ("diagonal", Structure::Diagonal), ("directions", Structure::Directions)];
const METHODS: [(&str, Method); 3] =
    [("cross-entropy", Method::CrossEntropy), ("moments", Method::Moments), ("variance", Method::Variance)];
const COORDINATES: [(&str, CoordinateChoice); 2] =
    [("standard-normal", CoordinateChoice::StandardNormal), ("natural", CoordinateChoice::Natural)];

impl TuningKeys {
    /// Evaluations in all, where neither file nor command says otherwise.
    pub const BUDGET: u64 = 20_000;
    /// Rounds at most, where neither file nor command says otherwise.
    pub const ROUNDS: u64 = 20;
    /// The seed, where neither file nor command says otherwise.
    pub const SEED: u64 = 1;

    /// These keys, with those that `over` sets put in their place.
    #[must_use]
    pub fn overridden_by(&self, over: &Self) -> Self {
        Self {
            budget: over.budget.or(self.budget),
            extended_from: if over.extended_from.is_empty() {
                self.extended_from.clone()
            } else {
                over.extended_from.clone()
            },
            round_draws: over.round_draws.or(self.round_draws),
            rounds: over.rounds.or(self.rounds),
            report_share: over.report_share.or(self.report_share),
            family: over.family.or(self.family),
            df: over.df.or(self.df),
            components: over.components.or(self.components),
            structure: over.structure.or(self.structure),
            method: over.method.or(self.method),
            coordinates: over.coordinates.or(self.coordinates),
            defensive: over.defensive.or(self.defensive),
            threads: over.threads.or(self.threads),
            seed: over.seed.or(self.seed),
        }
    }

    /// Every key with its value or its default, as TOML writes it, in the order in which the table is written. A budget that was
    /// never raised has no `extended_from`.
    #[must_use]
    pub fn listed(&self) -> Vec<(&'static str, String)> {
        let number = |value: Option<f64>| value.map_or("\"auto\"".into(), |x| format!("{x:?}"));
        let count = |value: Option<u64>| value.map_or("\"auto\"".into(), |n| n.to_string());
        let quoted = |word: &str| format!("\"{word}\"");
        let values = [
            self.budget.unwrap_or(Self::BUDGET).to_string(),
            format!("{:?}", self.extended_from),
            count(self.round_draws),
            self.rounds.unwrap_or(Self::ROUNDS).to_string(),
            number(self.report_share),
            quoted(word_of(self.family, &FAMILIES)),
            number(self.df),
            count(self.components),
            quoted(word_of(self.structure, &STRUCTURES)),
            quoted(word_of(self.method, &METHODS)),
            quoted(word_of(self.coordinates, &COORDINATES)),
            number(self.defensive),
            count(self.threads),
            self.seed.unwrap_or(Self::SEED).to_string(),
        ];
        let listed = KEYS.into_iter().zip(values);
        listed.filter(|(key, _)| *key != "extended_from" || !self.extended_from.is_empty()).collect()
    }

    /// The table as TOML, every key with its value or its default.
    pub(crate) fn written(&self) -> String {
        let lines: Vec<String> = self.listed().iter().map(|(key, value)| format!("{key} = {value}\n")).collect();
        format!("[tuning]\n{}", lines.concat())
    }
}

fn word_of<T: PartialEq + Copy>(value: Option<T>, words: &[(&'static str, T)]) -> &'static str {
    value.and_then(|value| words.iter().find(|(_, known)| *known == value)).map_or("auto", |(word, _)| word)
}

/// Reads the table.
pub(crate) fn read(reader: &mut Reader<'_>, table: &Table<'_>) -> TuningKeys {
    let mut keys = TuningKeys::default();
    reader.only(table, &KEYS);
    for entry in &table.entries {
        // The value of a misspelt key is looked at as that of the key that is meant.
        let meant =
            KEYS.iter().copied().find(|key| table.entry_or_slip(key, &KEYS).is_some_and(|e| e.key == entry.key));
        let entry = &Entry { key: meant.unwrap_or(entry.key), ..entry.clone() };
        match entry.key {
            "budget" => keys.budget = reader.count(entry, 100, "budget = 20000"),
            "rounds" => keys.rounds = reader.count(entry, 1, "rounds = 20"),
            "seed" => keys.seed = reader.count(entry, 0, "seed = 1"),
            "round_draws" => keys.round_draws = automatic_count(reader, entry, 10),
            "components" => keys.components = automatic_count(reader, entry, 1),
            "threads" => keys.threads = automatic_count(reader, entry, 1),
            "report_share" => {
                keys.report_share =
                    automatic_number(reader, entry, "between 0 and 1, both excluded", |x| x > 0.0 && x < 1.0);
            }
            "defensive" => {
                keys.defensive = automatic_number(reader, entry, "from 0 to below 1", |x| (0.0..1.0).contains(&x));
            }
            "df" => {
                keys.df = automatic_number(reader, entry, "above 0 and finite", |x| x > 0.0 && x.is_finite());
            }
            "family" => keys.family = automatic_word(reader, entry, &FAMILIES),
            "structure" => keys.structure = automatic_word(reader, entry, &STRUCTURES),
            "method" => keys.method = automatic_word(reader, entry, &METHODS),
            "coordinates" => keys.coordinates = automatic_word(reader, entry, &COORDINATES),
            _ => {}
        }
    }
    if let Some(entry) = table.entry("extended_from") {
        keys.extended_from = earlier_budgets(reader, entry, keys.budget.unwrap_or(TuningKeys::BUDGET));
    }
    if let (Some(Family::Gaussian), Some(_), Some(entry)) = (keys.family, keys.df, table.entry("df")) {
        reader.fault(
            Fault::new(entry.span.clone(), "Gaussian components have no degrees of freedom")
                .help("drop `df`, or write family = \"student-t\""),
        );
    }
    keys
}

/// Budgets from 100 on that rise up to below `budget`.
fn earlier_budgets(reader: &mut Reader<'_>, entry: &Entry<'_>, budget: u64) -> Vec<u64> {
    let example = "extended_from = [20000], with budget = 40000: earlier budgets, each below the next and the last below `budget`";
    let Some(list) = entry.value.as_array() else {
        reader.wants(entry, "a list of whole numbers", example);
        return Vec::new();
    };
    let whole = |x: f64| (100.0..9e15).contains(&x) && x.fract() == 0.0;
    let budget_of = |value| plain_number(value).filter(|&x| whole(x)).map(|x| x as u64);
    let budgets: Option<Vec<u64>> = list.iter().map(|item| budget_of(item.get_ref())).collect();
    let rising = |budgets: &Vec<u64>| {
        budgets.iter().zip(budgets[1.min(budgets.len())..].iter().chain([&budget])).all(|(a, b)| a < b)
    };
    match budgets.filter(rising) {
        Some(budgets) => budgets,
        None => {
            let fault = Fault::new(entry.span.clone(), "`extended_from` must be budgets that rise up to `budget`");
            reader.fault(fault.help(format!("write {example}")));
            Vec::new()
        }
    }
}

fn is_auto(entry: &Entry<'_>) -> bool {
    entry.value.as_str() == Some("auto")
}

fn automatic_count(reader: &mut Reader<'_>, entry: &Entry<'_>, least: u64) -> Option<u64> {
    if is_auto(entry) {
        return None;
    }
    reader.count(entry, least, &format!("{} = \"auto\" or a whole number, {least} or more", entry.key))
}

fn automatic_number(
    reader: &mut Reader<'_>,
    entry: &Entry<'_>,
    allowed: &str,
    holds: impl Fn(f64) -> bool,
) -> Option<f64> {
    if is_auto(entry) {
        return None;
    }
    let example = format!("{} = \"auto\" or a number {allowed}", entry.key);
    match plain_number(entry.value) {
        Some(x) if holds(x) => Some(x),
        Some(_) => {
            reader.fault(
                Fault::new(entry.span.clone(), format!("`{}` must be {allowed}", entry.key))
                    .help(format!("write {example}")),
            );
            None
        }
        None => {
            reader.wants(entry, "a number", &example);
            None
        }
    }
}

fn automatic_word<T: Copy>(reader: &mut Reader<'_>, entry: &Entry<'_>, words: &[(&'static str, T)]) -> Option<T> {
    if is_auto(entry) {
        return None;
    }
    let mut known: Vec<&str> = words.iter().map(|(word, _)| *word).collect();
    known.push("auto");
    let word = reader.word(entry, &known)?;
    words.iter().find(|(known, _)| *known == word).map(|(_, value)| *value)
}
