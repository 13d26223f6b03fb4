//! The columns of a data file: which are used, which rows are kept, which cells are numbers and which are labels.

use std::collections::BTreeSet;

use super::data::RawTable;
use super::data::Rows;
use super::data::line_source;
use super::data::lines;
use super::faults::Fault;
use super::names::Given;
use super::names::Names;
use super::names::Piece;
use super::names::pieces;
use super::table::Reader;
use crate::expression::is_name;
use crate::expression::is_reserved;
use crate::expression::nearest;

/// Cells of a column, of the rows that are kept.
#[derive(Debug, Clone, PartialEq)]
pub(crate) enum Cells {
    /// Numbers; NaN where a cell is missing. The texts are kept for columns that give labels.
    Numbers(Vec<f64>, Vec<String>),
    /// Labels; an empty text where a cell is missing.
    Texts(Vec<String>),
}

/// A column that has a name in formulas.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Column {
    /// What formulas call it: `flow`, or `gauge.flow`.
    pub(crate) name: String,
    pub(crate) header: String,
    pub(crate) cells: Cells,
    /// Its number in the file, from 0.
    at: usize,
}

/// A data file, ready for use.
#[derive(Debug, Clone)]
pub(crate) struct DataTable {
    pub(crate) raw: RawTable,
    pub(crate) columns: Vec<Column>,
    /// Records kept, by their number from 0.
    pub(crate) kept: Vec<usize>,
    /// Names that formulas use for columns whose headers are no names: each with the header that is probably meant.
    pub(crate) assumed: Vec<(String, String)>,
}

/// How the formulas of a problem use a name.
#[derive(Debug, Default)]
pub(crate) struct Uses {
    names: BTreeSet<String>,
    as_labels: BTreeSet<String>,
}

impl Uses {
    /// Notes every name of a formula; in `[...]` or compared with a text in quotes it is used as labels.
    pub(crate) fn note(&mut self, formula: &str) {
        let pieces = pieces(formula);
        for (k, piece) in pieces.iter().enumerate() {
            let Piece::Name(name) = piece else { continue };
            self.names.insert((*name).to_owned());
            let before = |back: usize| k.checked_sub(back).map(|at| pieces[at]);
            let after = |on: usize| pieces.get(k + on).copied();
            let compares = |sign: Option<Piece<'_>>| matches!(sign, Some(Piece::Sign("==" | "!=")));
            let bracketed = before(1) == Some(Piece::Sign("[")) && after(1) == Some(Piece::Sign("]"));
            let compared = (compares(after(1)) && after(2) == Some(Piece::Quoted))
                || (compares(before(1)) && before(2) == Some(Piece::Quoted));
            if bracketed || compared {
                self.as_labels.insert((*name).to_owned());
            }
        }
    }

    /// Notes that a column gives the labels of an `each`.
    pub(crate) fn note_labels(&mut self, column: &str) {
        self.names.insert(column.to_owned());
        self.as_labels.insert(column.to_owned());
    }
}

/// Names, rows and cells of a file.
pub(crate) fn settle(reader: &mut Reader<'_>, names: &mut Names, raw: RawTable, uses: &Uses) -> DataTable {
    let own = raw.own_names(reader, |header| is_name(header) && !crate::expression::is_reserved(header));
    let mut named = give_names(reader, names, &raw, &own);
    let assumed = assumed(&raw, &own, uses, |name| names.has(name) || reader.faulty.iter().any(|known| known == name));
    for (at, name) in &assumed {
        named.push((*at, name.clone()));
    }
    let assumed = assumed.into_iter().map(|(at, name)| (name, raw.headers[at].clone())).collect();
    // A misspelt name is a use of the column that it is like.
    let astray: Vec<&String> = uses.names.iter().filter(|name| !names.has(name) && !is_reserved(name)).collect();
    let like = |column: &str| {
        let nearest_column = |name: &str| nearest(name, named.iter().map(|(_, column)| column.as_str()));
        astray.iter().any(|name| nearest_column(name) == Some(column))
    };
    let is_used = |name: &String| uses.names.contains(name) || like(name);
    let used: Vec<usize> = named.iter().filter(|(_, name)| is_used(name)).map(|&(at, _)| at).collect();
    let complete = raw.spec.missing.is_some() && raw.spec.rows != Some(Rows::All);
    let whole = |row: &Vec<String>| used.iter().all(|&at| !raw.is_missing(&row[at]));
    let all = 0..raw.records.len();
    let mut kept: Vec<usize> = all.clone().filter(|&row| !complete || whole(&raw.records[row].1)).collect();
    if kept.is_empty() {
        no_whole_row(reader, &raw, &named, &used);
        kept = all.collect();
    }
    let marks = marks_of(&raw, &used);
    tell_missing(reader, &raw, &kept, &named, &used);
    let mut columns = Vec::new();
    for (at, name) in named {
        let labels = uses.as_labels.contains(&name);
        let cells = read_cells(reader, &raw, &kept, (at, &name), labels, used.contains(&at).then_some(&marks));
        columns.push(Column { header: raw.headers[at].clone(), name, cells, at });
    }
    DataTable { raw, columns, kept, assumed }
}

