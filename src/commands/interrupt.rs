//! Ctrl-C: at once where nothing is half-written, else at the next look, so that no half file is left.

use std::sync::atomic::{AtomicBool, Ordering};

use super::CommandError;
use crate::failure::FailureKind;

/// Whether a file is being written.
static GUARDED: AtomicBool = AtomicBool::new(false);
/// Whether the user has asked to stop.
static ASKED: AtomicBool = AtomicBool::new(false);

/// While it lives, Ctrl-C waits for [`Guard::check`].
pub struct Guard;

/// Answer Ctrl-C from now on. Where the system allows no handler its own way of ending stays in force.
pub fn install() {
    let _ = ctrlc::set_handler(|| {
        let asked_before = ASKED.swap(true, Ordering::SeqCst);
        if asked_before || !GUARDED.load(Ordering::SeqCst) {
            std::process::exit(FailureKind::Interrupted.exit_code().into());
        }
    });
}

impl Guard {
    /// From here on a file is being written.
    pub fn new() -> Self {
        GUARDED.store(true, Ordering::SeqCst);
        Guard
    }

    /// Whether to go on.
    ///
    /// # Errors
    /// Where the user has asked to stop.
    pub fn check(&self) -> Result<(), CommandError> {
        if ASKED.load(Ordering::SeqCst) {
            return Err(CommandError::Interrupted);
        }
        Ok(())
    }
}

impl Drop for Guard {
    fn drop(&mut self) {
        GUARDED.store(false, Ordering::SeqCst);
    }
}
