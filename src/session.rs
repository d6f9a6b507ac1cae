//! The session file: what an outing kept, one checksummed JSON line an entry, append-only.
//!
//! [`Entry`] ↔ line bytes in `codec`; whole files → [`Session`] with every damage told by line. Nothing
//! here touches a file: the shell hands in bytes and writes bytes.

pub mod codec;

use crate::config::{Air, Setup};
use crate::units::StreamTime;
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// Schema word of the first line.
pub const SCHEMA: &str = "steadytap.session/1";

/// A session as read: its header, its good entries in order, and what was wrong.
#[derive(Clone, Debug, PartialEq)]
pub struct Session {
    /// The first line.
    pub header: Header,
    /// Every entry with a right sum, in file order, the header left out.
    pub entries: Vec<Entry>,
    /// What could not be believed.
    pub damage: Vec<Damage>,
}

/// A line that could not be believed, and why.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Damage {
    /// Line number from 1.
    pub line: usize,
    /// What is wrong.
    pub what: DamageKind,
}

/// What can be wrong with a line.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum DamageKind {
    /// The last line has no end: the power went while it was written.
    #[error("torn: the line has no end")]
    Torn,
    /// Its bytes do not give its sum.
    #[error("wrong checksum")]
    Sum,
    /// No `sum` at its end.
    #[error("no checksum at its end")]
    NoSum,
    /// The sum is right but the entry is not understood.
    #[error("not understood: {0}")]
    Entry(String),
}

/// One line of a session file.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(tag = "kind", rename_all = "lowercase")]
pub enum Entry {
    /// The first line.
    Session(Box<Header>),
    /// Channel means at standstill.
    Zero(Zero),
    /// A kept dwell, or a span.
    Segment(Box<Segment>),
    /// A full dwell that could not be held.
    Rejected(Rejected),
    /// A segment withdrawn.
    Void(Void),
    /// A withdrawn segment counts again.
    Restore(Void),
    /// What a segment was tagged with was wrong.
    Correct(Correction),
    /// A moment noted.
    Mark(Remark),
    /// Words.
    Note(Remark),
    /// Another configuration is fitted.
    Configuration(Change),
    /// The direction is set by hand (`out`, `back`, `other`) or by track (`auto`).
    Direction(Change),
    /// Hoses moved; the whole map as it now is.
    Taps(TapsChange),
    /// The air was measured by hand.
    Air(AirChange),
    /// A port was lost or found, a line cut, or other trouble of the stream.
    Fault(Fault),
    /// The outing ended here; another run may go on after it.
    End(End),
}

/// What the session rests on.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Header {
    /// [`SCHEMA`].
    pub schema: String,
    /// Program version that wrote it.
    pub version: String,
    /// UTC instant of stream time 0, RFC 3339; none if the record did not say.
    pub started: Option<String>,
    /// Resolved rig, car and outing.
    #[serde(flatten)]
    pub setup: Setup,
}

/// Statistics of one channel over an interval; units are those used inside (Pa, km/h, deg, °C, %, mm).
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ChannelStatistics {
    /// Samples.
    pub n: u64,
    /// Arithmetic mean (track: mean of unit vectors).
    pub mean: f64,
    /// Sample standard deviation (n − 1); none below two samples.
    pub sd: Option<f64>,
    /// Smallest.
    pub min: f64,
    /// Largest.
    pub max: f64,
    /// Standard error of the mean by the lag-1 rule on bin means; none below three bins.
    pub se: Option<f64>,
    /// Least-squares slope over time, per s; none below two distinct times.
    pub slope: Option<f64>,
    /// Means of consecutive bins of `bin_s` seconds from t0; null where a bin is empty.
    pub bins: Vec<Option<f64>>,
}

/// A kept average.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Segment {
    /// From 1, never used twice in a session.
    pub id: u32,
    /// First moment (inclusive).
    pub t0: StreamTime,
    /// Last moment (exclusive).
    pub t1: StreamTime,
    /// Target speed, km/h; none for a span.
    pub target_kmh: Option<f64>,
    /// Which stretch of this run gave it, from 1; 0 for a span.
    pub stretch: u32,
    /// Which dwell of that stretch, from 1; 0 for a span.
    pub dwell: u32,
    /// What was fitted.
    pub configuration: String,
    /// Which way: `out`, `back` or `other`.
    pub direction: Direction,
    /// Mean course, degrees; none without a track channel.
    pub track_deg: Option<f64>,
    /// Channel → tap at that time.
    pub taps: BTreeMap<String, String>,
    /// Id of the zero taken last before it.
    pub zero: Option<u32>,
    /// Air at that time.
    pub air: SegmentAir,
    /// UTC of the last GPS fix before its end, RFC 3339.
    pub gps_utc: Option<String>,
    /// `by-hand` (a span), `marked`, `saturated:CH`, `stale:CH`, `stuck:CH`.
    pub flags: Vec<String>,
    /// Bin width of the channels' `bins`, s.
    pub bin_s: f64,
    /// Statistics by channel name; a channel without a sample is left out.
    pub channels: BTreeMap<String, ChannelStatistics>,
}

