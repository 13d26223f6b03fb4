//! Formulas from text to value and gradient, through the public interface only.

#![allow(clippy::unwrap_used, reason = "a test may fail")]

#[path = "formulas/errors.rs"]
mod errors;
#[path = "formulas/every_function.rs"]
mod every_function;
#[path = "formulas/meaning.rs"]
mod meaning;
#[path = "formulas/naive.rs"]
mod naive;
#[path = "formulas/random.rs"]
mod random;
#[path = "formulas/reference.rs"]
mod reference;
#[path = "formulas/world.rs"]
mod world;