/// Columns whose headers are no names, where a formula uses a word of the header as a name that nothing else has.
fn assumed(raw: &RawTable, own: &[Option<String>], uses: &Uses, known: impl Fn(&str) -> bool) -> Vec<(usize, String)> {
    let mut found: Vec<(usize, String)> = Vec::new();
    for name in uses.names.iter().filter(|name| !known(name) && !is_reserved(name)) {
        let (table, word) = name.rsplit_once('.').map_or((None, name.as_str()), |(table, word)| (Some(table), word));
        if table != raw.spec.name.as_deref() {
            continue;
        }
        let header = (0..raw.headers.len()).find(|&at| {
            own[at].is_none() && !found.iter().any(|(other, _)| *other == at) && is_meant(word, &raw.headers[at])
        });
        found.extend(header.map(|at| (at, name.clone())));
    }
    found
}

/// Whether a name is a word of a header, or made of words of it.
pub(crate) fn is_meant(name: &str, header: &str) -> bool {
    let (name, header) = (name.to_lowercase(), header.to_lowercase());
    let words = || header.split(|c: char| !c.is_alphanumeric()).filter(|word| word.chars().count() > 2);
    let parts = || name.split(|c: char| !c.is_alphanumeric()).filter(|part| part.chars().count() > 2);
    words().any(|word| name == word || parts().any(|part| part == word))
}

/// Every row lacks something: says which columns are to blame.
fn no_whole_row(reader: &mut Reader<'_>, raw: &RawTable, named: &[(usize, String)], used: &[usize]) {
    let message = format!("no row of `{}` has a value in every column that a formula uses", raw.shown);
    let lacking = |at: usize| raw.records.iter().filter(|(_, cells)| raw.is_missing(&cells[at])).count();
    let counts: Vec<String> = named
        .iter()
        .filter(|(at, _)| used.contains(at) && lacking(*at) > 0)
        .map(|(at, name)| format!("`{name}` in {} of {} rows", lacking(*at), raw.records.len()))
        .collect();
    let fault = Fault::new(raw.spec.file.span.clone(), message);
    let fault = fault.help(format!("missing is {}", counts.join(", ")));
    reader.fault(fault.help("write rows = \"all\" and ask present(x) in the formulas"));
}

/// What cells hold that have no value, in the files of the world.
const MARKS: [&str; 10] = ["na", "n/a", "nan", "null", "none", "-", "--", "?", ".", "missing"];

fn is_mark(cell: &str) -> bool {
    cell.is_empty() || MARKS.contains(&cell.to_lowercase().as_str())
}

