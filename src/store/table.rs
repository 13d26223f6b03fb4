//! Tables of numbers with named columns, as CSV or NumPy files.

use super::StoreError;
use super::npy::{NpyWriter, read_npy};
use std::fs::File;
use std::io;
use std::io::Read;
use std::io::Write;
use std::path::Path;

/// The shortest decimal that reads back to the same double; `nan`, `inf`, `-inf`.
///
/// ```
/// use evenpoise::store::decimal;
/// assert_eq!(decimal(0.1), "0.1");
/// assert_eq!(decimal(3.0), "3");
/// assert_eq!(decimal(1e-300), "1e-300");
/// assert_eq!(decimal(f64::NAN), "nan");
/// ```
#[must_use]
pub fn decimal(x: f64) -> String {
    if x.is_nan() {
        return "nan".to_owned();
    }
    // The debug form is the shortest one, with an exponent where plain digits would be many, and ".0" on whole numbers.
    let mut text = format!("{x:?}");
    if text.ends_with(".0") {
        text.truncate(text.len() - 2);
    }
    text
}

/// Writes rows of numbers: as CSV with a header row, or as a NumPy array.
#[derive(Debug)]
pub struct TableWriter<W: Write>(Form<W>);

#[derive(Debug)]
enum Form<W: Write> {
    Csv { out: Box<csv::Writer<W>>, columns: usize },
    Npy(NpyWriter<W>),
}

impl<W: Write> TableWriter<W> {
    /// A CSV file whose first row names the columns; names with commas, quotes or line ends are quoted.
    ///
    /// # Errors
    /// Those of `out`.
    pub fn csv(out: W, names: &[String]) -> io::Result<Self> {
        let mut out = csv::WriterBuilder::new().buffer_capacity(1 << 16).from_writer(out);
        out.write_record(names).map_err(of_csv)?;
        Ok(Self(Form::Csv { out: Box::new(out), columns: names.len() }))
    }

    /// A NumPy array of `rows` rows (it has no place for the names).
    ///
    /// # Errors
    /// Those of `out`.
    pub fn npy(out: W, names: &[String], rows: u64) -> io::Result<Self> {
        Ok(Self(Form::Npy(NpyWriter::new(out, rows, names.len())?)))
    }

    /// The form that the ending of `path` asks for: `.npy`, and CSV for every other.
    ///
    /// # Errors
    /// Those of `out`.
    pub fn for_path(path: &Path, out: W, names: &[String], rows: u64) -> io::Result<Self> {
        if is_npy(path) { Self::npy(out, names, rows) } else { Self::csv(out, names) }
    }

    /// Writes a row.
    ///
    /// # Errors
    /// Those of `out`; [`io::ErrorKind::InvalidInput`] for a row of another length than the header.
    pub fn row(&mut self, row: &[f64]) -> io::Result<()> {
        match &mut self.0 {
            Form::Npy(npy) => npy.row(row),
            Form::Csv { columns, .. } if row.len() != *columns => {
                Err(io::Error::new(io::ErrorKind::InvalidInput, "a row of another length than the header"))
            }
            Form::Csv { out, .. } => out.write_record(row.iter().map(|&x| decimal(x))).map_err(of_csv),
        }
    }

    /// Writes what is still in memory.
    ///
    /// # Errors
    /// Those of `out`; missing rows of a NumPy array.
    pub fn finish(self) -> io::Result<()> {
        match self.0 {
            Form::Csv { mut out, .. } => out.flush(),
            Form::Npy(npy) => npy.finish()?.flush(),
        }
    }
}

/// The system's own error, where it is one: a broken pipe must be known as such.
fn of_csv(error: csv::Error) -> io::Error {
    match error.into_kind() {
        csv::ErrorKind::Io(error) => error,
        other => io::Error::other(format!("{other:?}")),
    }
}

/// A table in memory.
#[derive(Debug, Clone, PartialEq)]
pub struct Table {
    /// The columns' names; for a NumPy file, which has none, their numbers from 0.
    pub names: Vec<String>,
    /// The columns, all of one length. NaN where the file says so or leaves a cell blank.
    pub columns: Vec<Vec<f64>>,
}

