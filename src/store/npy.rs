//! NumPy's array files: rows of doubles, a column a quantity.
//!
//! # Source
//! "NEP 1 — A Simple File Format for NumPy Arrays" (numpy.org/neps), versions 1.0 to 3.0.

use super::StoreError;
use std::fs;
use std::io;
use std::io::Write;
use std::path::Path;

const MAGIC: &[u8; 6] = b"\x93NUMPY";

/// Writes an array of `rows x columns` doubles, row by row; the number of rows is said beforehand.
#[derive(Debug)]
pub struct NpyWriter<W: Write> {
    out: W,
    columns: usize,
    rows_left: u64,
}

impl<W: Write> NpyWriter<W> {
    /// Writes the header.
    ///
    /// # Errors
    /// Those of `out`.
    pub fn new(mut out: W, rows: u64, columns: usize) -> io::Result<Self> {
        let mut header = format!("{{'descr': '<f8', 'fortran_order': False, 'shape': ({rows}, {columns}), }}");
        // Magic, version and length take 10 bytes; data begin at a multiple of 64, after a line end.
        let padding = 63 - (10 + header.len()) % 64;
        header.extend(std::iter::repeat_n(' ', padding));
        header.push('\n');
        out.write_all(MAGIC)?;
        out.write_all(&[1, 0])?;
        out.write_all(&(header.len() as u16).to_le_bytes())?;
        out.write_all(header.as_bytes())?;
        Ok(Self { out, columns, rows_left: rows })
    }

    /// Writes a row.
    ///
    /// # Errors
    /// Those of `out`, and [`io::ErrorKind::InvalidInput`] for a row of another length or one too many.
    pub fn row(&mut self, row: &[f64]) -> io::Result<()> {
        if row.len() != self.columns || self.rows_left == 0 {
            return Err(io::Error::new(io::ErrorKind::InvalidInput, "a row that the header did not announce"));
        }
        self.rows_left -= 1;
        row.iter().try_for_each(|x| self.out.write_all(&x.to_le_bytes()))
    }

    /// Ends the array and gives back the writer.
    ///
    /// # Errors
    /// [`io::ErrorKind::InvalidInput`] when rows are missing.
    pub fn finish(self) -> io::Result<W> {
        if self.rows_left > 0 {
            return Err(io::Error::new(io::ErrorKind::InvalidInput, format!("{} rows are missing", self.rows_left)));
        }
        Ok(self.out)
    }
}

/// Reads an array of one or two dimensions as columns; one dimension is one column.
///
/// # Errors
/// [`StoreError::Npy`] for anything but little-endian doubles, singles or whole numbers in one or two dimensions, and for
/// a file that is shorter or longer than its header says; [`StoreError::Io`].
pub fn read_npy(path: &Path) -> Result<Vec<Vec<f64>>, StoreError> {
    let bytes = fs::read(path).map_err(StoreError::io("read", path))?;
    parse(&bytes).map_err(|reason| StoreError::Npy { path: path.to_path_buf(), reason })
}

fn parse(bytes: &[u8]) -> Result<Vec<Vec<f64>>, String> {
    let cut = || "the file is cut off".to_owned();
    if !bytes.starts_with(MAGIC) {
        return Err("not a NumPy array file (.npy)".to_owned());
    }
    let version = *bytes.get(6).ok_or_else(cut)?;
    let (length, start) = match version {
        1 => (bytes.get(8..10).ok_or_else(cut)?.iter().rev().fold(0, |n, &b| n << 8 | usize::from(b)), 10_usize),
        2 | 3 => (bytes.get(8..12).ok_or_else(cut)?.iter().rev().fold(0, |n, &b| n << 8 | usize::from(b)), 12),
        other => return Err(format!("version {other} of the format is not known; save it again with numpy.save")),
    };
    let header = bytes.get(start..).and_then(|rest| rest.get(..length)).ok_or_else(cut)?;
    let header = std::str::from_utf8(header).map_err(|_| "its header is not text".to_owned())?;
    let data = &bytes[start + length..];
    let (rows, columns) = shape(value_of(header, "shape")?)?;
    let by_column = value_of(header, "fortran_order")?.starts_with("True");
    let numbers = numbers(data, value_of(header, "descr")?)?;
    if Some(numbers.len()) != rows.checked_mul(columns) {
        return Err(format!("it says {rows} x {columns} numbers and holds {}", numbers.len()));
    }
    let at = |i: usize, j: usize| if by_column { numbers[j * rows + i] } else { numbers[i * columns + j] };
    Ok((0..columns).map(|j| (0..rows).map(|i| at(i, j)).collect()).collect())
}

/// What follows `'key':` in the header.
fn value_of<'a>(header: &'a str, key: &str) -> Result<&'a str, String> {
    let quoted = format!("'{key}':");
    let at = header.find(&quoted).ok_or_else(|| format!("its header names no {key}"))?;
    Ok(header[at + quoted.len()..].trim_start())
}

