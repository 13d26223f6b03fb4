//! What can go wrong with files.

use std::io;
use std::path::Path;
use std::path::PathBuf;
use thiserror::Error;

/// Why a file could not be written, read or believed. Every variant names the path.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum StoreError {
    /// The system refused.
    #[error("cannot {action} {}", path.display())]
    Io {
        /// What was tried: "write", "read", ...
        action: &'static str,
        /// Where.
        path: PathBuf,
        /// The system's reason.
        #[source]
        source: io::Error,
    },
    /// The folder holds a run.
    #[error("{} holds a run already; choose another folder (--out), go on with it (--resume) or replace it (--force)", folder.display())]
    HoldsRun {
        /// The folder.
        folder: PathBuf,
    },
    /// The folder holds something under a name that a run needs, and no run.
    #[error("{} holds {entry}, which no run wrote; choose another folder (--out)", folder.display())]
    HoldsOther {
        /// The folder.
        folder: PathBuf,
        /// The entry in the way.
        entry: String,
    },
    /// The folder holds no run.
    #[error("{} holds no run: its journal, evaluations/journal, is not there; name the folder that a run was written to", folder.display())]
    HoldsNoRun {
        /// The folder.
        folder: PathBuf,
    },
    /// Another process holds the folder.
    #[error("{} is in use by {holder}; wait until it is done, or end it", folder.display())]
    InUse {
        /// The folder.
        folder: PathBuf,
        /// The process, as the lock file names it.
        holder: String,
    },
    /// The beginning of a journal cannot be believed, and so nothing after it.
    #[error("the journal {} cannot be used: {reason}; start the run again (--force), or restore the file from a copy", path.display())]
    JournalUnusable {
        /// The journal.
        path: PathBuf,
        /// What is wrong with it.
        reason: String,
    },
    /// A run is resumed with something else than it was begun with.
    #[error(
        "{what} is not what the run {} was begun with (then {before}, now {now}); put it back to resume, or start a new run",
        path.display()
    )]
    Changed {
        /// The journal.
        path: PathBuf,
        /// What has changed.
        what: String,
        /// What the journal says.
        before: String,
        /// What was given.
        now: String,
    },
    /// The journal holds other points than the run asks for, though everything it was begun with is the same.
    #[error(
        "the journal {} holds other points than this run asks for, from record {record} on; it was written by another build of \
         the program: start the run again (--force)",
        path.display()
    )]
    Diverged {
        /// The journal.
        path: PathBuf,
        /// The first record that differs, from 1.
        record: u64,
    },
    /// A table that cannot be read.
    #[error("{}: line {line}: {reason}", path.display())]
    Table {
        /// The file.
        path: PathBuf,
        /// Line in it, from 1.
        line: u64,
        /// What is wrong, and what was expected.
        reason: String,
    },
    /// A JSON file that cannot be believed.
    #[error("{}: {at}: {reason}", path.display())]
    Json {
        /// The file.
        path: PathBuf,
        /// The way to the place inside it: `components[0].scale`.
        at: String,
        /// What is wrong, and what was expected.
        reason: String,
    },
    /// A NumPy file that cannot be read.
    #[error("{}: {reason}", path.display())]
    Npy {
        /// The file.
        path: PathBuf,
        /// What is wrong, and what was expected.
        reason: String,
    },
}

impl StoreError {
    /// A system error while `action` was tried at `path`; for `map_err`.
    pub(crate) fn io(action: &'static str, path: &Path) -> impl FnOnce(io::Error) -> Self {
        let path = path.to_path_buf();
        move |source| Self::Io { action, path, source }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn errors_travel_and_name_their_path() {
        fn send_and_sync<T: Send + Sync>() {}
        send_and_sync::<StoreError>();
        let error = StoreError::io("write", Path::new("pipes.run/points.csv"))(io::Error::other("no space"));
        assert_eq!(error.to_string(), "cannot write pipes.run/points.csv");
        assert_eq!(std::error::Error::source(&error).unwrap().to_string(), "no space");
    }
}
