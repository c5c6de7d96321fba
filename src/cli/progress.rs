//! Progress on standard error when a terminal watches and the work is long, and interruption by Ctrl-C.

use crate::solve;
use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use std::sync::OnceLock;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::{Duration, Instant};

/// Work shorter than this shows nothing.
const PATIENCE: Duration = Duration::from_millis(500);

static STOP: AtomicBool = AtomicBool::new(false);

/// Watches one solve.
pub(super) struct Progress {
    start: Instant,
    bar: OnceLock<ProgressBar>,
    limit: Option<Duration>,
}

/// Whether Ctrl-C was pressed.
pub(super) fn interrupted() -> bool {
    STOP.load(Ordering::SeqCst)
}

impl Progress {
    /// Starts watching; Ctrl-C from now on ends the solve in order.
    pub fn start(limit: Option<Duration>) -> Self {
        // A second handler cannot be set; then the default one ends the program, which is as good.
        let _ = ctrlc::set_handler(|| STOP.store(true, Ordering::SeqCst));
        Self { start: Instant::now(), bar: OnceLock::new(), limit }
    }

    /// Takes in a step; false stops the solve.
    pub fn step(&self, step: solve::Progress) -> bool {
        if self.start.elapsed() > PATIENCE {
            let bar = self.bar.get_or_init(|| {
                let bar = ProgressBar::with_draw_target(None, ProgressDrawTarget::stderr());
                if let Ok(style) = ProgressStyle::with_template("{msg} {elapsed}") {
                    bar.set_style(style);
                }
                bar
            });
            bar.set_message(format!("pass {}, element {} of {}", step.pass, step.done, step.elements));
            bar.tick();
        }
        !interrupted() && self.limit.is_none_or(|limit| self.start.elapsed() < limit)
    }

    /// Takes the line away.
    pub fn finish(&self) {
        if let Some(bar) = self.bar.get() {
            bar.finish_and_clear();
        }
    }
}
