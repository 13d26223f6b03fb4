//! evenpoise finds the distribution to sample from, proves that its weights are even, and hands it over.
//!
//! The rooms, in reading order, which is also dependency order:
//!
//! * [`numeric`]: blocks of points, exponentials, streams, special functions;
//! * [`distribution`]: the named distributions of random variables, accurate in both tails;
//! * [`expression`]: formulas, their values and exact gradients;
//! * [`model`]: what a problem asks when its target is not a formula: a batch of points to values;
//! * [`problem`]: variables, coordinates, aim: a problem gives log target and Jacobian where the proposal lives;

pub mod distribution;
pub mod expression;
pub mod model;
pub mod numeric;
pub mod problem;
