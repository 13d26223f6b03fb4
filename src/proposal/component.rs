//! One component: a Gaussian or a Student-t, by its location and the Cholesky factor of its scale.

use crate::numeric::linear::{cholesky, invert_lower};
use crate::numeric::ln;
use std::sync::Arc;
use thiserror::Error;

/// What is wrong with a proposal's numbers.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum ProposalError {
    /// A scale matrix is not symmetric positive definite.
    #[error("the scale of component {component} is not positive definite")]
    NotPositiveDefinite {
        /// Which component, from 0.
        component: usize,
    },
    /// Lengths do not fit together.
    #[error("component {component} has {got} numbers where {wanted} are expected")]
    WrongLength {
        /// Which component, from 0.
        component: usize,
        /// Numbers found.
        got: usize,
        /// Numbers wanted.
        wanted: usize,
    },
    /// A number is NaN or infinite.
    #[error("component {component} holds a number that is not finite")]
    NotFinite {
        /// Which component, from 0.
        component: usize,
    },
    /// Degrees of freedom are not positive.
    #[error("component {component} has {df} degrees of freedom; more than 0 are needed")]
    Df {
        /// Which component, from 0.
        component: usize,
        /// The degrees of freedom given.
        df: f64,
    },
    /// The shares are not a probability vector.
    #[error("the shares sum to {sum}, with {count} components; they must be positive and sum to one")]
    Shares {
        /// Their sum.
        sum: f64,
        /// How many.
        count: usize,
    },
}

/// A Gaussian (`df` infinite) or Student-t distribution in `d` dimensions.
///
/// Density, with `q = (x - m)' S^-1 (x - m)`: Gaussian `(2 pi)^(-d/2) |S|^(-1/2) exp(-q/2)`; Student-t
/// `G((v+d)/2) / (G(v/2) (v pi)^(d/2)) |S|^(-1/2) (1 + q/v)^(-(v+d)/2)`, `S` its scale matrix (covariance `S v/(v-2)`).
///
/// # Source
/// Kotz & Nadarajah, "Multivariate t Distributions and Their Applications" (2004), equation (1.1).
#[derive(Debug, Clone)]
pub struct Component {
    shape: Arc<Shape>,
    /// The scale matrix is the shape's times this.
    widening: f64,
    df: f64,
    log_constant: f64,
}

/// Location and factor, shared by components that differ in width and tails only: their distances are computed once.
#[derive(Debug, PartialEq)]
pub(crate) struct Shape {
    pub(crate) location: Vec<f64>,
    factor: Vec<f64>,
    /// Rows of the inverse factor, lower triangle only, packed: row `i` at `i (i + 1) / 2`.
    pub(crate) inverse: Vec<f64>,
    log_det_factor: f64,
}

impl PartialEq for Component {
    fn eq(&self, other: &Self) -> bool {
        let shapes = Arc::ptr_eq(&self.shape, &other.shape) || self.shape == other.shape;
        shapes && self.widening == other.widening && self.df == other.df
    }
}

impl Component {
    /// A component from its location, its scale matrix (row by row) and its degrees of freedom (infinite: Gaussian).
    ///
    /// # Errors
    /// The condition that broke, as component 0: callers that hold several rename it with [`ProposalError::at`].
    ///
    /// ```
    /// use evenpoise::proposal::Component;
    /// let c = Component::new(vec![0.0], &[4.0], f64::INFINITY).unwrap();
    /// assert!((c.log_density(&[2.0]) - (-0.5 - 2.0_f64.ln() - 0.5 * (2.0 * std::f64::consts::PI).ln())).abs() < 1e-14);
    /// ```
    pub fn new(location: Vec<f64>, scale: &[f64], df: f64) -> Result<Self, ProposalError> {
        let d = location.len();
        check(&location, scale, df)?;
        let factor = cholesky(scale, d).ok_or(ProposalError::NotPositiveDefinite { component: 0 })?;
        Self::from_factor(location, factor, df)
    }

