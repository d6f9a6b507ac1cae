//! The record file: written behind the session's back, flushed once a second, given up without harm.

use super::Trouble;
use super::storage::{Disk, Storage, StoredFile};
use crate::stream::command::Command;
use crate::stream::record;
use crate::units::StreamTime;
use std::io::{ErrorKind, Write};
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// Unflushed bytes after which a write is due at once.
const BLOCK: usize = 64 * 1024;
/// Time after which a write is due, µs.
const FLUSH_US: i64 = 1_000_000;

/// An open record.
pub struct Recorder {
    storage: Arc<dyn Storage>,
    session: PathBuf,
    started: Option<String>,
    path: PathBuf,
    file: Option<Box<dyn StoredFile>>,
    buffer: Vec<u8>,
    written: u64,
    flushed_at: StreamTime,
    trouble: Option<String>,
    /// It stopped for want of space.
    full: bool,
}

impl Recorder {
    /// A new record beside the session: `NAME.record`, or `NAME.2.record` and so on when the session goes on.
    ///
    /// # Errors
    /// [`Trouble`] when it cannot be made.
    pub fn beside(session: &Path, started: Option<&str>) -> Result<Self, Trouble> {
        Self::beside_on(Arc::new(Disk), session, started)
    }

    /// The same in any storage.
    ///
    /// # Errors
    /// [`Trouble`] when it cannot be made.
    pub fn beside_on(storage: Arc<dyn Storage>, session: &Path, started: Option<&str>) -> Result<Self, Trouble> {
        for n in 1..10_000 {
            let path = session.with_extension(if n == 1 { "record".to_string() } else { format!("{n}.record") });
            match storage.create(&path) {
                Ok(file) => {
                    let mut buffer = Vec::with_capacity(2 * BLOCK);
                    record::write_header(&mut buffer, started);
                    return Ok(Self {
                        storage,
                        session: session.to_path_buf(),
                        started: started.map(str::to_string),
                        path,
                        file: Some(file),
                        buffer,
                        written: 0,
                        flushed_at: StreamTime::ZERO,
                        trouble: None,
                        full: false,
                    });
                }
                Err(e) if e.kind() == ErrorKind::AlreadyExists => {}
                Err(e) => {
                    let what = format!("the record cannot be written: {e}");
                    return Err(Trouble::new(what).at(path.display()).hint("go without one with --no-record"));
                }
            }
        }
        Err(Trouble::new("too many records beside the session").at(session.display()))
    }

    /// The next record beside the same session.
    ///
    /// # Errors
    /// [`Trouble`] when it cannot be made.
    pub fn another(&self) -> Result<Self, Trouble> {
        Self::beside_on(self.storage.clone(), &self.session, self.started.as_deref())
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
        if let Some(file) = &mut self.file {
            match file.write_all(&self.buffer) {
                Ok(()) => self.written += self.buffer.len() as u64,
                Err(e) => self.end(&e.to_string(), e.kind() == ErrorKind::StorageFull),
            }
        }
        self.buffer.clear();
    }

    /// Leaves what room there is to the session.
    pub fn give_way(&mut self) {
        self.flush();
        if self.file.is_some() {
            self.end("the disk is nearly full", true);
        }
    }

    fn end(&mut self, why: &str, full: bool) {
        let name = self.path.display();
        self.trouble = Some(format!("the record {name} stopped: {why}; segments are kept all the same"));
        self.full = full;
        self.file = None;
    }

    /// Where it is.
    pub fn path(&self) -> &Path {
        &self.path
    }
    /// Why it stopped, if it did.
    pub fn trouble(&self) -> Option<&str> {
        self.trouble.as_deref()
    }
    /// It stopped for want of space, and another may begin when there is some.
    pub fn waits_for_space(&self) -> bool {
        self.full
    }
    /// Bytes that it holds.
    pub fn written(&self) -> u64 {
        self.written
    }
}

impl Drop for Recorder {
    fn drop(&mut self) {
        self.flush();
    }
}
