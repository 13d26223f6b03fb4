//! What can be wrong with the description of a distribution.

use super::catalogue;
use super::given::ParameterSet;
use thiserror::Error;

/// A distribution that was described wrongly; the text says what to write instead.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum DistributionError {
    /// No distribution has that name.
    #[error("there is no distribution `{name}`; {}", nearest_or_list(*.nearest))]
    UnknownName {
        /// The name as given.
        name: String,
        /// The nearest known name, when one is near.
        nearest: Option<&'static str>,
    },
    /// The distribution has no parameter of that name.
    #[error("{distribution} has no parameter `{parameter}`{}; it takes {}", did_you_mean(*.nearest), describe(.sets))]
    UnknownParameter {
        /// The distribution.
        distribution: &'static str,
        /// The parameter as given.
        parameter: String,
        /// The nearest known parameter, when one is near.
        nearest: Option<&'static str>,
        /// The sets of parameters that it takes.
        sets: &'static [ParameterSet],
    },
    /// The parameters given are no complete set: one is missing, or two sets are mixed.
    #[error("{distribution} takes {}; given: {}", describe(.sets), list(.given))]
    Incomplete {
        /// The distribution.
        distribution: &'static str,
        /// The parameters given.
        given: Vec<String>,
        /// The sets of parameters that it takes.
        sets: &'static [ParameterSet],
    },
    /// A parameter was given twice.
    #[error("{distribution}: `{parameter}` is given twice; leave one out")]
    Twice {
        /// The distribution.
        distribution: &'static str,
        /// The parameter.
        parameter: &'static str,
    },
    /// The value of a parameter is not allowed.
    #[error("{distribution}: {parameter} = {value} is not allowed; give {allowed}")]
    Value {
        /// The distribution.
        distribution: &'static str,
        /// The parameter.
        parameter: &'static str,
        /// Its value.
        value: f64,
        /// What is allowed.
        allowed: String,
    },
    /// The ends of a truncation are out of order or NaN.
    #[error("between = [{low}, {high}] is no interval; give two numbers, the smaller first")]
    Between {
        /// The lower end.
        low: f64,
        /// The upper end.
        high: f64,
    },
    /// There is nothing between the ends of a truncation.
    #[error("{distribution} has no probability in [{low}, {high}]; its values lie in [{least}, {greatest}]")]
    NoMass {
        /// The distribution.
        distribution: &'static str,
        /// The lower end.
        low: f64,
        /// The upper end.
        high: f64,
        /// The least value that the distribution takes.
        least: f64,
        /// The greatest value that the distribution takes.
        greatest: f64,
    },
    /// Only a continuous distribution on a half-line can be shifted, by a finite number.
    #[error(
        "{distribution} cannot be shifted by {shift}; `shift` is a finite number, and for {}",
        catalogue::half_lines()
    )]
    Shift {
        /// The distribution.
        distribution: &'static str,
        /// The shift asked for.
        shift: f64,
    },
}

/// `shape, rate; or mean, sd; or mean, cv`.
fn describe(sets: &[ParameterSet]) -> String {
    sets.iter().map(ToString::to_string).collect::<Vec<_>>().join("; or ")
}

fn list(names: &[String]) -> String {
    if names.is_empty() { "none".to_owned() } else { names.join(", ") }
}

fn did_you_mean(nearest: Option<&str>) -> String {
    nearest.map(|name| format!(" (did you mean `{name}`?)")).unwrap_or_default()
}

fn nearest_or_list(nearest: Option<&str>) -> String {
    match nearest {
        Some(name) => format!("did you mean `{name}`?"),
        None => format!("give one of {}", super::Distribution::NAMES.join(", ")),
    }
}

/// The known name nearest to `name` in edits, if at most a third of it differs (two letters at least may).
#[must_use]
pub fn nearest_name(name: &str, known: impl IntoIterator<Item = &'static str>) -> Option<&'static str> {
    let name = name.to_lowercase().replace([' ', '_'], "-");
    let limit = (name.chars().count() / 3).max(2);
    known
        .into_iter()
        .map(|candidate| (edit_distance(&name, &candidate.replace('_', "-")), candidate))
        .filter(|&(distance, candidate)| distance <= limit && distance < candidate.chars().count())
        .min()
        .map(|(_, candidate)| candidate)
}

/// Insertions, deletions and replacements that turn `a` into `b`. Source: Wagner & Fischer, J. ACM 21 (1974) 168-173.
fn edit_distance(a: &str, b: &str) -> usize {
    let b: Vec<char> = b.chars().collect();
    let mut row: Vec<usize> = (0..=b.len()).collect();
    for (i, x) in a.chars().enumerate() {
        let mut diagonal = row[0];
        row[0] = i + 1;
        for (j, &y) in b.iter().enumerate() {
            let replaced = diagonal + usize::from(x != y);
            diagonal = row[j + 1];
            row[j + 1] = replaced.min(row[j] + 1).min(diagonal + 1);
        }
    }
    row[b.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn edits_are_counted() {
        assert_eq!(edit_distance("kitten", "sitting"), 3);
        assert_eq!(edit_distance("", "abc"), 3);
        assert_eq!(nearest_name("Log_Norml", ["normal", "lognormal", "logistic"]), Some("lognormal"));
        assert_eq!(nearest_name("zeta", ["normal", "poisson"]), None);
        assert_eq!(nearest_name("half normal", ["half-normal", "half-cauchy"]), Some("half-normal"));
    }

    #[test]
    fn errors_can_cross_threads() {
        fn check<T: Send + Sync + 'static>() {}
        check::<DistributionError>();
    }
}
