//! A proposal and the problem it belongs to, wherever the command was pointed.

use super::ending::Misuse;
use super::problem_file;
use anyhow::Context;
use evenpoise::problem::Problem;
use evenpoise::problem::TuningKeys;
use evenpoise::proposal::Mixture;
use evenpoise::store::ProposalFile;
use evenpoise::store::read_proposal;
use std::path::Path;
use std::path::PathBuf;

/// What production starts from.
#[derive(Debug)]
pub(crate) struct Source {
    pub(crate) problem: Problem,
    pub(crate) file: ProposalFile,
    pub(crate) mixture: Mixture,
    /// The proposal's file.
    pub(crate) path: PathBuf,
}

impl Source {
    /// The folder that the proposal lies in: that of a run, where there is one.
    pub(crate) fn folder(&self) -> &Path {
        match self.path.parent() {
            Some(folder) if !folder.as_os_str().is_empty() => folder,
            _ => Path::new("."),
        }
    }
}

/// A proposal to draw from: RUN, or a proposal's file. The problem is the one beside it; without one, the space that the file
/// describes.
pub(crate) fn of_proposal(given: &Path) -> anyhow::Result<Source> {
    let path = proposal_path(given);
    let file = read_proposal(&path)?;
    let beside = path.with_file_name(problem_file::COPY);
    let problem = if given.is_dir() || beside.is_file() {
        problem_file::read(&beside, TuningKeys::clone)?
    } else {
        file.space(&path)?
    };
    together(problem, file, path)
}

/// A problem to be evaluated at draws of a proposal: RUN, or a problem file with a proposal.
pub(crate) fn of_problem(given: &Path, proposal: Option<&Path>) -> anyhow::Result<Source> {
    let (problem, path) = match proposal {
        None if given.is_dir() => (given.join(problem_file::COPY), proposal_path(given)),
        Some(proposal) => (problem_file::locate(given, None).file, proposal_path(proposal)),
        None => {
            let advice = format!(
                "{} is no run folder; name one, or a problem file with --proposal RUN (or a proposal.json)",
                given.display()
            );
            return Err(Misuse(advice).into());
        }
    };
    let file = read_proposal(&path)?;
    together(problem_file::read(&problem, TuningKeys::clone)?, file, path)
}

fn together(problem: Problem, file: ProposalFile, path: PathBuf) -> anyhow::Result<Source> {
    if let Some(misfit) = file.misfit(&problem) {
        anyhow::bail!(
            "{} does not belong to this problem: {misfit}; name the problem it was tuned for",
            path.display()
        );
    }
    let mixture = file.mixture().with_context(|| format!("the proposal {}", path.display()))?;
    Ok(Source { problem, file, mixture, path })
}

fn proposal_path(given: &Path) -> PathBuf {
    if given.is_dir() { given.join("proposal.json") } else { given.to_path_buf() }
}
