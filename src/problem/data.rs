//! Data tables: CSV files with a header row, read once when the problem is.

use std::fs;
use std::path::Path;
use std::path::PathBuf;

use super::faults::Fault;
use super::faults::Source;
use super::names::all_of;
use super::table::Entry;
use super::table::Reader;
use super::table::Table;
use super::text_value::Text;
use crate::expression::nearest;

/// Which rows are kept.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Rows {
    /// Those without a missing cell in a column that a formula uses.
    Complete,
    /// All.
    All,
}

/// A data file as the problem states it.
#[derive(Debug, Clone)]
pub(crate) struct DataSpec {
    /// `gauge` of `[data.gauge]`; none for a plain `[data]`.
    pub(crate) name: Option<String>,
    pub(crate) file: Text,
    /// Names for headers: (name, its place, header).
    pub(crate) renamed: Vec<(Text, Text)>,
    pub(crate) missing: Option<Vec<String>>,
    pub(crate) rows: Option<Rows>,
    pub(crate) key_span: std::ops::Range<usize>,
}

impl DataSpec {
    /// What formulas call the column with this header, if it is a name.
    pub(crate) fn scope_name(&self, own: &str) -> String {
        self.name.as_ref().map_or_else(|| own.to_owned(), |table| format!("{table}.{own}"))
    }
}

/// The cells of a file, as texts.
#[derive(Debug, Clone)]
pub(crate) struct RawTable {
    pub(crate) spec: DataSpec,
    /// The file as messages call it.
    pub(crate) shown: String,
    pub(crate) path: PathBuf,
    pub(crate) bytes: Vec<u8>,
    pub(crate) headers: Vec<String>,
    /// Row by row: the line it begins on, from 1, and its cells.
    pub(crate) records: Vec<(usize, Vec<String>)>,
    /// What stands between the cells: a comma, or else it was told.
    pub(crate) separator: char,
}

const KEYS: [&str; 4] = ["file", "names", "missing", "rows"];

/// Reads `[data]` or the tables of `[data.NAME]`.
pub(crate) fn read_specs(reader: &mut Reader<'_>, table: &Table<'_>) -> Vec<DataSpec> {
    let own_key = |entry: &Entry<'_>| KEYS.contains(&entry.key) || !entry.value.is_table();
    if table.entries.iter().any(own_key) {
        return read_spec(reader, table, None).into_iter().collect();
    }
    let mut specs = Vec::new();
    for entry in &table.entries {
        let name = format!("[data.{}]", entry.key);
        match reader.table(entry, &name, &format!("{name} with `file = \"...\"`")) {
            Some(inner) => specs.extend(read_spec(reader, &inner, Some(entry.key.to_owned()))),
            None => reader.open.push(entry.key.to_owned()),
        }
    }
    if table.entries.is_empty() {
        reader.open.push(String::new());
        reader.fault(
            Fault::new(table.span.clone(), "[data] names no file")
                .help("write file = \"readings.csv\", a path from the problem file's folder"),
        );
    }
    specs
}

