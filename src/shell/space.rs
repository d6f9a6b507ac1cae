//! How long the disk lasts: free bytes and the rate of writing → hours, and whether the record must give way to the session.

use super::storage::Storage;
use crate::config::Rig;
use std::path::Path;
use std::time::{Duration, Instant};

/// Time between two looks.
const LOOK: Duration = Duration::from_secs(10);
/// Below this only the session is written, bytes: some hundred segments of an outing with many channels.
const RESERVE: u64 = 4 << 20;
/// From here on a record may begin again, bytes.
const ROOM_AGAIN: u64 = 4 * RESERVE;
/// Under so many hours it is said.
const LOW_HOURS: f64 = 1.0;
/// What a record has over the bytes of the ports: a time and a name for each line, as a share (common practice: lines of some 80 bytes).
const HEADS: f64 = 1.3;
/// The measured rate counts from here on.
const MEASURED_AFTER: Duration = Duration::from_secs(60);

/// The most that a record of this rig can grow, bytes a second: every port sends all it can, ten bits a byte.
///
/// *Input* the rig's baud rates. *Output* bytes/s. *Method* arithmetic.
pub fn most_bytes_per_s(rig: &Rig) -> f64 {
    rig.ports.iter().map(|p| f64::from(p.baud) / 10.0).sum::<f64>() * HEADS
}

/// Hours that `free` bytes last at `bytes_per_s`; none when nothing is written.
///
/// ```
/// assert_eq!(steadytap::shell::space::hours(36_000_000, 10_000.0), Some(1.0));
/// ```
pub fn hours(free: u64, bytes_per_s: f64) -> Option<f64> {
    (bytes_per_s > 0.0).then(|| free as f64 / bytes_per_s / 3600.0)
}

/// Words for a disk that is nearly full, if it is.
pub fn low(free: u64, bytes_per_s: f64) -> Option<String> {
    let hours = hours(free, bytes_per_s).filter(|h| *h < LOW_HOURS)?;
    Some(format!(
        "the disk has room for {:.0} minutes of record at most ({} MiB): free some space",
        hours * 60.0,
        free >> 20
    ))
}

/// Free bytes where a session of this name would be, and the hours that they last at the most that the rig can send; none where nobody knows.
pub fn room(storage: &dyn Storage, session: &Path, rig: &Rig) -> Option<(u64, f64)> {
    let there = session.ancestors().find(|path| path.parent().is_some_and(Path::is_dir)).unwrap_or(session);
    let free = storage.free_space(there)?;
    Some((free, hours(free, most_bytes_per_s(rig))?))
}

/// What the free space asks for.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Judgement {
    /// Nothing.
    Fine,
    /// To say this.
    Low(String),
    /// To stop the record: what is left belongs to the session.
    Stop,
    /// A record that stopped may begin again.
    Room,
}

/// Looks at the disk now and then.
#[derive(Debug)]
pub struct Space {
    began: Option<Instant>,
    looked: Option<Instant>,
    most_bytes_per_s: f64,
    told: bool,
}

impl Space {
    /// Of a run on this rig.
    pub fn new(rig: &Rig) -> Self {
        Self { began: None, looked: None, most_bytes_per_s: most_bytes_per_s(rig), told: false }
    }

    /// It is time for another look.
    pub fn due(&mut self, now: Instant) -> bool {
        self.began.get_or_insert(now);
        let due = self.looked.is_none_or(|looked| now.duration_since(looked) >= LOOK);
        if due {
            self.looked = Some(now);
        }
        due
    }

    /// Judges so many free bytes; `recorded`: bytes that a record has taken since the run began, none where none is being written.
    pub fn judge(&mut self, now: Instant, free: u64, recorded: Option<u64>) -> Judgement {
        let Some(recorded) = recorded else {
            return if free >= ROOM_AGAIN { Judgement::Room } else { Judgement::Fine };
        };
        if free < RESERVE {
            return Judgement::Stop;
        }
        let elapsed = self.began.map_or(Duration::ZERO, |began| now.duration_since(began));
        let measured = recorded as f64 / elapsed.as_secs_f64();
        let rate = if elapsed >= MEASURED_AFTER { measured } else { self.most_bytes_per_s };
        let words = low(free, rate);
        let told = std::mem::replace(&mut self.told, words.is_some());
        words.filter(|_| !told).map_or(Judgement::Fine, Judgement::Low)
    }
}
