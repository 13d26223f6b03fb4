//! `estimate.json`, format `evenpoise-estimate/1`: what a production run says, and the sums that make it poolable; and the
//! state of a run under way.

use super::StoreError;
use super::atomic::write_json;
use super::checksum::checksum;
use crate::production::Job;
use crate::production::Outcome;
use crate::production::PilotNumber;
use crate::production::Shard;
use crate::production::Sums;
use serde::Deserialize;
use serde::Serialize;
use serde::de::DeserializeOwned;
use std::fs;
use std::path::Path;

/// The version of estimates that is written, and the only one that is read.
pub const ESTIMATE_FORMAT: &str = "evenpoise-estimate/1";
/// The same of states.
const STATE_FORMAT: &str = "evenpoise-estimate-state/1";

/// Shards that a run may have.
pub const MOST_SHARDS: u32 = 1_000_000;
/// Strata that a run can have: each holds a 128th of the draws, or nearly.
const MOST_STRATA: u32 = 130;

/// What of an estimate is read again: all that its numbers follow from.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct EstimateParts {
    /// Which part of the run this is.
    pub shard: Shard,
    /// Shards that are missing from a pool that was made without them; empty otherwise.
    #[serde(skip_serializing_if = "Vec::is_empty", default)]
    pub missing: Vec<Shard>,
    /// The pilot, where one fixed the number of draws.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub pilot: Option<PilotNumber>,
    /// What the run is.
    pub job: Job,
    /// Its sums.
    pub sums: Sums,
}

/// The file.
#[derive(Serialize)]
struct EstimateFile<'a> {
    format: &'static str,
    title: &'a str,
    aim: &'a str,
    #[serde(flatten)]
    outcome: &'a Outcome,
    #[serde(flatten)]
    parts: &'a EstimateParts,
    checksum: String,
}

#[derive(Deserialize)]
struct EstimateRead {
    format: String,
    #[serde(flatten)]
    parts: EstimateParts,
    checksum: String,
}

impl EstimateParts {
    /// Whether these are all draws that the job asks of this shard.
    #[must_use]
    pub fn are_complete(&self) -> bool {
        self.job.draws.is_none_or(|draws| {
            let part = self.shard.part(draws);
            part.end - part.start == self.sums.draws
        })
    }

    /// Writes `estimate.json`: the outcome in front, the sums behind. The same parts give the same bytes.
    ///
    /// # Errors
    /// [`StoreError::Io`] with the path.
    pub fn write(&self, path: &Path, outcome: &Outcome) -> Result<(), StoreError> {
        write_json(path, &self.file(outcome))
    }

    /// The same as a text.
    ///
    /// # Errors
    /// None that numbers and texts can give rise to.
    pub fn to_json(&self, outcome: &Outcome) -> serde_json::Result<String> {
        serde_json::to_string_pretty(&self.file(outcome))
    }

    fn file<'a>(&'a self, outcome: &'a Outcome) -> EstimateFile<'a> {
        EstimateFile {
            format: ESTIMATE_FORMAT,
            title: &self.job.title,
            aim: &self.job.aim,
            outcome,
            parts: self,
            checksum: checksum_of(self),
        }
    }

    /// Reads the parts of an `estimate.json`, and believes them only with their checksum.
    ///
    /// # Errors
    /// [`StoreError::Json`] for another format, damaged or cut files; [`StoreError::Io`].
    pub fn read(path: &Path) -> Result<Self, StoreError> {
        let read: EstimateRead = parsed(path, ESTIMATE_FORMAT)?;
        believed(path, &read.format, ESTIMATE_FORMAT, read.checksum == checksum_of(&read.parts))?;
        checked(path, read.parts)
    }
}

/// A run under way.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct EstimateState {
    /// Where it stands.
    #[serde(flatten)]
    pub parts: EstimateParts,
    /// Whether this is the pilot still.
    pub in_pilot: bool,
    /// Draws after which the course was noted: the answer, its error and interval.
    pub course: Vec<CourseRow>,
    /// Bytes of the points' file that belong to these draws.
    pub points_bytes: u64,
    /// Seconds spent until here.
    pub seconds: f64,
}

