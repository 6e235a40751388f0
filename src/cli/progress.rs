//! Progress of long runs: on standard error, only at a terminal, and only after a second.

use crate::pipeline::Progress;
use indicatif::{ProgressBar, ProgressDrawTarget};
use std::cell::RefCell;
use std::io::IsTerminal;
use std::time::{Duration, Instant};

/// A line that tells the stage, and goes away at the end.
pub(super) struct Spinner {
    bar: RefCell<Option<ProgressBar>>,
    began: Instant,
    terminal: bool,
}

impl Spinner {
    pub(super) fn new() -> Spinner {
        Spinner { bar: RefCell::new(None), began: Instant::now(), terminal: std::io::stderr().is_terminal() }
    }

    pub(super) fn finish(&self) {
        if let Some(bar) = self.bar.borrow_mut().take() {
            bar.finish_and_clear();
        }
    }
}

impl Progress for Spinner {
    fn stage(&self, name: &str) {
        if !self.terminal || self.began.elapsed() < Duration::from_secs(1) {
            return;
        }
        let mut bar = self.bar.borrow_mut();
        let bar = bar.get_or_insert_with(|| ProgressBar::with_draw_target(None, ProgressDrawTarget::stderr()));
        bar.enable_steady_tick(Duration::from_millis(120));
        bar.set_message(name.to_owned());
    }
}
