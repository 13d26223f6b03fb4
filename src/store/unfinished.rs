//! Answers of the batch at hand, kept until the whole batch is in the journal.
//!
//! A round of a slow model takes hours. What was answered when the process ends is in this file, and a resumed run asks
//! only for the rest. It holds questions and answers as the model knows them; the same checksums as in the journal guard
//! them, and whatever is not whole is left out.

use super::StoreError;
use super::record::HEAD;
use super::record::JournalBatch;
use super::record::JournalColumn;
use super::record::TAIL;
use super::record::decode;
use super::record::encode;
use super::record::payload_length;
use crate::numeric::Points;
use crate::numeric::Purpose;
use std::fs;
use std::fs::OpenOptions;
use std::io;
use std::io::Write;
use std::path::Path;
use std::path::PathBuf;

/// The file of an unfinished batch.
#[derive(Debug)]
pub struct Unfinished {
    path: PathBuf,
    waiting: Vec<(Points, Points)>,
    records: u32,
}

impl Unfinished {
    /// The file at `path`, with what it holds: questions, each with its answers. The first answers make it.
    ///
    /// # Errors
    /// [`StoreError::Io`] where it is there and cannot be read.
    pub fn open(path: &Path) -> Result<(Self, Vec<(Points, Points)>), StoreError> {
        let path = path.to_path_buf();
        let bytes = match fs::read(&path) {
            Ok(bytes) => bytes,
            Err(error) if error.kind() == io::ErrorKind::NotFound => Vec::new(),
            Err(error) => return Err(StoreError::io("read", &path)(error)),
        };
        let (found, whole) = read(&bytes);
        if whole < bytes.len() {
            let cut = OpenOptions::new().write(true).open(&path).and_then(|file| file.set_len(whole as u64));
            cut.map_err(StoreError::io("shorten", &path))?;
        }
        Ok((Self { path, waiting: Vec::new(), records: found.len() as u32 }, found))
    }

    /// Takes answers to be written.
    pub fn add(&mut self, questions: &Points, answers: &Points) {
        match self.waiting.last_mut() {
            Some((known, given)) if known.dim() == questions.dim() && given.dim() == answers.dim() => {
                known.extend(questions);
                given.extend(answers);
            }
            _ => self.waiting.push((questions.clone(), answers.clone())),
        }
    }

    /// Hands what waits to the system: a kill of the process loses nothing of it any more.
    ///
    /// # Errors
    /// [`StoreError::Io`].
    pub fn write(&mut self) -> Result<(), StoreError> {
        if self.waiting.is_empty() {
            return Ok(());
        }
        let mut bytes = Vec::new();
        for (questions, answers) in self.waiting.drain(..) {
            let batch = JournalBatch {
                purpose: Purpose::Round,
                round: 0,
                log_density: vec![0.0; questions.len()],
                points: questions,
                columns: vec![JournalColumn { name: "answers".to_owned(), values: answers }],
            };
            bytes.extend(encode(self.records, &batch));
            self.records += 1;
        }
        let written =
            OpenOptions::new().create(true).append(true).open(&self.path).and_then(|mut file| file.write_all(&bytes));
        written.map_err(StoreError::io("write", &self.path))
    }

    /// The batch is in the journal.
    ///
    /// # Errors
    /// [`StoreError::Io`].
    pub fn clear(&mut self) -> Result<(), StoreError> {
        self.waiting.clear();
        if self.records > 0 {
            self.records = 0;
            fs::remove_file(&self.path).map_err(StoreError::io("remove", &self.path))?;
        }
        Ok(())
    }
}

/// Whole records, and the bytes that they take.
fn read(bytes: &[u8]) -> (Vec<(Points, Points)>, usize) {
    let (mut found, mut at) = (Vec::new(), 0);
    while let Some(head) = bytes.get(at..at + HEAD) {
        let Some(length) = payload_length(head, found.len() as u32) else { break };
        let end = usize::try_from(length).ok().and_then(|length| at.checked_add(HEAD + length + TAIL));
        let Some(record) = end.and_then(|end| bytes.get(at..end)) else { break };
        let Some(batch) = decode(record) else { break };
        at += record.len();
        found.extend(batch.columns.into_iter().next().map(|column| (batch.points, column.values)));
    }
    (found, at)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn answers_come_back_and_a_torn_end_is_left_out() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("unfinished");
        let (mut unfinished, found) = Unfinished::open(&path).unwrap();
        assert!(found.is_empty());
        let (a, b) = (Points::from_rows(2, &[0.1, 0.2]), Points::from_rows(1, &[f64::NAN]));
        unfinished.add(&a, &b);
        unfinished.add(&a, &b);
        unfinished.write().unwrap();
        unfinished.add(&Points::from_rows(1, &[3.0]), &b);
        unfinished.write().unwrap();
        let (_, found) = Unfinished::open(&path).unwrap();
        assert_eq!((found.len(), found[0].0.len(), found[1].0.point(0)), (2, 2, vec![3.0]));
        assert!(found[0].1.get(1, 0).is_nan());
        let bytes = fs::read(&path).unwrap();
        fs::write(&path, &bytes[..bytes.len() - 3]).unwrap();
        let (mut unfinished, found) = Unfinished::open(&path).unwrap();
        assert_eq!(found.len(), 1);
        unfinished.add(&a, &b);
        unfinished.write().unwrap();
        assert_eq!(Unfinished::open(&path).unwrap().1.len(), 2);
        unfinished.clear().unwrap();
        assert!(!path.exists());
    }
}
