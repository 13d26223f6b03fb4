//! evenpoise finds the distribution to sample from, proves that its weights are even, and hands it over.
//!
//! The rooms, in reading order, which is also dependency order:
//!
//! * [`numeric`]: blocks of points, exponentials, streams, special functions;
//! * [`expression`]: formulas, their values and exact gradients;

pub mod expression;
pub mod numeric;
