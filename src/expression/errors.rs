//! What is wrong with a formula, where, and what to write instead.

use std::ops::Range;

use thiserror::Error;

use super::lexer::Fault;

/// One mistake in one formula. The caller knows the file and draws the caret.
#[derive(Debug, Clone, PartialEq, Error)]
#[error("{key}: {message}{}", .help.as_ref().map(|help| format!("; {help}")).unwrap_or_default())]
pub struct FormulaError {
    /// Name of the formula, or key of the output, whose text it is in.
    pub key: String,
    /// The bytes of that text that are at fault; empty at its end when something is missing there.
    pub span: Range<usize>,
    /// What is wrong.
    pub message: String,
    /// What to write instead, where that can be told.
    pub help: Option<String>,
    /// The name of the scope that was probably meant, where a name was misspelt.
    pub meant: Option<String>,
}

impl FormulaError {
    pub(super) fn new(key: &str, fault: Fault) -> Self {
        Self { key: key.to_string(), span: fault.span, message: fault.message, help: fault.help, meant: fault.meant }
    }
}

/// The name among `known` that is nearest to `name`: fewest letters added, left out, changed or swapped with their
/// neighbour, and no more than a third of them (one of two). Of equally near ones the first.
#[must_use]
pub fn nearest<'a>(name: &str, known: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let letters: Vec<char> = name.to_lowercase().chars().collect();
    // Every other single letter is one change away from a single letter: that is no nearness.
    let most = if letters.len() == 2 { 1 } else { letters.len() / 3 };
    let mut best: Option<(usize, &str)> = None;
    for candidate in known {
        let other: Vec<char> = candidate.to_lowercase().chars().collect();
        if other.len().abs_diff(letters.len()) > most {
            continue;
        }
        let steps = distance(&letters, &other);
        if steps <= most && best.is_none_or(|(fewest, _)| steps < fewest) {
            best = Some((steps, candidate));
        }
    }
    best.map(|(_, candidate)| candidate)
}

/// Optimal string alignment distance (Damerau, Commun. ACM 7 (1964) 171-176; each stretch edited once).
fn distance(a: &[char], b: &[char]) -> usize {
    let mut before_last: Vec<usize> = Vec::new();
    let mut last: Vec<usize> = (0..=b.len()).collect();
    for i in 1..=a.len() {
        let mut row = vec![i; b.len() + 1];
        for j in 1..=b.len() {
            let changed = last[j - 1] + usize::from(a[i - 1] != b[j - 1]);
            row[j] = changed.min(last[j] + 1).min(row[j - 1] + 1);
            if i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1] {
                row[j] = row[j].min(before_last[j - 2] + 1);
            }
        }
        before_last = std::mem::replace(&mut last, row);
    }
    last[b.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_nearest_name_is_found() {
        let known = ["velocity", "dispersion", "offset", "log", "exp"];
        for (name, want) in [
            ("velocty", Some("velocity")),
            ("Velocity", Some("velocity")),
            ("vleocity", Some("velocity")),
            ("ofset", Some("offset")),
            ("lg", Some("log")),
            ("pressure", None),
            ("x", None),
        ] {
            assert_eq!(nearest(name, known), want, "{name}");
        }
    }

    #[test]
    fn errors_travel_between_threads() {
        fn travels<T: Send + Sync + std::error::Error>() {}
        travels::<FormulaError>();
    }
}