/// `(rows, columns)` from `(5,)` or `(5, 2)`.
fn shape(text: &str) -> Result<(usize, usize), String> {
    let wrong = || "expected an array of one or two dimensions".to_owned();
    let inside = text.strip_prefix('(').and_then(|text| text.split_once(')')).ok_or_else(wrong)?.0;
    let sizes: Vec<usize> = inside
        .split(',')
        .map(str::trim)
        .filter(|size| !size.is_empty())
        .map(|size| size.parse().map_err(|_| wrong()))
        .collect::<Result<_, _>>()?;
    match sizes[..] {
        [rows] => Ok((rows, 1)),
        [rows, columns] => Ok((rows, columns)),
        _ => Err(wrong()),
    }
}

fn numbers(data: &[u8], descr: &str) -> Result<Vec<f64>, String> {
    fn each<const N: usize>(data: &[u8], number: impl Fn([u8; N]) -> f64) -> Result<Vec<f64>, String> {
        let chunks = data.chunks_exact(N);
        if !chunks.remainder().is_empty() {
            return Err("the file ends within a number".to_owned());
        }
        Ok(chunks.map(|chunk| number(chunk.try_into().unwrap_or([0; N]))).collect())
    }
    let quoted = descr.trim_start_matches('\'').split('\'').next().unwrap_or_default();
    match quoted {
        "<f8" => each(data, f64::from_le_bytes),
        "<f4" => each(data, |b| f64::from(f32::from_le_bytes(b))),
        "<i8" => each(data, |b| i64::from_le_bytes(b) as f64),
        "<i4" => each(data, |b| f64::from(i32::from_le_bytes(b))),
        other => Err(format!("numbers of type {other:?} are not read; save them as float64")),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: NumPy 2.4.6, numpy.save of array([[1.5, -0.0, nan], [inf, 1e-310, 3.0]]), whole file,
    /// its CRC-64/XZ computed bit by bit in Python.
    #[test]
    fn bytes_are_those_of_numpy() {
        let mut writer = NpyWriter::new(Vec::new(), 2, 3).unwrap();
        writer.row(&[1.5, -0.0, f64::NAN]).unwrap();
        writer.row(&[f64::INFINITY, 1e-310, 3.0]).unwrap();
        let bytes = writer.finish().unwrap();
        assert_eq!(bytes.len(), 128 + 48);
        assert_eq!(super::super::checksum::checksum(&bytes), 0xC19D_DC29_DD1D_C840);
        let columns = parse(&bytes).unwrap();
        assert_eq!(columns[0], [1.5, f64::INFINITY]);
        assert!(columns[2][0].is_nan() && columns[1][0].is_sign_negative());
    }

    fn file(header: &str, data: &[u8]) -> Vec<u8> {
        let mut bytes = b"\x93NUMPY\x02\x00".to_vec();
        bytes.extend((header.len() as u32).to_le_bytes());
        bytes.extend(header.as_bytes());
        bytes.extend(data);
        bytes
    }

    #[test]
    fn other_orders_types_and_versions_are_read() {
        let data: Vec<u8> = [1_i32, 2, 3, 4, 5, 6].iter().flat_map(|x| x.to_le_bytes()).collect();
        let by_column = file("{'shape': (3, 2), 'fortran_order': True, 'descr': '<i4'}\n", &data);
        assert_eq!(parse(&by_column).unwrap(), [[1.0, 2.0, 3.0], [4.0, 5.0, 6.0]]);
        let one =
            file("{'descr': '<f4', 'fortran_order': False, 'shape': (2,), }\n", &[0, 0, 0x80, 0x3F, 0, 0, 0, 0x40]);
        assert_eq!(parse(&one).unwrap(), [[1.0, 2.0]]);
    }

    #[test]
    fn what_is_not_right_is_refused() {
        let header = "{'descr': '<f8', 'fortran_order': False, 'shape': (2, 1), }\n";
        for (bytes, reason) in [
            (b"PK\x03\x04".to_vec(), "not a NumPy"),
            (file(header, &[0; 8]), "says 2 x 1 numbers and holds 1"),
            (file(header, &[0; 17]), "ends within a number"),
            (file(&header.replace("<f8", ">f8"), &[0; 16]), "save them as float64"),
            (file(&header.replace("(2, 1)", "(1, 2, 1)"), &[0; 16]), "one or two dimensions"),
            (file("{}", &[]), "names no shape"),
            (file(header, &[])[..20].to_vec(), "cut off"),
            (b"\x93NUMPY\x09\x00".to_vec(), "version 9"),
        ] {
            let error = parse(&bytes).unwrap_err();
            assert!(error.contains(reason), "{error}");
        }
    }

    #[test]
    fn rows_must_be_as_announced() {
        let mut writer = NpyWriter::new(Vec::new(), 1, 2).unwrap();
        assert!(writer.row(&[1.0]).is_err());
        writer.row(&[1.0, 2.0]).unwrap();
        assert!(writer.row(&[1.0, 2.0]).is_err());
        assert!(NpyWriter::new(Vec::new(), 1, 2).unwrap().finish().is_err());
    }
}
