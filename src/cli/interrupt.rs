//! Ctrl-C and a polite kill: a flag that long commands look at, so that they end in order with every outlet off.

use std::sync::OnceLock;
use std::sync::atomic::{AtomicBool, Ordering};

static STOP: AtomicBool = AtomicBool::new(false);
static INSTALLED: OnceLock<()> = OnceLock::new();

/// The flag; from the first call on a signal raises it instead of ending the program.
pub(super) fn stop_flag() -> anyhow::Result<&'static AtomicBool> {
    if INSTALLED.set(()).is_ok() {
        ctrlc::set_handler(|| STOP.store(true, Ordering::Relaxed))?;
    }
    Ok(&STOP)
}
