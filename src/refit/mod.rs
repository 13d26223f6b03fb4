//! Fits of a mixture to weighted points: what the next proposal could be.
//!
//! Cross-entropy (Kullback-Leibler) fits by weighted EM ([`em`]), moment matching ([`moments_fit`]), new components seeded,
//! split, merged or born where the proposal lacks mass ([`seed`], [`split()`], [`merge_nearest`], [`residual`]), and shares set by convex minimisation of the
//! predicted weight variance ([`minimise_variance`]). [`candidates`] makes the list that a round ranks.

mod births;
mod candidates;
mod degrees;
mod em;
mod moments;
mod shares;
mod slopes;

pub use births::{merge_nearest, residual, seed, split};
pub use candidates::{Candidate, Incumbent, Preference, Step, candidates, most_components, polish};
pub use em::{Anchor, Method, em, moments_fit};
pub use moments::{Moments, weighted_moments};
pub use shares::minimise_variance;

use crate::proposal::ProposalError;
use thiserror::Error;

/// Why a fit gave no mixture.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum RefitError {
    /// Too few effective points for what was asked.
    #[error("{effective:.1} effective points are too few to fit {components} components in {dim} dimensions")]
    TooFew {
        /// Effective points.
        effective: f64,
        /// Components asked for.
        components: usize,
        /// Dimension.
        dim: usize,
    },
    /// The numbers do not make a mixture.
    #[error(transparent)]
    Proposal(#[from] ProposalError),
}

/// Degrees of freedom above this are Gaussian for all that a sample of some thousands can tell.
pub const GAUSSIAN_DF: f64 = 150.0;

/// Effective number `1 / sum w^2` of points whose weights sum to one.
#[must_use]
pub fn effective(weights: &[f64]) -> f64 {
    let sum: f64 = weights.iter().sum();
    let squares: f64 = weights.iter().map(|w| w * w).sum();
    if squares > 0.0 { sum * sum / squares } else { 0.0 }
}
