//! Progress of a sweep: done of total, rate, time left; plain lines where there is no terminal.

use std::io::IsTerminal;
use std::time::{Duration, Instant};

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};

/// Nothing is shown before this.
const PATIENCE: Duration = Duration::from_secs(1);
/// Without a terminal a line is written this often, so that logs stay alive.
const LINE_EVERY: Duration = Duration::from_secs(10);

/// Progress of one sweep.
pub(super) struct Rate {
    quiet: bool,
    begun: Instant,
    said: Instant,
    before: usize,
    bar: Option<ProgressBar>,
}

impl Rate {
    /// Begin; `before` tasks were done by an earlier run.
    pub(super) fn new(quiet: bool, before: usize) -> Rate {
        let now = Instant::now();
        Rate { quiet, begun: now, said: now, before, bar: None }
    }

    /// Say how many tasks are done.
    pub(super) fn at(&mut self, done: usize, total: usize) {
        if self.quiet || self.begun.elapsed() < PATIENCE {
            return;
        }
        if std::io::stderr().is_terminal() {
            self.draw(done, total);
        } else if self.said.elapsed() >= LINE_EVERY {
            self.said = Instant::now();
            let rate = (done - self.before.min(done)) as f64 / self.begun.elapsed().as_secs_f64();
            let left_s = total.saturating_sub(done) as f64 / rate.max(1e-9);
            eprintln!("{done} of {total} outages, {rate:.1} per s, {left_s:.0} s left");
        }
    }

    fn draw(&mut self, done: usize, total: usize) {
        let bar = self.bar.get_or_insert_with(|| {
            let target = ProgressDrawTarget::stderr();
            let bar = ProgressBar::with_draw_target(Some(total as u64), target);
            let look = "outages [{bar:30}] {pos} of {len}, {per_sec}, {eta} left";
            let style = ProgressStyle::with_template(look);
            bar.set_style(
                style.unwrap_or_else(|_| ProgressStyle::default_bar()).progress_chars("=> "),
            );
            bar
        });
        bar.set_position(done as u64);
    }
}

impl Drop for Rate {
    fn drop(&mut self) {
        if let Some(bar) = &self.bar {
            bar.finish_and_clear();
        }
    }
}
