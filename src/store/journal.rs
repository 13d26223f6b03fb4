//! The journal of a run: every evaluated point, written and synced before it is used.
//!
//! A file of one header and any number of records, each with its number, its length and its checksum. A run that was
//! killed at any moment leaves whole records and at most one torn one; reading stops at the first record that is not
//! whole, says so, and what was in it is evaluated again. Nothing is ever believed that fails its checksum.

use super::StoreError;
use super::atomic::{sync_folder, write_atomically};
use super::checksum::checksum;
use super::record::{HEAD, JournalBatch, TAIL, decode, encode, payload_length};
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;
use std::fs;
use std::fs::File;
use std::fs::OpenOptions;
use std::io;
use std::io::BufReader;
use std::io::Read;
use std::io::Write;
use std::path::Path;
use std::path::PathBuf;

/// First line of a journal.
const FORMAT: &str = "evenpoise-journal/1\n";
/// A header longer than this is none: it holds digests and settings.
const MAX_HEADER: u32 = 1 << 24;

/// What a run was begun with: whatever must be the same when it is resumed.
///
/// Keys are what a person would call the thing ("the problem file", "the seed"), values its digest or setting.
#[derive(Debug, Clone, PartialEq, Eq, Default, Serialize, Deserialize)]
pub struct JournalHeader {
    /// The facts, in the order of their names.
    pub facts: BTreeMap<String, String>,
}

/// An open journal, to be appended to.
#[derive(Debug)]
pub struct Journal {
    path: PathBuf,
    file: File,
    /// Bytes that are whole.
    length: u64,
    /// Records in them.
    records: u32,
    /// A torn record could not be taken back: nothing may follow it.
    broken: bool,
}

/// What a journal held.
#[derive(Debug, Clone, PartialEq)]
pub struct Replay {
    /// The batches, in the order they were written.
    pub batches: Vec<JournalBatch>,
    /// What was dropped from the end, in a sentence for the user; nothing when the journal was whole.
    pub dropped: Option<String>,
}

impl Journal {
    /// Begins a journal in a run's folder.
    ///
    /// # Errors
    /// [`StoreError::Io`] with the path.
    ///
    /// ```
    /// # let folder = tempfile::tempdir()?;
    /// use evenpoise::numeric::{Points, Purpose};
    /// use evenpoise::store::{Journal, JournalBatch, JournalHeader};
    /// let header = JournalHeader { facts: [("the seed".to_owned(), "7".to_owned())].into() };
    /// let batch = JournalBatch {
    ///     purpose: Purpose::Round,
    ///     round: 1,
    ///     points: Points::from_rows(2, &[0.1, 0.2]),
    ///     log_density: vec![-1.5],
    ///     columns: Vec::new(),
    /// };
    /// Journal::create(folder.path(), &header)?.append(&batch)?;
    /// let (_, replay) = Journal::open_for_resume(folder.path(), &header)?;
    /// assert_eq!(replay.batches, [batch]);
    /// # Ok::<(), Box<dyn std::error::Error>>(())
    /// ```
    pub fn create(folder: &Path, header: &JournalHeader) -> Result<Self, StoreError> {
        let path = journal_path(folder);
        let inside = folder.join("evaluations");
        fs::create_dir_all(&inside).map_err(StoreError::io("create the folder", &inside))?;
        sync_folder(folder).map_err(StoreError::io("sync", folder))?;
        let bytes = header_bytes(header).map_err(StoreError::io("write", &path))?;
        write_atomically(&path, |file| file.write_all(&bytes))?;
        Self::at(path, bytes.len() as u64, 0)
    }

    /// Appends a batch. When this returns, the batch is on the disk.
    ///
    /// # Errors
    /// As [`Journal::write`] and [`Journal::sync`].
    ///
    /// # Panics
    /// When a column of the batch has another number of points than the batch.
    pub fn append(&mut self, batch: &JournalBatch) -> Result<(), StoreError> {
        self.write(batch)?;
        self.sync()
    }

    /// Hands a batch to the system. From here on a kill of the process loses nothing of it; a power cut may, until
    /// [`Journal::sync`] has returned.
    ///
    /// # Errors
    /// [`StoreError::Io`] with the path and the system's reason (the disk is full, ...). The torn record is taken back, so
    /// the journal is as it was before.
    ///
    /// # Panics
    /// When a column of the batch has another number of points than the batch.
    pub fn write(&mut self, batch: &JournalBatch) -> Result<(), StoreError> {
        if self.broken {
            let source = io::Error::other("an earlier record could not be written whole, nor taken back");
            return Err(StoreError::io("write", &self.path)(source));
        }
        let record = encode(self.records, batch);
        if let Err(source) = self.file.write_all(&record) {
            self.broken = self.file.set_len(self.length).is_err();
            return Err(StoreError::io("write", &self.path)(source));
        }
        self.length += record.len() as u64;
        self.records += 1;
        Ok(())
    }

