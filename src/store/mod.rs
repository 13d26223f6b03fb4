//! Files: every byte that goes to disk, or comes from it, goes through here.
//!
//! * [`write_atomically`], [`write_json`]: a file is there whole, or as it was before;
//! * [`RunFolder`]: the folder of a run, held by one process at a time;
//! * [`Journal`], [`Recorder`]: every evaluated point, written and synced before it is used, so that an interrupted run loses nothing;
//! * [`ExchangeFolder`], [`Unfinished`]: points that somebody else evaluates, and answers of a batch that is not whole yet;
//! * [`ProposalFile`], [`read_proposal`]: the proposal, checked as it is read;
//! * [`EstimateParts`], [`EstimateState`]: what a production run says, and where it stands;
//! * [`Table`], [`TableWriter`]: points as CSV or NumPy files, numbers read back to the same bits.
//!
//! **Invariant:** nothing here computes. A file holds what it was given, or the caller is told, with the path, why not.

mod atomic;
mod checksum;
mod error;
mod estimate;
mod exchange;
mod folder;
mod journal;
mod json;
mod lock;
mod npy;
mod points_file;
mod proposal;
mod proposal_reader;
mod proposal_space;
mod record;
mod recorder;
mod table;
mod unfinished;

pub use atomic::{write_atomically, write_json};
pub use error::StoreError;
pub use estimate::{CourseRow, ESTIMATE_FORMAT, EstimateParts, EstimateState, MOST_SHARDS, fingerprint};
pub use exchange::ExchangeFolder;
pub use folder::{RUN_ENTRIES, RunFolder};
pub use journal::{Journal, JournalHeader, Replay};
pub use lock::Lock;
pub use npy::{NpyWriter, read_npy};
pub use points_file::PointsFile;
pub use proposal::{
    ComponentEntry, CorrelationEntry, MadeBy, PROPOSAL_FORMAT, ProposalFile, ScoresEntry, VariableEntry, finite,
};
pub use proposal_reader::read_proposal;
pub use record::{JournalBatch, JournalColumn};
pub use recorder::Recorder;
pub use table::{Table, TableWriter, decimal};
pub use unfinished::Unfinished;
