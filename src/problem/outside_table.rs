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

/// Reads one of the tables, the one that is `meant`. What is wrong in it is told; the names of what the model returns stay
/// known as far as they can be read.
pub(crate) fn read(reader: &mut Reader<'_>, meant: &str, entry: &Entry<'_>, table: &Table<'_>) -> OutsideSpec {
    let (known, title): (&[&str], &'static str) = match meant {
        "program" => (&PROGRAM, "[program]"),
        "library" => (&LIBRARY, "[library]"),
        _ => (&COMMON, "[exchange]"),
    };
    reader.only(table, known);
    let keys = Keys { table, known };
    let means = match meant {
        "program" => read_program(reader, &keys).map(Means::Program),
        "library" => read_library(reader, &keys),
        _ => Some(Means::Exchange),
    };
    let takes = read_takes(reader, &keys);
    let returns =
        read_returned(reader, keys.entry("returns"), |reader, entry| reader.texts(entry, "returns = [\"peak_level\"]"));
    let returns_rows = read_returned(reader, keys.entry("returns_rows"), read_rows);
    let empty = returns.as_ref().is_some_and(Vec::is_empty) && returns_rows.as_ref().is_some_and(Vec::is_empty);
    if empty {
        reader.fault(
            Fault::new(entry.key_span.clone(), format!("{title} does not say what the model returns"))
                .help("write returns = [\"peak_level\"]: the names under which formulas use its values, in order"),
        );
    }
    if empty || returns.is_none() || returns_rows.is_none() {
        // Names that nothing else has may be those of what it returns.
        reader.open.push(String::new());
    }
    let spec = OutsideSpec {
        // What stands in is never asked: there is a fault.
        means: means.unwrap_or(Means::Exchange),
        table: title,
        span: entry.key_span.clone(),
        takes,
        returns: returns.unwrap_or_default(),
        returns_rows: returns_rows.unwrap_or_default(),
    };
    check_gradient(reader, &keys, &spec);
    spec
}

/// A table with the keys that it may have: one that is misspelt is read as the one that is meant.
struct Keys<'t, 'a> {
    table: &'t Table<'a>,
    known: &'t [&'t str],
}

impl<'a> Keys<'_, 'a> {
    fn entry(&self, key: &str) -> Option<&Entry<'a>> {
        self.table.entry_or_slip(key, self.known)
    }
}

fn read_takes(reader: &mut Reader<'_>, keys: &Keys<'_, '_>) -> Option<Vec<Text>> {
    let entry = keys.entry("takes")?;
    let takes = reader.texts(entry, "takes = [\"inflow\", \"gate_level\"]");
    match &takes {
        None => reader.mention(entry.value),
        Some(takes) if takes.is_empty() => reader.fault(
            Fault::new(entry.span.clone(), "the model takes nothing")
                .help("name its inputs in order, or leave `takes` out: then it takes all variables"),
        ),
        Some(_) => {}
    }
    takes
}

/// A list of what the model returns: empty where it is not there, none where it cannot be read.
fn read_returned<T>(
    reader: &mut Reader<'_>,
    entry: Option<&Entry<'_>>,
    read: impl FnOnce(&mut Reader<'_>, &Entry<'_>) -> Option<Vec<T>>,
) -> Option<Vec<T>> {
    entry.map_or(Some(Vec::new()), |entry| read(reader, entry))
}

fn check_gradient(reader: &mut Reader<'_>, keys: &Keys<'_, '_>, spec: &OutsideSpec) {
    let gradient = matches!(&spec.means, Means::Program(program) if program.gradient);
    if gradient && (spec.returns.len() != 1 || !spec.returns_rows.is_empty()) {
        let span = keys.entry("gradient").map_or(0..0, |entry| entry.span.clone());
        reader.fault(
            Fault::new(span, "derivatives belong to one value")
                .help("keep one name in `returns`, or write gradient = false"),
        );
    }
}

fn read_program(reader: &mut Reader<'_>, keys: &Keys<'_, '_>) -> Option<ProgramKeys> {
    let example = "run = [\"python3\", \"tank.py\"]";
    let Some(entry) = keys.entry("run") else {
        reader.fault(
            Fault::new(keys.table.span.clone(), "[program] does not say what to run").help(format!("write {example}")),
        );
        return None;
    };
    let run = reader.texts(entry, example)?;
    if run.first().is_none_or(|program| program.value.is_empty()) {
        reader.fault(Fault::new(entry.span.clone(), "`run` names no program").help(format!("write {example}")));
        return None;
    }
    let folder = keys.entry("folder").and_then(|entry| reader.text(entry, "folder = \"model\""));
    let workers = keys.entry("workers").and_then(|entry| reader.count(entry, 1, "workers = 2"));
    let batch = auto_or(reader, keys, "batch", "batch = 100, or batch = \"auto\"");
    let timeout =
        keys.entry("timeout").and_then(|entry| reader.number(entry, "timeout = 60, in seconds; inf waits for ever"));
    if timeout.is_some_and(|seconds| seconds <= 0.0) {
        let span = keys.entry("timeout").map_or(0..0, |entry| entry.span.clone());
        reader.fault(
            Fault::new(span, "`timeout` must be above zero")
                .help("it is the longest wait for any answer, in seconds; inf waits for ever"),
        );
    }
    let tries = keys.entry("tries").and_then(|entry| reader.count(entry, 1, "tries = 3"));
    let format = keys.entry("format").and_then(|entry| reader.word(entry, &["text", "f64"]));
    let format = if format.as_deref() == Some("f64") { ProgramFormat::F64 } else { ProgramFormat::Text };
    let gradient = keys.entry("gradient").and_then(|entry| truth(reader, entry)).unwrap_or(false);
    Some(ProgramKeys { run, folder, workers, batch, timeout, tries, format, gradient })
}

fn read_library(reader: &mut Reader<'_>, keys: &Keys<'_, '_>) -> Option<Means> {
    let mut needed = |key: &str, example: &str| match keys.entry(key) {
        Some(entry) => reader.text(entry, example),
        None => {
            reader.fault(
                Fault::new(keys.table.span.clone(), format!("[library] has no `{key}`"))
                    .help(format!("write {example}")),
            );
            None
        }
    };
    let file = needed("file", "file = \"./libtank.so\"");
    let symbol = needed("symbol", "symbol = \"tank_peak\", the name of the function");
    let any_thread = match keys.entry("threads") {
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
fn read_rows(reader: &mut Reader<'_>, entry: &Entry<'_>) -> Option<Vec<(Text, Option<Text>)>> {
    let example = "returns_rows = [\"level\"], or with several data files returns_rows = { level = \"gauge\" }";
    if !entry.value.is_table() {
        return Some(reader.texts(entry, example)?.into_iter().map(|name| (name, None)).collect());
    }
    let table = reader.table(entry, "`returns_rows`", example)?;
    let mut rows = Vec::new();
    for entry in &table.entries {
        let Some(file) = reader.text(entry, example) else {
            reader.faulty.push(entry.key.to_owned());
            continue;
        };
        let mut name = Text::unplaced(entry.key);
        name.span = entry.key_span.clone();
        rows.push((name, Some(file)));
    }
    Some(rows)
}

fn auto_or(reader: &mut Reader<'_>, keys: &Keys<'_, '_>, key: &str, example: &str) -> Option<u64> {
    let entry = keys.entry(key)?;
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

/// Leaves a table of a model unread; its names may be used elsewhere.
pub(crate) fn leave(reader: &mut Reader<'_>, table: &Table<'_>) {
    table.entries.iter().for_each(|entry| reader.mention(entry.value));
    reader.open.push(String::new());
}
