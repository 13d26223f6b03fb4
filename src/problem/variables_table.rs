//! The `[variables]` table as it stands in the file: keys and kinds checked, names of columns not yet looked up.

use std::ops::Range;

use toml::de::DeValue;

use super::faults::Fault;
use super::names::all_of;
use super::names::listed;
use super::table::Entry;
use super::table::Reader;
use super::table::Table;
use super::table::plain_number;
use super::text_value::Text;
use crate::distribution::Distribution;
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
}

const COMMON: [&str; 10] =
    ["distribution", "range", "near", "spread", "between", "shift", "unit", "label", "note", "each"];
const ONLY_RANDOM: [&str; 3] = ["distribution", "between", "shift"];

/// Reads every variable of the table, in the order of the text.
pub(crate) fn read(reader: &mut Reader<'_>, table: &Table<'_>) -> Vec<VariableSpec> {
    let mut specs = Vec::new();
    for entry in &table.entries {
        let example = format!("{} = {{ distribution = \"normal\", mean = 0.0, sd = 1.0 }}", entry.key);
        if let Some(inner) = reader.table(entry, &format!("the variable `{}`", entry.key), &example) {
            specs.extend(read_one(reader, entry, &inner));
        }
    }
    specs
}

fn read_one(reader: &mut Reader<'_>, entry: &Entry<'_>, table: &Table<'_>) -> Option<VariableSpec> {
    let mut word = |key: &str, example: &str| {
        table.entry(key).and_then(|entry| reader.text(entry, example)).map(|text| text.value)
    };
    let unit = word("unit", "unit = \"m3/s\"");
    let label = word("label", "label = \"Inflow (m³/s)\"");
    let note = word("note", "note = \"a remark\"");
    let each = table.entry("each").and_then(|entry| read_each(reader, entry));
    let near = placed(reader, table, "near", "near = 5.0");
    let spread = placed(reader, table, "spread", "spread = 2.0");
    if let Some((_, span)) = spread.as_ref().filter(|(width, _)| *width <= 0.0 || width.is_infinite()) {
        reader.fault(
            Fault::new(span.clone(), "`spread` must be above zero and finite")
                .help("it says how wide to look first, in the variable's own unit"),
        );
        return None;
    }
    let nature = match (table.entry("distribution"), table.entry("range")) {
        (Some(_), Some(range)) => {
            reader.fault(
                Fault::new(range.key_span.clone(), format!("`{}` has both a `distribution` and a `range`", entry.key))
                    .help("a range is flat and has no distribution; to cut a distribution off, write between = [low, high]"),
            );
            None
        }
        (None, None) => {
            no_nature(reader, entry, table);
            None
        }
        (Some(family), None) => read_random(reader, table, family),
        (None, Some(range)) => read_range(reader, table, entry, range, near.as_ref(), spread.as_ref()),
    }?;
    Some(VariableSpec {
        name: entry.key.to_owned(),
        name_span: entry.key_span.clone(),
        label,
        unit,
        note,
        each,
        nature,
        near,
        spread,
    })
}

/// Neither a distribution nor a range: a slip in the key itself is told as such.
fn no_nature(reader: &mut Reader<'_>, variable: &Entry<'_>, table: &Table<'_>) {
    let slip = table.entries.iter().find(|entry| nearest(entry.key, ["distribution", "range"]).is_some());
    match slip {
        Some(slip) => reader.unknown_key(slip, &table.name, &COMMON),
        None => reader.fault(
            Fault::new(variable.key_span.clone(), format!("`{}` has neither a `distribution` nor a `range`", variable.key))
                .help("write distribution = \"normal\", mean = 0.0, sd = 1.0, say, or range = [0.0, inf], near = 5.0, spread = 2.0"),
        ),
    }
}

