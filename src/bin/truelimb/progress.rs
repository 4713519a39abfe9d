//! A progress bar on a terminal, a plain line a stage elsewhere, nothing when quiet.

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use std::io::{IsTerminal, Write};
use std::sync::Mutex;
use truelimb::pipeline::Progress;

/// Says one thing to the person at the terminal.
pub(crate) fn say(text: &str) {
    let _ = writeln!(std::io::stderr().lock(), "{text}");
}

/// Progress on stderr.
pub(crate) struct Bar {
    shown: Mutex<Option<ProgressBar>>,
    quiet: bool,
    terminal: bool,
}

impl Bar {
    /// A bar, or silence.
    pub(crate) fn new(quiet: bool) -> Self {
        Self {
            shown: Mutex::new(None),
            quiet,
            terminal: std::io::stderr().is_terminal(),
        }
    }

    /// Takes the bar away.
    pub(crate) fn finish(&self) {
        if let Ok(mut slot) = self.shown.lock()
            && let Some(it) = slot.take()
        {
            it.finish_and_clear();
        }
    }
}

impl Progress for Bar {
    fn stage(&self, name: &str, steps: u64) {
        self.finish();
        if self.quiet {
            return;
        }
        if !self.terminal {
            say(&format!("{name}: {steps} steps"));
            return;
        }
        let bar = ProgressBar::with_draw_target(Some(steps), ProgressDrawTarget::stderr());
        let style =
            ProgressStyle::with_template("{msg:28} {wide_bar} {pos}/{len}  {per_sec}  {eta} left");
        if let Ok(it) = style {
            bar.set_style(it);
        }
        bar.set_message(name.to_owned());
        if let Ok(mut slot) = self.shown.lock() {
            *slot = Some(bar);
        }
    }

    fn tick(&self) {
        if let Ok(slot) = self.shown.lock()
            && let Some(it) = slot.as_ref()
        {
            it.inc(1);
        }
    }
}
