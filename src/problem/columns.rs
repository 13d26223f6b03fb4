//! The columns of a data file: which are used, which rows are kept, which cells are numbers and which are labels.

use std::collections::BTreeSet;

use super::data::RawTable;
use super::data::Rows;
use super::data::line_source;
use super::names::Given;
use super::names::Names;
use super::names::Piece;
use super::names::pieces;
use super::table::Reader;
use crate::expression::is_name;

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
pub(crate) fn settle(reader: &mut Reader<'_>, names: &mut Names, raw: RawTable, uses: &Uses) -> Option<DataTable> {
    let own = raw.own_names(reader, |header| is_name(header) && !crate::expression::is_reserved(header));
    let named = give_names(reader, names, &raw, &own);
    let used: Vec<usize> = named.iter().filter(|(_, name)| uses.names.contains(name)).map(|&(at, _)| at).collect();
    let complete = raw.spec.missing.is_some() && raw.spec.rows != Some(Rows::All);
    let whole = |row: &Vec<String>| used.iter().all(|&at| !raw.is_missing(&row[at]));
    let kept: Vec<usize> = (0..raw.records.len()).filter(|&row| !complete || whole(&raw.records[row].1)).collect();
    if kept.is_empty() {
        let message = format!("no row of `{}` has a value in every column that a formula uses", raw.shown);
        let fault = super::faults::Fault::new(raw.spec.file.span.clone(), message);
        reader.fault(fault.help("write rows = \"all\" and ask present(x) in the formulas"));
        return None;
    }
    let before = reader.faults.len();
    let mut columns = Vec::new();
    for (at, name) in named {
        let labels = uses.as_labels.contains(&name);
        let is_used = used.contains(&at);
        if let Some(cells) = read_cells(reader, &raw, &kept, at, &name, labels, is_used) {
            columns.push(Column { header: raw.headers[at].clone(), name, cells, at });
        }
    }
    (reader.faults.len() == before).then_some(DataTable { raw, columns, kept })
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
            None => Given::Header(header_line.clone(), super::data::cell_span(&header_line.text, at)),
        };
        if names.give(reader, &name, "the column", given) {
            named.push((at, name));
        }
    }
    named
}

/// Cells of column `at`. A column of numbers with a cell that is none is a fault where formulas use it as numbers.
fn read_cells(
    reader: &mut Reader<'_>,
    raw: &RawTable,
    kept: &[usize],
    at: usize,
    name: &str,
    as_labels: bool,
    is_used: bool,
) -> Option<Cells> {
    let cell = |row: usize| raw.records[row].1[at].as_str();
    let is_number = |row: usize| number(cell(row)).is_some();
    let missing = kept.iter().find(|&&row| raw.is_missing(cell(row)));
    if let Some(&row) = missing.filter(|_| is_used && raw.spec.missing.is_none()) {
        let line = raw.records[row].0;
        let message = format!("the column `{name}` has no value in line {line} of `{}`", raw.shown);
        let fault = raw.cell_fault(row, at, message).label("empty");
        reader.fault(fault.help("fill the cell, or write missing = [\"\"] under [data] to drop such rows"));
        return None;
    }
    let present = || kept.iter().copied().filter(|&row| !raw.is_missing(cell(row)));
    let texts = || kept.iter().map(|&row| if raw.is_missing(cell(row)) { String::new() } else { cell(row).to_owned() });
    if present().all(is_number) {
        let numbers = kept
            .iter()
            .map(|&row| if raw.is_missing(cell(row)) { f64::NAN } else { number(cell(row)).unwrap_or(f64::NAN) });
        return Some(Cells::Numbers(numbers.collect(), texts().collect()));
    }
    let bad = present().find(|&row| !is_number(row));
    if let Some(row) = bad.filter(|_| is_used && !as_labels && present().any(is_number)) {
        let line = raw.records[row].0;
        let message = format!("line {line} of `{}`, column `{name}`: \"{}\" is no number", raw.shown, cell(row));
        let fault = raw.cell_fault(row, at, message).label("not a number");
        reader.fault(fault.help(number_help(cell(row))));
        return None;
    }
    Some(Cells::Texts(texts().collect()))
}

fn number_help(cell: &str) -> String {
    if number(&cell.replace(',', ".")).is_some() {
        return format!("write it with a point: {}", cell.replace(',', "."));
    }
    format!("mend the cell, or count it as missing: missing = [\"\", \"{cell}\"] under [data]")
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
