//! The problem file as stated: every table read, types checked, nothing worked out yet.

use std::ops::Range;

use toml::Spanned;
use toml::de::DeTable;

use super::correlation_table;
use super::correlation_table::CorrelationSpec;
use super::data;
use super::data::DataSpec;
use super::faults::Fault;
use super::names::Names;
use super::outside_table;
use super::outside_table::OutsideSpec;
use super::table::Entry;
use super::table::Reader;
use super::table::Table;
use super::table::home_of;
use super::target;
use super::target::TargetSpec;
use super::target::TargetTable;
use super::text_value::Text;
use super::tuning;
use super::tuning::TuningKeys;
use super::variables_table;
use super::variables_table::VariableSpec;
use crate::expression::nearest;

/// A name with a formula.
#[derive(Debug, Clone)]
pub(crate) struct NamedFormula {
    pub(crate) name: String,
    pub(crate) name_span: Range<usize>,
    pub(crate) formula: Text,
}

/// All that a problem file states.
#[derive(Debug, Clone)]
pub(crate) struct Statement {
    pub(crate) title: String,
    pub(crate) constants: Vec<(String, f64, Range<usize>)>,
    pub(crate) variables: Vec<VariableSpec>,
    pub(crate) data: Vec<DataSpec>,
    pub(crate) formulas: Vec<NamedFormula>,
    pub(crate) target: TargetSpec,
    pub(crate) estimates: Vec<NamedFormula>,
    pub(crate) correlations: Vec<CorrelationSpec>,
    /// A model that is not a formula.
    pub(crate) outside: Option<OutsideSpec>,
    pub(crate) tuning: TuningKeys,
}

/// A file as far as it could be read.
#[derive(Debug)]
pub(crate) struct Stated {
    /// What it states; its target is meaningless where `target` has none.
    pub(crate) statement: Statement,
    /// The target as far as it could be read.
    pub(crate) target: TargetTable,
}

const TABLES: [&str; 12] = [
    "title",
    "constants",
    "variables",
    "data",
    "formulas",
    "target",
    "estimates",
    "tuning",
    "correlation",
    "program",
    "library",
    "exchange",
];

/// Reads the document. Faults go to `reader`, and reading goes on after each: a misspelt table is taken for the one that
/// is meant.
pub(crate) fn read(reader: &mut Reader<'_>, names: &mut Names, document: &Spanned<DeTable<'_>>) -> Stated {
    let file = Table::new("a problem file", document.get_ref(), document.span());
    check_top(reader, &file);
    let mut statement = Statement {
        title: read_title(reader, &file).unwrap_or_default(),
        constants: Vec::new(),
        variables: Vec::new(),
        data: Vec::new(),
        formulas: Vec::new(),
        target: no_target(),
        estimates: Vec::new(),
        correlations: Vec::new(),
        outside: None,
        tuning: TuningKeys::default(),
    };
    let mut target = TargetTable::default();
    // In the order of the text, so that the first of two equal names is the one that stands first.
    for entry in &file.entries {
        let Some(meant) = meant_table(&file, entry) else { continue };
        if meant == "correlation" {
            statement.correlations = correlation_table::read(reader, entry);
            continue;
        }
        let name = format!("[{meant}]");
        let Some(table) = reader.table(entry, &name, &format!("a table: {name}, then its keys below")) else {
            reader.open.push(String::new());
            continue;
        };
        match meant {
            "constants" => statement.constants = read_constants(reader, &table),
            "variables" => statement.variables = variables_table::read(reader, &table),
            "data" => statement.data = data::read_specs(reader, &table),
            "formulas" => {
                let (inside, table) = strayed(&file, table);
                statement.formulas = read_formulas(reader, &table);
                if let Some(inside) = inside {
                    no_header(reader, &inside);
                    target = target::read(reader, &inside);
                }
            }
            "target" => target = target::read(reader, &table),
            "estimates" => {
                let (inside, table) = strayed(&file, table);
                statement.estimates = read_formulas(reader, &table);
                if let Some(inside) = inside {
                    no_header(reader, &inside);
                    target = target::read(reader, &inside);
                }
            }
            "program" | "library" | "exchange" => match &statement.outside {
                Some(first) => {
                    outside_table::second(reader, entry, first);
                    outside_table::leave(reader, &table);
                }
                None => statement.outside = Some(outside_table::read(reader, meant, entry, &table)),
            },
            _ => statement.tuning = tuning::read(reader, &table),
        }
    }
    give_names(reader, names, &statement);
    let has = |wanted: &str| file.entries.iter().any(|entry| meant_table(&file, entry) == Some(wanted));
    if statement.variables.is_empty() && (!has("variables") || file.entry("variables").is_some_and(is_empty_table)) {
        let span = file.entry("variables").map_or(0..0, |entry| entry.key_span.clone());
        reader.fault(
            Fault::new(span, "the problem has no variables")
                .help("write [variables], and below it one variable a line: depth = { distribution = \"normal\", mean = 2.0, sd = 0.5 }"),
        );
    }
    if !has("target") && target.texts.is_empty() && target.aim.is_none() {
        let end = reader.source.trim_end().len();
        reader.fault(
            Fault::new(end..end, "the problem has no [target]")
                .help("write [target], and below it aim = \"density\" with log_factor = \"...\", aim = \"expectation\" with integrand = \"...\", or aim = \"probability\" with event = \"...\""),
        );
    }
    if let Some(spec) = &target.spec {
        statement.target = spec.clone();
    }
    Stated { statement, target }
}

