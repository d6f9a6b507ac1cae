//! The world: ports, files, clock, terminal. The only room that does I/O.
//!
//! Sources (`serial`, `player`, the rehearsal, keys) stamp what arrives and send it to the `engine`, which alone owns the
//! pipeline, the `journal` (session file) and the `recorder`; the screen has a thread of its own and the engine never waits for it.
#![expect(clippy::disallowed_methods, reason = "the shell reads the clock for everybody")]
#![expect(clippy::disallowed_macros, reason = "the shell talks for everybody")]

pub mod calibration;
pub mod check;
pub mod clock;
pub mod cues;
pub mod ear;
pub mod engine;
pub mod feed;
pub mod files;
pub mod going_on;
pub mod holder;
pub mod journal;
pub mod keyboard;
pub mod keyfile;
pub mod listen;
pub mod live;
pub mod outing;
pub mod player;
pub mod progress;
pub mod recorder;
pub mod reduce;
pub mod reducer;
pub mod rehold;
pub mod serial;
pub mod solo;
pub mod space;
pub mod speaker;
pub mod storage;
pub mod terminal;
pub mod watch;

use std::fmt;
use std::io::Write;

/// Words on standard error. A terminal that has gone or hangs takes none, and that stops nobody.
pub fn say(words: impl fmt::Display) {
    if !terminal::abandoned() {
        let _ = writeln!(std::io::stderr().lock(), "{words}");
    }
}

/// What a person is told when something cannot be done: what, where, and the next thing to do.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Trouble {
    /// What is wrong.
    pub what: String,
    /// File, line and column, or port.
    pub place: Option<String>,
    /// What to do.
    pub hint: Option<String>,
}

impl Trouble {
    /// Something is wrong.
    pub fn new(what: impl Into<String>) -> Self {
        Self { what: what.into(), place: None, hint: None }
    }
    /// … there.
    #[must_use]
    pub fn at(self, place: impl fmt::Display) -> Self {
        Self { place: Some(place.to_string()), ..self }
    }
    /// … and this helps.
    #[must_use]
    pub fn hint(self, hint: impl Into<String>) -> Self {
        Self { hint: Some(hint.into()), ..self }
    }
}

impl fmt::Display for Trouble {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "error: {}", self.what)?;
        if let Some(place) = &self.place {
            write!(f, " ({place})")?;
        }
        match &self.hint {
            Some(hint) => write!(f, "\n\nhint: {hint}"),
            None => Ok(()),
        }
    }
}

impl std::error::Error for Trouble {}
