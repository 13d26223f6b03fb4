//! The `[variables]` table as it stands in the file: keys and kinds checked, names of columns not yet looked up.

use std::ops::Range;

use toml::de::DeValue;

use super::faults::Fault;
use super::foreign::COMMON_SYNONYMS;
use super::foreign::OF_LOGARITHM;
use super::foreign::SYNONYMS;
use super::foreign::meant_family;
use super::names::all_of;
use super::names::listed;
use super::table::Entry;
use super::table::Reader;
use super::table::Table;
use super::table::kind;
use super::table::plain_number;
use super::text_value::Text;
use crate::distribution::Distribution;
use crate::distribution::Form;
use crate::expression::nearest;

/// A number with its place.
pub(crate) type Placed = (f64, Range<usize>);

/// What `each` says.
#[derive(Debug, Clone)]
pub(crate) enum Each {
    /// One variable for every label of this column.
    Column(Text),
    /// So many variables.
    Count(u64),
}

/// A parameter of a distribution: a number, or a formula in quotes.
#[derive(Debug, Clone)]
pub(crate) enum ParameterSpec {
    Number(f64),
    Formula(Text),
}

/// A parameter with its name and its places.
#[derive(Debug, Clone)]
pub(crate) struct ParameterEntry {
    pub(crate) key: String,
    pub(crate) span: Range<usize>,
    pub(crate) value: ParameterSpec,
}

/// What a variable is, as stated.
#[derive(Debug, Clone)]
pub(crate) enum NatureSpec {
    Range {
        low: f64,
        high: f64,
    },
    Random {
        family: Text,
        parameters: Vec<ParameterEntry>,
        between: Option<((f64, f64), Range<usize>)>,
        shift: Option<Placed>,
    },
    /// Not known: something about it is wrong, and was told. Its parameters are looked at as formulas all the same.
    Faulty {
        parameters: Vec<ParameterEntry>,
    },
}

impl NatureSpec {
    /// The parameters of a distribution.
    pub(crate) fn parameters(&self) -> &[ParameterEntry] {
        match self {
            Self::Range { .. } => &[],
            Self::Random { parameters, .. } | Self::Faulty { parameters } => parameters,
        }
    }
}

/// A variable as stated.
#[derive(Debug, Clone)]
pub(crate) struct VariableSpec {
    pub(crate) name: String,
    pub(crate) name_span: Range<usize>,
    pub(crate) label: Option<String>,
    pub(crate) unit: Option<String>,
    pub(crate) note: Option<String>,
    pub(crate) each: Option<Each>,
    pub(crate) nature: NatureSpec,
    pub(crate) near: Option<Placed>,
    pub(crate) spread: Option<Placed>,
    /// Whether nothing is wrong with the line.
    pub(crate) sound: bool,
    /// Whether it is one of many, and it is not known of how many.
    pub(crate) each_unknown: bool,
}

const COMMON: [&str; 10] =
    ["distribution", "range", "near", "spread", "between", "shift", "unit", "label", "note", "each"];
const ONLY_RANDOM: [&str; 3] = ["distribution", "between", "shift"];

/// The key of every variable that another word stands for.
fn meant_key(key: &str) -> Option<&'static str> {
    let synonym = COMMON_SYNONYMS.iter().find(|(other, _)| *other == key).map(|(_, meant)| *meant);
    synonym.or_else(|| nearest(key, COMMON))
}

/// The entry with this key or, failing that, one whose unknown key stands for it.
fn common_entry<'t, 'a>(table: &'t Table<'a>, key: &str, own: &[&str]) -> Option<&'t Entry<'a>> {
    let slip = |entry: &&Entry<'_>| {
        !COMMON.contains(&entry.key) && !own.contains(&entry.key) && meant_key(entry.key) == Some(key)
    };
    table.entry(key).or_else(|| table.entries.iter().find(slip))
}