impl Table {
    /// Reads a CSV file with a header row, or a NumPy array (by the ending `.npy`).
    ///
    /// # Errors
    /// [`StoreError::Table`] with the line, the column and what stands there; [`StoreError::Npy`]; [`StoreError::Io`].
    pub fn read(path: &Path) -> Result<Self, StoreError> {
        if is_npy(path) {
            let columns = read_npy(path)?;
            return Ok(Self { names: (0..columns.len()).map(|j| j.to_string()).collect(), columns });
        }
        let file = File::open(path).map_err(StoreError::io("read", path))?;
        Self::read_csv(file, path)
    }

    /// Reads CSV from anywhere; `path` is named in errors.
    ///
    /// # Errors
    /// As [`read`](Self::read).
    pub fn read_csv(input: impl Read, path: &Path) -> Result<Self, StoreError> {
        let wrong = |line: u64, reason: String| StoreError::Table { path: path.to_path_buf(), line, reason };
        let mut reader = csv::ReaderBuilder::new().trim(csv::Trim::All).from_reader(input);
        let header = reader.headers().map_err(|error| unreadable(path, error))?;
        let names: Vec<String> = header.iter().map(|name| name.trim_start_matches('\u{FEFF}').to_owned()).collect();
        if names.iter().all(String::is_empty) {
            return Err(wrong(1, "expected a header row with the columns' names".to_owned()));
        }
        if let Some(name) = names.iter().enumerate().find(|(j, name)| names[..*j].contains(name)).map(|(_, name)| name)
        {
            return Err(wrong(1, format!("two columns are named {name:?}")));
        }
        if names.iter().all(|name| name.parse::<f64>().is_ok()) {
            return Err(wrong(1, "expected a header row with the columns' names, found only numbers".to_owned()));
        }
        let mut columns = vec![Vec::new(); names.len()];
        let mut record = csv::StringRecord::new();
        while reader.read_record(&mut record).map_err(|error| unreadable(path, error))? {
            for ((cell, column), name) in record.iter().zip(&mut columns).zip(&names) {
                let number = if cell.is_empty() { Some(f64::NAN) } else { cell.parse().ok() };
                let line = record.position().map_or(0, csv::Position::line);
                column.push(
                    number.ok_or_else(|| wrong(line, format!("column {name:?} holds {cell:?}; expected a number")))?,
                );
            }
        }
        Ok(Self { names, columns })
    }

    /// Number of rows.
    #[must_use]
    pub fn len(&self) -> usize {
        self.columns.first().map_or(0, Vec::len)
    }

    /// Whether there is no row.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// The column of that name.
    #[must_use]
    pub fn column(&self, name: &str) -> Option<&[f64]> {
        let at = self.names.iter().position(|known| known == name)?;
        Some(&self.columns[at])
    }
}

fn is_npy(path: &Path) -> bool {
    path.extension().is_some_and(|ending| ending.eq_ignore_ascii_case("npy"))
}

