//! Progress on standard error when a terminal watches and the work is long; Ctrl-C and the time limit.

use super::{GOOD, NOT_MET};
use crate::solve;
use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Mutex, MutexGuard, OnceLock, PoisonError};
use std::time::{Duration, Instant};

/// Work shorter than this shows nothing.
const PATIENCE: Duration = Duration::from_millis(500);
/// Time for a solve to end in order after Ctrl-C.
const GRACE: Duration = Duration::from_millis(50);

static STOP: AtomicBool = AtomicBool::new(false);
/// Whether nothing is done but waiting for a change.
static WAITING: AtomicBool = AtomicBool::new(false);
/// Held while files are written: the program is never ended in between.
static WRITING: Mutex<()> = Mutex::new(());

/// Whether Ctrl-C was pressed.
pub(super) fn interrupted() -> bool {
    STOP.load(Ordering::SeqCst)
}

/// Says whether the program is only waiting.
pub(super) fn wait(waiting: bool) {
    WAITING.store(waiting, Ordering::SeqCst);
}

/// Until the guard is dropped the program is not ended.
pub(super) fn writing() -> MutexGuard<'static, ()> {
    WRITING.lock().unwrap_or_else(PoisonError::into_inner)
}

/// From now on Ctrl-C ends the program at once, yet leaves nothing half-written.
pub(super) fn listen() {
    // A second handler cannot be set; then the default one ends the program, which is as good.
    let _ = ctrlc::set_handler(|| {
        STOP.store(true, Ordering::SeqCst);
        if WAITING.load(Ordering::SeqCst) {
            std::process::exit(GOOD.into());
        }
        std::thread::sleep(GRACE);
        let _whole = writing();
        eprintln!("error: interrupted: nothing was written");
        std::process::exit(NOT_MET.into());
    });
}

/// Ends the program when the time is over, whatever it is at.
pub(super) fn deadline(limit: Option<Duration>) {
    let Some(limit) = limit else { return };
    std::thread::spawn(move || {
        std::thread::sleep(limit + 2 * GRACE);
        let _whole = writing();
        eprintln!("error: {}", late(limit));
        std::process::exit(NOT_MET.into());
    });
}

/// What is said when the time is over.
pub(super) fn late(limit: Duration) -> String {
    format!("not solved within the {} s allowed: nothing was written", limit.as_secs_f64())
}

/// Watches one solve.
pub(super) struct Progress {
    start: Instant,
    bar: OnceLock<ProgressBar>,
    limit: Option<Duration>,
    /// The pass at hand, when it began to be watched, and how many elements were done then.
    began: Mutex<(usize, Instant, usize)>,
}

impl Progress {
    /// Starts watching.
    pub fn start(limit: Option<Duration>) -> Self {
        let began = Mutex::new((0, Instant::now(), 0));
        Self { start: Instant::now(), bar: OnceLock::new(), limit, began }
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
            let mut message = format!("pass {}, element {} of {}", step.pass, step.done, step.elements);
            if let Some(left) = self.left(&step) {
                message.push_str(&format!(", about {left} s to go in this pass"));
            }
            bar.set_message(message);
            bar.tick();
        }
        !interrupted() && self.limit.is_none_or(|limit| self.start.elapsed() < limit)
    }

    /// Seconds that this pass will still take, by the elements done; how many passes will follow nobody knows.
    fn left(&self, step: &solve::Progress) -> Option<u64> {
        let mut began = self.began.lock().unwrap_or_else(PoisonError::into_inner);
        if began.0 != step.pass || step.done == 0 {
            *began = (step.pass, Instant::now(), step.done);
        }
        let (_, since, first) = *began;
        let done = step.done.checked_sub(first).filter(|done| *done > 0)?;
        let each = since.elapsed().as_secs_f64() / done as f64;
        let left = each * step.elements.saturating_sub(step.done) as f64;
        (left >= 1.0).then(|| left.ceil() as u64)
    }

    /// Takes the line away.
    pub fn finish(&self) {
        if let Some(bar) = self.bar.get() {
            bar.finish_and_clear();
        }
    }
}
