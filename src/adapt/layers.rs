//! The layers of a proposal: the fitted mixture, its halo, and the wide start.

use super::survey::identity;
use crate::proposal::{Component, Mixture, ProposalError};

/// Shares of the two defensive layers.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct LayerShares {
    pub(crate) halo: f64,
    pub(crate) wide: f64,
}

/// The halo's scale and its degrees of freedom at most.
const HALO_SCALE: f64 = 2.0;
pub(crate) const HALO_DF: f64 = 4.0;
/// Degrees of freedom of the wide start.
pub(crate) const WIDE_DF: f64 = 5.0;

/// Every fitted component again, twice as wide in variance and heavy-tailed, with shares drawn together: `share^(1/2)`.
pub(crate) fn halo(fitted: &Mixture) -> Result<Mixture, ProposalError> {
    let masses: Vec<f64> = fitted.shares().iter().map(|a| a.sqrt()).collect();
    let components = fitted.components().iter().map(|c| c.widened(HALO_SCALE).with_df(c.df().min(HALO_DF))).collect();
    Mixture::new(&masses, components)
}

/// The start itself, heavy-tailed: where everything was looked for to begin with.
pub(crate) fn wide(d: usize) -> Result<Mixture, ProposalError> {
    Ok(Mixture::single(Component::new(vec![0.0; d], &identity(d), WIDE_DF)?))
}

/// `q = (1 - halo - wide) fitted + halo halo + wide start`; the fitted mixture alone where the layers are off.
pub(crate) fn layered(fitted: &Mixture, wide: &Mixture, shares: Option<LayerShares>) -> Result<Mixture, ProposalError> {
    match shares {
        None => Ok(fitted.clone()),
        Some(LayerShares { halo: h, wide: s }) => {
            Mixture::union(&[(1.0 - h - s, fitted), (h, &halo(fitted)?), (s, wide)])
        }
    }
}
