//! Progress on standard error, on a terminal alone, of anything that takes over a second.

use std::io::IsTerminal;
use std::sync::mpsc::{RecvTimeoutError, Sender, channel};
use std::thread::JoinHandle;
use std::time::{Duration, Instant};

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};

/// What takes less says nothing.
const PATIENCE: Duration = Duration::from_secs(1);

/// A bar over a known amount of work.
pub struct Bar {
    bar: ProgressBar,
    began: Instant,
}

impl Bar {
    /// For `total` units of work.
    pub fn new(total: u64) -> Self {
        let bar = ProgressBar::with_draw_target(Some(total), ProgressDrawTarget::hidden());
        let style = ProgressStyle::with_template("{bar:40} {percent:>3} %  {eta} left");
        if let Ok(style) = style {
            bar.set_style(style);
        }
        Bar {
            bar,
            began: Instant::now(),
        }
    }

    /// So much more is done.
    pub fn advance(&self, units: u64) {
        if self.bar.is_hidden()
            && self.began.elapsed() > PATIENCE
            && std::io::stderr().is_terminal()
        {
            self.bar.set_draw_target(ProgressDrawTarget::stderr());
        }
        self.bar.inc(units);
    }
}

impl Drop for Bar {
    fn drop(&mut self) {
        self.bar.finish_and_clear();
    }
}

/// A sign of life over work of unknown length.
pub struct Waiting {
    stop: Option<Sender<()>>,
    thread: Option<JoinHandle<()>>,
}

impl Waiting {
    /// Say `what` is going on, such as `measuring`.
    pub fn new(what: &'static str) -> Self {
        if !std::io::stderr().is_terminal() {
            return Waiting {
                stop: None,
                thread: None,
            };
        }
        let (stop, stopped) = channel();
        let thread = std::thread::spawn(move || {
            if stopped.recv_timeout(PATIENCE) == Err(RecvTimeoutError::Timeout) {
                let spinner = ProgressBar::new_spinner().with_message(what);
                spinner.enable_steady_tick(Duration::from_millis(100));
                let _ = stopped.recv();
                spinner.finish_and_clear();
            }
        });
        Waiting {
            stop: Some(stop),
            thread: Some(thread),
        }
    }
}

impl Drop for Waiting {
    fn drop(&mut self) {
        self.stop.take();
        if let Some(thread) = self.thread.take() {
            let _ = thread.join();
        }
    }
}