/// Tells of cells without a value in columns that formulas use, where `[data]` does not say what that means: all of them
/// at once, since one line mends them all.
fn tell_missing(reader: &mut Reader<'_>, raw: &RawTable, kept: &[usize], named: &[(usize, String)], used: &[usize]) {
    if raw.spec.missing.is_some() {
        return;
    }
    let quoted: Vec<String> = marks_of(raw, used).iter().map(|mark| format!("\"{mark}\"")).collect();
    let marks = format!("[{}]", quoted.join(", "));
    for (at, name) in named.iter().filter(|(at, _)| used.contains(at)) {
        let rows: Vec<usize> = kept.iter().copied().filter(|&row| raw.is_missing(&raw.records[row].1[*at])).collect();
        let Some((&first, others)) = rows.split_first() else { continue };
        let message = format!("the column `{name}` has no value in line {} of `{}`", raw.records[first].0, raw.shown);
        let mut fault = raw.cell_fault(first, *at, message).label("empty");
        if !others.is_empty() {
            let lines = lines(others.iter().map(|&row| raw.records[row].0));
            fault = fault.help(format!("nor has it one in {lines}"));
        }
        reader.fault(fault.help(format!("fill the cell, or write missing = {marks} under [data] to drop such rows")));
    }
}

/// All that marks a missing cell in the columns that are used, and what `missing` lists already.
fn marks_of(raw: &RawTable, used: &[usize]) -> Vec<String> {
    let mut found = vec![String::new()];
    let listed = raw.spec.missing.iter().flatten();
    let cells = raw.records.iter().flat_map(|(_, cells)| used.iter().map(|&at| &cells[at]));
    for mark in listed.chain(cells.filter(|cell| is_mark(cell))) {
        if !found.contains(mark) {
            found.push(mark.clone());
        }
    }
    found
}

fn give_names(
    reader: &mut Reader<'_>,
    names: &mut Names,
    raw: &RawTable,
    own: &[Option<String>],
) -> Vec<(usize, String)> {
    let mut named = Vec::new();
    let header_line = line_source(&raw.bytes, &raw.shown, 1);
    for (at, own) in own.iter().enumerate() {
        let Some(own) = own else { continue };
        let name = raw.spec.scope_name(own);
        let renamed = raw.spec.renamed.iter().find(|(key, _)| key.value == *own);
        let given = match renamed {
            Some((key, _)) => {
                if !Names::check_spelling(reader, own, "the column", &key.span) {
                    continue;
                }
                Given::Here(key.span.clone())
            }
            None => Given::Header(header_line.clone(), super::data::cell_span(&header_line.text, at, raw.separator)),
        };
        if names.give(reader, &name, "the column", given) {
            named.push((at, name));
        }
    }
    named
}

/// Cells of column `at`. A column of numbers with a cell that is none is a fault where formulas use it as numbers; such a
/// cell is then read as missing.
fn read_cells(
    reader: &mut Reader<'_>,
    raw: &RawTable,
    kept: &[usize],
    (at, name): (usize, &str),
    as_labels: bool,
    marks: Option<&Vec<String>>,
) -> Cells {
    let is_used = marks.is_some();
    let cell = |row: usize| raw.records[row].1[at].as_str();
    let is_number = |row: usize| number(cell(row)).is_some();
    let present = || kept.iter().copied().filter(|&row| !raw.is_missing(cell(row)));
    let texts = || kept.iter().map(|&row| if raw.is_missing(cell(row)) { String::new() } else { cell(row).to_owned() });
    let value = |row: usize| if raw.is_missing(cell(row)) { f64::NAN } else { number(cell(row)).unwrap_or(f64::NAN) };
    let bad: Vec<usize> = present().filter(|&row| !is_number(row)).collect();
    let is_stray = is_used && !as_labels && present().any(is_number);
    if !bad.is_empty() && !is_stray {
        return Cells::Texts(texts().collect());
    }
    if let Some((&first, others)) = bad.split_first() {
        let line = raw.records[first].0;
        let message = match cell(first) {
            "" => format!("line {line} of `{}`, column `{name}`: the cell is empty", raw.shown),
            text => format!("line {line} of `{}`, column `{name}`: \"{text}\" is no number", raw.shown),
        };
        let fault = raw.cell_fault(first, at, message).label("not a number");
        let mut fault = match line == 2 && others.is_empty() && raw.records.len() > 1 && is_unit(cell(first)) {
            true => fault.help("a line of units has no place below the header: take the line out"),
            false => fault.help(number_help(cell(first), marks.map_or(&[], Vec::as_slice))),
        };
        if !others.is_empty() {
            let each = others.iter().take(10).map(|&row| format!("\"{}\" in line {}", cell(row), raw.records[row].0));
            let more = if others.len() > 10 { format!(" and {} more", others.len() - 10) } else { String::new() };
            fault = fault.help(format!("nor is {}{more}", each.collect::<Vec<_>>().join(", ")));
        }
        reader.fault(fault);
    }
    Cells::Numbers(kept.iter().map(|&row| value(row)).collect(), texts().collect())
}

