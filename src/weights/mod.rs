//! Log weights, and everything that is said about them: effective sample size, tail shape, standard errors,
//! estimates, and the verdict.
//!
//! Read in this order: [`LogWeights`] (the weights, valid by construction), [`TailShape`] (how heavy their top is),
//! [`Strata`] (standard errors that know how the draws were spread over components), [`Score`] (all numbers about
//! a set of weights). Every routine works relative to the largest log weight, so a target whose constant is off by
//! `e^5000` gives the same score.

mod log_weights;
mod score;
mod stratified;
mod tail;

pub use log_weights::{LogWeights, WeightError};
pub use score::{Score, score};
pub use stratified::{Strata, StratifiedMean};
pub use tail::{TailReason, TailShape, smoothed_weights, tail_limit};