/// Reads every variable of the table, in the order of the text. What is wrong with one leaves its name known.
pub(crate) fn read(reader: &mut Reader<'_>, table: &Table<'_>) -> Vec<VariableSpec> {
    let mut specs = Vec::new();
    for entry in &table.entries {
        let example = format!("{} = {{ distribution = \"normal\", mean = 0.0, sd = 1.0 }}", entry.key);
        let name = format!("the variable `{}`", entry.key);
        let before = reader.faults.len();
        let inner = match entry.value {
            DeValue::Table(_) => reader.table(entry, &name, &example),
            _ => {
                no_table(reader, entry, &example);
                None
            }
        };
        let mut spec = match inner {
            Some(inner) => read_one(reader, entry, &inner),
            None => VariableSpec::faulty(entry),
        };
        spec.sound = reader.faults.len() == before;
        specs.push(spec);
    }
    specs
}

/// A variable that is a number, a text or a list.
fn no_table(reader: &mut Reader<'_>, entry: &Entry<'_>, example: &str) {
    let fault = Fault::new(entry.span.clone(), format!("the variable `{}` does not say how it varies", entry.key))
        .label(format!("this is {}", kind(entry.value)));
    let fault = match plain_number(entry.value) {
        Some(number) => {
            fault.help(format!("a number that is known belongs under [constants]: {} = {number:?}", entry.key))
        }
        None => fault,
    };
    reader.fault(fault.help(format!("a variable is written {example}")));
}

impl VariableSpec {
    fn faulty(entry: &Entry<'_>) -> Self {
        Self {
            name: entry.key.to_owned(),
            name_span: entry.key_span.clone(),
            label: None,
            unit: None,
            note: None,
            each: None,
            nature: NatureSpec::Faulty { parameters: Vec::new() },
            near: None,
            spread: None,
            sound: false,
            each_unknown: false,
        }
    }
}

fn read_one(reader: &mut Reader<'_>, entry: &Entry<'_>, table: &Table<'_>) -> VariableSpec {
    // Parameters may be like other keys; `mean` never stands for one.
    let family = table.entry("distribution").and_then(|entry| entry.value.as_str()).and_then(meant_family);
    let own = family.map(parameter_keys).unwrap_or_default();
    let mut word = |key: &str, example: &str| {
        table.entry(key).and_then(|entry| reader.text(entry, example)).map(|text| text.value)
    };
    let unit = word("unit", "unit = \"m3/s\"");
    let label = word("label", "label = \"Inflow (m³/s)\"");
    let note = word("note", "note = \"a remark\"");
    let each_entry = common_entry(table, "each", &own);
    let each = each_entry.and_then(|entry| read_each(reader, entry));
    let each_unknown = each.is_none() && each_entry.is_some();
    let near = placed(reader, common_entry(table, "near", &own), "near = 5.0");
    let spread = placed(reader, common_entry(table, "spread", &own), "spread = 2.0");
    if let Some((_, span)) = spread.as_ref().filter(|(width, _)| *width <= 0.0 || width.is_infinite()) {
        reader.fault(
            Fault::new(span.clone(), "`spread` must be above zero and finite")
                .help("it says how wide to look first, in the variable's own unit"),
        );
    }
    let nature = match (table.entry("distribution"), table.entry("range")) {
        (Some(family), Some(range)) => {
            reader.fault(
                Fault::new(range.key_span.clone(), format!("`{}` has both a `distribution` and a `range`", entry.key))
                    .help("a range is flat and has no distribution; to cut a distribution off, write between = [low, high]"),
            );
            read_random(reader, table, family)
        }
        (None, None) => no_nature(reader, entry, table, near.as_ref()),
        (Some(family), None) => read_random(reader, table, family),
        (None, Some(range)) => read_range(reader, table, entry, range, near.as_ref()),
    };
    VariableSpec {
        name: entry.key.to_owned(),
        name_span: entry.key_span.clone(),
        label,
        unit,
        note,
        each,
        nature,
        near,
        spread,
        sound: true,
        each_unknown,
    }
}