fn read_spec(reader: &mut Reader<'_>, table: &Table<'_>, name: Option<String>) -> Option<DataSpec> {
    let file = table.entry_or_slip("file", &KEYS).or_else(|| {
        table.entries.iter().find(|entry| ["path", "filename", "csv", "source", "from"].contains(&entry.key))
    });
    if let Some(entry) = file.filter(|entry| nearest(entry.key, KEYS).is_none()) {
        let message = format!("`{}` is no key of {}", entry.key, table.name);
        reader.fault(Fault::new(entry.key_span.clone(), message).label("unknown key").help("did you mean `file`?"));
    }
    for entry in table.entries.iter().filter(|entry| !KEYS.contains(&entry.key)) {
        if file.is_none_or(|file| file.key != entry.key) || nearest(entry.key, KEYS).is_some() {
            reader.unknown_key(entry, &table.name, &KEYS);
        }
    }
    let Some(entry) = file else {
        reader.fault(
            Fault::new(table.span.clone(), format!("{} names no file", table.name))
                .help("write file = \"readings.csv\", a path from the problem file's folder"),
        );
        reader.open.push(name.unwrap_or_default());
        return None;
    };
    let Some(file) = reader.text(entry, "file = \"readings.csv\"") else {
        reader.open.push(name.unwrap_or_default());
        return None;
    };
    let mut renamed = Vec::new();
    if let Some(entry) = table.entry_or_slip("names", &KEYS) {
        let example = "names = { flow = \"Flow (m3/s)\" }";
        for entry in reader.table(entry, "`names`", example).map(|t| t.entries).unwrap_or_default() {
            if let Some(header) = reader.text(&entry, example) {
                let mut key = Text::unplaced(entry.key);
                key.span = entry.key_span.clone();
                renamed.push((key, header));
            } else {
                reader
                    .faulty
                    .push(name.as_ref().map_or_else(|| entry.key.into(), |name| format!("{name}.{}", entry.key)));
            }
        }
    }
    let missing = table.entry_or_slip("missing", &KEYS);
    let missing = missing.map(|entry| reader.texts(entry, "missing = [\"\", \"NA\"]").unwrap_or_default());
    let missing = missing.map(|texts| texts.into_iter().map(|text| text.value).collect());
    let rows = table.entry_or_slip("rows", &KEYS).and_then(|entry| reader.word(entry, &["complete", "all"]));
    let rows = rows.map(|word| if word == "all" { Rows::All } else { Rows::Complete });
    Some(DataSpec { name, file, renamed, missing, rows, key_span: table.span.clone() })
}

/// Reads the file that `spec` names, relative to `folder`.
pub(crate) fn load(reader: &mut Reader<'_>, spec: &DataSpec, folder: &Path) -> Option<RawTable> {
    let table = read_file(reader, spec, folder);
    if table.is_none() {
        reader.open.push(spec.name.clone().unwrap_or_default());
    }
    table
}

fn read_file(reader: &mut Reader<'_>, spec: &DataSpec, folder: &Path) -> Option<RawTable> {
    let path = folder.join(&spec.file.value);
    let shown = spec.file.value.clone();
    match fs::read(&path) {
        Ok(bytes) => parse_bytes(reader, spec, shown, path, bytes),
        Err(error) => {
            let message = format!("the data file `{shown}` cannot be read: {}", reason(&error));
            let fault = Fault::new(spec.file.span.clone(), message);
            if error.kind() != std::io::ErrorKind::NotFound {
                reader.fault(fault.help("check the file; a path is taken from the folder of the problem file"));
                return None;
            }
            let (help, meant) = not_found(&path, folder);
            reader.fault(fault.help(help));
            // The file that is meant is looked at as if it had been named.
            let meant = meant?;
            let bytes = fs::read(&meant).ok()?;
            let shown = meant.strip_prefix(folder).unwrap_or(&meant).display().to_string();
            parse_bytes(reader, spec, shown, meant, bytes)
        }
    }
}

/// Where a file was looked for, what is there, and the file that is meant.
fn not_found(path: &Path, folder: &Path) -> (String, Option<PathBuf>) {
    let place = path.parent().unwrap_or(Path::new(""));
    let shown = if place.as_os_str().is_empty() { ".".into() } else { place.display().to_string() };
    let listing = fs::read_dir(if place.as_os_str().is_empty() { Path::new(".") } else { place });
    let Ok(listing) = listing else {
        let from = if folder.as_os_str().is_empty() { ".".into() } else { folder.display().to_string() };
        return (
            format!("there is no folder `{shown}`; a path is taken from the problem file's folder, `{from}`"),
            None,
        );
    };
    let mut names: Vec<String> = listing
        .filter_map(|entry| entry.ok()?.file_name().into_string().ok())
        .filter(|name| name.to_lowercase().ends_with(".csv"))
        .collect();
    names.sort();
    let own = path.file_name().map(|name| name.to_string_lossy().into_owned()).unwrap_or_default();
    let mut meant = nearest(&own, names.iter().map(String::as_str));
    if names.len() == 1 {
        meant = names.first().map(String::as_str);
    }
    let place_of = |name: &str| place.join(name);
    let looked = format!("it was looked for in the folder `{shown}`");
    let help = match (meant, names.as_slice()) {
        (Some(meant), _) => {
            // A path to write, from the folder of the problem file.
            let full = place_of(meant);
            let written = full.strip_prefix(folder).unwrap_or(&full).display().to_string();
            format!("did you mean \"{written}\"? {}", looked.replacen("it", "It", 1))
        }
        (None, []) => format!("{looked}, which has no CSV file; a path is taken from the problem file's folder"),
        (None, names) => {
            let some: Vec<&String> = names.iter().take(8).collect();
            let more = if names.len() > some.len() { ", ..." } else { "" };
            let some: Vec<&str> = some.iter().map(|name| name.as_str()).collect();
            format!("{looked}; CSV files there: {}{more}", some.join(", "))
        }
    };
    let meant = meant.map(place_of);
    (help, meant)
}