    /// Waits until everything written is on the disk.
    ///
    /// # Errors
    /// [`StoreError::Io`] with the path and the system's reason.
    pub fn sync(&mut self) -> Result<(), StoreError> {
        self.file.sync_data().map_err(StoreError::io("sync", &self.path))
    }

    /// Whether nothing was recorded.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.records == 0
    }

    /// Where it is.
    #[must_use]
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// Opens the journal of a run that was begun with `header`, gives back what it holds and cuts off what is not whole.
    ///
    /// # Errors
    /// [`StoreError::Changed`] with the first fact that differs; [`StoreError::JournalUnusable`] when the header itself
    /// is damaged or of another version; [`StoreError::Io`].
    pub fn open_for_resume(folder: &Path, header: &JournalHeader) -> Result<(Self, Replay), StoreError> {
        let path = journal_path(folder);
        let read = read_all(&path)?;
        compare(&path, &read.header, header)?;
        let journal = Self::at(path, read.length, read.replay.batches.len() as u32)?;
        if read.replay.dropped.is_some() {
            let cut = journal.file.set_len(read.length).and_then(|()| journal.file.sync_all());
            cut.map_err(StoreError::io("shorten", &journal.path))?;
        }
        Ok((journal, read.replay))
    }

    /// Reads what the run in a folder was begun with.
    ///
    /// # Errors
    /// [`StoreError::JournalUnusable`], [`StoreError::Io`].
    pub fn header(folder: &Path) -> Result<JournalHeader, StoreError> {
        let path = journal_path(folder);
        let mut input = BufReader::new(File::open(&path).map_err(StoreError::io("read", &path))?);
        Ok(header_of(&path, &mut input)?.0)
    }

    /// Puts another header in the place of that which the journal has, whole or not at all: the records stay as they are.
    ///
    /// # Errors
    /// [`StoreError::Changed`] where the journal has another header than `before`; [`StoreError::JournalUnusable`],
    /// [`StoreError::Io`].
    pub fn replace_header(folder: &Path, before: &JournalHeader, now: &JournalHeader) -> Result<(), StoreError> {
        let path = journal_path(folder);
        let mut input = BufReader::new(File::open(&path).map_err(StoreError::io("read", &path))?);
        let (header, _) = header_of(&path, &mut input)?;
        compare(&path, &header, before)?;
        let bytes = header_bytes(now).map_err(StoreError::io("write", &path))?;
        write_atomically(&path, |file| {
            file.write_all(&bytes)?;
            io::copy(&mut input, file).map(|_| ())
        })
    }

    /// Reads the journal in a run's folder and changes nothing.
    ///
    /// # Errors
    /// [`StoreError::JournalUnusable`], [`StoreError::Io`].
    pub fn read(folder: &Path) -> Result<(JournalHeader, Replay), StoreError> {
        let read = read_all(&journal_path(folder))?;
        Ok((read.header, read.replay))
    }

    fn at(path: PathBuf, length: u64, records: u32) -> Result<Self, StoreError> {
        let file = OpenOptions::new().append(true).open(&path).map_err(StoreError::io("open", &path))?;
        Ok(Self { path, file, length, records, broken: false })
    }
}

/// Where a run's journal is.
pub(super) fn journal_path(folder: &Path) -> PathBuf {
    folder.join("evaluations").join("journal")
}

/// Format line, length of the header, header as JSON, checksum of all of them.
fn header_bytes(header: &JournalHeader) -> io::Result<Vec<u8>> {
    let json = serde_json::to_vec(header)?;
    let mut bytes = FORMAT.as_bytes().to_vec();
    bytes.extend((json.len() as u32).to_le_bytes());
    bytes.extend(json);
    let sum = checksum(&bytes);
    bytes.extend(sum.to_le_bytes());
    Ok(bytes)
}

/// A journal as it was found: `length` bytes of it are whole.
struct Found {
    header: JournalHeader,
    replay: Replay,
    length: u64,
}

