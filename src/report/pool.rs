//! Shards put together: refused by name where they do not belong together.

use crate::production::Job;
use crate::production::Shard;
use crate::store::EstimateParts;
use thiserror::Error;

/// Why shards cannot be pooled.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum PoolError {
    /// There is none.
    #[error("no shard was given")]
    Nothing,
    /// A shard is of another run.
    #[error("{file} has {what} {found}, {first} has {expected}; only shards of one run can be pooled")]
    Foreign {
        /// The file.
        file: String,
        /// The first file.
        first: String,
        /// What differs.
        what: &'static str,
        /// In this file.
        found: String,
        /// In the first.
        expected: String,
    },
    /// Two files hold the same shard.
    #[error("{first} and {second} are both shard {index} of {of}; give each shard once")]
    Doubled {
        /// A file.
        first: String,
        /// Another.
        second: String,
        /// The shard.
        index: u32,
        /// Of how many.
        of: u32,
    },
    /// A shard does not hold all draws of its part.
    #[error("{file} holds {found} draws, its shard has {expected}; let it finish first")]
    Unfinished {
        /// The file.
        file: String,
        /// Draws it holds.
        found: u64,
        /// Draws of the shard.
        expected: u64,
    },
    /// A file is no shard: a pool that was made without some.
    #[error("{file} is a pool without {missing} of its shards; pool the shards themselves")]
    Partial {
        /// The file.
        file: String,
        /// Shards that it lacks.
        missing: usize,
    },
    /// Shards are missing.
    #[error("missing of {of} shards: {list}")]
    Missing {
        /// Their numbers.
        list: String,
        /// Of how many.
        of: u32,
    },
}

/// Pools shards, given with the names of their files, in any order. All of them make the parts of the single run; with `partial`,
/// some may be missing and are noted.
///
/// # Errors
/// [`PoolError`], naming the file.
pub fn pooled(shards: Vec<(String, EstimateParts)>, partial: bool) -> Result<EstimateParts, PoolError> {
    let mut shards = shards;
    shards.sort_by_key(|(_, parts)| parts.shard);
    let Some((first_name, first)) = shards.first().cloned() else { return Err(PoolError::Nothing) };
    let mut known: Vec<Option<&str>> = vec![None; first.shard.of as usize];
    for (name, parts) in &shards {
        belongs(name, parts, &first_name, &first)?;
        if let Some(other) = known[parts.shard.index as usize - 1].replace(name) {
            let Shard { index, of } = parts.shard;
            return Err(PoolError::Doubled { first: other.to_owned(), second: name.clone(), index, of });
        }
    }
    let of = first.shard.of;
    let missing: Vec<Shard> =
        (1..=of).filter(|&k| known[k as usize - 1].is_none()).map(|index| Shard { index, of }).collect();
    if !(missing.is_empty() || partial) {
        let list: Vec<String> = missing.iter().map(|shard| shard.index.to_string()).collect();
        return Err(PoolError::Missing { list: list.join(", "), of });
    }
    let mut whole = EstimateParts { shard: Shard::WHOLE, missing, ..first };
    for (name, parts) in shards.iter().skip(1) {
        if !whole.sums.merge(&parts.sums) {
            return Err(foreign(
                name,
                &first_name,
                "the layout of its sums",
                ("another".to_owned(), "its own".to_owned()),
            ));
        }
    }
    whole.sums.settle();
    Ok(whole)
}

fn belongs(name: &str, parts: &EstimateParts, first_name: &str, first: &EstimateParts) -> Result<(), PoolError> {
    let texts = |job: &Job, shard: Shard| {
        let draws = job.draws.map_or("not fixed beforehand".to_owned(), |draws| draws.to_string());
        [
            ("the program", job.program.clone()),
            ("the problem", job.problem.clone()),
            ("the proposal", job.proposal.clone()),
            ("the seed", job.seed.to_string()),
            ("the stage", job.stage.to_string()),
            ("the number of draws", draws),
            ("the number of shards", shard.of.to_string()),
            ("the list of quantiles", format!("{:?}", job.quantiles)),
        ]
    };
    let pairs = texts(&parts.job, parts.shard).into_iter().zip(texts(&first.job, first.shard));
    for ((what, found), (_, expected)) in pairs {
        if found != expected {
            return Err(foreign(name, first_name, what, (found, expected)));
        }
    }
    if parts.job != first.job {
        return Err(foreign(
            name,
            first_name,
            "a layout of sums that is",
            ("another".to_owned(), "its own".to_owned()),
        ));
    }
    if !parts.missing.is_empty() {
        return Err(PoolError::Partial { file: name.to_owned(), missing: parts.missing.len() });
    }
    if !parts.are_complete() {
        let part = parts.shard.part(parts.job.draws.unwrap_or(0));
        let expected = part.end - part.start;
        return Err(PoolError::Unfinished { file: name.to_owned(), found: parts.sums.draws, expected });
    }
    Ok(())
}

fn foreign(file: &str, first: &str, what: &'static str, (found, expected): (String, String)) -> PoolError {
    PoolError::Foreign { file: file.to_owned(), first: first.to_owned(), what, found, expected }
}
