//! The problem file of a command, and the run folder that belongs to it.

use evenpoise::problem::Problem;
use evenpoise::problem::ProblemErrors;
use evenpoise::problem::TuningKeys;
use std::path::Path;
use std::path::PathBuf;

/// Ending of a run folder's name.
const RUN: &str = "run";
/// The copy of the problem in a run folder.
pub(crate) const COPY: &str = "problem.toml";

/// A problem file and the run folder beside it.
#[derive(Debug)]
pub(crate) struct Located {
    pub(crate) file: PathBuf,
    pub(crate) run: PathBuf,
}

/// Where `given` points to: a problem file, or the folder of a run with a copy of one.
pub(crate) fn locate(given: &Path, out: Option<&Path>) -> Located {
    if given.is_dir() {
        return Located { file: given.join(COPY), run: out.unwrap_or(given).to_path_buf() };
    }
    let beside = || given.with_extension(RUN);
    Located { file: given.to_path_buf(), run: out.map_or_else(beside, Path::to_path_buf) }
}

/// Reads a problem, with what `change` makes of its `[tuning]`.
pub(crate) fn read(path: &Path, change: impl Fn(&TuningKeys) -> TuningKeys) -> Result<Problem, ProblemErrors> {
    Problem::read_with(path, change)
}
