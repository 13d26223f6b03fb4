//! The command from end to end: what it writes, what it says, and how it ends.

#![allow(clippy::unwrap_used, reason = "a test that cannot go on has failed")]

mod common;
mod compare;
mod endings;
mod others;
mod rare;
mod schema;
mod tune;
