//! Numbers: blocks of points, exponentials and logarithms with the same bits on every machine, random
//! streams, special functions, small triangular solves. Nothing here knows of importance sampling.
//!
//! **Memory layout of points, everywhere in this crate.** Points live in blocks of [`BLOCK`] = 128; inside a
//! block every coordinate is one contiguous column of 128 numbers. Kernels run down such a column, so the
//! compiler turns them into vector instructions, and a block of ten coordinates fits the first-level cache.
//! [`Points`] is that layout.
//!
//! **Same seed, same bytes.** No fused multiply-add, no `f64::exp`, `f64::ln` or other function of the system's
//! mathematics library (its last bits differ between processors): use [`exp`], [`ln`] or the `libm` crate.
//! Sums run in a fixed order.

mod beta;
mod elementary;
mod error_function;
mod gamma;
mod points;
mod streams;
mod tails;

pub mod linear;
pub mod normal;
pub mod quadrature;
pub mod special;

pub use elementary::{exp, ln, log_add_exp, log_sum_exp};
pub use points::{BLOCK, Points};
pub use streams::{Purpose, Stream, stream, uniform};
