//! Gaussian copulas: correlations of the variables, of their ranks and of their scores.
//!
//! What is given as a linear or a rank correlation becomes one of the standard normal scores; tables that share a
//! variable become one group. Pairs that are not named are uncorrelated.

use std::ops::Range;

use thiserror::Error;

use super::correlation_table::CorrelationKind;
use super::correlation_table::CorrelationSpec;
use super::expand::Expanded;
use super::faults::Fault;
use super::names::all_of;
use super::table::Reader;
use super::text_value::Text;
use super::variable::Nature;
use super::variable::Variable;
use super::variables_table::NatureSpec;
use crate::distribution::Distribution;
use crate::distribution::correlation as copula;
use crate::distribution::correlation::CorrelationError as PairError;
use crate::distribution::correlation::LinearCorrelation;
use crate::expression::nearest;
use crate::numeric::linear;

/// Variables that are correlated, directly or through one another.
#[derive(Debug, Clone, PartialEq)]
pub struct Correlation {
    /// Their places among all coordinates, ascending.
    pub members: Vec<usize>,
    /// The correlation of their standard normal scores: the whole symmetric matrix, row by row.
    pub score: Vec<f64>,
    /// Lower factor of `score`.
    pub(crate) lower: Vec<f64>,
}

/// Why variables cannot be correlated so.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum CorrelationError {
    /// The matrix of the scores is not positive definite.
    #[error(
        "the correlations contradict each other: the smallest eigenvalue of the matrix of the scores is {smallest:.4}; it must be above zero"
    )]
    NotPositiveDefinite {
        /// Smallest eigenvalue.
        smallest: f64,
        /// The pair of variables that alone could be mended, with its present correlation of scores and the ends of the
        /// interval that the others leave to it; none where no single pair could.
        pair: Option<Box<Mendable>>,
    },
    /// Only settled distributions can be correlated.
    #[error("`{name}` has no distribution of its own that could be correlated")]
    NotSettled {
        /// The variable.
        name: String,
    },
    /// The two distributions cannot be so correlated.
    #[error("`{first}` and `{second}` cannot be correlated so")]
    Pair {
        /// One of the pair.
        first: String,
        /// The other.
        second: String,
        /// Why.
        #[source]
        source: PairError,
    },
}

/// A pair whose correlation alone stands against those of the others.
#[derive(Debug, Clone, PartialEq)]
pub struct Mendable {
    /// One of the pair.
    pub first: String,
    /// The other.
    pub second: String,
    /// What the numbers are correlations of: of the variables, of their ranks or of their scores, as was given.
    pub kind: CorrelationKind,
    /// The correlation that was given.
    pub value: f64,
    /// Low end of what the other correlations allow.
    pub low: f64,
    /// High end.
    pub high: f64,
}

impl CorrelationError {
    /// The whole story, and what to write instead.
    pub(crate) fn explained(&self) -> (String, String) {
        let own = self.to_string();
        let Self::Pair { first, second, source } = self else {
            let general = "bring the numbers nearer to zero, or check their signs";
            let help = match self {
                Self::NotPositiveDefinite { pair: Some(pair), .. } => format!(
                    "{general}; the others allow `{}` and `{}` a {} correlation between {:.4} and {:.4}, and theirs is {:.4}",
                    pair.first,
                    pair.second,
                    pair.kind.word(),
                    (pair.low * 1e4).ceil() / 1e4,
                    (pair.high * 1e4).floor() / 1e4,
                    pair.value
                ),
                Self::NotPositiveDefinite { pair: None, .. } => {
                    format!("{general}; no single pair could be changed alone to mend it")
                }
                _ => general.to_owned(),
            };
            return (own, help);
        };
        match source {
            PairError::Unattainable { value, low, high, .. } => (
                format!("`{first}` and `{second}` cannot have the linear correlation {value}"),
                format!("give a number from {low:.4} to {high:.4}, or a `rank` or `score` correlation"),
            ),
            other => {
                let text = other.to_string();
                let (message, help) = text.split_once("; ").unwrap_or((&text, ""));
                (format!("{own}: {message}"), help.to_owned())
            }
        }
    }
}

impl Correlation {
    /// Spearman's rank correlations that follow: the whole symmetric matrix, row by row.
    #[must_use]
    pub fn rank(&self) -> Vec<f64> {
        self.score.iter().map(|&score| copula::rank_of_score(score).unwrap_or(f64::NAN)).collect()
    }

