//! evenpoise finds the distribution to sample from, proves that its weights are even, and hands it over.
//!
//! The rooms, in reading order, which is also dependency order:
//!
//! * [`numeric`]: blocks of points, exponentials, streams, special functions;
//! * [`distribution`]: the named distributions of random variables, accurate in both tails;
//! * [`weights`]: log weights and what is said about them: effective sample size, tail shape, errors, verdict;
//! * [`store`]: files: whole or not at all, the journal, tables;

pub mod distribution;
pub mod numeric;
pub mod store;
pub mod weights;
