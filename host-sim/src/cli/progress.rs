//! A progress bar that stays out of the way.
//!
//! Contract: on stderr, only if that is a terminal, only once the work has
//! taken longer than a second, and cleared at the end.

use std::io::IsTerminal;
use std::time::{Duration, Instant};

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};

/// How long work may take before anything is shown.
const PATIENCE: Duration = Duration::from_secs(1);

/// Steps of the bar.
const STEPS: u64 = 1000;

/// Progress of one piece of work.
pub(super) struct Progress {
    what: String,
    begun: Instant,
    wanted: bool,
    bar: Option<ProgressBar>,
}

impl Progress {
    /// Begin; nothing is shown yet.
    pub(super) fn new(what: &str, quiet: bool) -> Progress {
        Progress {
            what: what.to_owned(),
            begun: Instant::now(),
            wanted: !quiet && std::io::stderr().is_terminal(),
            bar: None,
        }
    }

    /// Say what share is done, 0 to 1.
    pub(super) fn at(&mut self, share: f64) {
        if !self.wanted || (self.bar.is_none() && self.begun.elapsed() < PATIENCE) {
            return;
        }
        let bar = self.bar.get_or_insert_with(|| {
            let bar = ProgressBar::with_draw_target(Some(STEPS), ProgressDrawTarget::stderr());
            let look = ProgressStyle::with_template("{msg} [{bar:30}] {percent:>3} %  {eta} left");
            bar.set_style(
                look.unwrap_or_else(|_| ProgressStyle::default_bar()).progress_chars("=> "),
            );
            bar.set_message(self.what.clone());
            bar
        });
        bar.set_position((share.clamp(0.0, 1.0) * STEPS as f64) as u64);
    }
}

impl Drop for Progress {
    fn drop(&mut self) {
        if let Some(bar) = &self.bar {
            bar.finish_and_clear();
        }
    }
}
