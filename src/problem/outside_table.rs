//! The tables `[program]`, `[library]` and `[exchange]` as they stand in the file: a model that is not a formula.

use std::ops::Range;

use toml::de::DeValue;

use super::faults::Fault;
use super::names::all_of;
use super::table::Entry;
use super::table::Reader;
use super::table::Table;
use super::table::plain_number;
use super::text_value::Text;
use crate::model::ProgramFormat;

/// A model as stated.
#[derive(Debug, Clone)]
pub(crate) struct OutsideSpec {
    pub(crate) means: Means,
    /// The table's name, for messages: `[program]`.
    pub(crate) table: &'static str,
    pub(crate) span: Range<usize>,
    /// None: all variables.
    pub(crate) takes: Option<Vec<Text>>,
    pub(crate) returns: Vec<Text>,
    /// Columns with the data table whose rows they have.
    pub(crate) returns_rows: Vec<(Text, Option<Text>)>,
}

/// By what means the model is asked.
#[derive(Debug, Clone)]
pub(crate) enum Means {
    Program(ProgramKeys),
    Library { file: Text, symbol: Text, any_thread: bool },
    Exchange,
}

/// Keys of `[program]` alone.
#[derive(Debug, Clone)]
pub(crate) struct ProgramKeys {
    pub(crate) run: Vec<Text>,
    pub(crate) folder: Option<Text>,
    pub(crate) workers: Option<u64>,
    pub(crate) batch: Option<u64>,
    /// Seconds; infinite for ever; none where nothing is said.
    pub(crate) timeout: Option<f64>,
    pub(crate) tries: Option<u64>,
    pub(crate) format: ProgramFormat,
    pub(crate) gradient: bool,
}

/// The tables of models.
pub(crate) const TABLES: [&str; 3] = ["program", "library", "exchange"];

const COMMON: [&str; 3] = ["takes", "returns", "returns_rows"];
const PROGRAM: [&str; 11] =
    ["run", "folder", "takes", "returns", "returns_rows", "workers", "batch", "timeout", "tries", "format", "gradient"];
const LIBRARY: [&str; 6] = ["file", "symbol", "takes", "returns", "returns_rows", "threads"];

/// Reads one of the tables.
pub(crate) fn read(reader: &mut Reader<'_>, entry: &Entry<'_>) -> Option<OutsideSpec> {
    let name = format!("[{}]", entry.key);
    let table = reader.table(entry, &name, &format!("a table: {name}, then its keys below"))?;
    let before = reader.faults.len();
    let (known, title): (&[&str], &'static str) = match entry.key {
        "program" => (&PROGRAM, "[program]"),
        "library" => (&LIBRARY, "[library]"),
        _ => (&COMMON, "[exchange]"),
    };
    reader.only(&table, known);
    let means = match entry.key {
        "program" => read_program(reader, &table).map(Means::Program),
        "library" => read_library(reader, &table),
        _ => Some(Means::Exchange),
    };
    let takes = table.entry("takes").and_then(|entry| reader.texts(entry, "takes = [\"inflow\", \"gate_level\"]"));
    let returns = table.entry("returns").and_then(|entry| reader.texts(entry, "returns = [\"peak_level\"]"));
    let returns = returns.unwrap_or_default();
    let returns_rows = table.entry("returns_rows").map(|entry| read_rows(reader, entry)).unwrap_or_default();
    if takes.as_ref().is_some_and(Vec::is_empty) {
        let span = table.entry("takes").map_or(0..0, |entry| entry.span.clone());
        reader.fault(
            Fault::new(span, "the model takes nothing")
                .help("name its inputs in order, or leave `takes` out: then it takes all variables"),
        );
    }
    let spec = OutsideSpec { means: means?, table: title, span: entry.key_span.clone(), takes, returns, returns_rows };
    if spec.returns.is_empty() && spec.returns_rows.is_empty() && reader.faults.len() == before {
        reader.fault(
            Fault::new(entry.key_span.clone(), format!("{name} does not say what the model returns"))
                .help("write returns = [\"peak_level\"]: the names under which formulas use its values, in order"),
        );
    }
    check_gradient(reader, &table, &spec);
    (reader.faults.len() == before).then_some(spec)
}

fn check_gradient(reader: &mut Reader<'_>, table: &Table<'_>, spec: &OutsideSpec) {
    let gradient = matches!(&spec.means, Means::Program(keys) if keys.gradient);
    if gradient && (spec.returns.len() != 1 || !spec.returns_rows.is_empty()) {
        let span = table.entry("gradient").map_or(0..0, |entry| entry.span.clone());
        reader.fault(
            Fault::new(span, "derivatives belong to one value")
                .help("keep one name in `returns`, or write gradient = false"),
        );
    }
}

