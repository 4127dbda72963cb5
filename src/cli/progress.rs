//! How far a sweep has come, on a terminal.

use std::fmt;
use std::io::{self, IsTerminal};

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressState, ProgressStyle};

/// Shows points, rate and time left on standard error, if that is a terminal and messages are wanted.
pub struct Progress(ProgressBar);

impl Progress {
    /// For so many points, some of which are done.
    pub fn new(points: u64, done: u64, quiet: bool) -> Self {
        let shown = io::stderr().is_terminal() && !quiet;
        let target = if shown { ProgressDrawTarget::stderr_with_hz(5) } else { ProgressDrawTarget::hidden() };
        let bar = ProgressBar::with_draw_target(Some(points), target).with_position(done);
        let look = "{wide_bar} {pos} of {len} points, {rate}, {eta} left";
        let style = ProgressStyle::with_template(look).expect("a template of known keys");
        bar.set_style(style.with_key("rate", |state: &ProgressState, out: &mut dyn fmt::Write| {
            // a bar that cannot be drawn is no reason to stop
            let _ = write!(out, "{:.0}/s", state.per_sec());
        }));
        bar.reset_eta();
        Self(bar)
    }

    /// Whether anything is shown.
    pub fn is_shown(&self) -> bool {
        !self.0.is_hidden()
    }

    /// So many points more are done.
    pub fn advance(&self, points: u64) {
        self.0.inc(points);
    }

    /// Takes the bar away.
    pub fn clear(&self) {
        self.0.finish_and_clear();
    }
}
