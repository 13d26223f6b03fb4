//! Gaussian copulas: correlations of the variables, of their ranks and of their scores.

use thiserror::Error;

use super::correlation_table::CorrelationKind;
use super::correlation_table::CorrelationSpec;
use super::expand::Expanded;
use super::table::Reader;
use super::variable::Variable;

/// TEMPORARY
#[derive(Debug, Clone, PartialEq)]
pub struct Correlation {
    /// Places of the variables among all coordinates.
    pub members: Vec<usize>,
    /// Lower
    pub lower: Vec<f64>,
}
/// TEMPORARY
#[derive(Debug, Clone, PartialEq, Error)]
pub enum CorrelationError {
    #[error("x")]
    /// x
    X,
}
pub(crate) fn of_matrix(
    _variables: &[Variable],
    members: Vec<usize>,
    _kind: CorrelationKind,
    matrix: &[f64],
) -> Result<Correlation, CorrelationError> {
    let lower = crate::numeric::linear::cholesky(matrix, members.len()).ok_or(CorrelationError::X)?;
    Ok(Correlation { members, lower })
}
pub(crate) fn settle(
    _reader: &mut Reader<'_>,
    specs: &[CorrelationSpec],
    _expanded: &[Expanded<'_>],
    variables: &[Variable],
) -> Option<Vec<Correlation>> {
    specs.iter().map(|s| of_matrix(variables, vec![], s.kind, &s.matrix).ok()).collect()
}