    /// The linear correlations that follow; NaN for a pair of which one has no standard deviation.
    ///
    /// `variables` are those of the problem.
    #[must_use]
    pub fn linear(&self, variables: &[Variable]) -> Vec<f64> {
        let d = self.members.len();
        let distribution = |i: usize| match &variables.get(self.members[i])?.nature {
            Nature::Random(distribution) => Some(distribution),
            _ => None,
        };
        let pair = |i: usize, j: usize| {
            let link = LinearCorrelation::new(distribution(i)?, distribution(j)?).ok()?;
            link.linear(self.score[i * d + j]).ok()
        };
        (0..d * d)
            .map(|at| (at / d, at % d))
            .map(|(i, j)| if i == j { 1.0 } else { pair(i.max(j), i.min(j)).unwrap_or(f64::NAN) })
            .collect()
    }
}

/// A pair with the correlation that is asked of it.
struct Pair {
    places: (usize, usize),
    kind: CorrelationKind,
    value: f64,
    span: Range<usize>,
    /// Place of the numbers of its table.
    table: Range<usize>,
}

/// A correlation among `members` from a whole matrix of one kind.
pub(crate) fn of_matrix(
    variables: &[Variable],
    members: Vec<usize>,
    kind: CorrelationKind,
    matrix: &[f64],
) -> Result<Correlation, CorrelationError> {
    let d = members.len();
    let mut scores = Vec::new();
    for i in 0..d {
        for j in 0..i {
            let (first, second) = (members[i], members[j]);
            let pair = (&variables[first], &variables[second]);
            let value = score_of_pair(pair, kind, matrix[i * d + j])?;
            scores.push(((members[i], members[j]), value));
        }
    }
    let mut sorted = members;
    sorted.sort_unstable();
    group(sorted, &scores, |first, second| Some((&variables[first], &variables[second], kind)))
}

