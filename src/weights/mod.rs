//! Log weights, and everything that is said about them: effective sample size, tail shape, standard errors,
//! estimates, and the verdict.
//!
//! Read in this order: [`LogWeights`] (the weights, valid by construction), [`TailShape`] (how heavy their top is),
//! [`Strata`] (standard errors that know how the draws were spread over components), [`Score`] (all numbers about
//! a set of weights), [`Estimate`] (the answers), [`combine_rounds`] (rounds as one answer), [`verdict`] (what the reader
//! may do with them). Every routine works relative to the largest log weight, so a target whose constant is off by
//! `e^5000` gives the same score.

mod estimate;
mod interval;
mod log_weights;
mod resample;
mod rounds;
mod score;
mod stratified;
mod tail;

pub mod verdict;

pub use estimate::{Answer, Estimate, plain_mean, ratio_estimate};
pub use interval::{
    gamma_interval, gamma_interval_of, log_interval, no_hit_bound, normal_interval, probability_interval,
};
pub use log_weights::{LogWeights, WeightError};
pub use resample::resample;
pub use rounds::{CombinedRounds, RoundMean, combine_rounds};
pub use score::{Score, score};
pub use stratified::{Strata, StratifiedMean};
pub use tail::{TailReason, TailShape, smoothed_weights, tail_limit};
