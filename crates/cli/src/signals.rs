//! Signals that ask for an end: Ctrl-C at the terminal, SIGTERM from a batch system.

use signal_hook::consts::{SIGINT, SIGTERM};
use signal_hook::flag;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};

/// What was asked for so far.
#[derive(Clone, Debug, Default)]
pub(crate) struct Asked {
    /// Set by the first signal.
    pub(crate) stop: Arc<AtomicBool>,
    signal: Arc<AtomicUsize>,
}

impl Asked {
    /// The exit status that the signal stands for, 128 and its number, as shells have it; None where none came.
    pub(crate) fn status(&self) -> Option<u8> {
        match self.signal.load(Ordering::Relaxed) {
            0 => None,
            signal => u8::try_from(128 + signal).ok(),
        }
    }
}

/// Heeds signals: the first asks for an end, a second ends the process at once.
pub(crate) fn heed() -> std::io::Result<Asked> {
    let asked = Asked::default();
    for signal in [SIGINT, SIGTERM] {
        // In this order: at the first signal nothing was asked for yet.
        flag::register_conditional_shutdown(signal, 128 + signal, asked.stop.clone())?;
        flag::register_usize(signal, asked.signal.clone(), signal as usize)?;
        flag::register(signal, asked.stop.clone())?;
    }
    Ok(asked)
}

/// Leaves signals to the runner, which tells its workers to come to an end: a terminal sends them to all its processes at once.
pub(crate) fn leave_to_the_runner() -> std::io::Result<()> {
    for signal in [SIGINT, SIGTERM] {
        flag::register(signal, Arc::default())?;
    }
    Ok(())
}