/// The air a segment was driven in.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct SegmentAir {
    /// The values.
    #[serde(flatten)]
    pub air: Air,
    /// Where they come from, weakest source of the three.
    pub source: AirSource,
}

/// Where air values come from, weakest first.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum AirSource {
    /// The standard atmosphere: nobody said.
    Assumed,
    /// The outing file or an `air` command.
    Stated,
    /// Channels, averaged over the segment.
    Measured,
}

/// Which way a pass was driven.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Direction {
    /// Along `out_track_deg`.
    Out,
    /// Against it.
    Back,
    /// Neither.
    Other,
}

impl Session {
    /// Its zeros, in order.
    pub fn zeros(&self) -> impl Iterator<Item = &Zero> {
        self.entries.iter().filter_map(|e| if let Entry::Zero(z) = e { Some(z) } else { None })
    }

    /// Its segments as they stand in the end, corrected, in order; and whether each is void.
    pub fn segments(&self) -> Vec<(std::borrow::Cow<'_, Segment>, bool)> {
        use std::borrow::Cow;
        let mut all: Vec<(Cow<'_, Segment>, bool)> = Vec::new();
        let mut place: BTreeMap<u32, usize> = BTreeMap::new();
        for entry in &self.entries {
            match entry {
                Entry::Segment(s) => {
                    place.insert(s.id, all.len());
                    all.push((Cow::Borrowed(s), false));
                }
                Entry::Void(v) | Entry::Restore(v) => {
                    if let Some(i) = place.get(&v.segment) {
                        all[*i].1 = matches!(entry, Entry::Void(_));
                    }
                }
                Entry::Correct(c) => {
                    if let Some(i) = place.get(&c.segment) {
                        let segment = all[*i].0.to_mut();
                        c.apply(&mut segment.configuration, &mut segment.direction);
                    }
                }
                _ => {}
            }
        }
        all
    }
}

impl Direction {
    /// Its word in files and commands.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Out => "out",
            Self::Back => "back",
            Self::Other => "other",
        }
    }
}

/// Channel means at standstill.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Zero {
    /// From 1.
    pub id: u32,
    /// First moment (inclusive).
    pub t0: StreamTime,
    /// The moment of the command.
    pub t1: StreamTime,
    /// Bin width of the channels' `bins`, s.
    pub bin_s: f64,
    /// Statistics by channel name.
    pub channels: BTreeMap<String, ChannelStatistics>,
}

/// A full dwell that could not be held.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Rejected {
    /// First moment (inclusive).
    pub t0: StreamTime,
    /// Last moment (exclusive).
    pub t1: StreamTime,
    /// Target speed, km/h.
    pub target_kmh: f64,
    /// Stretch, from 1.
    pub stretch: u32,
    /// Dwell of that stretch, from 1.
    pub dwell: u32,
    /// `slope`, `saturated:CH`, `stale:CH`; at least one.
    pub why: Vec<String>,
}

/// A segment withdrawn, or restored.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Void {
    /// When.
    pub t: StreamTime,
    /// Which segment.
    pub segment: u32,
}

/// What a segment should have been tagged with; the segment's own line stays as it is.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Correction {
    /// When.
    pub t: StreamTime,
    /// Which segment.
    pub segment: u32,
    /// What was fitted; none: as it stands.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub configuration: Option<String>,
    /// Which way; none: as it stands.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub direction: Option<Direction>,
}

impl Correction {
    /// Puts the tags right.
    pub fn apply(&self, configuration: &mut String, direction: &mut Direction) {
        if let Some(letter) = &self.configuration {
            configuration.clone_from(letter);
        }
        *direction = self.direction.unwrap_or(*direction);
    }
}

/// Words at a moment.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Remark {
    /// When.
    pub t: StreamTime,
    /// The words, as typed.
    pub text: String,
}

/// Something is now so.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Change {
    /// Since when.
    pub t: StreamTime,
    /// What it now is.
    pub to: String,
}

/// Hoses moved.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct TapsChange {
    /// Since when.
    pub t: StreamTime,
    /// Channel → tap, whole.
    pub taps: BTreeMap<String, String>,
}

/// The air was measured by hand.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct AirChange {
    /// When.
    pub t: StreamTime,
    /// What it is.
    #[serde(flatten)]
    pub air: Air,
}

/// Trouble of the stream.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Fault {
    /// When.
    pub t: StreamTime,
    /// Port or part.
    pub place: String,
    /// What: `lost`, `found`, `long-line` …
    pub what: String,
}

/// The end of one run.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct End {
    /// Time of the last input.
    pub t: StreamTime,
}