/// All groups of the file; faults point at the number, the name or the table that is wrong. Pairs of variables that are
/// not known are left out.
pub(crate) fn settle(
    reader: &mut Reader<'_>,
    specs: &[CorrelationSpec],
    expanded: &[Expanded<'_>],
    variables: &[Option<Variable>],
) -> Vec<Correlation> {
    let mut pairs: Vec<Pair> = Vec::new();
    for spec in specs {
        add_pairs(reader, spec, expanded, variables, &mut pairs);
    }
    let mut scores = Vec::new();
    let mut doubtful: Vec<usize> = Vec::new();
    for pair in &pairs {
        let (i, j) = pair.places;
        let known = variables[i].as_ref().zip(variables[j].as_ref()).filter(|_| !pair.value.is_nan());
        match known.map(|known| score_of_pair(known, pair.kind, pair.value)) {
            Some(Ok(score)) => scores.push((pair.places, score)),
            Some(Err(error)) => {
                let (message, help) = error.explained();
                reader.fault(Fault::new(pair.span.clone(), message).help(help));
                doubtful.push(i);
            }
            None => doubtful.push(i),
        }
    }
    let mut groups = Vec::new();
    for members in connected(&pairs).into_iter().filter(|members| !doubtful.iter().any(|place| members.contains(place)))
    {
        let inside: Vec<((usize, usize), f64)> =
            scores.iter().copied().filter(|((i, _), _)| members.contains(i)).collect();
        let table = pairs.iter().find(|pair| members.contains(&pair.places.0)).map_or(0..0, |pair| pair.table.clone());
        let name = |place: usize| variables[place].as_ref().map_or_else(String::new, |variable| variable.name.clone());
        let given = |first: usize, second: usize| {
            let pair = pairs.iter().find(|pair| pair.places == (first.max(second), first.min(second)));
            let kind = pair.map_or(CorrelationKind::Score, |pair| pair.kind);
            Some((variables[first].as_ref()?, variables[second].as_ref()?, kind))
        };
        match group(members, &inside, given) {
            Ok(found) => groups.push(found),
            Err(error) => {
                let (message, help) = error.explained();
                let at_fault = match &error {
                    CorrelationError::NotPositiveDefinite { pair: Some(pair), .. } => {
                        let names = |of: &Pair| [name(of.places.0), name(of.places.1)];
                        let same = |of: &&Pair| names(of).contains(&pair.first) && names(of).contains(&pair.second);
                        pairs.iter().find(same).map(|pair| pair.span.clone())
                    }
                    _ => None,
                };
                let fault = Fault::new(at_fault.unwrap_or(table), message);
                reader.fault(fault.help(help));
            }
        }
    }
    groups
}

fn add_pairs(
    reader: &mut Reader<'_>,
    spec: &CorrelationSpec,
    expanded: &[Expanded<'_>],
    variables: &[Option<Variable>],
    pairs: &mut Vec<Pair>,
) {
    let mut places: Vec<usize> = Vec::new();
    for name in &spec.among {
        let Some(place) = place_of(reader, name, expanded, variables) else { continue };
        if places.contains(&place) {
            let message = format!("`{}` stands twice among the correlated", name.value);
            reader.fault(Fault::new(name.span.clone(), message).help("name each variable once"));
        } else {
            places.push(place);
        }
    }
    let d = spec.among.len();
    if places.len() != d {
        return;
    }
    for (i, j, span) in &spec.places {
        let (first, second) = (places[*i].max(places[*j]), places[*i].min(places[*j]));
        let value = spec.matrix[i * d + j];
        if let Some(other) = pairs.iter().find(|pair| pair.places == (first, second)) {
            let message = format!("`{}` and `{}` are correlated twice", spec.among[*j].value, spec.among[*i].value);
            let fault = Fault::new(span.clone(), message).also(other.span.clone(), "first here");
            reader.fault(fault.help("give each pair one number"));
        } else {
            let table = spec.span.clone();
            pairs.push(Pair { places: (first, second), kind: spec.kind, value, span: span.clone(), table });
        }
    }
}

/// The place of a variable that may be correlated.
fn place_of(
    reader: &mut Reader<'_>,
    name: &Text,
    expanded: &[Expanded<'_>],
    variables: &[Option<Variable>],
) -> Option<usize> {
    let Some(found) = expanded.iter().find(|variable| variable.spec.name == name.value) else {
        if reader.faulty.contains(&name.value) {
            return None;
        }
        let names: Vec<&str> = expanded.iter().map(|variable| variable.spec.name.as_str()).collect();
        let fault = Fault::new(name.span.clone(), format!("no variable is called `{}`", name.value));
        let base = name.value.split('[').next().unwrap_or_default();
        if base != name.value && names.contains(&base) {
            let message = format!("`{}` cannot be correlated: it is one of a group of variables (`each`)", name.value);
            let help = "correlate single variables whose distribution has numbers as parameters";
            reader.fault(Fault::new(name.span.clone(), message).help(help));
            return None;
        }
        reader.fault(match nearest(&name.value, names.iter().copied()) {
            Some(near) => fault.help(format!("did you mean `{near}`?")),
            None => fault.help(format!("the variables are {}", all_of(&names))),
        });
        return None;
    };
    let refusal = match &found.spec.nature {
        _ if found.labels.is_some() => Some("is a group of variables (`each`)"),
        NatureSpec::Faulty { .. } => None,
        NatureSpec::Range { .. } => Some("has a range and no distribution"),
        NatureSpec::Random { .. } => {
            let one = variables[found.places.start].as_ref();
            let dependent = one.is_some_and(|one| matches!(one.nature, Nature::Dependent { .. }));
            dependent.then_some("has parameters that depend on other variables")
        }
    };
    if let Some(refusal) = refusal {
        let message = format!("`{}` cannot be correlated: it {refusal}", name.value);
        let fault = Fault::new(name.span.clone(), message).also(found.spec.name_span.clone(), "the variable");
        reader.fault(fault.help("correlate single variables whose distribution has numbers as parameters"));
        return None;
    }
    Some(found.places.start)
}

/// The correlation of the scores of a pair.
fn score_of_pair(
    (one, other): (&Variable, &Variable),
    kind: CorrelationKind,
    value: f64,
) -> Result<f64, CorrelationError> {
    let settled = |variable: &Variable| -> Result<Distribution, CorrelationError> {
        match &variable.nature {
            Nature::Random(distribution) => Ok(distribution.clone()),
            _ => Err(CorrelationError::NotSettled { name: variable.name.clone() }),
        }
    };
    let (first, second) = (settled(one)?, settled(other)?);
    let score = match kind {
        CorrelationKind::Score => Ok(value),
        CorrelationKind::Rank => copula::score_of_rank(value),
        // A pair that is uncorrelated needs no standard deviations.
        CorrelationKind::Linear if value == 0.0 => Ok(0.0),
        CorrelationKind::Linear => LinearCorrelation::new(&first, &second).and_then(|link| link.score(value)),
    };
    score.map_err(|source| CorrelationError::Pair { first: other.name.clone(), second: one.name.clone(), source })
}

/// Members that hang together, directly or through others, in the order of their places.
fn connected(pairs: &[Pair]) -> Vec<Vec<usize>> {
    let mut groups: Vec<Vec<usize>> = Vec::new();
    for pair in pairs {
        let (i, j) = pair.places;
        let touched: Vec<usize> =
            (0..groups.len()).filter(|&k| groups[k].contains(&i) || groups[k].contains(&j)).collect();
        let mut merged = vec![i, j];
        for &k in touched.iter().rev() {
            merged.extend(groups.remove(k));
        }
        merged.sort_unstable();
        merged.dedup();
        groups.push(merged);
    }
    groups.sort();
    groups
}

/// A correlation of a pair as it was given, from that of the scores.
fn as_given(one: &Variable, other: &Variable, kind: CorrelationKind, score: f64) -> Option<f64> {
    match (kind, &one.nature, &other.nature) {
        (CorrelationKind::Score, ..) => Some(score),
        (CorrelationKind::Rank, ..) => copula::rank_of_score(score).ok(),
        (CorrelationKind::Linear, Nature::Random(first), Nature::Random(second)) => {
            LinearCorrelation::new(first, second).ok()?.linear(score).ok()
        }
        (CorrelationKind::Linear, ..) => None,
    }
}

/// The group of `members`; `given` tells of two places the variables and the kind of correlation that was given.
fn group<'v>(
    members: Vec<usize>,
    scores: &[((usize, usize), f64)],
    given: impl Fn(usize, usize) -> Option<(&'v Variable, &'v Variable, CorrelationKind)>,
) -> Result<Correlation, CorrelationError> {
    let d = members.len();
    let mut score = vec![0.0; d * d];
    (0..d).for_each(|i| score[i * d + i] = 1.0);
    let row = |place: usize| members.iter().position(|&member| member == place);
    for &((i, j), value) in scores {
        if let (Some(i), Some(j)) = (row(i), row(j)) {
            score[i * d + j] = value;
            score[j * d + i] = value;
        }
    }
    match linear::cholesky(&score, d) {
        Some(lower) => Ok(Correlation { members, score, lower }),
        None => {
            let smallest = linear::eigen(&score, d).map_or(f64::NAN, |eigen| eigen.values[0]);
            let pair = mendable(&score, d).and_then(|(i, j, low, high)| {
                let (one, other, kind) = given(members[j], members[i])?;
                let own = score[i * d + j];
                let told = |score: f64| as_given(one, other, kind, score);
                let (kind, value, low, high) = match (told(own), told(low), told(high)) {
                    (Some(value), Some(low), Some(high)) => (kind, value, low, high),
                    _ => (CorrelationKind::Score, own, low, high),
                };
                Some(Box::new(Mendable { first: one.name.clone(), second: other.name.clone(), kind, value, low, high }))
            });
            Err(CorrelationError::NotPositiveDefinite { smallest, pair })
        }
    }
}

/// The pair whose number alone can be changed so that the matrix becomes positive definite, with what the others leave
/// to it; of several the one that has to move least.
///
/// With all others in their places the determinant is a parabola `-m s^2 + 2 b s + c` in the number `s` of the pair, and
/// the matrix is positive definite between its zeros where the matrix without either of the two is.
fn mendable(score: &[f64], d: usize) -> Option<(usize, usize, f64, f64)> {
    let mut best: Option<(f64, (usize, usize, f64, f64))> = None;
    for i in 0..d {
        for j in 0..i {
            let rest: Vec<usize> = (0..d).filter(|&k| k != i && k != j).collect();
            let n = rest.len();
            let inner: Vec<f64> = rest.iter().flat_map(|&a| rest.iter().map(move |&b| score[a * d + b])).collect();
            let Some(lower) = linear::cholesky(&inner, n) else { continue };
            let column = |of: usize| -> Vec<f64> {
                let raw: Vec<f64> = rest.iter().map(|&k| score[k * d + of]).collect();
                linear::lower_times(&linear::invert_lower(&lower, n), &raw)
            };
            let (a, b) = (column(i), column(j));
            // Partial variances of the two given the others, and where the middle of the interval lies.
            let (left, right, middle) = (1.0 - linear::dot(&a, &a), 1.0 - linear::dot(&b, &b), linear::dot(&a, &b));
            if !(left > 0.0 && right > 0.0) {
                continue;
            }
            let half = (left * right).sqrt();
            let (low, high) = (middle - half, middle + half);
            let move_by = (low - score[i * d + j]).max(score[i * d + j] - high);
            if best.as_ref().is_none_or(|(least, _)| move_by < *least) {
                best = Some((move_by, (i, j, low, high)));
            }
        }
    }
    best.map(|(_, pair)| pair)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn normal(name: &str) -> Variable {
        Variable::random(name, Distribution::new("normal", &[("mean", 0.0), ("sd", 1.0)]).unwrap())
    }

    /// Eigenvalues of `[[1, a, b], [a, 1, c], [b, c, 1]]` for `a, b, c = .9, -.9, .9`: the matrix is one minus .9 times
    /// the adjacency of a frustrated triangle, whose eigenvalues are -1, -1, 2: the smallest is 1 - 1.8.
    #[test]
    fn contradictions_are_refused_with_an_eigenvalue() {
        let variables: Vec<Variable> = ["a", "b", "c"].map(normal).to_vec();
        let matrix = [1.0, 0.9, -0.9, 0.9, 1.0, 0.9, -0.9, 0.9, 1.0];
        match of_matrix(&variables, vec![0, 1, 2], CorrelationKind::Score, &matrix) {
            Err(CorrelationError::NotPositiveDefinite { smallest, pair }) => {
                assert!((smallest + 0.8).abs() < 1e-12);
                // Of three scores each lies between `ab -+ sqrt((1 - a^2)(1 - b^2))`: here .81 -+ .19, or its negative.
                let pair = pair.unwrap();
                assert!(
                    (pair.high - pair.low - 0.38).abs() < 1e-12 && (pair.low.abs() - 0.62).abs() < 1e-12
                        || (pair.high.abs() - 0.62).abs() < 1e-12,
                    "{pair:?}"
                );
            }
            other => panic!("{other:?}"),
        }
    }

    /// The interval is that of the kind given: just inside its ends a matrix can be had, just outside it cannot.
    #[test]
    fn what_the_others_allow_is_told_in_the_kind_that_was_given() {
        let gumbel =
            |name: &str| Variable::random(name, Distribution::new("gumbel", &[("mean", 2.0), ("sd", 0.5)]).unwrap());
        let variables: Vec<Variable> = ["a", "b", "c"].map(gumbel).to_vec();
        for kind in [CorrelationKind::Linear, CorrelationKind::Rank, CorrelationKind::Score] {
            let of = |first: f64| {
                let matrix = [1.0, first, 0.9, first, 1.0, -0.8, 0.9, -0.8, 1.0];
                of_matrix(&variables, vec![0, 1, 2], kind, &matrix)
            };
            let Err(CorrelationError::NotPositiveDefinite { pair: Some(pair), .. }) = of(0.9) else { panic!() };
            assert_eq!((pair.kind, pair.value.clamp(0.9 - 1e-6, 0.9 + 1e-6)), (kind, pair.value));
            assert!(of(pair.high - 1e-4).is_ok() && of(pair.low + 1e-4).is_ok(), "{pair:?}");
            assert!(of(pair.high + 1e-4).is_err(), "{pair:?}");
        }
    }

    #[test]
    fn the_order_of_the_names_does_not_matter() {
        let variables: Vec<Variable> = ["a", "b", "c"].map(normal).to_vec();
        let one = of_matrix(
            &variables,
            vec![0, 1, 2],
            CorrelationKind::Score,
            &[1.0, 0.1, 0.2, 0.1, 1.0, 0.3, 0.2, 0.3, 1.0],
        );
        let two = of_matrix(
            &variables,
            vec![2, 0, 1],
            CorrelationKind::Score,
            &[1.0, 0.2, 0.3, 0.2, 1.0, 0.1, 0.3, 0.1, 1.0],
        );
        assert_eq!(one, two);
    }

    #[test]
    fn tables_that_share_a_variable_are_one_group() {
        let pair = |i, j| Pair { places: (i, j), kind: CorrelationKind::Score, value: 0.1, span: 0..0, table: 0..0 };
        assert_eq!(connected(&[pair(1, 0), pair(5, 4), pair(6, 2), pair(5, 1)]), [vec![0, 1, 4, 5], vec![2, 6]]);
    }

    #[test]
    fn errors_may_cross_threads() {
        fn crosses<T: std::error::Error + Send + Sync + 'static>() {}
        crosses::<CorrelationError>();
    }
}
