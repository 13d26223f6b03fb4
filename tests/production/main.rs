//! Production from the command line: shards, interruptions, points, memory.

#![allow(clippy::unwrap_used, reason = "a test that cannot go on has failed")]

mod common;
mod interruption;
mod memory;
mod points;
mod refusals;
mod shards;