/// Neither a distribution nor a range: a slip in the key itself is told as such, and taken for the key that is meant.
fn no_nature(reader: &mut Reader<'_>, variable: &Entry<'_>, table: &Table<'_>, near: Option<&Placed>) -> NatureSpec {
    let slip = |key: &str| {
        let like = |entry: &&Entry<'_>| !COMMON.contains(&entry.key) && meant_key(entry.key) == Some(key);
        table.entries.iter().find(like)
    };
    let named = table.entries.iter().find(|entry| names_a_family(entry));
    if let Some(entry) = slip("distribution").filter(|_| named.is_none()) {
        reader.unknown_key(entry, &table.name, &COMMON);
        if entry.value.is_str() {
            return read_random(reader, table, entry);
        }
    } else if let Some(entry) = slip("range") {
        reader.unknown_key(entry, &table.name, &COMMON);
        if matches!(entry.value, DeValue::Array(_)) {
            return read_range(reader, table, variable, entry, near);
        }
    } else if let Some(entry) = named {
        let family = entry.value.as_str().unwrap_or_default();
        reader.fault(
            Fault::new(entry.key_span.clone(), format!("`{}` is no key of {}", entry.key, table.name))
                .label("unknown key")
                .help(format!("write distribution = \"{}\"", meant_family(family).unwrap_or(family))),
        );
        return read_random(reader, table, entry);
    } else {
        let message = format!("`{}` has neither a `distribution` nor a `range`", variable.key);
        reader.fault(Fault::new(variable.key_span.clone(), message).help(
            "write distribution = \"normal\", mean = 0.0, sd = 1.0, say, or range = [0.0, inf], near = 5.0, spread = 2.0",
        ));
    }
    let mut parameters = Vec::new();
    for entry in table.entries.iter().filter(|entry| !COMMON.contains(&entry.key)) {
        reader.mention(entry.value);
        parameters.extend(parameter(reader, entry, entry.key));
    }
    // What keys like `mean` are of is not known; only their formulas are looked at.
    parameters.retain(|entry| matches!(entry.value, ParameterSpec::Formula(_)));
    NatureSpec::Faulty { parameters }
}

/// Whether an entry names a distribution under another key, as `type = "normal"` does.
fn names_a_family(entry: &Entry<'_>) -> bool {
    ["type", "dist", "kind", "family", "prior", "law"].contains(&entry.key) && entry.value.is_str()
}

fn placed(reader: &mut Reader<'_>, entry: Option<&Entry<'_>>, example: &str) -> Option<Placed> {
    let entry = entry?;
    reader.number(entry, example).map(|number| (number, entry.span.clone()))
}

fn read_each(reader: &mut Reader<'_>, entry: &Entry<'_>) -> Option<Each> {
    match entry.value {
        DeValue::String(_) => reader.text(entry, "").map(Each::Column),
        _ if plain_number(entry.value).is_some() => reader.count(entry, 1, "each = 4").map(Each::Count),
        _ => {
            reader.wants(entry, "the name of a data column or a whole number", "each = \"station\" or each = 4");
            None
        }
    }
}

/// Keys that a variable with this distribution may have.
fn known_keys(family: &str) -> Vec<&'static str> {
    let common = COMMON.into_iter().filter(|key| *key != "range");
    common.chain(parameter_keys(family)).collect()
}

/// Every parameter that the distribution accepts in any of its forms.
pub(crate) fn parameter_keys(family: &str) -> Vec<&'static str> {
    let mut keys: Vec<&'static str> = Vec::new();
    for set in Distribution::parameters_of(family).unwrap_or_default() {
        for key in set.required.iter().chain(set.optional.iter().map(|(key, _)| key)) {
            if !keys.contains(key) {
                keys.push(key);
            }
        }
    }
    keys
}

