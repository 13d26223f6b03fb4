//! Models outside the problem file, with real processes, compiled code and files.

#![allow(clippy::unwrap_used, reason = "a test that cannot go on has failed")]

mod common;
mod examples;
mod exchange;
mod faults;
mod libraries;
mod problems;
mod production;
mod runs;