/// The keys of a target that stand in another table, since the line `[target]` is not there, and the table without them.
fn strayed<'a>(file: &Table<'a>, mut table: Table<'a>) -> (Option<Table<'a>>, Table<'a>) {
    let is_there = file.entries.iter().any(|entry| meant_table(file, entry) == Some("target"));
    if is_there || table.entry("aim").is_none() {
        return (None, table);
    }
    let (inside, left) = table.entries.into_iter().partition(|entry| target::KEYS.contains(&entry.key));
    table.entries = left;
    let entries: Vec<Entry<'a>> = inside;
    let span = entries[0].key_span.clone();
    (Some(Table { name: "[target]".into(), span, entries }), table)
}

fn no_header(reader: &mut Reader<'_>, inside: &Table<'_>) {
    reader.fault(
        Fault::new(inside.span.clone(), "the line [target] is missing above this one").help("write [target] before it"),
    );
}

fn is_empty_table(entry: &Entry<'_>) -> bool {
    entry.value.as_table().is_some_and(DeTable::is_empty)
}

/// The table that an entry of the file is, or is meant to be; none for texts and for what is unknown.
fn meant_table(file: &Table<'_>, entry: &Entry<'_>) -> Option<&'static str> {
    let tables = || TABLES[1..].iter().copied();
    if let Some(exact) = tables().find(|known| *known == entry.key) {
        return Some(exact);
    }
    let meant = near_table(entry.key)?;
    (meant != "title" && file.entry(meant).is_none()).then_some(meant)
}

/// The table whose name is nearest, or that goes by this name elsewhere.
fn near_table(key: &str) -> Option<&'static str> {
    let other = match key {
        "parameters" | "priors" | "inputs" | "unknowns" => "variables",
        "constant" | "fixed" | "settings" => "constants",
        "model" | "formulae" | "expressions" | "definitions" => "formulas",
        "outputs" | "quantities" | "results" => "estimates",
        "correlations" => "correlation",
        "observations" | "datafile" => "data",
        _ => return nearest(key, TABLES),
    };
    Some(other)
}

fn check_top(reader: &mut Reader<'_>, file: &Table<'_>) {
    for entry in file.entries.iter().filter(|entry| !TABLES.contains(&entry.key)) {
        match near_table(entry.key) {
            Some(near) => reader.fault(
                Fault::new(entry.key_span.clone(), format!("`{}` is no key of {}", entry.key, file.name))
                    .label("unknown key")
                    .help(format!("did you mean `{near}`?")),
            ),
            None => reader.unknown_key(entry, &file.name, &TABLES),
        }
        if meant_table(file, entry).is_none() {
            // What it names may be used elsewhere.
            reader.mention(entry.value);
            if let Some(table) = entry.value.as_table() {
                reader.faulty.extend(table.iter().map(|(key, _)| key.get_ref().to_string()));
            }
        }
    }
}

