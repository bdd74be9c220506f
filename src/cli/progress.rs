//! Progress on a terminal; silence in a pipe.

use crate::study::Event;
use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use std::io::IsTerminal;
use std::time::Duration;

/// Shows what is being done, on standard error, where that is a terminal.
pub struct Progress {
    bar: ProgressBar,
}

impl Progress {
    /// Starts a line of progress.
    pub fn new() -> Self {
        let bar = if std::io::stderr().is_terminal() {
            let style = ProgressStyle::with_template("{spinner} {elapsed:>4} {msg}")
                .expect("the template is a constant");
            let bar = ProgressBar::new_spinner().with_style(style);
            bar.enable_steady_tick(Duration::from_millis(120));
            bar
        } else {
            ProgressBar::with_draw_target(None, ProgressDrawTarget::hidden())
        };
        Self { bar }
    }

    /// Shows one event.
    pub fn show(&self, event: &Event) {
        self.bar.set_message(event.to_string());
    }
}

impl Default for Progress {
    fn default() -> Self {
        Self::new()
    }
}

impl Drop for Progress {
    fn drop(&mut self) {
        self.bar.finish_and_clear();
    }
}
