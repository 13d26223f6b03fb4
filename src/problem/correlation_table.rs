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
    /// The whole symmetric matrix, row by row; NaN where a number is wrong.
    pub(crate) matrix: Vec<f64>,
    /// Place of the numbers.
    pub(crate) span: Range<usize>,
    /// Places of the entries below the diagonal: (row, column, place).
    pub(crate) places: Vec<(usize, usize, Range<usize>)>,
}

const KEYS: [&str; 4] = ["among", "linear", "rank", "score"];
const EXAMPLE: &str = "[[correlation]] with among = [\"yield\", \"modulus\"] and linear = 0.3";

/// Reads every table.
pub(crate) fn read(reader: &mut Reader<'_>, entry: &Entry<'_>) -> Vec<CorrelationSpec> {
    let DeValue::Array(items) = entry.value else {
        reader.fault(
            Fault::new(entry.key_span.clone(), "correlations stand under [[correlation]], in two pairs of brackets")
                .help(format!("write {EXAMPLE}")),
        );
        let table = entry.value.as_table().map(|table| Table::new("[[correlation]]", table, entry.key_span.clone()));
        return table.and_then(|table| read_one(reader, &table, &entry.key_span)).into_iter().collect();
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
    reader.only(table, &KEYS);
    let place = table.entries.first().map_or(key_span.clone(), |entry| entry.key_span.clone());
    let Some(among) = table.entry_or_slip("among", &KEYS) else {
        reader.fault(
            Fault::new(place, "[[correlation]] does not say among which variables")
                .help("write among = [\"yield\", \"modulus\"], the names of two or more variables"),
        );
        return None;
    };
    let example = "among = [\"yield\", \"modulus\"]";
    let names = reader.texts(among, example);
    if names.as_ref().is_some_and(|names| names.len() < 2) {
        reader.fault(
            Fault::new(among.span.clone(), "a correlation is among two variables or more")
                .help(format!("write {example}")),
        );
    }
    let kinds: Vec<(CorrelationKind, &Entry<'_>)> =
        [CorrelationKind::Linear, CorrelationKind::Rank, CorrelationKind::Score]
            .into_iter()
            .filter_map(|kind| table.entry_or_slip(kind.word(), &KEYS).map(|entry| (kind, entry)))
            .collect();
    // Without numbers the names can be looked at all the same.
    let names = names?;
    let bare = |names: Vec<Text>| {
        let (matrix, places) = (vec![f64::NAN; names.len() * names.len()], Vec::new());
        CorrelationSpec { among: names, kind: CorrelationKind::Score, matrix, span: among.span.clone(), places }
    };
    match kinds.as_slice() {
        [(kind, entry)] => match read_matrix(reader, entry, names.len()) {
            Some((matrix, places)) => {
                Some(CorrelationSpec { among: names, kind: *kind, matrix, span: entry.span.clone(), places })
            }
            None => Some(bare(names)),
        },
        [] => {
            reader.fault(
                Fault::new(among.span.clone(), "[[correlation]] gives no numbers").help(
                    "write linear = ... (of the variables), rank = ... (of their ranks) or score = ... (of their normal scores)",
                ),
            );
            Some(bare(names))
        }
        [(_, first), (_, second), ..] => {
            reader.fault(
                Fault::new(second.key_span.clone(), format!("`{}` and `{}` exclude each other", first.key, second.key))
                    .also(first.key_span.clone(), "and this one")
                    .help("keep one of them: the others follow from it and are shown by `check`"),
            );
            Some(bare(names))
        }
    }
}

type Places = Vec<(usize, usize, Range<usize>)>;

/// A number for a pair, or the lower triangle row by row with ones on the diagonal.
fn read_matrix(reader: &mut Reader<'_>, entry: &Entry<'_>, d: usize) -> Option<(Vec<f64>, Places)> {
    if let Some(number) = plain_number(entry.value) {
        if d < 2 {
            return None; // That was told.
        }
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
        let number = if check_entry(reader, number, &entry.span) { number } else { f64::NAN };
        return Some((vec![1.0, number, number, 1.0], vec![(1, 0, entry.span.clone())]));
    }
    if let Some(number) = entry.value.as_str().and_then(|text| text.trim().parse::<f64>().ok()) {
        reader.wants(entry, "a number", &format!("it without quotes: {} = {number:?}", entry.key));
        return None;
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
    if let Some(triangle) = lower_triangle(&rows, d) {
        let message = format!("the {d} by {d} matrix stands here, or its upper half; its lower triangle is wanted");
        reader.fault(Fault::new(entry.span.clone(), message).help(format!("write {} = {triangle}", entry.key)));
        return Some(pairs_of_whole(reader, &rows, d));
    }
    let (mut matrix, mut places) = (vec![0.0; d * d], Vec::new());
    for (i, row) in rows.iter().enumerate() {
        let Some(cells) = reader.list(row, &example) else { continue };
        if cells.len() != i + 1 {
            let message = if cells.len() == d && rows.len() == d {
                format!("row {} of the lower triangle has all {d} numbers of the matrix", i + 1)
            } else {
                format!("row {} of the lower triangle has {} of {} numbers", i + 1, cells.len(), i + 1)
            };
            let help = format!("end each row with the 1.0 of its own variable: {example}");
            reader.fault(Fault::new(row.span.clone(), message).help(help));
        }
        for (j, cell) in cells.iter().enumerate().take(i + 1) {
            let number = reader.number(cell, &example).unwrap_or(f64::NAN);
            if i == j && number != 1.0 && !number.is_nan() && cells.len() == i + 1 {
                reader.fault(
                    Fault::new(cell.span.clone(), "the correlation of a variable with itself is 1")
                        .help(format!("write {example}")),
                );
            }
            if i != j {
                let allowed = number.is_nan() || check_entry(reader, number, &cell.span);
                let number = if allowed { number } else { f64::NAN };
                places.push((i, j, cell.span.clone()));
                matrix[i * d + j] = number;
                matrix[j * d + i] = number;
            } else {
                matrix[i * d + i] = 1.0;
            }
        }
    }
    Some((matrix, places))
}

/// The lower triangle, as one writes it, of what stands there as a whole symmetric matrix or as an upper triangle.
fn lower_triangle(rows: &[Entry<'_>], d: usize) -> Option<String> {
    let numbers = |row: &Entry<'_>| -> Option<Vec<f64>> {
        row.value.as_array()?.iter().map(|cell| plain_number(cell.get_ref())).collect()
    };
    let rows: Vec<Vec<f64>> = rows.iter().map(numbers).collect::<Option<_>>()?;
    let whole = rows.iter().all(|row| row.len() == d);
    let upper = rows.iter().enumerate().all(|(i, row)| row.len() == d - i);
    let entry = |i: usize, j: usize| if whole { rows[i][j] } else { rows[j][i - j] };
    let symmetric = upper || (whole && (0..d).all(|i| (0..i).all(|j| rows[i][j] == rows[j][i])));
    if !symmetric || d < 2 {
        return None;
    }
    let row = |i: usize| {
        let cells: Vec<String> = (0..=i).map(|j| format!("{:?}", entry(i, j))).collect();
        format!("[{}]", cells.join(", "))
    };
    Some(format!("[{}]", (0..d).map(row).collect::<Vec<_>>().join(", ")))
}

/// The numbers of a whole matrix, or of its upper half, with the places of those below the diagonal, or above it: the
/// advice taken, the rest is looked at as well.
fn pairs_of_whole(reader: &mut Reader<'_>, rows: &[Entry<'_>], d: usize) -> (Vec<f64>, Places) {
    let (mut matrix, mut places) = (vec![0.0; d * d], Vec::new());
    let cells: Vec<Vec<(f64, Range<usize>)>> = rows
        .iter()
        .map(|row| {
            let cells = row.value.as_array().into_iter().flatten();
            cells.map(|cell| (plain_number(cell.get_ref()).unwrap_or(f64::NAN), cell.span())).collect()
        })
        .collect();
    for i in 0..d {
        matrix[i * d + i] = 1.0;
        for j in 0..i {
            let cell = if cells[i].len() == d { cells[i].get(j) } else { cells[j].get(i - j) };
            let Some((number, span)) = cell else { continue };
            let number = if check_entry(reader, *number, span) { *number } else { f64::NAN };
            (matrix[i * d + j], matrix[j * d + i]) = (number, number);
            places.push((i, j, span.clone()));
        }
    }
    (matrix, places)
}

fn check_entry(reader: &mut Reader<'_>, number: f64, span: &Range<usize>) -> bool {
    if number > -1.0 && number < 1.0 {
        return true;
    }
    reader.fault(
        Fault::new(span.clone(), "a correlation is between -1 and 1, both excluded")
            .help("variables that determine each other are one variable: write the other as a formula"),
    );
    false
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
