//! `evenpoise pool`: shards from anywhere as one answer.

use super::ending::Ending;
use super::ending::Misuse;
use super::estimate_report;
use super::numbers::count;
use super::output;
use anyhow::Context;
use evenpoise::production::Outcome;
use evenpoise::report::PoolError;
use evenpoise::report::pooled;
use evenpoise::store::EstimateParts;
use evenpoise::weights::verdict::Word;
use std::path::Path;
use std::path::PathBuf;

/// Shards of one production run as one answer, to the byte what a single run writes.
#[derive(Debug, clap::Args)]
pub(crate) struct Args {
    /// Files that `estimate --shard` wrote.
    #[arg(required = true, value_name = "FILE")]
    shards: Vec<PathBuf>,
    /// Folder for estimate.json [default: that of the first file].
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
    /// Pool what is there, and say what is missing.
    #[arg(long)]
    partial: bool,
    /// Replace the estimate that is in the folder.
    #[arg(long)]
    force: bool,
    /// Print what came out as JSON on standard output, and nothing else there.
    #[arg(long)]
    json: bool,
}

pub(crate) fn run(args: &Args) -> anyhow::Result<Ending> {
    let mut read = Vec::new();
    for path in &args.shards {
        read.push((path.display().to_string(), EstimateParts::read(path)?));
    }
    let parts = pooled(read, args.partial).map_err(|error| match error {
        PoolError::Missing { .. } => {
            anyhow::Error::from(error).context("not all shards are here (--partial pools those that are)")
        }
        other => other.into(),
    })?;
    let folder =
        args.out.clone().unwrap_or_else(|| args.shards[0].parent().map_or_else(PathBuf::new, Path::to_path_buf));
    let path = folder.join("estimate.json");
    if path.is_file() && !args.force {
        return Err(Misuse(format!(
            "{} is there already; choose a folder (--out) or replace it (--force)",
            path.display()
        ))
        .into());
    }
    if !folder.as_os_str().is_empty() {
        std::fs::create_dir_all(&folder).with_context(|| format!("cannot create the folder {}", folder.display()))?;
    }
    let outcome = Outcome::of(&parts.job, &parts.sums);
    parts.write(&path, &outcome)?;
    let mut told = estimate_report::report(&parts, &outcome);
    if !parts.missing.is_empty() {
        let names: Vec<String> = parts.missing.iter().map(|shard| shard.index.to_string()).collect();
        let all = parts.job.draws.unwrap_or(0);
        told.push_str(&super::layout::hanging(
            "\nPartial   ",
            &format!(
                "{} of {} draws; missing of {} shards: {}",
                count(outcome.draws),
                count(all),
                parts.missing[0].of,
                names.join(", ")
            ),
        ));
    }
    told.push_str(&format!("File      {}\n", path.display()));
    if args.json {
        output::complain(&told);
        output::say(&format!("{}\n", serde_json::to_string_pretty(&outcome)?))?;
    } else {
        output::say(&told)?;
    }
    Ok(if outcome.verdict == Word::Unfit { Ending::Unfit } else { Ending::Done })
}
