//! Problem files, right and wrong: what they mean, checked against independent numbers, and how they are refused.
#![allow(clippy::unwrap_used)]

mod documentation;
mod right;
mod whole;
mod wrong;