fn read_random(reader: &mut Reader<'_>, table: &Table<'_>, entry: &Entry<'_>) -> NatureSpec {
    let family = reader.text(entry, "distribution = \"normal\"").and_then(|text| known_family(reader, text));
    let own = family.as_ref().map(|family| parameter_keys(&family.value)).unwrap_or_default();
    let between = table
        .entry("between")
        .map(|entry| reader.interval(entry, "between = [0.0, inf]").map(|interval| (interval, entry.span.clone())));
    let shift = placed(reader, common_entry(table, "shift", &own), "shift = 1.5");
    let mut whole = true;
    let mut parameters: Vec<ParameterEntry> = Vec::new();
    for other in table.entries.iter().filter(|other| other.key != entry.key && !COMMON.contains(&other.key)) {
        let key = match &family {
            None => Some(other.key),
            Some(_) if own.contains(&other.key) => Some(other.key),
            Some(family) => {
                reader.mention(other.value);
                whole = false;
                let meant = unknown_parameter(reader, (table, other), &family.value, &own);
                meant.filter(|key| table.entry(key).is_none())
            }
        };
        let Some(key) = key else { continue };
        // What a list is to a distribution that nobody knows cannot be told.
        if family.is_none() && matches!(other.value, DeValue::Array(_)) {
            reader.mention(other.value);
            continue;
        }
        match parameter(reader, other, key) {
            Some(parameter) => parameters.push(parameter),
            None => whole = false,
        }
    }
    let keys: Vec<&str> = parameters.iter().map(|entry| entry.key.as_str()).collect();
    match family {
        // Where something is left out or misspelt, a set of parameters that is not complete is told already.
        Some(family) if whole || Form::new(&family.value, &keys).is_ok() => {
            NatureSpec::Random { family, parameters, between: between.flatten(), shift }
        }
        _ => NatureSpec::Faulty { parameters },
    }
}

/// A number, or a formula in quotes.
fn parameter(reader: &mut Reader<'_>, entry: &Entry<'_>, key: &str) -> Option<ParameterEntry> {
    let value = match entry.value {
        DeValue::String(_) => reader.text(entry, "").map(ParameterSpec::Formula),
        _ => {
            let example = format!("{} = 1.5, or a formula in quotes", entry.key);
            reader.number(entry, &example).map(ParameterSpec::Number)
        }
    };
    Some(ParameterEntry { key: key.to_owned(), span: entry.span.clone(), value: value? })
}

/// The family that a text names; a misspelt one is told and taken as the one that is suggested.
fn known_family(reader: &mut Reader<'_>, text: Text) -> Option<Text> {
    if Distribution::NAMES.contains(&text.value.as_str()) {
        return Some(text);
    }
    let fault = Fault::new(text.span.clone(), format!("there is no distribution \"{}\"", text.value))
        .label("unknown distribution");
    let meant = meant_family(&text.value);
    reader.fault(match meant {
        Some(near) => fault.help(format!("did you mean \"{near}\"?")),
        None => fault.help(format!(
            "the distributions are {}",
            listed(Distribution::NAMES).replace('`', "").replace(" or ", " and ")
        )),
    });
    meant.map(|meant| text.meaning(meant))
}

