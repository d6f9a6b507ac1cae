//! The record file: written behind the session's back, flushed once a second, given up without harm.

use super::Trouble;
use crate::stream::command::Command;
use crate::stream::record;
use crate::units::StreamTime;
use std::fs::{File, OpenOptions};
use std::io::Write;
use std::path::{Path, PathBuf};

/// Unflushed bytes after which a write is due at once.
const BLOCK: usize = 64 * 1024;
/// Time after which a write is due, µs.
const FLUSH_US: i64 = 1_000_000;

/// An open record.
pub struct Recorder {
    path: PathBuf,
    file: Option<File>,
    buffer: Vec<u8>,
    flushed_at: StreamTime,
    trouble: Option<String>,
}

impl Recorder {
    /// A new record beside the session: `NAME.record`, or `NAME.2.record` and so on when the session goes on.
    ///
    /// # Errors
    /// [`Trouble`] when it cannot be made.
    pub fn beside(session: &Path, started: Option<&str>) -> Result<Self, Trouble> {
        for n in 1..10_000 {
            let path = session.with_extension(if n == 1 { "record".to_string() } else { format!("{n}.record") });
            match OpenOptions::new().append(true).create_new(true).open(&path) {
                Ok(file) => {
                    let mut buffer = Vec::with_capacity(2 * BLOCK);
                    record::write_header(&mut buffer, started);
                    return Ok(Self { path, file: Some(file), buffer, flushed_at: StreamTime::ZERO, trouble: None });
                }
                Err(e) if e.kind() == std::io::ErrorKind::AlreadyExists => {}
                Err(e) => {
                    let what = format!("the record cannot be written: {e}");
                    return Err(Trouble::new(what).at(path.display()).hint("go without one with --no-record"));
                }
            }
        }
        Err(Trouble::new("too many records beside the session").at(session.display()))
    }

    /// A line of a port.
    pub fn line(&mut self, at: StreamTime, port: &str, line: &[u8]) {
        record::write_line(&mut self.buffer, at, port, line);
        self.due(at);
    }

    /// An event of a port.
    pub fn event(&mut self, at: StreamTime, port: &str, word: &str) {
        record::write_event(&mut self.buffer, at, port, word);
        self.due(at);
    }

    /// What the person did.
    pub fn command(&mut self, at: StreamTime, command: &Command) {
        record::write_command(&mut self.buffer, at, command);
        self.due(at);
    }

    /// Writes what is due at `now`.
    pub fn due(&mut self, now: StreamTime) {
        if self.buffer.len() >= BLOCK || now.since(self.flushed_at) >= FLUSH_US {
            self.flushed_at = now;
            self.flush();
        }
    }

    /// Writes everything. After a failure the record ends there; no segment is lost by that.
    pub fn flush(&mut self) {
        if let Some(file) = &mut self.file
            && let Err(e) = file.write_all(&self.buffer)
        {
            self.trouble = Some(format!("the record stopped: {e}; segments are kept all the same"));
            self.file = None;
        }
        self.buffer.clear();
    }

    /// Where it is.
    pub fn path(&self) -> &Path {
        &self.path
    }
    /// Why it stopped, if it did.
    pub fn trouble(&self) -> Option<&str> {
        self.trouble.as_deref()
    }
}

impl Drop for Recorder {
    fn drop(&mut self) {
        self.flush();
    }
}