/// The answer after some draws; what is not known is `null`.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct CourseRow {
    /// Draws.
    pub draws: u64,
    /// The answer.
    pub value: Option<f64>,
    /// Its standard error.
    pub se: Option<f64>,
    /// Its 95 % interval.
    pub interval_95: [Option<f64>; 2],
}

#[derive(Serialize, Deserialize)]
struct StateFile {
    format: String,
    #[serde(flatten)]
    state: EstimateState,
    checksum: String,
}

impl EstimateState {
    /// Writes the state, whole or not at all.
    ///
    /// # Errors
    /// [`StoreError::Io`] with the path.
    pub fn write(&self, path: &Path) -> Result<(), StoreError> {
        let file = StateFile { format: STATE_FORMAT.to_owned(), state: self.clone(), checksum: checksum_of(self) };
        write_json(path, &file)
    }

    /// Reads a state.
    ///
    /// # Errors
    /// As [`EstimateParts::read`].
    pub fn read(path: &Path) -> Result<Self, StoreError> {
        let read: StateFile = parsed(path, STATE_FORMAT)?;
        believed(path, &read.format, STATE_FORMAT, read.checksum == checksum_of(&read.state))?;
        let parts = checked(path, read.state.parts)?;
        Ok(Self { parts, ..read.state })
    }
}

/// A fingerprint of a file's bytes: against mistakes, not against forgers.
///
/// # Errors
/// [`StoreError::Io`] with the path.
pub fn fingerprint(path: &Path) -> Result<String, StoreError> {
    let bytes = fs::read(path).map_err(StoreError::io("read", path))?;
    Ok(format!("{:016x}", checksum(&bytes)))
}

fn checksum_of<T: Serialize>(value: &T) -> String {
    // Plain numbers, texts and lists: nothing here that JSON refuses.
    let bytes = serde_json::to_vec(value).unwrap_or_default();
    format!("{:016x}", checksum(&bytes))
}

fn parsed<T: DeserializeOwned>(path: &Path, format: &str) -> Result<T, StoreError> {
    let text = fs::read_to_string(path).map_err(StoreError::io("read", path))?;
    let value: serde_json::Value = serde_json::from_str(&text).map_err(|error| {
        let at = format!("line {}, column {}", error.line(), error.column());
        wrong(path, &at, format!("not JSON that can be read ({error}); the file is damaged or cut off"))
    })?;
    if value.get("format").and_then(|f| f.as_str()) != Some(format) {
        let found = value.get("format").map_or_else(|| "missing".to_owned(), ToString::to_string);
        return Err(wrong(path, "format", format!("is {found}; this program reads {format:?}")));
    }
    serde_json::from_value(value).map_err(|error| wrong(path, "the whole", format!("{error}; the file is damaged")))
}

fn believed(path: &Path, found: &str, format: &str, holds: bool) -> Result<(), StoreError> {
    debug_assert_eq!(found, format);
    if holds {
        return Ok(());
    }
    let reason = "does not fit the rest: the file was damaged or changed; make it again".to_owned();
    Err(wrong(path, "checksum", reason))
}

/// Parts that hang together.
fn checked(path: &Path, parts: EstimateParts) -> Result<EstimateParts, StoreError> {
    let Shard { index, of } = parts.shard;
    if !(1..=of).contains(&index) || of > MOST_SHARDS {
        return Err(wrong(path, "shard", format!("{index} of {of} is none")));
    }
    if parts.job.strata > MOST_STRATA || !parts.sums.belong_to(&parts.job) {
        return Err(wrong(path, "sums", "they have another layout than their job".to_owned()));
    }
    Ok(parts)
}

fn wrong(path: &Path, at: &str, reason: String) -> StoreError {
    StoreError::Json { path: path.to_path_buf(), at: at.to_owned(), reason }
}
