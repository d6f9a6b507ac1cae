//! A progress line on standard error: only on a terminal, only for work that takes over a second.

use std::cell::Cell;
use std::io::{IsTerminal, Write};
use std::time::{Duration, Instant};

/// Work shorter than this shows nothing.
const PATIENCE: Duration = Duration::from_secs(1);
/// Time between two updates.
const STEP: Duration = Duration::from_millis(100);

/// How far some work is.
pub struct Progress {
    what: &'static str,
    total: Option<u64>,
    start: Instant,
    shown: Cell<Option<Instant>>,
    on: bool,
}

impl Progress {
    /// Work on `total` bytes begins.
    pub fn new(what: &'static str, total: Option<u64>) -> Self {
        Self { what, total, start: Instant::now(), shown: Cell::new(None), on: std::io::stderr().is_terminal() }
    }

    /// So many bytes are done.
    pub fn at(&self, done: u64) {
        let due = self.shown.get().map_or(self.start.elapsed() > PATIENCE, |shown| shown.elapsed() > STEP);
        if !self.on || !due {
            return;
        }
        self.shown.set(Some(Instant::now()));
        let mib = done as f64 / f64::from(1 << 20);
        let line = match self.total {
            Some(total) if total > 0 => format!("{} {:3.0} %", self.what, done as f64 / total as f64 * 100.0),
            _ => format!("{} {mib:.0} MiB", self.what),
        };
        let _ = write!(std::io::stderr(), "\r{line} ");
    }

    /// The work is over: the line goes away.
    pub fn done(&self) {
        if self.shown.get().is_some() {
            let _ = write!(std::io::stderr(), "\r\x1b[K");
        }
    }
}
