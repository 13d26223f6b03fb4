//! Problem files, right and wrong: what they mean, checked against independent numbers, and how they are refused.
#![allow(clippy::unwrap_used)]

mod built;
mod documentation;
mod mutations;
mod other_ways;
mod right;
mod starts;
mod whole;
mod wrong;
mod wrong_layers;
mod wrong_tables;
mod wrong_words;