fn parse_bytes(
    reader: &mut Reader<'_>,
    spec: &DataSpec,
    shown: String,
    path: PathBuf,
    bytes: Vec<u8>,
) -> Option<RawTable> {
    if let Err(error) = std::str::from_utf8(&bytes) {
        let line = 1 + bytes[..error.valid_up_to()].iter().filter(|&&byte| byte == b'\n').count();
        reader.fault(
            Fault::new(spec.file.span.clone(), format!("line {line} of `{shown}` is not UTF-8 text"))
                .help("save the file with the encoding UTF-8"),
        );
        return None;
    }
    parse_records(reader, spec.clone(), shown, path, bytes)
}

pub(crate) fn reason(error: &std::io::Error) -> String {
    match error.kind() {
        std::io::ErrorKind::NotFound => "there is no such file".into(),
        std::io::ErrorKind::PermissionDenied => "permission is denied".into(),
        std::io::ErrorKind::IsADirectory => "it is a folder".into(),
        _ => error.to_string(),
    }
}

fn parse_records(
    reader: &mut Reader<'_>,
    spec: DataSpec,
    shown: String,
    path: PathBuf,
    bytes: Vec<u8>,
) -> Option<RawTable> {
    let separator = separator(&bytes);
    let mut csv = csv::ReaderBuilder::new()
        .trim(csv::Trim::All)
        .flexible(true)
        .delimiter(separator as u8)
        .from_reader(bytes.as_slice());
    let headers: Vec<String> = match csv.headers() {
        Ok(headers) => headers.iter().map(str::to_owned).collect(),
        Err(error) => {
            reader
                .fault(Fault::new(spec.file.span.clone(), format!("the header of `{shown}` cannot be read: {error}")));
            return None;
        }
    };
    let mut all: Vec<(usize, Vec<String>)> = Vec::new();
    for record in csv.records() {
        match record {
            Ok(record) => {
                let line = record.position().map_or(0, |position| position.line() as usize);
                all.push((line, record.iter().map(str::to_owned).collect()));
            }
            Err(error) => {
                reader.fault(Fault::new(spec.file.span.clone(), format!("`{shown}` cannot be read: {error}")));
                return None;
            }
        }
    }
    if separator != ',' {
        other_separator(reader, &bytes, &shown, separator, &mut all);
    }
    if headers.iter().all(|header| header.is_empty() || header.parse::<f64>().is_ok()) {
        let fault = Fault::new(0..usize::MAX, format!("line 1 of `{shown}` holds no names of columns"))
            .within(line_source(&bytes, &shown, 1));
        let mut fault = fault.help("put a line with the name of each column before the first row: time,flow");
        let empty = all.iter().filter(|(_, cells)| cells.iter().any(String::is_empty)).map(|(line, _)| *line);
        if empty.clone().next().is_some() {
            fault = fault.help(format!(
                "cells are empty in {}: fill them, or write missing = [\"\"] under [data] to drop such rows",
                lines(empty)
            ));
        }
        reader.fault(fault);
        return None;
    }
    if all.is_empty() {
        reader.fault(
            Fault::new(spec.file.span.clone(), format!("`{shown}` has no row below its header"))
                .help("the first line holds the names of the columns, each further line a row"),
        );
        return None;
    }
    let (records, ragged): (Vec<_>, Vec<_>) = all.into_iter().partition(|(_, cells)| cells.len() == headers.len());
    tell_ragged(reader, &bytes, &shown, &headers, &ragged);
    if records.is_empty() {
        // No row can be used: its columns are known all the same.
        for header in headers.iter().chain(spec.renamed.iter().map(|(name, _)| &name.value)) {
            reader.faulty.push(spec.scope_name(header));
        }
        return None;
    }
    Some(RawTable { spec, shown, path, bytes, headers, records, separator })
}

