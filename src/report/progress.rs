//! A progress bar on stderr for work that takes over a second.

use std::fmt::Write;
use std::io::IsTerminal;
use std::sync::mpsc::{self, RecvTimeoutError, Sender};
use std::thread::{self, JoinHandle};
use std::time::Duration;

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressState, ProgressStyle};

const QUIET_FOR: Duration = Duration::from_secs(1);
const REDRAW: Duration = Duration::from_millis(250);
const LINE: &str = "{prefix} {bar:30} {human_pos} of {human_len}, {rate}, {eta} left";

/// Counts finished items; shows a bar with rate and time left after one second, and clears it when dropped.
///
/// Silent when stderr is not a terminal. May be shared by the threads of a parallel loop.
pub struct Progress {
    bar: ProgressBar,
    showing: Option<(Sender<()>, JoinHandle<()>)>,
}

impl Progress {
    /// Begins work on `total` items, called `label` in the bar.
    #[must_use]
    pub fn new(label: &str, total: u64) -> Self {
        let bar = ProgressBar::with_draw_target(Some(total), ProgressDrawTarget::hidden())
            .with_prefix(label.to_owned());
        if let Ok(style) = ProgressStyle::with_template(LINE) {
            let rate = |state: &ProgressState, out: &mut dyn Write| {
                // The line is only for the eye; what cannot be written is not shown.
                let _ = write!(out, "{:.1}/s", state.per_sec());
            };
            bar.set_style(style.with_key("rate", rate));
        }
        // The first item may itself take minutes, so a waiting thread shows the bar, not the count.
        let showing = std::io::stderr().is_terminal().then(|| {
            let (done, wait) = mpsc::channel();
            let shown = bar.clone();
            let show = move || {
                if wait.recv_timeout(QUIET_FOR) == Err(RecvTimeoutError::Timeout) {
                    shown.set_draw_target(ProgressDrawTarget::stderr());
                    shown.enable_steady_tick(REDRAW);
                }
            };
            // No thread, no bar: the work goes on.
            let thread = thread::Builder::new().spawn(show).ok()?;
            Some((done, thread))
        });
        let showing = showing.flatten();
        Self { bar, showing }
    }

    /// One more item is done.
    pub fn inc(&self) {
        self.bar.inc(1);
    }

    /// Items done so far.
    #[must_use]
    pub fn done(&self) -> u64 {
        self.bar.position()
    }
}

impl Drop for Progress {
    fn drop(&mut self) {
        if let Some((done, thread)) = self.showing.take() {
            drop(done);
            // A thread that failed only means a bar that was not shown.
            let _ = thread.join();
        }
        self.bar.finish_and_clear();
    }
}
