//! Runs that are killed, stopped, starved or damaged: what was paid for is kept, and the end is the same to the last byte.

#![allow(clippy::unwrap_used, reason = "a test that cannot go on has failed")]

mod common;
mod damage;
mod disks;
mod kills;
mod raises;
mod refusals;
