//! The evenpoise command.
fn main() {}