/// Whether a cell looks like the unit of its column.
fn is_unit(cell: &str) -> bool {
    !is_mark(cell) && cell.starts_with(|c: char| c.is_alphabetic() || matches!(c, '(' | '[' | '%' | '°'))
}

fn number_help(cell: &str, marks: &[String]) -> String {
    if let Some(written) = super::written_numbers::ungrouped(cell) {
        return format!("write it without groups of thousands: {written}");
    }
    if let Some(help) = beyond_a_limit(cell) {
        return help;
    }
    let pointed = cell.replacen(',', ".", 1);
    if number(&pointed).is_some() {
        let (whole, part) = cell.split_once(',').unwrap_or((cell, ""));
        if part.len() == 3 && !whole.starts_with('0') && whole.len() <= 3 {
            return format!("write {whole}{part} for a large number, {pointed} for a fraction");
        }
        return format!("write it with a point: {pointed}");
    }
    let spaced: String = cell.chars().filter(|c| !c.is_whitespace() && *c != '\'').collect();
    if number(&spaced).is_some() {
        return format!("write it without gaps: {spaced}");
    }
    let leading: String = cell.chars().take_while(|c| c.is_ascii_digit() || matches!(c, '.' | '-' | '+')).collect();
    if number(&leading).is_some() {
        return format!("write the number alone: {leading}");
    }
    let mut all = marks.to_vec();
    if !marks.iter().any(|mark| mark == cell) {
        all.push(cell.to_owned());
    }
    let all: Vec<String> = all.iter().map(|mark| format!("\"{mark}\"")).collect();
    format!("mend the cell, or count it as missing: missing = [{}] under [data]", all.join(", "))
}

/// What to do with a reading of which only a limit is known, as `<4` or `> 10`.
fn beyond_a_limit(cell: &str) -> Option<String> {
    let limit = cell.trim_start_matches(['<', '>', '≤', '≥', '=', ' ']);
    number(limit).filter(|_| limit.len() < cell.len())?;
    let (side, function) = match cell.starts_with(['<', '≤']) {
        true => ("below", "log_normal_below((limit - mean)/sd)"),
        false => ("above", "log_normal_tail((limit - mean)/sd)"),
    };
    Some(format!(
        "it is a censored reading, known to lie {side} {limit}: leave the cell empty, put {limit} into a further column \
         `limit`, and give such rows {function}: \"Readings beyond a limit\" in docs/problem-file.md shows how. To drop them \
         instead makes the rest look {} than they are",
        if side == "below" { "larger" } else { "smaller" }
    ))
}

/// The number that a cell holds; `nan` is none.
fn number(cell: &str) -> Option<f64> {
    cell.parse::<f64>().ok().filter(|number| !number.is_nan())
}

impl Column {
    /// The labels of a column, row by row.
    pub(crate) fn labels(&self) -> &[String] {
        match &self.cells {
            Cells::Numbers(_, texts) | Cells::Texts(texts) => texts,
        }
    }

    /// Different labels in the order in which they first appear; the number of a row without one is the error.
    pub(crate) fn distinct_labels(&self) -> Result<Vec<String>, usize> {
        let mut found: Vec<String> = Vec::new();
        let mut seen = BTreeSet::new();
        for (row, label) in self.labels().iter().enumerate() {
            if label.is_empty() {
                return Err(row);
            }
            if seen.insert(label.clone()) {
                found.push(label.clone());
            }
        }
        Ok(found)
    }

    /// Its number in the file, from 0.
    pub(crate) fn place(&self) -> usize {
        self.at
    }
}
