//! What production starts from and where its files are.

use super::ending::Misuse;
use super::header;
use super::run_files::Form;
use super::run_files::write_figures;
use super::source::Source;
use anyhow::Context;
use evenpoise::figures::Drawing;
use evenpoise::figures::Style;
use evenpoise::problem::Aim;
use evenpoise::production::EstimateJob;
use evenpoise::production::Job;
use evenpoise::production::Outcome;
use evenpoise::production::Sequence;
use evenpoise::production::Shard;
use evenpoise::production::borders;
use evenpoise::report::BAND_SHARES;
use evenpoise::report::DrawsTable;
use evenpoise::report::bands_figures;
use evenpoise::report::course_figure;
use evenpoise::report::has_columns;
use evenpoise::store::CourseRow;
use evenpoise::store::Lock;
use evenpoise::store::fingerprint;
use std::fs;
use std::path::Path;
use std::path::PathBuf;

/// Estimates up to which bands of columns are counted without being asked for: each takes some 130 kB.
const MOST_BANDED: usize = 500;

/// In the folder of a run: answers of a model that no sums hold yet.
pub(crate) const UNFINISHED: &str = "unfinished";
/// Questions to a model that is run elsewhere, and its answers.
const EXCHANGED: [&str; 2] = ["asked", "answered"];

/// Where a run writes.
#[derive(Debug)]
pub(crate) struct Place {
    /// `estimate.json`, or the file of a shard.
    pub(crate) result: PathBuf,
    /// Folder of what belongs to the run while it works.
    pub(crate) work: PathBuf,
    lock: Lock,
}

impl Place {
    /// Takes the folder; an estimate in it is replaced only by force, a run under way is gone on with only by resuming.
    pub(crate) fn take(out: &Path, shard: Shard, force: bool, resume: bool) -> anyhow::Result<Self> {
        let (result, work) = if shard == Shard::WHOLE {
            (out.join("estimate.json"), out.to_path_buf())
        } else {
            let stem = shard_stem(shard);
            (out.join(format!("{stem}.json")), out.join(stem))
        };
        fs::create_dir_all(&work).with_context(|| format!("cannot create the folder {}", work.display()))?;
        let lock = Lock::take(&work)?;
        let place = Self { result, work, lock };
        if resume && place.state().is_file() {
            return Ok(place);
        }
        if force {
            return place.emptied();
        }
        if place.result.is_file() {
            let how = if resume { "is finished" } else { "is there already" };
            anyhow::bail!("{} {how}; choose another folder (--out) or replace it (--force)", place.result.display());
        }
        if place.state().is_file() {
            anyhow::bail!(
                "{} holds a run under way; go on with it (--resume) or begin anew (--force)",
                place.work.display()
            );
        }
        place.emptied()
    }

    pub(crate) fn state(&self) -> PathBuf {
        self.work.join("state.json")
    }

    /// Removes what a model was asked and answered: another estimate asks anew.
    fn emptied(self) -> anyhow::Result<Self> {
        let unfinished = self.work.join(UNFINISHED);
        let exchanged = EXCHANGED.map(|name| self.work.join(name)).into_iter().filter(|path| path.is_dir());
        let removed = |path: PathBuf| {
            let done = if path.is_dir() { fs::remove_dir_all(&path) } else { fs::remove_file(&path) };
            done.with_context(|| format!("cannot remove {}", path.display()))
        };
        exchanged.chain(unfinished.is_file().then_some(unfinished)).try_for_each(removed)?;
        Ok(self)
    }

    /// The state has done its work. What a shard leaves is its one file.
    pub(crate) fn clear(self, shard: Shard) -> anyhow::Result<()> {
        let state = self.state();
        if state.is_file() {
            fs::remove_file(&state).with_context(|| format!("cannot remove {}", state.display()))?;
        }
        let Self { work, lock, .. } = self;
        drop(lock);
        if shard != Shard::WHOLE && fs::remove_file(work.join("log.txt")).is_ok() {
            // Fails, as it should, when the folder holds anything else.
            let _ = fs::remove_dir(work);
        }
        Ok(())
    }
}

/// `shard-03-of-64`.
pub(crate) fn shard_stem(shard: Shard) -> String {
    let width = shard.of.to_string().len();
    format!("shard-{:0width$}-of-{}", shard.index, shard.of)
}