/// An error of the CSV reader with its line.
fn unreadable(path: &Path, error: csv::Error) -> StoreError {
    let line = error.position().map_or(0, csv::Position::line);
    match error.into_kind() {
        csv::ErrorKind::Io(source) => StoreError::io("read", path)(source),
        csv::ErrorKind::UnequalLengths { expected_len, len, .. } => StoreError::Table {
            path: path.to_path_buf(),
            line,
            reason: format!("{len} cells where the header has {expected_len}"),
        },
        csv::ErrorKind::Utf8 { .. } => {
            StoreError::Table { path: path.to_path_buf(), line, reason: "not UTF-8 text; save it as UTF-8".to_owned() }
        }
        other => StoreError::Table { path: path.to_path_buf(), line, reason: format!("{other:?}") },
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn csv_of(names: &[&str], rows: &[&[f64]]) -> Vec<u8> {
        let mut bytes = Vec::new();
        let names: Vec<String> = names.iter().map(|&name| name.to_owned()).collect();
        let mut writer = TableWriter::csv(&mut bytes, &names).unwrap();
        rows.iter().for_each(|row| writer.row(row).unwrap());
        writer.finish().unwrap();
        bytes
    }

    fn read(text: &str) -> Result<Table, StoreError> {
        Table::read_csv(text.as_bytes(), Path::new("points.csv"))
    }

    #[test]
    fn names_with_commas_and_quotes_come_back() {
        let names = ["effect[gauge 3, north]", "the \"upper\" weir", "log_proposal"];
        let bytes = csv_of(&names, &[&[1.0, -0.5, f64::NEG_INFINITY], &[1e-7, f64::NAN, 12_345_678.9]]);
        let text = String::from_utf8(bytes.clone()).unwrap();
        assert_eq!(
            text,
            "\"effect[gauge 3, north]\",\"the \"\"upper\"\" weir\",log_proposal\n1,-0.5,-inf\n1e-7,nan,12345678.9\n"
        );
        let table = Table::read_csv(&bytes[..], Path::new("points.csv")).unwrap();
        assert_eq!(table.names, names);
        assert_eq!(table.column("log_proposal").unwrap(), [f64::NEG_INFINITY, 12_345_678.9]);
        assert!(table.column("the \"upper\" weir").unwrap()[1].is_nan() && table.len() == 2);
        assert_eq!(table.column("absent"), None);
    }

    proptest! {
        #[test]
        fn every_double_reads_back_to_its_bits(bits: u64) {
            let x = f64::from_bits(bits);
            let back: f64 = decimal(x).parse().unwrap();
            prop_assert!(back.to_bits() == bits || (x.is_nan() && back.is_nan()), "{x:e} {}", decimal(x));
        }
    }

    #[test]
    fn errors_name_line_column_and_content() {
        for (text, line, reason) in [
            ("a,b\n1,2\n1,two\n", 3, "column \"b\" holds \"two\""),
            ("a,b\n1,2,3\n", 2, "3 cells where the header has 2"),
            ("a,a\n1,2\n", 1, "two columns are named \"a\""),
            ("1,2\n3,4\n", 1, "found only numbers"),
            ("", 1, "header row"),
        ] {
            match read(text).unwrap_err() {
                StoreError::Table { line: found, reason: why, .. } => {
                    assert_eq!(found, line, "{text:?}");
                    assert!(why.contains(reason), "{why}");
                }
                other => panic!("{other}"),
            }
        }
        let latin = Table::read_csv(&b"a\n\xE9\n"[..], Path::new("a.csv")).unwrap_err();
        assert!(latin.to_string().contains("UTF-8"), "{latin}");
    }

    #[test]
    fn blanks_marks_and_foreign_line_ends_are_read() {
        let table = read("\u{FEFF}x, y\r\n 1 ,\r\n2.5e1,NaN\r\n").unwrap();
        assert_eq!(table.names, ["x", "y"]);
        assert_eq!(table.columns[0], [1.0, 25.0]);
        assert!(table.columns[1].iter().all(|y| y.is_nan()));
    }

    #[test]
    fn the_ending_chooses_the_form() {
        let folder = tempfile::tempdir().unwrap();
        let names = vec!["a".to_owned(), "b".to_owned()];
        for (file, read_names) in [("points.csv", ["a", "b"]), ("points.NPY", ["0", "1"])] {
            let path = folder.path().join(file);
            super::super::write_atomically(&path, |out| {
                let mut writer = TableWriter::for_path(&path, out, &names, 2)?;
                writer.row(&[0.1, 0.2])?;
                writer.row(&[0.3, 1e300])?;
                writer.finish()
            })
            .unwrap();
            let table = Table::read(&path).unwrap();
            assert_eq!(table.names, read_names);
            assert_eq!(table.columns, [[0.1, 0.3], [0.2, 1e300]]);
        }
        assert!(TableWriter::csv(Vec::new(), &names).unwrap().row(&[1.0]).is_err());
    }

    #[cfg(target_os = "linux")]
    #[test]
    fn a_full_disk_is_an_error() {
        let full = File::options().write(true).open("/dev/full").unwrap();
        let mut writer = TableWriter::csv(full, &["a".to_owned()]).unwrap();
        writer.row(&[1.0]).unwrap();
        let error = writer.finish().unwrap_err();
        assert!(error.to_string().contains("No space left on device"), "{error}");
    }
}