fn placed(reader: &mut Reader<'_>, table: &Table<'_>, key: &str, example: &str) -> Option<Placed> {
    let entry = table.entry(key)?;
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

fn read_random(reader: &mut Reader<'_>, table: &Table<'_>, entry: &Entry<'_>) -> Option<NatureSpec> {
    let family = reader.text(entry, "distribution = \"normal\"")?;
    if !Distribution::NAMES.contains(&family.value.as_str()) {
        let fault = Fault::new(family.span.clone(), format!("there is no distribution \"{}\"", family.value))
            .label("unknown distribution");
        reader.fault(match nearest(&family.value, Distribution::NAMES.iter().copied()) {
            Some(near) => fault.help(format!("did you mean \"{near}\"?")),
            None => fault.help(format!(
                "the distributions are {}",
                listed(Distribution::NAMES).replace('`', "").replace(" or ", " and ")
            )),
        });
        return None;
    }
    let between = table.entry("between").and_then(|entry| {
        reader.interval(entry, "between = [0.0, 10.0]").map(|interval| (interval, entry.span.clone()))
    });
    let shift = placed(reader, table, "shift", "shift = 1.5");
    let own = parameter_keys(&family.value);
    let mut parameters = Vec::new();
    for entry in &table.entries {
        if own.contains(&entry.key) {
            let value = match entry.value {
                DeValue::String(_) => reader.text(entry, "").map(ParameterSpec::Formula),
                _ => {
                    let example = format!("{} = 1.5, or a formula in quotes", entry.key);
                    reader.number(entry, &example).map(ParameterSpec::Number)
                }
            };
            parameters.push(ParameterEntry { key: entry.key.to_owned(), span: entry.span.clone(), value: value? });
        } else if !COMMON.contains(&entry.key) {
            unknown_parameter(reader, entry, &family.value, &own);
        }
    }
    Some(NatureSpec::Random { family, parameters, between, shift })
}

fn unknown_parameter(reader: &mut Reader<'_>, entry: &Entry<'_>, family: &str, own: &[&'static str]) {
    let known = known_keys(family);
    let fault =
        Fault::new(entry.key_span.clone(), format!("`{}` is no parameter of the {family} distribution", entry.key))
            .label("unknown key");
    let all = format!("its parameters are {}", all_of(own));
    let other_way = match entry.key {
        "scale" if own.contains(&"rate") => Some("give `rate`, which is one over the scale"),
        "rate" if own.contains(&"scale") => Some("give `scale`, which is one over the rate"),
        "sigma" | "stdev" | "std" | "stddev" if own.contains(&"sd") => Some("write `sd`"),
        _ => None,
    };
    if let Some(way) = other_way {
        reader.fault(fault.help(format!("{way}; its parameters are {all_of}", all_of = all_of(own))));
        return;
    }
    reader.fault(match nearest(entry.key, known) {
        Some(near) => fault.help(format!("did you mean `{near}`? {}", capitalised(&all))),
        None => fault.help(all),
    });
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
    spread: Option<&Placed>,
) -> Option<NatureSpec> {
    for key in ONLY_RANDOM {
        if let Some(entry) = table.entry(key) {
            reader.fault(
                Fault::new(entry.key_span.clone(), format!("`{key}` belongs to a distribution, and this is a range"))
                    .help("put the ends that you want into the range itself"),
            );
        }
    }
    let range_keys: Vec<&str> = COMMON.into_iter().filter(|key| !ONLY_RANDOM[1..].contains(key)).collect();
    let foreign: Vec<&Entry<'_>> = table.entries.iter().filter(|entry| !COMMON.contains(&entry.key)).collect();
    for entry in foreign {
        reader.unknown_key(entry, "a variable with a range", &range_keys);
    }
    let (low, high) = reader.interval(entry, "range = [0.0, inf]")?;
    for key in ["near", "spread"] {
        // A slip in the key has been told already.
        let misspelt = || table.entries.iter().any(|entry| nearest(entry.key, [key]).is_some());
        if table.entry(key).is_none() && !misspelt() {
            let says = if key == "near" { "where to look first" } else { "how wide to look first" };
            reader.fault(
                Fault::new(entry.span.clone(), format!("the range of `{}` needs `{key}`", variable.key))
                    .help(format!("write {key} = ..., {says} in the variable's own unit; any rough figure will do")),
            );
        }
    }
    let ((near, span), _) = (near?, spread?);
    if !(*near > low && *near < high) {
        let on_end = *near == low || *near == high;
        let message = format!("`near` is {} the range", if on_end { "on an end of" } else { "outside" });
        reader.fault(
            Fault::new(span.clone(), message)
                .also(entry.span.clone(), "the range")
                .help("put it strictly between the ends"),
        );
        return None;
    }
    Some(NatureSpec::Range { low, high })
}
