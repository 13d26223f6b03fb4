//! evenpoise finds the distribution to sample from, proves that its weights are even, and hands it over.
//!
//! The rooms, in reading order, which is also dependency order:
//!
//! * [`numeric`]: blocks of points, exponentials, streams, special functions;

pub mod numeric;
pub mod proposal;
pub mod refit;
