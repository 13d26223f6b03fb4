//! The problem file as stated: every table read, types checked, nothing worked out yet.

use std::ops::Range;

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
use super::target;
use super::target::TargetSpec;
use super::text_value::Text;
use super::tuning;
use super::tuning::TuningKeys;
use super::variables_table;
use super::variables_table::VariableSpec;

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
    /// Whether all that bears a name in formulas was read: only then do formulas tell more than is known already.
    pub(crate) names_known: bool,
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

/// Reads the document. Faults go to `reader`; none is returned where there is no target to speak of.
pub(crate) fn read(reader: &mut Reader<'_>, names: &mut Names) -> Option<Statement> {
    let (document, errors) = DeTable::parse_recoverable(reader.source);
    if !errors.is_empty() {
        for error in errors {
            let end = reader.source.len();
            let span = error.span().unwrap_or(end..end);
            reader.fault(not_toml(error.message().trim(), span));
        }
        return None;
    }
    let file = Table::new("a problem file", document.get_ref(), document.span());
    let before = reader.faults.len();
    check_top(reader, &file);
    let tables_known = reader.faults.len() == before && file.entry("variables").is_some();
    let title = read_title(reader, &file);
    let mut statement = Statement {
        title: title.unwrap_or_default(),
        constants: Vec::new(),
        variables: Vec::new(),
        data: Vec::new(),
        formulas: Vec::new(),
        target: no_target(),
        estimates: Vec::new(),
        correlations: Vec::new(),
        outside: None,
        tuning: TuningKeys::default(),
        names_known: tables_known,
    };
    let mut target = None;
    // In the order of the text, so that the first of two equal names is the one that stands first.
    for entry in &file.entries {
        let name = format!("[{}]", entry.key);
        match entry.key {
            "constants" | "variables" | "data" | "formulas" | "target" | "estimates" | "tuning" => {
                let before = reader.faults.len();
                let table = reader.table(entry, &name, &format!("a table: {name}, then its keys below"));
                match (entry.key, table) {
                    (_, None) => {}
                    ("constants", Some(table)) => statement.constants = read_constants(reader, &table),
                    ("variables", Some(table)) => statement.variables = variables_table::read(reader, &table),
                    ("data", Some(table)) => statement.data = data::read_specs(reader, &table),
                    ("formulas", Some(table)) => statement.formulas = read_formulas(reader, &table),
                    ("target", Some(table)) => target = target::read(reader, &table),
                    ("estimates", Some(table)) => statement.estimates = read_formulas(reader, &table),
                    (_, Some(table)) => statement.tuning = tuning::read(reader, &table),
                }
                let named = ["constants", "variables", "data", "formulas"].contains(&entry.key);
                statement.names_known &= !named || reader.faults.len() == before;
            }
            "program" | "library" | "exchange" => {
                if let Some(first) = &statement.outside {
                    outside_table::second(reader, entry, first);
                    continue;
                }
                statement.outside = outside_table::read(reader, entry);
                statement.names_known &= statement.outside.is_some();
            }
            "correlation" => statement.correlations = correlation_table::read(reader, entry),
            _ => {}
        }
    }
    let before = reader.faults.len();
    give_names(reader, names, &statement);
    statement.names_known &= reader.faults.len() == before;
    if statement.variables.is_empty() && reader.faults.is_empty() {
        let span = file.entry("variables").map_or(0..0, |entry| entry.key_span.clone());
        reader.fault(
            Fault::new(span, "the problem has no variables")
                .help("write [variables], and below it one variable a line: depth = { distribution = \"normal\", mean = 2.0, sd = 0.5 }"),
        );
    }
    if file.entry("target").is_none() {
        let end = reader.source.trim_end().len();
        reader.fault(
            Fault::new(end..end, "the problem has no [target]")
                .help("write [target], and below it aim = \"density\" with log_factor = \"...\", aim = \"expectation\" with integrand = \"...\", or aim = \"probability\" with event = \"...\""),
        );
    }
    statement.target = target?;
    Some(statement)
}

fn not_toml(message: &str, span: Range<usize>) -> Fault {
    if message.contains("duplicate key") {
        return Fault::new(span, "this key stands twice in its table").label("again").help("keep one of the two");
    }
    let help = if message.contains("string") {
        "close the text with the quotes it began with; a backslash in \"...\" is written \\\\, in '...' as it is"
    } else {
        "a key and its value stand on one line: key = value; texts and formulas in quotes, tables under [name]"
    };
    Fault::new(span, format!("this is not TOML: {message}")).help(help)
}

fn check_top(reader: &mut Reader<'_>, file: &Table<'_>) {
    for entry in file.entries.iter().filter(|entry| !TABLES.contains(&entry.key)) {
        reader.unknown_key(entry, "a problem file", &TABLES);
    }
}

fn read_title(reader: &mut Reader<'_>, file: &Table<'_>) -> Option<String> {
    let example = "title = \"Dye tracer in the feeder canal\"";
    let Some(entry) = file.entry("title") else {
        reader.fault(Fault::new(0..0, "the problem has no title").help(format!("begin the file with {example}")));
        return None;
    };
    let title = reader.text(entry, example)?;
    if title.value.trim().is_empty() {
        reader.fault(Fault::new(entry.span.clone(), "the title is empty").help(format!("write {example}")));
    }
    Some(title.value)
}

fn read_constants(reader: &mut Reader<'_>, table: &Table<'_>) -> Vec<(String, f64, Range<usize>)> {
    let mut constants = Vec::new();
    for entry in &table.entries {
        if entry.value.is_str() {
            reader.fault(
                Fault::new(entry.span.clone(), format!("the constant `{}` wants a number", entry.key))
                    .label("this is a text")
                    .help(
                        "a number stands without quotes; what is worked out from other values belongs under [formulas]",
                    ),
            );
        } else if let Some(number) = reader.number(entry, &format!("{} = 2.5", entry.key)) {
            constants.push((entry.key.to_owned(), number, entry.key_span.clone()));
        }
    }
    constants
}

fn read_formulas(reader: &mut Reader<'_>, table: &Table<'_>) -> Vec<NamedFormula> {
    let mut formulas = Vec::new();
    for entry in &table.entries {
        let example = format!("{} = \"a formula in quotes\"", entry.key);
        if let Some(formula) = read_formula(reader, entry, &table.name, &example) {
            formulas.push(NamedFormula { name: entry.key.to_owned(), name_span: entry.key_span.clone(), formula });
        }
    }
    formulas
}

fn read_formula(reader: &mut Reader<'_>, entry: &Entry<'_>, place: &str, example: &str) -> Option<Text> {
    if place == "[formulas]" && super::table::plain_number(entry.value).is_some() {
        reader.fault(
            Fault::new(entry.span.clone(), format!("the formula `{}` is a plain number", entry.key))
                .help("move it to [constants]"),
        );
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
