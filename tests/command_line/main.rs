//! The command from end to end: what it writes, what it says, and how it ends.

mod common;
mod endings;
mod tune;
