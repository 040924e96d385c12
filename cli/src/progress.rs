//! A bar with rate and time left, on a terminal only.

use std::time::Duration;

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};

use crate::console::Console;

/// Counts spectra.
pub struct Progress {
    bar: ProgressBar,
}

impl Progress {
    /// `total` spectra, of which `done` were done by an earlier run.
    pub fn new(console: &Console, total: u64, done: u64) -> Self {
        if !console.shows_progress() {
            return Progress {
                bar: ProgressBar::hidden(),
            };
        }
        let bar = ProgressBar::with_draw_target(Some(total), ProgressDrawTarget::stderr_with_hz(5));
        let style = ProgressStyle::with_template(
            "{wide_bar} {percent}%  {human_pos}/{human_len} spectra  {per_sec}  {eta} left",
        );
        if let Ok(style) = style {
            bar.set_style(style);
        }
        bar.set_position(done);
        // The rate and the time left count from here, not from the start of the interrupted run.
        bar.reset_eta();
        bar.enable_steady_tick(Duration::from_millis(500));
        Progress { bar }
    }

    /// `spectra` more are done.
    pub fn advance(&self, spectra: u64) {
        self.bar.inc(spectra);
    }

    /// Takes the bar away.
    pub fn finish(&self) {
        self.bar.finish_and_clear();
    }
}
