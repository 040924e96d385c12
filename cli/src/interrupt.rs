//! Ctrl-C: the first asks to finish what is running, the second ends at once.

use std::sync::atomic::{AtomicBool, Ordering};

/// The exit code of an interrupted run: 128 + SIGINT, as shells have it.
pub const EXIT_CODE: u8 = 130;

static ASKED: AtomicBool = AtomicBool::new(false);

/// From now on the first Ctrl-C only raises a flag.
pub fn listen() {
    // It can fail only where a handler is set already or the system has no signals; then Ctrl-C ends the program
    // at once, which the journal survives as well.
    let _ = ctrlc::set_handler(|| {
        if ASKED.swap(true, Ordering::SeqCst) {
            std::process::exit(i32::from(EXIT_CODE));
        }
    });
}

/// Whether the user wants to stop.
pub fn asked() -> bool {
    ASKED.load(Ordering::SeqCst)
}
