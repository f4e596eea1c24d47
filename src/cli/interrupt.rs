//! Ctrl-C: the first ends a batch after what is under way, the second ends the program at once.

use inrush::run::RunError;
use signal_hook::consts::{SIGINT, SIGTERM};
use signal_hook::flag;
use std::sync::Arc;
use std::sync::atomic::AtomicBool;

/// A flag that an interrupt sets.
pub fn flag() -> Result<Arc<AtomicBool>, RunError> {
    let stop = Arc::new(AtomicBool::new(false));
    for signal in [SIGINT, SIGTERM] {
        // in this order: the shutdown looks at what an earlier signal has set
        flag::register_conditional_shutdown(signal, super::INTERRUPTED.into(), Arc::clone(&stop))
            .and_then(|_| flag::register(signal, Arc::clone(&stop)))
            .map_err(|error| RunError::Internal(format!("no handler of interrupts: {error}")))?;
    }
    Ok(stop)
}
