//! evenpoise finds the distribution to sample from, proves that its weights are even, and hands it over.
//!
//! The rooms, in reading order, which is also dependency order:
//!
//! * [`numeric`]: blocks of points, exponentials, streams, special functions;
//! * [`figures`]: figures of a run, data in, drawing out: PNG, SVG, caption and the numbers behind;

pub mod figures;
pub mod numeric;
