//! Formulas from text to value and gradient, through the public interface only.

#![allow(clippy::unwrap_used, reason = "a test may fail")]

#[path = "formulas/meaning.rs"]
mod meaning;
#[path = "formulas/reference.rs"]
mod reference;
#[path = "formulas/world.rs"]
mod world;