    /// A component from the lower Cholesky factor (row by row) of its scale matrix.
    ///
    /// # Errors
    /// As [`Component::new`].
    pub fn from_factor(location: Vec<f64>, factor: Vec<f64>, df: f64) -> Result<Self, ProposalError> {
        let d = location.len();
        check(&location, &factor, df)?;
        if (0..d).any(|i| !(factor[i * d + i] > 0.0)) {
            return Err(ProposalError::NotPositiveDefinite { component: 0 });
        }
        let dense = invert_lower(&factor, d);
        if dense.iter().any(|v| !v.is_finite()) {
            return Err(ProposalError::NotPositiveDefinite { component: 0 });
        }
        let inverse = (0..d).flat_map(|i| dense[i * d..=i * d + i].to_vec()).collect();
        let log_det_factor = (0..d).map(|i| ln(factor[i * d + i])).sum();
        Ok(Self::of_shape(Arc::new(Shape { location, factor, inverse, log_det_factor }), 1.0, df))
    }

    fn of_shape(shape: Arc<Shape>, widening: f64, df: f64) -> Self {
        let d = shape.location.len();
        let log_det_factor = shape.log_det_factor + 0.5 * d as f64 * ln(widening);
        Self { log_constant: log_constant(d, log_det_factor, df), shape, widening, df }
    }

    /// The same location and scale with other degrees of freedom (infinite: Gaussian).
    #[must_use]
    pub fn with_df(&self, df: f64) -> Self {
        Self::of_shape(Arc::clone(&self.shape), self.widening, df)
    }

    /// The same shape with its scale matrix multiplied by `factor > 0`.
    #[must_use]
    pub fn widened(&self, factor: f64) -> Self {
        Self::of_shape(Arc::clone(&self.shape), self.widening * factor, self.df)
    }

    /// The component in the coordinates `near + spread * x`, coordinate by coordinate.
    ///
    /// # Errors
    /// [`ProposalError::NotFinite`] or [`ProposalError::NotPositiveDefinite`] where the numbers leave the range of a double.
    pub fn rescaled(&self, near: &[f64], spread: &[f64]) -> Result<Self, ProposalError> {
        let d = self.dim();
        let location = (0..d).map(|i| near[i] + spread[i] * self.location()[i]).collect();
        let factor = self.factor().iter().enumerate().map(|(at, v)| spread[at / d] * v).collect();
        Self::from_factor(location, factor, self.df)
    }

    /// Dimension `d`.
    #[must_use]
    pub fn dim(&self) -> usize {
        self.shape.location.len()
    }

    /// Location: the mean, where there is one.
    #[must_use]
    pub fn location(&self) -> &[f64] {
        &self.shape.location
    }

    /// Lower Cholesky factor of the scale matrix, row by row.
    #[must_use]
    pub fn factor(&self) -> Vec<f64> {
        let root = self.widening.sqrt();
        self.shape.factor.iter().map(|v| v * root).collect()
    }

    /// Scale matrix, row by row: the covariance of a Gaussian, `(v-2)/v` times that of a Student-t.
    #[must_use]
    pub fn scale(&self) -> Vec<f64> {
        let d = self.dim();
        let factor = &self.shape.factor;
        let mut scale = vec![0.0; d * d];
        for i in 0..d {
            for j in 0..=i {
                let mut sum = 0.0;
                for k in 0..=j {
                    sum += factor[i * d + k] * factor[j * d + k];
                }
                scale[i * d + j] = sum * self.widening;
                scale[j * d + i] = sum * self.widening;
            }
        }
        scale
    }

    /// Degrees of freedom; infinite for a Gaussian.
    #[must_use]
    pub fn df(&self) -> f64 {
        self.df
    }

    /// `ln |L|`, `L` the Cholesky factor of the scale.
    #[must_use]
    pub fn log_det_factor(&self) -> f64 {
        self.shape.log_det_factor + 0.5 * self.dim() as f64 * ln(self.widening)
    }

    /// What it shares with others, and how much wider than that its scale is.
    pub(crate) fn shape(&self) -> (&Arc<Shape>, f64) {
        (&self.shape, self.widening)
    }

    /// The part of the log density that no point changes.
    pub(crate) fn log_constant(&self) -> f64 {
        self.log_constant
    }

