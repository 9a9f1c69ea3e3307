//! A line of progress for work over a second, on a terminal only, and the interrupt key.

use crate::integrals::Progress;
use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use std::io::IsTerminal;
use std::sync::Once;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Mutex, PoisonError};
use std::time::{Duration, Instant};

static INTERRUPTED: AtomicBool = AtomicBool::new(false);
static HANDLER: Once = Once::new();

/// Seconds before anything is shown.
const PATIENCE: Duration = Duration::from_secs(1);

/// Watches a run.
pub(super) struct Watch {
    start: Instant,
    bar: Mutex<Option<ProgressBar>>,
    terminal: bool,
}

impl Watch {
    pub(super) fn new() -> Self {
        HANDLER.call_once(|| {
            // Without a handler the key ends the process at once, which is a fair second best.
            let _ = ctrlc::set_handler(|| {
                if INTERRUPTED.swap(true, Ordering::SeqCst) {
                    std::process::exit(130);
                }
            });
        });
        Self { start: Instant::now(), bar: Mutex::new(None), terminal: std::io::stderr().is_terminal() }
    }

    pub(super) fn interrupted() -> bool {
        INTERRUPTED.load(Ordering::SeqCst)
    }
}

impl Progress for Watch {
    fn evaluations(&self, so_far: u64) {
        if !self.terminal || self.start.elapsed() < PATIENCE {
            return;
        }
        let mut bar = self.bar.lock().unwrap_or_else(PoisonError::into_inner);
        let bar = bar.get_or_insert_with(|| {
            let style = ProgressStyle::with_template("{spinner} {msg} ({elapsed})")
                .unwrap_or_else(|_| ProgressStyle::default_spinner());
            ProgressBar::with_draw_target(None, ProgressDrawTarget::stderr()).with_style(style)
        });
        bar.set_message(format!("{so_far} evaluations"));
        bar.tick();
    }

    fn cancelled(&self) -> bool {
        Self::interrupted()
    }
}

impl Drop for Watch {
    fn drop(&mut self) {
        if let Some(bar) = self.bar.lock().unwrap_or_else(PoisonError::into_inner).take() {
            bar.finish_and_clear();
        }
    }
}
