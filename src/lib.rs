//! evenpoise finds the distribution to sample from, proves that its weights are even, and hands it over.
//!
//! The rooms, in reading order, which is also dependency order:
//!
//! * [`numeric`]: blocks of points, exponentials, streams, special functions;
//! * [`proposal`]: mixtures of Gaussian and Student-t components, drawn from and evaluated;
//! * [`weights`]: log weights and what is said about them: effective sample size, tail shape, errors, verdict;
//! * [`refit`]: fits of a mixture to weighted points;
//! * [`adapt`]: the loop;

pub mod adapt;
pub mod numeric;
pub mod proposal;
pub mod refit;
pub mod weights;

/// An error of any kind that can cross threads.
pub type BoxError = Box<dyn std::error::Error + Send + Sync>;

/// Experiments only.
#[doc(hidden)]
pub fn knob(name: &str, default: f64) -> f64 {
    std::env::var(name).ok().and_then(|v| v.parse().ok()).unwrap_or(default)
}