fn read_title(reader: &mut Reader<'_>, file: &Table<'_>) -> Option<String> {
    let example = "title = \"Dye tracer in the feeder canal\"";
    let Some(entry) = file.entry_or_slip("title", &TABLES) else {
        reader.fault(Fault::new(0..0, "the problem has no title").help(format!("begin the file with {example}")));
        return None;
    };
    let title = reader.text(entry, example)?;
    if title.value.trim().is_empty() {
        reader.fault(Fault::new(entry.span.clone(), "the title is empty").help(format!("write {example}")));
    }
    Some(title.value)
}

/// Constants; one that is no number keeps its name and stands for 1, so that formulas can be looked at.
fn read_constants(reader: &mut Reader<'_>, table: &Table<'_>) -> Vec<(String, f64, Range<usize>)> {
    let mut constants = Vec::new();
    for entry in &table.entries {
        let number = if let Some(text) = entry.value.as_str() {
            reader.mention(entry.value);
            let fault = Fault::new(entry.span.clone(), format!("the constant `{}` wants a number", entry.key))
                .label("this is a text");
            reader.fault(match text.trim().parse::<f64>() {
                Ok(number) => fault.help(format!("a number stands without quotes: {} = {number:?}", entry.key)),
                Err(_) => fault.help(
                    "a number stands without quotes; what is worked out from other values belongs under [formulas]",
                ),
            });
            None
        } else {
            reader.number(entry, &format!("{} = 2.5", entry.key))
        };
        constants.push((entry.key.to_owned(), number.unwrap_or(1.0), entry.key_span.clone()));
    }
    constants
}

fn read_formulas(reader: &mut Reader<'_>, table: &Table<'_>) -> Vec<NamedFormula> {
    let mut formulas = Vec::new();
    for entry in &table.entries {
        let example = format!("{} = \"a formula in quotes\"", entry.key);
        match read_formula(reader, entry, &table.name, &example) {
            Some(formula) => {
                formulas.push(NamedFormula { name: entry.key.to_owned(), name_span: entry.key_span.clone(), formula });
            }
            None => {
                reader.mention(entry.value);
                reader.faulty.push(entry.key.to_owned());
            }
        }
    }
    formulas
}

fn read_formula(reader: &mut Reader<'_>, entry: &Entry<'_>, place: &str, example: &str) -> Option<Text> {
    if place == "[formulas]"
        && let Some(number) = super::table::plain_number(entry.value)
    {
        reader.fault(Fault::new(entry.span.clone(), format!("the formula `{}` is a plain number", entry.key)).help(
            match home_of(entry.key) {
                Some(home) => format!("`{}` belongs {home}", entry.key),
                None => format!("move it to [constants]: {} = {number:?}", entry.key),
            },
        ));
        return None;
    }
    reader.text(entry, example)
}

fn give_names(reader: &mut Reader<'_>, names: &mut Names, statement: &Statement) {
    let mut given: Vec<(&str, &str, &Range<usize>)> = Vec::new();
    given.extend(statement.constants.iter().map(|(name, _, span)| (name.as_str(), "the constant", span)));
    given.extend(statement.variables.iter().map(|spec| (spec.name.as_str(), "the variable", &spec.name_span)));
    given.extend(statement.formulas.iter().map(|f| (f.name.as_str(), "the formula", &f.name_span)));
    if let Some(outside) = &statement.outside {
        let returned = outside.returns.iter().chain(outside.returns_rows.iter().map(|(name, _)| name));
        given.extend(returned.map(|name| (name.value.as_str(), "the model's value", &name.span)));
    }
    given.sort_by_key(|(_, _, span)| span.start);
    for (name, kind, span) in given {
        names.give_key(reader, name, kind, span);
    }
    for spec in statement.data.iter().filter(|spec| spec.name.is_some()) {
        let name = spec.name.clone().unwrap_or_default();
        Names::check_spelling(reader, &name, "the data table", &spec.key_span);
    }
    // Estimates are never used in formulas: they may bear the name of a variable.
    for estimate in &statement.estimates {
        if !crate::expression::is_name(&estimate.name) {
            Names::check_spelling(reader, &estimate.name, "the estimate", &estimate.name_span);
        }
    }
}

/// Stands in until the table is read; never returned.
fn no_target() -> TargetSpec {
    TargetSpec {
        aim: target::Aim::Density,
        aim_span: 0..0,
        key: target::TargetKey::LogFactor,
        formula: Text::unplaced(""),
        require: Vec::new(),
        failed: None,
    }
}
