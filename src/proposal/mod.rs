//! The distribution to sample from: a mixture of Gaussian and Student-t components, drawn from and evaluated.
//!
//! Values are immutable: a refit makes a new mixture, so any round can be replayed and threads share a proposal
//! without a lock. Reading order: [`Component`], [`Mixture`], the block kernel.

mod component;
mod kernel;
mod mixture;

pub use component::{Component, ProposalError};
pub use kernel::BlockTerms;
pub use mixture::{Drawn, Mixture};