    /// Squared distance `(x - m)' S^-1 (x - m)` of one point.
    #[must_use]
    pub fn distance(&self, x: &[f64]) -> f64 {
        let shape = &self.shape;
        let mut at = 0;
        let mut q = 0.0;
        for i in 0..self.dim() {
            let mut z = 0.0;
            for j in 0..=i {
                z += shape.inverse[at + j] * (x[j] - shape.location[j]);
            }
            at += i + 1;
            q += z * z;
        }
        q / self.widening
    }

    /// Log density of one point, in nats.
    #[must_use]
    pub fn log_density(&self, x: &[f64]) -> f64 {
        log_density_at(self.log_constant, self.dim(), self.df, self.distance(x))
    }
}

fn check(location: &[f64], matrix: &[f64], df: f64) -> Result<(), ProposalError> {
    let d = location.len();
    if matrix.len() != d * d || d == 0 {
        return Err(ProposalError::WrongLength { component: 0, got: matrix.len(), wanted: d * d });
    }
    if location.iter().chain(matrix).any(|v| !v.is_finite()) {
        return Err(ProposalError::NotFinite { component: 0 });
    }
    if df > 0.0 { Ok(()) } else { Err(ProposalError::Df { component: 0, df }) }
}

/// Log density at squared distance `q`.
#[inline(always)]
pub(crate) fn log_density_at(log_constant: f64, d: usize, df: f64, q: f64) -> f64 {
    if df == f64::INFINITY { log_constant - 0.5 * q } else { log_constant - 0.5 * (df + d as f64) * ln(1.0 + q / df) }
}

/// `ln` of the constant of a `d`-dimensional Gaussian or Student-t density.
pub(crate) fn log_constant(d: usize, log_det_factor: f64, df: f64) -> f64 {
    let half = 0.5 * d as f64;
    if df == f64::INFINITY {
        return -half * ln(2.0 * std::f64::consts::PI) - log_det_factor;
    }
    libm::lgamma(0.5 * df + half) - libm::lgamma(0.5 * df) - half * ln(df * std::f64::consts::PI) - log_det_factor
}

impl ProposalError {
    /// The same error, said of component `index`.
    #[must_use]
    pub fn at(self, index: usize) -> Self {
        match self {
            Self::NotPositiveDefinite { .. } => Self::NotPositiveDefinite { component: index },
            Self::WrongLength { got, wanted, .. } => Self::WrongLength { component: index, got, wanted },
            Self::NotFinite { .. } => Self::NotFinite { component: index },
            Self::Df { df, .. } => Self::Df { component: index, df },
            other @ Self::Shares { .. } => other,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_is_broken_is_named() {
        assert_eq!(
            Component::new(vec![0.0, 0.0], &[1.0, 2.0, 2.0, 1.0], 5.0),
            Err(ProposalError::NotPositiveDefinite { component: 0 })
        );
        assert!(matches!(Component::new(vec![0.0], &[1.0], 0.0), Err(ProposalError::Df { .. })));
        assert!(matches!(Component::new(vec![0.0], &[f64::NAN], 3.0), Err(ProposalError::NotFinite { .. })));
        assert!(matches!(Component::new(vec![0.0], &[1.0, 0.0], 3.0), Err(ProposalError::WrongLength { .. })));
    }

    #[test]
    fn widening_and_rescaling_change_the_scale_as_said() {
        let c = Component::new(vec![1.0, 2.0], &[2.0, 0.5, 0.5, 1.0], 7.0).unwrap();
        let wide = c.widened(4.0);
        assert!((wide.scale()[1] - 2.0).abs() < 1e-14);
        assert!((wide.log_density(&[1.0, 2.0]) - (c.log_density(&[1.0, 2.0]) - 4.0_f64.ln())).abs() < 1e-13);
        let moved = c.rescaled(&[10.0, 0.0], &[2.0, 3.0]).unwrap();
        assert_eq!(moved.location(), &[12.0, 6.0]);
        let shift = 6.0_f64.ln();
        assert!((moved.log_density(&[12.5, 6.6]) + shift - c.log_density(&[1.25, 2.2])).abs() < 1e-13);
    }
}