/// What stands between the cells of the header: the one of comma, semicolon and tab that stands there most often, the
/// comma before the others.
fn separator(bytes: &[u8]) -> char {
    let header = bytes.split(|&byte| byte == b'\n').next().unwrap_or_default();
    let count = |wanted: u8| header.iter().filter(|&&byte| byte == wanted).count();
    let mut found = (b',', count(b','));
    for other in [b';', b'\t'] {
        if count(other) > found.1 {
            found = (other, count(other));
        }
    }
    found.0 as char
}

/// Tells of semicolons or tabs, and of the decimal commas that go with them; these are read as points.
fn other_separator(
    reader: &mut Reader<'_>,
    bytes: &[u8],
    shown: &str,
    separator: char,
    rows: &mut [(usize, Vec<String>)],
) {
    let source = line_source(bytes, shown, 1);
    let at = source.text.find(separator).unwrap_or(0);
    let word = if separator == ';' { "semicolons" } else { "tabs" };
    let fault = Fault::new(at..at + 1, format!("the columns of `{shown}` are separated by {word}, not by commas"))
        .label("here, for one");
    let mut example = None;
    for (line, cells) in rows {
        for cell in cells {
            let pointed = cell.replacen(',', ".", 1);
            if cell.contains(',') && pointed.parse::<f64>().is_ok() {
                example.get_or_insert((*line, cell.clone(), pointed.clone()));
                *cell = pointed;
            }
        }
    }
    let name = if separator == ';' { "each `;`" } else { "each tab" };
    let help = match example {
        Some((line, cell, pointed)) => format!(
            "first write the numbers with points, {pointed} for {cell} (line {line}) and so on, then a comma for {name}, or \
             save the sheet anew as CSV with commas and decimal points"
        ),
        None => format!("write a comma for {name}, in the header and in every row"),
    };
    reader.fault(fault.within(source).help(help));
}

/// Tells of rows that do not have as many cells as the header: the first of them, and where the others are.
fn tell_ragged(
    reader: &mut Reader<'_>,
    bytes: &[u8],
    shown: &str,
    headers: &[String],
    ragged: &[(usize, Vec<String>)],
) {
    let Some((line, row)) = ragged.first() else { return };
    let fault = Fault::new(
        0..usize::MAX,
        format!("line {line} of `{shown}` has {}, the header has {}", cells(row.len()), headers.len()),
    );
    let mut fault = fault.within(line_source(bytes, shown, *line)).help(row_length_help(headers, row));
    if ragged.len() > 1 {
        fault = fault.help(format!("the same is wrong in {}", lines(ragged[1..].iter().map(|(line, _)| *line))));
    }
    reader.fault(fault);
}

/// "line 7", or "lines 7, 12 and 30"; no more than ten of them.
pub(crate) fn lines(found: impl Iterator<Item = usize>) -> String {
    let all: Vec<String> = found.map(|line| line.to_string()).collect();
    match all.as_slice() {
        [one] => format!("line {one}"),
        [first @ .., last] if all.len() <= 10 => format!("lines {} and {last}", first.join(", ")),
        _ => format!("lines {} and {} more", all[..all.len().min(10)].join(", "), all.len().saturating_sub(10)),
    }
}

fn cells(n: usize) -> String {
    if n == 1 { "1 cell".into() } else { format!("{n} cells") }
}

fn row_length_help(headers: &[String], row: &[String]) -> String {
    let columns = all_of(headers);
    if row.len() < headers.len() {
        return format!("the columns are {columns}; leave a cell empty rather than out");
    }
    if row[headers.len()..].iter().all(String::is_empty) {
        return "take away the commas at its end".into();
    }
    // 600,0,21: the digits after a decimal comma are a cell of their own.
    let is_digits = |text: &String| !text.is_empty() && text.chars().all(|c| c.is_ascii_digit());
    let pair = row.windows(2).rfind(|pair| pair[0].parse::<f64>().is_ok() && is_digits(&pair[1]));
    match pair {
        Some([whole, part]) => format!(
            "the columns are {columns}; a decimal comma is written as a point, {whole}.{part} for {whole},{part}, and a text \
             with a comma stands in double quotes"
        ),
        _ => format!("the columns are {columns}; a cell that holds a comma needs double quotes around it"),
    }
}

