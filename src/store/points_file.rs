//! Points that are kept as production goes on: a table that grows, and can be cut back to where a state was saved.

use super::StoreError;
use super::npy::NpyWriter;
use super::table::TableWriter;
use super::table::decimal;
use std::fs::File;
use std::fs::OpenOptions;
use std::io;
use std::io::Seek;
use std::io::SeekFrom;
use std::io::Write;
use std::path::Path;
use std::path::PathBuf;

/// A file of points, CSV or NumPy by its ending, open at its end.
#[derive(Debug)]
pub struct PointsFile {
    path: PathBuf,
    file: File,
    binary: bool,
    bytes: u64,
}

impl PointsFile {
    /// Begins the file: the header row, or a NumPy header that announces `rows`.
    ///
    /// # Errors
    /// [`StoreError::Io`]; a NumPy file needs the number of rows beforehand ([`StoreError::Npy`]).
    pub fn begin(path: &Path, names: &[String], rows: Option<u64>) -> Result<Self, StoreError> {
        let binary = path.extension().is_some_and(|ending| ending.eq_ignore_ascii_case("npy"));
        let mut head = Vec::new();
        let written = if binary {
            let rows = rows.ok_or_else(|| StoreError::Npy {
                path: path.to_path_buf(),
                reason: "a NumPy file says its number of rows first, which is not known here; write CSV".to_owned(),
            })?;
            NpyWriter::new(&mut head, rows, names.len()).map(|_| ())
        } else {
            TableWriter::csv(&mut head, names).and_then(TableWriter::finish)
        };
        written.map_err(StoreError::io("write", path))?;
        let file = File::create(path).map_err(StoreError::io("create", path))?;
        let mut points = Self { path: path.to_path_buf(), file, binary, bytes: 0 };
        points.write(&head)?;
        Ok(points)
    }

    /// Goes on with a file whose first `bytes` are good; what was written after them is cut off.
    ///
    /// # Errors
    /// [`StoreError::Io`], also where the file is shorter.
    pub fn resume(path: &Path, bytes: u64) -> Result<Self, StoreError> {
        let opened = || -> io::Result<File> {
            let mut file = OpenOptions::new().write(true).open(path)?;
            if file.metadata()?.len() < bytes {
                return Err(io::Error::other("it is shorter than it was; take it away and start again with --force"));
            }
            file.set_len(bytes)?;
            file.seek(SeekFrom::End(0))?;
            Ok(file)
        };
        let binary = path.extension().is_some_and(|ending| ending.eq_ignore_ascii_case("npy"));
        let file = opened().map_err(StoreError::io("go on with", path))?;
        Ok(Self { path: path.to_path_buf(), file, binary, bytes })
    }

    /// Appends rows, given as columns of one length.
    ///
    /// # Errors
    /// [`StoreError::Io`].
    pub fn append(&mut self, columns: &[Vec<f64>]) -> Result<(), StoreError> {
        let mut text = Vec::new();
        for i in 0..columns.first().map_or(0, Vec::len) {
            for (j, column) in columns.iter().enumerate() {
                if self.binary {
                    text.extend_from_slice(&column[i].to_le_bytes());
                } else {
                    text.extend_from_slice(if j > 0 { b"," } else { b"" });
                    text.extend_from_slice(decimal(column[i]).as_bytes());
                }
            }
            text.extend_from_slice(if self.binary { b"" } else { b"\n" });
        }
        self.write(&text)
    }

    /// Makes what was written durable, and says how many bytes that is.
    ///
    /// # Errors
    /// [`StoreError::Io`].
    pub fn sync(&mut self) -> Result<u64, StoreError> {
        self.file.sync_data().map_err(StoreError::io("sync", &self.path))?;
        Ok(self.bytes)
    }

    fn write(&mut self, bytes: &[u8]) -> Result<(), StoreError> {
        self.file.write_all(bytes).map_err(StoreError::io("write", &self.path))?;
        self.bytes += bytes.len() as u64;
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::super::Table;
    use super::*;

    /// Cut back and gone on with, both forms hold what an uninterrupted file holds.
    #[test]
    fn a_file_cut_back_goes_on_as_if_nothing_had_happened() {
        let folder = tempfile::tempdir().unwrap();
        let names = ["a,b".to_owned(), "c".to_owned()];
        for ending in ["csv", "npy"] {
            let [whole, cut] = ["whole", "cut"].map(|stem| folder.path().join(format!("{stem}.{ending}")));
            let first = [vec![0.1, f64::NAN], vec![1.0, -2.5e-9]];
            let second = [vec![3.0], vec![f64::INFINITY]];
            let mut file = PointsFile::begin(&whole, &names, Some(3)).unwrap();
            file.append(&first).unwrap();
            file.append(&second).unwrap();
            let mut file = PointsFile::begin(&cut, &names, Some(3)).unwrap();
            file.append(&first).unwrap();
            let bytes = file.sync().unwrap();
            file.append(&[vec![9.0; 7], vec![9.0; 7]]).unwrap();
            drop(file);
            PointsFile::resume(&cut, bytes).unwrap().append(&second).unwrap();
            assert_eq!(std::fs::read(&whole).unwrap(), std::fs::read(&cut).unwrap());
            let table = Table::read(&cut).unwrap();
            assert_eq!((table.len(), table.columns[0][2]), (3, 3.0));
            assert!(PointsFile::resume(&cut, 10_000).is_err());
        }
        assert!(PointsFile::begin(&folder.path().join("a.npy"), &names, None).is_err());
    }
}