/// What is produced, but for what the user asks of it.
pub(crate) struct Wanted<'a> {
    pub(crate) seed: Option<u64>,
    pub(crate) stage: u32,
    pub(crate) draws: Option<u64>,
    pub(crate) quantiles: &'a [f64],
}

/// The job: all that the numbers depend on.
pub(crate) fn job(source: &Source, wanted: &Wanted) -> anyhow::Result<Job> {
    let (problem, scores) = (&source.problem, source.file.scores.as_ref());
    let log_scale = scores.and_then(|s| s.log_normaliser);
    if log_scale.is_none() && problem.aim() == Aim::Density {
        let advice = format!(
            "{} says no log_normaliser in its scores, by which the terms are scaled; write it there, to some hundreds of nats",
            source.path.display()
        );
        return Err(Misuse(advice).into());
    }
    let names = problem.estimate_names();
    let banded = has_columns(&names) && names.len() <= MOST_BANDED;
    let mut quantiles = wanted.quantiles.to_vec();
    if banded {
        quantiles.extend(BAND_SHARES);
    }
    quantiles.sort_by(f64::total_cmp);
    quantiles.dedup();
    let sequence = Sequence::new(&source.mixture, 0, 0, wanted.draws);
    Ok(Job {
        program: header::PROGRAM.to_owned(),
        title: problem.title().to_owned(),
        aim: problem.aim().word().to_owned(),
        problem: problem.digest(),
        proposal: fingerprint(&source.path)?,
        seed: wanted.seed.unwrap_or(source.file.made_by.seed),
        stage: wanted.stage,
        draws: wanted.draws,
        failed: Job::failed_word(problem),
        log_scale: log_scale.unwrap_or(0.0),
        predicted_ess_fraction: scores.and_then(|s| s.ess_fraction),
        proposal_verdict: source.file.verdict.clone(),
        strata: 1 + sequence.strata().into_iter().max().unwrap_or(0),
        estimates: estimates(source, names, !quantiles.is_empty(), !wanted.quantiles.is_empty())?,
        quantiles,
    })
}

/// The same job with another number of draws and stage.
pub(crate) fn with_draws(job: &Job, source: &Source, draws: Option<u64>, stage: u32) -> Job {
    let strata = Sequence::new(&source.mixture, 0, 0, draws).strata().into_iter().max().unwrap_or(0) + 1;
    Job { draws, stage, strata, ..job.clone() }
}

/// Centres, and borders of bins, from the report draws beside the proposal. Without them sums are about zero, and quantiles
/// that were asked for (`needed`) cannot be had.
fn estimates(source: &Source, names: Vec<String>, binned: bool, needed: bool) -> anyhow::Result<Vec<EstimateJob>> {
    if names.is_empty() {
        return Ok(Vec::new());
    }
    let path = source.folder().join("points.csv");
    let draws = match DrawsTable::read(&path, &source.problem) {
        Ok(draws) => draws,
        Err(error) if needed => return Err(error).context("quantiles are laid out by the run's report draws"),
        Err(_) => {
            return Ok(names.into_iter().map(|name| EstimateJob { name, centre: 0.0, borders: Vec::new() }).collect());
        }
    };
    let weights = draws.weights();
    let each = names.into_iter().zip(draws.estimates()).map(|(name, (_, values))| EstimateJob {
        name,
        centre: centre(values, weights),
        borders: if binned { borders(values, weights) } else { Vec::new() },
    });
    Ok(each.collect())
}

fn centre(values: &[f64], weights: &[f64]) -> f64 {
    let given = || values.iter().zip(weights).filter(|(x, w)| x.is_finite() && **w > 0.0);
    let mass: f64 = given().map(|(_, w)| w).sum();
    let mean = given().map(|(x, w)| x * w / mass).sum::<f64>();
    if mean.is_finite() { mean } else { 0.0 }
}

/// Writes the figures of a run: its course, and bands of the estimates that are columns.
pub(crate) fn figures(work: &Path, job: &Job, outcome: &Outcome, course: &[CourseRow]) -> anyhow::Result<()> {
    let folder = work.join("figures");
    fs::create_dir_all(&folder).with_context(|| format!("cannot create the folder {}", folder.display()))?;
    let style = Style::default();
    let mut drawings: Vec<Drawing> = vec![course_figure(job, course, &style)];
    drawings.extend(bands_figures(outcome, &style));
    write_figures(&folder, &drawings, Form::Png)
}
