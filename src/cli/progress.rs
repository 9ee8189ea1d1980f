//! A bar on standard error, once the work has taken longer than a second.

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use std::sync::mpsc;
use std::thread::JoinHandle;
use std::time::Duration;

const PATIENCE: Duration = Duration::from_secs(1);

pub struct Progress {
    bar: ProgressBar,
    /// Dropping the sender wakes the thread that would show the bar.
    waiting: Option<(mpsc::Sender<()>, JoinHandle<()>)>,
}

impl Progress {
    /// `shown` false: never drawn.
    pub fn new(steps: usize, shown: bool) -> Self {
        let bar = ProgressBar::with_draw_target(Some(steps as u64), ProgressDrawTarget::hidden());
        if let Ok(style) = ProgressStyle::with_template("{spinner} {pos} of {len} runs, {elapsed}") {
            bar.set_style(style);
        }
        let waiting = shown.then(|| {
            let (sender, receiver) = mpsc::channel::<()>();
            let late = bar.clone();
            let thread = std::thread::spawn(move || {
                if receiver.recv_timeout(PATIENCE) == Err(mpsc::RecvTimeoutError::Timeout) {
                    late.set_draw_target(ProgressDrawTarget::stderr());
                    late.enable_steady_tick(Duration::from_millis(200));
                }
            });
            (sender, thread)
        });
        Progress { bar, waiting }
    }

    pub fn step(&self) {
        self.bar.inc(1);
    }

    pub fn finish(mut self) {
        if let Some((sender, thread)) = self.waiting.take() {
            drop(sender);
            let _ = thread.join();
        }
        self.bar.finish_and_clear();
    }
}
