//! Standard output and standard error; colours are left out where nobody sees them, or `NO_COLOR` is set.

use anyhow::Context;
use std::io::Write;

/// Writes a text to standard output.
pub(crate) fn say(text: &str) -> anyhow::Result<()> {
    let mut out = anstream::stdout().lock();
    out.write_all(text.as_bytes()).and_then(|()| out.flush()).context("cannot write to standard output")
}

/// Writes a line to standard error. Where even that cannot be written, nobody is there to be told.
pub(crate) fn complain(line: &str) {
    let mut out = anstream::stderr().lock();
    let _ = writeln!(out, "{line}");
}