fn read_all(path: &Path) -> Result<Found, StoreError> {
    let file = File::open(path).map_err(StoreError::io("read", path))?;
    let size = file.metadata().map_err(StoreError::io("read", path))?.len();
    let mut input = BufReader::new(file);
    let (header, header_length) = header_of(path, &mut input)?;
    let (replay, length) = read_records(&mut input, header_length, size).map_err(StoreError::io("read", path))?;
    Ok(Found { header, replay, length })
}

/// The header and its length in bytes.
fn header_of(path: &Path, input: &mut impl Read) -> Result<(JournalHeader, u64), StoreError> {
    read_header(input)
        .map_err(StoreError::io("read", path))?
        .map_err(|reason| StoreError::JournalUnusable { path: path.to_path_buf(), reason })
}

/// The header and its length in bytes, or why it cannot be used.
fn read_header(input: &mut impl Read) -> io::Result<Result<(JournalHeader, u64), String>> {
    let damaged = || Ok(Err("its header is damaged or cut off".to_owned()));
    let mut bytes = read_up_to(input, FORMAT.len() as u64 + 4)?;
    if bytes.len() < FORMAT.len() + 4 {
        return damaged();
    }
    let (format, length) = bytes.split_at(FORMAT.len());
    if format != FORMAT.as_bytes() {
        let found = String::from_utf8_lossy(format).lines().next().unwrap_or_default().to_owned();
        return Ok(Err(format!("it begins with {found:?} and not with {:?}", FORMAT.trim_end())));
    }
    let length = u32::from_le_bytes([length[0], length[1], length[2], length[3]]);
    if length > MAX_HEADER {
        return damaged();
    }
    bytes.extend(read_up_to(input, u64::from(length) + 8)?);
    let Some((body, sum)) = bytes.split_last_chunk::<8>() else { return damaged() };
    if body.len() != FORMAT.len() + 4 + length as usize || checksum(body) != u64::from_le_bytes(*sum) {
        return damaged();
    }
    match serde_json::from_slice(&body[FORMAT.len() + 4..]) {
        Ok(header) => Ok(Ok((header, bytes.len() as u64))),
        Err(_) => damaged(),
    }
}

/// All whole records from byte `start` of `size`, and where they end.
fn read_records(input: &mut impl Read, start: u64, size: u64) -> io::Result<(Replay, u64)> {
    let (mut batches, mut at) = (Vec::new(), start);
    while at < size {
        let number = batches.len() as u32;
        let mut record = read_up_to(input, HEAD as u64)?;
        let head_whole = record.len() == HEAD;
        let length = if head_whole { payload_length(&record, number) } else { None };
        let rest = length.map(|length| length.saturating_add(TAIL as u64));
        let fits = rest.is_some_and(|rest| rest <= size - at - HEAD as u64);
        if let (Some(rest), true) = (rest, fits) {
            record.extend(read_up_to(input, rest)?);
        }
        let Some(batch) = (if fits { decode(&record) } else { None }) else {
            // The length is under a checksum: a record that claims more than there is was cut, not damaged.
            let torn = !head_whole || (length.is_some() && !fits);
            return Ok((Replay { batches, dropped: Some(dropped(number, size - at, torn)) }, at));
        };
        batches.push(batch);
        at += record.len() as u64;
    }
    Ok((Replay { batches, dropped: None }, at))
}

fn dropped(number: u32, bytes: u64, torn: bool) -> String {
    let number = u64::from(number) + 1;
    if torn {
        format!(
            "The journal ends in the middle of record {number}, as after a kill or a power cut; its {bytes} bytes are dropped and \
             those points are evaluated again."
        )
    } else {
        format!(
            "Record {number} of the journal is damaged (a checksum does not match); it and what follows, {bytes} bytes, are dropped \
             and those points are evaluated again. Check the disk."
        )
    }
}

/// Up to `length` bytes, fewer where the file ends.
fn read_up_to(input: &mut impl Read, length: u64) -> io::Result<Vec<u8>> {
    let mut bytes = Vec::new();
    input.take(length).read_to_end(&mut bytes)?;
    Ok(bytes)
}

/// Refuses when a fact differs, is missing, or is new.
fn compare(path: &Path, before: &JournalHeader, now: &JournalHeader) -> Result<(), StoreError> {
    let absent = || "nothing".to_owned();
    for key in before.facts.keys().chain(now.facts.keys()) {
        let (a, b) = (before.facts.get(key), now.facts.get(key));
        if a != b {
            return Err(StoreError::Changed {
                path: path.to_path_buf(),
                what: key.clone(),
                before: a.cloned().unwrap_or_else(absent),
                now: b.cloned().unwrap_or_else(absent),
            });
        }
    }
    Ok(())
}

#[cfg(test)]
mod tests;
