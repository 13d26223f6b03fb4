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
        if let Some(inner) = reader.table(entry, &name, &format!("{name} with `file = \"...\"`")) {
            specs.extend(read_spec(reader, &inner, Some(entry.key.to_owned())));
        }
    }
    if specs.is_empty() && reader.faults.is_empty() {
        reader.fault(
            Fault::new(table.span.clone(), "[data] names no file")
                .help("write file = \"readings.csv\", a path from the problem file's folder"),
        );
    }
    specs
}

fn read_spec(reader: &mut Reader<'_>, table: &Table<'_>, name: Option<String>) -> Option<DataSpec> {
    reader.only(table, &KEYS);
    let Some(entry) = table.entry("file") else {
        reader.fault(
            Fault::new(table.span.clone(), format!("{} names no file", table.name))
                .help("write file = \"readings.csv\", a path from the problem file's folder"),
        );
        return None;
    };
    let file = reader.text(entry, "file = \"readings.csv\"");
    let mut renamed = Vec::new();
    if let Some(entry) = table.entry("names") {
        let example = "names = { flow = \"Flow (m3/s)\" }";
        for entry in reader.table(entry, "`names`", example).map(|t| t.entries).unwrap_or_default() {
            if let Some(header) = reader.text(&entry, example) {
                let mut key = Text::unplaced(entry.key);
                key.span = entry.key_span.clone();
                renamed.push((key, header));
            }
        }
    }
    let missing = table.entry("missing").and_then(|entry| reader.texts(entry, "missing = [\"\", \"NA\"]"));
    let missing = missing.map(|texts| texts.into_iter().map(|text| text.value).collect());
    let rows = table.entry("rows").and_then(|entry| reader.word(entry, &["complete", "all"]));
    let rows = rows.map(|word| if word == "all" { Rows::All } else { Rows::Complete });
    Some(DataSpec { name, file: file?, renamed, missing, rows, key_span: table.span.clone() })
}

/// Reads the file that `spec` names, relative to `folder`.
pub(crate) fn load(reader: &mut Reader<'_>, spec: &DataSpec, folder: &Path) -> Option<RawTable> {
    let path = folder.join(&spec.file.value);
    let shown = spec.file.value.clone();
    let bytes = match fs::read(&path) {
        Ok(bytes) => bytes,
        Err(error) => {
            reader.fault(
                Fault::new(
                    spec.file.span.clone(),
                    format!("the data file `{shown}` cannot be read: {}", reason(&error)),
                )
                .help("a path is taken from the folder of the problem file"),
            );
            return None;
        }
    };
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
    let mut csv = csv::ReaderBuilder::new().trim(csv::Trim::All).flexible(true).from_reader(bytes.as_slice());
    let headers: Vec<String> = match csv.headers() {
        Ok(headers) => headers.iter().map(str::to_owned).collect(),
        Err(error) => {
            reader
                .fault(Fault::new(spec.file.span.clone(), format!("the header of `{shown}` cannot be read: {error}")));
            return None;
        }
    };
    if headers.len() == 1 && (headers[0].contains(';') || headers[0].contains('\t')) {
        reader.fault(
            Fault::new(spec.file.span.clone(), format!("the columns of `{shown}` are not separated by commas"))
                .help("save the file with commas between the columns and points in the numbers"),
        );
        return None;
    }
    let mut records = Vec::new();
    for record in csv.records() {
        let record = match record {
            Ok(record) => record,
            Err(error) => {
                reader.fault(Fault::new(spec.file.span.clone(), format!("`{shown}` cannot be read: {error}")));
                return None;
            }
        };
        let line = record.position().map_or(0, |position| position.line() as usize);
        if record.len() != headers.len() {
            let fault = Fault::new(
                0..usize::MAX,
                format!("line {line} of `{shown}` has {}, the header has {}", cells(record.len()), headers.len()),
            );
            let source = line_source(&bytes, &shown, line);
            reader.fault(fault.within(source).help(row_length_help(&headers, record.len())));
            return None;
        }
        records.push((line, record.iter().map(str::to_owned).collect()));
    }
    if records.is_empty() {
        reader.fault(
            Fault::new(spec.file.span.clone(), format!("`{shown}` has no row below its header"))
                .help("the first line holds the names of the columns, each further line a row"),
        );
        return None;
    }
    Some(RawTable { spec, shown, path, bytes, headers, records })
}

fn cells(n: usize) -> String {
    if n == 1 { "1 cell".into() } else { format!("{n} cells") }
}

fn row_length_help(headers: &[String], found: usize) -> String {
    if found < headers.len() {
        format!("the columns are {}; leave a cell empty rather than out", all_of(headers))
    } else {
        "a cell that holds a comma needs double quotes around it".into()
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
                    let help = nearest(&header.value, known).map_or_else(
                        || format!("its headers are {}", all_of(&self.headers)),
                        |near| format!("did you mean \"{near}\"?"),
                    );
                    reader.fault(fault.help(help));
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
        let span = cell_span(&source.text, column);
        Fault::new(span, message).within(source)
    }
}

/// Bytes of cell `column` of a line, without the blanks around it.
pub(crate) fn cell_span(line: &str, column: usize) -> std::ops::Range<usize> {
    let (mut start, mut cell, mut quoted) = (0, 0, false);
    for (at, character) in line.char_indices() {
        match character {
            '"' => quoted = !quoted,
            ',' if !quoted => {
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
        assert_eq!(&line[cell_span(line, 0)], "12.5");
        assert_eq!(&line[cell_span(line, 1)], "\"a, b\"");
        assert_eq!(&line[cell_span(line, 2)], "x");
        assert_eq!(cell_span(line, 3), 16..16);
    }
}
