//! evenpoise finds the distribution to sample from, proves that its weights are even, and hands it over.
//!
//! The rooms, in reading order, which is also dependency order (a room uses only rooms above it):
//!
//! * [`numeric`]: blocks of points, exponentials with the same bits everywhere, random streams, special functions;
//! * [`distribution`]: the named distributions of random variables, accurate in both tails;
//! * [`expression`]: formula text to checked programs with exact gradients;
//! * [`model`]: what is evaluated at a batch of points;
//! * [`problem`]: the integral as the user states it: variables, coordinates, aim;
//! * [`proposal`]: mixtures of Gaussian and Student-t components, drawn from and evaluated;
//! * [`weights`]: log weights and what is said about them: effective sample size, tail shape, errors, verdict;
//! * [`refit`]: fits of a mixture to weighted points;
//! * [`adapt`]: the loop: survey, rounds, choice, report;
//! * [`production`]: production draws in one sequence, exact sums over them, and what they say;
//! * [`store`]: files: whole or not at all, the journal, tables;
//! * [`figures`]: data in, drawing out;
//! * [`report`]: tables, summary and figures of a run.

pub mod adapt;
pub mod distribution;
pub mod expression;
pub mod figures;
pub mod model;
pub mod numeric;
pub mod problem;
pub mod production;
pub mod proposal;
pub mod refit;
pub mod report;
pub mod store;
pub mod weights;

/// An error of any kind that can cross threads.
pub type BoxError = Box<dyn std::error::Error + Send + Sync>;
