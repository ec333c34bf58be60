//! Progress and cancellation shared between a long computation and its caller:
//! [`Monitor`].

use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};

use crate::error::{CoreError, Result};

/// A counter of finished work units and a flag that asks for an early end.
///
/// The computation calls [`Monitor::advance`] and [`Monitor::check`]; the
/// caller reads [`Monitor::fraction`] and may call [`Monitor::cancel`] from
/// another thread.
#[derive(Debug, Default)]
pub struct Monitor {
    done: AtomicU64,
    total: AtomicU64,
    cancelled: AtomicBool,
}

impl Monitor {
    /// Announces how many units the work holds.
    pub fn set_total(&self, units: u64) {
        self.total.store(units, Ordering::Relaxed);
    }

    /// Records finished units.
    pub fn advance(&self, units: u64) {
        self.done.fetch_add(units, Ordering::Relaxed);
    }

    /// Finished and announced units.
    pub fn progress(&self) -> (u64, u64) {
        (
            self.done.load(Ordering::Relaxed),
            self.total.load(Ordering::Relaxed),
        )
    }

    /// Asks the computation to stop at its next check.
    pub fn cancel(&self) {
        self.cancelled.store(true, Ordering::Relaxed);
    }

    /// # Errors
    /// [`CoreError::Interrupted`] once [`Monitor::cancel`] was called.
    pub fn check(&self) -> Result<()> {
        if self.cancelled.load(Ordering::Relaxed) {
            Err(CoreError::Interrupted)
        } else {
            Ok(())
        }
    }
}
