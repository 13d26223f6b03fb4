//! evenpoise finds the distribution to sample from, proves that its weights are even, and hands it over.
//!
//! The rooms, in reading order, which is also dependency order:
//!
//! * [`numeric`]: blocks of points, exponentials, streams, special functions;
//! * [`distribution`]: the named distributions of random variables, accurate in both tails;

pub mod distribution;
pub mod numeric;
