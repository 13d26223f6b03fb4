//! Ctrl-C and a polite kill: the tuning ends after the batch at hand, and everything is saved.

use signal_hook::consts::signal::SIGINT;
use signal_hook::consts::signal::SIGTERM;
use std::io;
use std::sync::Arc;
use std::sync::atomic::AtomicBool;
use std::sync::atomic::AtomicUsize;
use std::sync::atomic::Ordering;

/// The signal that came, if one did.
#[derive(Debug, Clone, Default)]
pub(crate) struct Signals {
    number: Arc<AtomicUsize>,
}

impl Signals {
    /// Begins to listen. A second signal ends the process at once, as if nobody listened.
    pub(crate) fn listen() -> io::Result<Self> {
        let signals = Self::default();
        let first = Arc::new(AtomicBool::new(false));
        for signal in [SIGINT, SIGTERM] {
            signal_hook::flag::register_conditional_default(signal, Arc::clone(&first))?;
            signal_hook::flag::register(signal, Arc::clone(&first))?;
            signal_hook::flag::register_usize(signal, Arc::clone(&signals.number), signal as usize)?;
        }
        Ok(signals)
    }

    /// The number of the signal that came.
    pub(crate) fn came(&self) -> Option<u8> {
        u8::try_from(self.number.load(Ordering::Relaxed)).ok().filter(|&number| number > 0)
    }
}
