//! `[[correlation]]` as it stands in the file: which variables, which kind, which numbers.

use std::ops::Range;

use toml::de::DeValue;

use super::faults::Fault;
use super::table::Entry;
use super::table::Reader;
use super::table::Table;
use super::table::plain_number;
use super::text_value::Text;

/// What the numbers of a correlation are of.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum CorrelationKind {
    /// Of the variables themselves (Pearson's).
    Linear,
    /// Of their ranks (Spearman's).
    Rank,
    /// Of their standard normal scores.
    Score,
}

impl CorrelationKind {
    /// The key of the problem file.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            Self::Linear => "linear",
            Self::Rank => "rank",
            Self::Score => "score",
        }
    }
}

/// One table of `[[correlation]]`.
#[derive(Debug, Clone)]
pub(crate) struct CorrelationSpec {
    pub(crate) among: Vec<Text>,
    pub(crate) kind: CorrelationKind,
    /// The whole symmetric matrix, row by row.
    pub(crate) matrix: Vec<f64>,
    /// Place of the numbers.
    pub(crate) span: Range<usize>,
    /// Places of the entries below the diagonal: (row, column, place).
    pub(crate) places: Vec<(usize, usize, Range<usize>)>,
}

const EXAMPLE: &str = "[[correlation]] with among = [\"yield\", \"modulus\"] and linear = 0.3";

/// Reads every table.
pub(crate) fn read(reader: &mut Reader<'_>, entry: &Entry<'_>) -> Vec<CorrelationSpec> {
    let DeValue::Array(items) = entry.value else {
        reader.fault(
            Fault::new(entry.key_span.clone(), "correlations stand under [[correlation]], in two pairs of brackets")
                .help(format!("write {EXAMPLE}")),
        );
        return Vec::new();
    };
    let mut specs = Vec::new();
    for item in items {
        match item.get_ref() {
            DeValue::Table(table) => {
                let table = Table::new("[[correlation]]", table, item.span());
                specs.extend(read_one(reader, &table, &entry.key_span));
            }
            _ => reader.fault(Fault::new(item.span(), "a correlation wants a table").help(format!("write {EXAMPLE}"))),
        }
    }
    specs
}

fn read_one(reader: &mut Reader<'_>, table: &Table<'_>, key_span: &Range<usize>) -> Option<CorrelationSpec> {
    reader.only(table, &["among", "linear", "rank", "score"]);
    let place = table.entries.first().map_or(key_span.clone(), |entry| entry.key_span.clone());
    let Some(among) = table.entry("among") else {
        reader.fault(
            Fault::new(place, "[[correlation]] does not say among which variables")
                .help("write among = [\"yield\", \"modulus\"], the names of two or more variables"),
        );
        return None;
    };
    let example = "among = [\"yield\", \"modulus\"]";
    let names = reader.texts(among, example)?;
    if names.len() < 2 {
        reader.fault(
            Fault::new(among.span.clone(), "a correlation is among two variables or more")
                .help(format!("write {example}")),
        );
        return None;
    }
    let kinds: Vec<(CorrelationKind, &Entry<'_>)> =
        [CorrelationKind::Linear, CorrelationKind::Rank, CorrelationKind::Score]
            .into_iter()
            .filter_map(|kind| table.entry(kind.word()).map(|entry| (kind, entry)))
            .collect();
    match kinds.as_slice() {
        [(kind, entry)] => {
            let (matrix, places) = read_matrix(reader, entry, names.len())?;
            Some(CorrelationSpec { among: names, kind: *kind, matrix, span: entry.span.clone(), places })
        }
        [] => {
            reader.fault(
                Fault::new(among.span.clone(), "[[correlation]] gives no numbers").help(
                    "write linear = ... (of the variables), rank = ... (of their ranks) or score = ... (of their normal scores)",
                ),
            );
            None
        }
        [(_, first), (_, second), ..] => {
            reader.fault(
                Fault::new(second.key_span.clone(), format!("`{}` and `{}` exclude each other", first.key, second.key))
                    .also(first.key_span.clone(), "and this one")
                    .help("keep one of them: the others follow from it and are shown by `check`"),
            );
            None
        }
    }
}

type Places = Vec<(usize, usize, Range<usize>)>;

/// A number for a pair, or the lower triangle row by row with ones on the diagonal.
fn read_matrix(reader: &mut Reader<'_>, entry: &Entry<'_>, d: usize) -> Option<(Vec<f64>, Places)> {
    if let Some(number) = plain_number(entry.value) {
        if d != 2 {
            reader.fault(
                Fault::new(entry.span.clone(), format!("one number cannot correlate {d} variables")).help(format!(
                    "write the lower triangle row by row: {} = {}",
                    entry.key,
                    triangle_example(d)
                )),
            );
            return None;
        }
        check_entry(reader, number, &entry.span)?;
        return Some((vec![1.0, number, number, 1.0], vec![(1, 0, entry.span.clone())]));
    }
    let example = format!("{} = {}", entry.key, triangle_example(d));
    let rows = reader.list(entry, &example)?;
    if rows.len() != d {
        reader.fault(
            Fault::new(entry.span.clone(), format!("{} rows for {d} variables", rows.len()))
                .help(format!("write a row for each variable: {example}")),
        );
        return None;
    }
    let (mut matrix, mut places) = (vec![0.0; d * d], Vec::new());
    for (i, row) in rows.iter().enumerate() {
        let cells = reader.list(row, &example)?;
        if cells.len() != i + 1 {
            reader.fault(
                Fault::new(
                    row.span.clone(),
                    format!("row {} of the lower triangle has {} of {} numbers", i + 1, cells.len(), i + 1),
                )
                .help(format!("write {example}")),
            );
            return None;
        }
        for (j, cell) in cells.iter().enumerate() {
            let number = reader.number(cell, &example)?;
            if i == j && number != 1.0 {
                reader.fault(
                    Fault::new(cell.span.clone(), "the correlation of a variable with itself is 1")
                        .help(format!("write {example}")),
                );
                return None;
            }
            if i != j {
                check_entry(reader, number, &cell.span)?;
                places.push((i, j, cell.span.clone()));
            }
            matrix[i * d + j] = number;
            matrix[j * d + i] = number;
        }
    }
    Some((matrix, places))
}

fn check_entry(reader: &mut Reader<'_>, number: f64, span: &Range<usize>) -> Option<()> {
    if number > -1.0 && number < 1.0 {
        return Some(());
    }
    reader.fault(
        Fault::new(span.clone(), "a correlation is between -1 and 1, both excluded")
            .help("variables that determine each other are one variable: write the other as a formula"),
    );
    None
}

/// `[[1.0], [0.3, 1.0], ...]` of the right size.
fn triangle_example(d: usize) -> String {
    let row = |i: usize| {
        let mut cells = vec!["0.3".to_owned(); i];
        cells.push("1.0".into());
        format!("[{}]", cells.join(", "))
    };
    let rows: Vec<String> = (0..d.min(4)).map(row).collect();
    format!("[{}{}]", rows.join(", "), if d > 4 { ", ..." } else { "" })
}
