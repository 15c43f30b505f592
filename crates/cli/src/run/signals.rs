//! Ctrl-C and the wishes of schedulers.

use std::io;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

/// Whether someone has asked the run to stop.
#[derive(Clone, Debug, Default)]
pub struct Interrupt(Arc<AtomicBool>);

impl Interrupt {
    /// Watch for signals: the first one asks, the second one ends the program at once.
    ///
    /// # Errors
    /// The system's answer when a signal cannot be watched.
    pub fn watch() -> io::Result<Self> {
        use signal_hook::consts::{SIGINT, SIGTERM};
        use signal_hook::flag;
        let asked = Arc::new(AtomicBool::new(false));
        for signal in [SIGINT, SIGTERM] {
            // In this order: the shutdown looks at the flag before the same signal sets it.
            flag::register_conditional_shutdown(signal, crate::failure::INTERRUPTED.into(), Arc::clone(&asked))?;
            flag::register(signal, Arc::clone(&asked))?;
        }
        // A limit on file sizes then shows as an error of the write instead of killing the program.
        #[cfg(unix)]
        flag::register(signal_hook::consts::SIGXFSZ, Arc::new(AtomicBool::new(false)))?;
        Ok(Self(asked))
    }

    /// Whether someone has asked the run to stop.
    pub fn asked(&self) -> bool {
        self.0.load(Ordering::Relaxed)
    }
}
