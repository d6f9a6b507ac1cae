//! How a port is: lines a second, share rejected, the last bad line, lost or silent.
//!
//! Kept in one-second slots over the last ten seconds of stream time; totals for the exit status.

use crate::stream::Reject;
use crate::units::StreamTime;

/// Seconds that shares are taken over.
const SLOTS: usize = 10;
/// Silence after which a port is called silent, µs.
const SILENT_US: i64 = 3_000_000;
/// Bytes but no good line for this long means: check baud, µs.
const GARBAGE_US: i64 = 2_500_000;
/// Bytes of a bad line that are kept for the eye.
const BAD_LINE_SHOWN: usize = 120;

/// Health of one port.
#[derive(Clone, Debug, Default)]
pub struct Health {
    /// Good lines.
    pub good: u64,
    /// Rejected lines.
    pub rejected: u64,
    /// Times it was lost.
    pub losses: u64,
    slots: [(i64, u32, u32); SLOTS],
    last_bad: Option<(Vec<u8>, Reject)>,
    first_heard: Option<StreamTime>,
    last_heard: Option<StreamTime>,
    last_good: Option<StreamTime>,
    lost: bool,
    no_fix: bool,
}

/// How a port is now.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Condition {
    /// Nothing came yet.
    Waiting,
    /// Lines parse.
    Good,
    /// Bytes arrive but no line parses.
    CheckBaud,
    /// Nothing came for three seconds.
    Silent,
    /// Unplugged.
    Lost,
    /// A GPS that talks but has no fix.
    NoFix,
}

impl Health {
    /// Bytes arrived.
    pub fn heard(&mut self, at: StreamTime) {
        self.first_heard.get_or_insert(at);
        self.last_heard = Some(at);
        self.lost = false;
    }

    /// A line parsed.
    #[inline]
    pub fn good(&mut self, at: StreamTime, no_fix: bool) {
        self.good += 1;
        self.no_fix = no_fix;
        self.last_good = Some(at);
        self.heard(at);
        self.slot(at).1 += 1;
    }

    /// A line was rejected.
    pub fn bad(&mut self, at: StreamTime, line: &[u8], why: Reject) {
        self.rejected += 1;
        self.heard(at);
        self.slot(at).2 += 1;
        self.last_bad = Some((line[..line.len().min(BAD_LINE_SHOWN)].to_vec(), why));
    }

    /// `lost` or `found`.
    pub fn event(&mut self, at: StreamTime, word: &str) {
        if word == "lost" {
            self.lost = true;
            self.losses += 1;
        } else if word == "found" {
            self.lost = false;
            self.first_heard = None;
            self.last_heard = Some(at);
        }
    }

    #[inline]
    fn slot(&mut self, at: StreamTime) -> &mut (i64, u32, u32) {
        let second = at.micros() / 1_000_000;
        let slot = &mut self.slots[second.rem_euclid(SLOTS as i64) as usize];
        if slot.0 != second {
            *slot = (second, 0, 0);
        }
        slot
    }

    /// Good and rejected lines of the last `seconds` whole seconds before `now`.
    fn recent(&self, now: StreamTime, seconds: i64) -> (u32, u32) {
        let second = now.micros() / 1_000_000;
        let recent = self.slots.iter().filter(|s| s.0 < second && s.0 >= second - seconds);
        recent.fold((0, 0), |sum, s| (sum.0 + s.1, sum.1 + s.2))
    }

    /// Lines a second over the last five whole seconds.
    pub fn lines_per_s(&self, now: StreamTime) -> f64 {
        let (good, bad) = self.recent(now, 5);
        f64::from(good + bad) / 5.0
    }

    /// Share of rejected lines over the last nine whole seconds, 0–1.
    pub fn rejected_share(&self, now: StreamTime) -> f64 {
        let (good, bad) = self.recent(now, SLOTS as i64 - 1);
        if good + bad == 0 { 0.0 } else { f64::from(bad) / f64::from(good + bad) }
    }

    /// The last bad line (its head) and why.
    pub fn last_bad(&self) -> Option<(&[u8], Reject)> {
        self.last_bad.as_ref().map(|(line, why)| (line.as_slice(), *why))
    }

    /// How it is now.
    pub fn condition(&self, now: StreamTime) -> Condition {
        let quiet = |since: Option<StreamTime>, us| since.is_none_or(|at| now.since(at) > us);
        if self.lost {
            Condition::Lost
        } else if self.last_heard.is_none() {
            Condition::Waiting
        } else if quiet(self.last_heard, SILENT_US) {
            Condition::Silent
        } else if quiet(self.last_good, GARBAGE_US) && quiet(self.first_heard, GARBAGE_US) {
            Condition::CheckBaud
        } else if self.last_good.is_none() {
            Condition::Waiting
        } else if self.no_fix {
            Condition::NoFix
        } else {
            Condition::Good
        }
    }
}
