//! Ctrl-C, SIGTERM and SIGHUP: the first asks the work to stop, the second ends the program at once.

use std::sync::atomic::{AtomicBool, Ordering};

static STOPPED: AtomicBool = AtomicBool::new(false);

/// Whether the work was asked to stop.
pub(super) fn stopped() -> bool {
    STOPPED.load(Ordering::Relaxed)
}

/// Listens from now on. Where the system does not allow it, signals keep their usual effect.
pub(super) fn listen() {
    let _ = ctrlc::set_handler(|| {
        if STOPPED.swap(true, Ordering::SeqCst) {
            end_at_once();
        }
    });
}

#[expect(
    clippy::exit,
    reason = "the second signal means at once; temporary files are hidden and cleared next time"
)]
fn end_at_once() {
    std::process::exit(2);
}
