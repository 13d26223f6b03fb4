//! What a run shows while it works: lines that stay, and one that changes; and the run's log of them.

use std::fs::File;
use std::fs::OpenOptions;
use std::io;
use std::io::IsTerminal;
use std::io::Write;
use std::path::Path;
use std::time::Duration;
use std::time::Instant;

/// The changing line is not written more often than this.
const EVERY: Duration = Duration::from_millis(100);

/// Standard error and the log of a run.
#[derive(Debug)]
pub(crate) struct Screen {
    log: Option<File>,
    live: bool,
    shown: Option<Instant>,
}

impl Screen {
    /// A screen whose lines are also appended to the file at `log`.
    pub(crate) fn new(log: &Path) -> io::Result<Self> {
        let log = OpenOptions::new().create(true).append(true).open(log)?;
        Ok(Self { log: Some(log), live: io::stderr().is_terminal(), shown: None })
    }

    /// Whether anybody sees the line that changes.
    pub(crate) fn is_live(&self) -> bool {
        self.live
    }

    /// Lines that stay.
    pub(crate) fn keep(&mut self, text: &str) {
        self.clear();
        let text = text.trim_end_matches('\n');
        let mut out = anstream::stderr().lock();
        // A terminal that is gone must not end a tuning.
        let _ = writeln!(out, "{text}");
        self.log(text);
    }

    /// The line that changes; only a terminal shows it.
    pub(crate) fn now(&mut self, text: &str) {
        if !self.live || self.shown.is_some_and(|at| at.elapsed() < EVERY) {
            return;
        }
        self.shown = Some(Instant::now());
        let mut out = io::stderr().lock();
        let _ = write!(out, "\r\x1b[K{text}").and_then(|()| out.flush());
    }

    /// Takes the changing line away.
    pub(crate) fn clear(&mut self) {
        if self.shown.take().is_some() {
            let mut out = io::stderr().lock();
            let _ = write!(out, "\r\x1b[K").and_then(|()| out.flush());
        }
    }

    /// Lines for the log alone.
    pub(crate) fn log(&mut self, text: &str) {
        let plain = anstream::adapter::strip_str(text).to_string();
        // A log that cannot be written is no reason to lose a run; the files that matter tell of a full disk.
        if let Some(log) = &mut self.log
            && writeln!(log, "{plain}").is_err()
        {
            self.log = None;
        }
    }
}
