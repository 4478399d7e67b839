//! Progress on a terminal: stage, frames done, frames a second, time left. Silent elsewhere and with `--quiet`.

use std::io::IsTerminal;
use std::sync::Mutex;

use indicatif::{ProgressBar, ProgressStyle};

use crate::pipeline::Progress;

/// A bar on standard error.
pub(super) struct Bar {
    bar: Mutex<ProgressBar>,
    shown: bool,
}

impl Bar {
    /// Shown only on a terminal that was not asked to be quiet.
    pub(super) fn new(quiet: bool) -> Self {
        Self { bar: Mutex::new(ProgressBar::hidden()), shown: !quiet && std::io::stderr().is_terminal() }
    }

    fn with(&self, act: impl FnOnce(&mut ProgressBar)) {
        if let Ok(mut bar) = self.bar.lock() {
            act(&mut bar);
        }
    }
}

impl Progress for Bar {
    fn stage(&self, name: &str, frames: Option<usize>) {
        if !self.shown {
            return;
        }
        self.with(|bar| {
            bar.finish_and_clear();
            let (next, form) = match frames {
                Some(n) => {
                    (ProgressBar::new(n as u64), "{msg:<12} {wide_bar} {pos}/{len} frames  {per_sec}  {eta} left")
                }
                None => (ProgressBar::new_spinner(), "{msg:<12} {spinner}"),
            };
            if let Ok(style) = ProgressStyle::with_template(form) {
                next.set_style(style);
            }
            next.set_message(name.to_owned());
            *bar = next;
        });
    }

    fn frame(&self) {
        self.with(|bar| bar.inc(1));
    }
}

impl Drop for Bar {
    fn drop(&mut self) {
        self.with(|bar| bar.finish_and_clear());
    }
}