fn read_program(reader: &mut Reader<'_>, table: &Table<'_>) -> Option<ProgramKeys> {
    let example = "run = [\"python3\", \"tank.py\"]";
    let Some(entry) = table.entry("run") else {
        reader.fault(
            Fault::new(table.span.clone(), "[program] does not say what to run").help(format!("write {example}")),
        );
        return None;
    };
    let run = reader.texts(entry, example)?;
    if run.first().is_none_or(|program| program.value.is_empty()) {
        reader.fault(Fault::new(entry.span.clone(), "`run` names no program").help(format!("write {example}")));
        return None;
    }
    let folder = table.entry("folder").and_then(|entry| reader.text(entry, "folder = \"model\""));
    let workers = table.entry("workers").and_then(|entry| reader.count(entry, 1, "workers = 2"));
    let batch = auto_or(reader, table, "batch", "batch = 100, or batch = \"auto\"");
    let timeout =
        table.entry("timeout").and_then(|entry| reader.number(entry, "timeout = 60, in seconds; inf waits for ever"));
    if timeout.is_some_and(|seconds| seconds <= 0.0) {
        let span = table.entry("timeout").map_or(0..0, |entry| entry.span.clone());
        reader.fault(
            Fault::new(span, "`timeout` must be above zero")
                .help("it is the longest wait for any answer, in seconds; inf waits for ever"),
        );
    }
    let tries = table.entry("tries").and_then(|entry| reader.count(entry, 1, "tries = 3"));
    let format = table.entry("format").and_then(|entry| reader.word(entry, &["text", "f64"]));
    let format = if format.as_deref() == Some("f64") { ProgramFormat::F64 } else { ProgramFormat::Text };
    let gradient = table.entry("gradient").and_then(|entry| truth(reader, entry)).unwrap_or(false);
    Some(ProgramKeys { run, folder, workers, batch, timeout, tries, format, gradient })
}

fn read_library(reader: &mut Reader<'_>, table: &Table<'_>) -> Option<Means> {
    let mut needed = |key: &str, example: &str| match table.entry(key) {
        Some(entry) => reader.text(entry, example),
        None => {
            reader.fault(
                Fault::new(table.span.clone(), format!("[library] has no `{key}`")).help(format!("write {example}")),
            );
            None
        }
    };
    let file = needed("file", "file = \"./libtank.so\"");
    let symbol = needed("symbol", "symbol = \"tank_peak\", the name of the function");
    let any_thread = match table.entry("threads") {
        None => true,
        Some(entry) if plain_number(entry.value) == Some(1.0) => false,
        Some(entry) if matches!(entry.value, DeValue::String(word) if word == "any") => true,
        Some(entry) => {
            reader.wants(
                entry,
                "\"any\" or 1",
                "threads = \"any\" if it may be called from several threads at once, else threads = 1",
            );
            return None;
        }
    };
    Some(Means::Library { file: file?, symbol: symbol?, any_thread })
}

/// `["level"]`, or `{ level = "gauge" }` where there are several data files.
fn read_rows(reader: &mut Reader<'_>, entry: &Entry<'_>) -> Vec<(Text, Option<Text>)> {
    let example = "returns_rows = [\"level\"], or with several data files returns_rows = { level = \"gauge\" }";
    if !entry.value.is_table() {
        return reader.texts(entry, example).unwrap_or_default().into_iter().map(|name| (name, None)).collect();
    }
    let Some(table) = reader.table(entry, "`returns_rows`", example) else { return Vec::new() };
    let mut rows = Vec::new();
    for entry in &table.entries {
        if let Some(file) = reader.text(entry, example) {
            let mut name = Text::unplaced(entry.key);
            name.span = entry.key_span.clone();
            rows.push((name, Some(file)));
        }
    }
    rows
}

fn auto_or(reader: &mut Reader<'_>, table: &Table<'_>, key: &str, example: &str) -> Option<u64> {
    let entry = table.entry(key)?;
    if matches!(entry.value, DeValue::String(word) if word == "auto") {
        return None;
    }
    reader.count(entry, 1, example)
}

fn truth(reader: &mut Reader<'_>, entry: &Entry<'_>) -> Option<bool> {
    match entry.value {
        DeValue::Boolean(value) => Some(*value),
        _ => {
            reader.wants(entry, "true or false", &format!("{} = true", entry.key));
            None
        }
    }
}

/// A second table of a model.
pub(crate) fn second(reader: &mut Reader<'_>, entry: &Entry<'_>, first: &OutsideSpec) {
    reader.fault(
        Fault::new(entry.key_span.clone(), "a problem has one model")
            .also(first.span.clone(), "given here already")
            .help(format!("keep one of {}", all_of(&TABLES.map(|name| format!("[{name}]")))).replace(" and ", " or ")),
    );
}