/// Tells that a key is no parameter; gives the one that is meant, where its value may stand for it.
fn unknown_parameter(
    reader: &mut Reader<'_>,
    (table, entry): (&Table<'_>, &Entry<'_>),
    family: &str,
    own: &[&'static str],
) -> Option<&'static str> {
    let known = known_keys(family);
    let fault =
        Fault::new(entry.key_span.clone(), format!("`{}` is no parameter of the {family} distribution", entry.key))
            .label("unknown key");
    let all = format!("its parameters are {}", all_of(own));
    let other_way = match entry.key {
        "scale" if own.contains(&"rate") => Some("give `rate`, which is one over the scale".to_owned()),
        "rate" if own.contains(&"scale") => Some("give `scale`, which is one over the rate".to_owned()),
        "lower" | "min" | "minimum" | "upper" | "max" | "maximum"
            if !own.contains(&"low") && !own.contains(&"minimum") =>
        {
            Some("to cut a distribution off write between = [low, high]; an end may be inf".to_owned())
        }
        "scale" if family == "lognormal" => {
            Some("give `log_mean`, the logarithm of that scale, with `log_sd`".to_owned())
        }
        "median" if family == "lognormal" => {
            Some("give `log_mean`, the logarithm of the median, with `log_sd`; or `mean` with `sd` or `cv`".to_owned())
        }
        "median" => Some("a median is no parameter".to_owned()),
        "variance" | "var" if own.contains(&"sd") => Some("give `sd`, the square root of the variance".to_owned()),
        _ => None,
    };
    if let Some(way) = other_way {
        reader.fault(fault.help(format!("{way}; {all}")));
        return None;
    }
    // `mu` of a lognormal is that of the logarithm, unless a parameter of the variable itself stands beside it.
    let of_logarithm = family == "lognormal" && !["mean", "sd", "cv"].iter().any(|key| table.entry(key).is_some());
    let own_words = OF_LOGARITHM.iter().filter(|_| of_logarithm).chain(&SYNONYMS);
    let synonym = own_words.into_iter().find(|(other, meant)| *other == entry.key && own.contains(meant));
    if let Some((_, meant)) = synonym {
        reader.fault(fault.help(match table.entry(meant) {
            Some(_) => format!("take it out: `{meant}` is there already; {all}"),
            None => format!("write `{meant}`; {all}"),
        }));
        return Some(meant);
    }
    let common = COMMON_SYNONYMS.iter().find(|(other, _)| *other == entry.key).map(|(_, meant)| *meant);
    let near = common.or_else(|| nearest(entry.key, known));
    reader.fault(match near {
        Some(near) => fault.help(format!("did you mean `{near}`? {}", capitalised(&all))),
        None => fault.help(all),
    });
    own.iter().copied().find(|key| Some(*key) == near)
}

fn capitalised(text: &str) -> String {
    let mut letters = text.chars();
    letters.next().map_or_else(String::new, |first| first.to_uppercase().chain(letters).collect())
}

fn read_range(
    reader: &mut Reader<'_>,
    table: &Table<'_>,
    variable: &Entry<'_>,
    entry: &Entry<'_>,
    near: Option<&Placed>,
) -> NatureSpec {
    for key in ONLY_RANDOM {
        if let Some(entry) = table.entry(key) {
            reader.fault(
                Fault::new(entry.key_span.clone(), format!("`{key}` belongs to a distribution, and this is a range"))
                    .help("put the ends that you want into the range itself"),
            );
        }
    }
    let range_keys: Vec<&str> = COMMON.into_iter().filter(|key| !ONLY_RANDOM[1..].contains(key)).collect();
    let foreign = |other: &&Entry<'_>| other.key != entry.key && !COMMON.contains(&other.key);
    for other in table.entries.iter().filter(foreign) {
        reader.mention(other.value);
        let fault = Fault::new(other.key_span.clone(), format!("`{}` is no key of a variable with a range", other.key))
            .label("unknown key");
        reader.fault(match meant_key(other.key).filter(|meant| range_keys.contains(meant)) {
            Some(meant) => fault.help(format!("did you mean `{meant}`?")),
            None => fault.help(format!("the keys of a variable with a range are {}", all_of(&range_keys))),
        });
    }
    for key in ["near", "spread"] {
        // A slip in the key has been told already.
        if common_entry(table, key, &[]).is_none() {
            let says = if key == "near" { "where to look first" } else { "how wide to look first" };
            reader.fault(
                Fault::new(entry.span.clone(), format!("the range of `{}` needs `{key}`", variable.key))
                    .help(format!("write {key} = ..., {says} in the variable's own unit; any rough figure will do")),
            );
        }
    }
    let Some((low, high)) = reader.interval(entry, "range = [0.0, inf]") else {
        return NatureSpec::Faulty { parameters: Vec::new() };
    };
    if let Some((near, span)) = near.filter(|(near, _)| !(*near > low && *near < high)) {
        let on_end = *near == low || *near == high;
        let message = format!("`near` is {} the range", if on_end { "on an end of" } else { "outside" });
        reader.fault(
            Fault::new(span.clone(), message)
                .also(entry.span.clone(), "the range")
                .help("put it strictly between the ends"),
        );
    }
    NatureSpec::Range { low, high }
}