/// Line `line` of a data file, to point into.
pub(crate) fn line_source(bytes: &[u8], shown: &str, line: usize) -> Source {
    let text = String::from_utf8_lossy(bytes);
    let text = text.lines().nth(line.saturating_sub(1)).unwrap_or("").to_owned();
    Source { file: shown.to_owned(), text, first_line: line }
}

impl RawTable {
    /// The name a column goes by in `names` or by its own header, and where that stands.
    ///
    /// Columns whose header is no name, and that `names` does not mention, have none.
    pub(crate) fn own_names(&self, reader: &mut Reader<'_>, is_name: impl Fn(&str) -> bool) -> Vec<Option<String>> {
        let mut names: Vec<Option<String>> =
            self.headers.iter().map(|header| is_name(header).then(|| header.clone())).collect();
        for (name, header) in &self.spec.renamed {
            let found: Vec<usize> = (0..self.headers.len()).filter(|&k| self.headers[k] == header.value).collect();
            match found.as_slice() {
                [one] => names[*one] = Some(name.value.clone()),
                [] => {
                    let fault = Fault::new(
                        header.span.clone(),
                        format!("`{}` has no column with the header \"{}\"", self.shown, header.value),
                    );
                    let known = self.headers.iter().map(String::as_str);
                    let like = || {
                        let mut like =
                            self.headers.iter().filter(|known| super::columns::is_meant(&header.value, known));
                        like.next().filter(|_| like.next().is_none()).map(String::as_str)
                    };
                    match nearest(&header.value, known).or_else(like) {
                        Some(near) => {
                            reader.fault(fault.help(format!("did you mean \"{near}\"?")));
                            let at = self.headers.iter().position(|known| known == near);
                            if let Some(at) = at {
                                names[at] = Some(name.value.clone());
                            }
                        }
                        None => {
                            reader.fault(fault.help(format!("its headers are {}", all_of(&self.headers))));
                            reader.faulty.push(self.spec.scope_name(&name.value));
                        }
                    }
                }
                _ => reader.fault(
                    Fault::new(
                        header.span.clone(),
                        format!("`{}` has several columns \"{}\"", self.shown, header.value),
                    )
                    .help("give each column of the file its own header"),
                ),
            }
        }
        names
    }

    /// Whether a cell counts as missing.
    pub(crate) fn is_missing(&self, cell: &str) -> bool {
        match &self.spec.missing {
            Some(texts) => texts.iter().any(|text| text.trim() == cell),
            None => cell.is_empty(),
        }
    }

    /// A fault at a cell: row `row` (from 0, of all records), column `column`.
    pub(crate) fn cell_fault(&self, row: usize, column: usize, message: String) -> Fault {
        let (line, _) = self.records[row];
        let source = line_source(&self.bytes, &self.shown, line);
        let span = cell_span(&source.text, column, self.separator);
        Fault::new(span, message).within(source)
    }
}

/// Bytes of cell `column` of a line, without the blanks around it.
pub(crate) fn cell_span(line: &str, column: usize, separator: char) -> std::ops::Range<usize> {
    let (mut start, mut cell, mut quoted) = (0, 0, false);
    for (at, character) in line.char_indices() {
        match character {
            '"' => quoted = !quoted,
            c if c == separator && !quoted => {
                if cell == column {
                    return trimmed(line, start, at);
                }
                cell += 1;
                start = at + 1;
            }
            _ => {}
        }
    }
    trimmed(line, start, line.len())
}

fn trimmed(line: &str, start: usize, end: usize) -> std::ops::Range<usize> {
    let cell = &line[start..end];
    let from = start + cell.len() - cell.trim_start().len();
    from..(from + cell.trim().len())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn cells_are_found_in_their_line() {
        let line = "12.5, \"a, b\" ,x,";
        assert_eq!(&line[cell_span(line, 0, ',')], "12.5");
        assert_eq!(&line[cell_span(line, 1, ',')], "\"a, b\"");
        assert_eq!(&line[cell_span(line, 2, ',')], "x");
        assert_eq!(cell_span(line, 3, ','), 16..16);
    }
}
