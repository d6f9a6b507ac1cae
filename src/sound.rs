//! What is heard: an event of the pipeline → a [`Cue`]; a cue → the samples of its sound; the speed → a guidance tone.
//!
//! `pattern` owns the notes of every cue, `tone` turns notes into samples, `queue` says what is heard first, `guidance` glides.
//! Nothing here plays anything: the shell's speaker does. Rising is good, falling is bad, repeated is trouble; the speed's
//! own cues point where the speed has gone.

pub mod guidance;
pub mod pattern;
pub mod queue;
pub mod tone;

pub use tone::synthesise;

use crate::hold::State;
use crate::pipeline::{Event, What};
use crate::session::{Direction, Entry};

/// One sound.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Cue {
    /// The speed has come into a window.
    Window,
    /// It has settled: the averaging begins.
    Steady,
    /// A full dwell is held.
    Held,
    /// A segment is on the disk.
    Kept,
    /// A dwell was rejected, or a command cannot be done.
    Refused,
    /// The speed has left its window downward.
    Slow,
    /// … upward.
    Fast,
    /// What the next pass is: a short note for every letter up to the configuration's, then up for out, down for back.
    Next {
        /// 0 for A.
        configuration_index: usize,
        /// Which way; level when it is neither.
        direction: Direction,
    },
    /// Every wanted pass is kept.
    AllDone,
    /// Something is broken: a port, the disk.
    Trouble,
}

impl Cue {
    /// Every kind of cue, in the order of an outing; the next pass as A, out.
    pub const ALL: [Self; 10] = [
        Self::Window,
        Self::Steady,
        Self::Held,
        Self::Kept,
        Self::Refused,
        Self::Slow,
        Self::Fast,
        Self::Next { configuration_index: 0, direction: Direction::Out },
        Self::AllDone,
        Self::Trouble,
    ];

    /// Its name on the command line and of its file.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Window => "window",
            Self::Steady => "steady",
            Self::Held => "held",
            Self::Kept => "kept",
            Self::Refused => "refused",
            Self::Slow => "slow",
            Self::Fast => "fast",
            Self::Next { .. } => "next",
            Self::AllDone => "done",
            Self::Trouble => "trouble",
        }
    }

    /// What it says, for the manual.
    pub const fn meaning(self) -> &'static str {
        match self {
            Self::Window => "the speed is inside the window",
            Self::Steady => "the speed has settled, averaging has begun",
            Self::Held => "a full dwell is held",
            Self::Kept => "the segment is on the disk",
            Self::Refused => "a dwell was rejected, or a command cannot be done",
            Self::Slow => "off speed: too slow",
            Self::Fast => "off speed: too fast",
            Self::Next { .. } => "the next pass: one short note for A, two for B …; then up for out, down for back",
            Self::AllDone => "every wanted pass is kept",
            Self::Trouble => "trouble: a port is lost or the disk fails; again every 5 s until acknowledged",
        }
    }

    /// It tells of the window's state, and is out of date as soon as the next one comes.
    pub const fn is_of_the_window(self) -> bool {
        matches!(self, Self::Window | Self::Steady | Self::Held | Self::Slow | Self::Fast)
    }
}

/// The sound of an event, if it has one. `on_disk`: its line is on a disk.
///
/// Leaving the window has none here, since the event does not say which way: see [`off_speed`].
pub fn cue_for(event: &Event, on_disk: bool) -> Option<Cue> {
    match &event.what {
        What::Entry(entry) if !on_disk && !matches!(**entry, Entry::Session(_)) => Some(Cue::Trouble),
        What::Entry(entry) => match &**entry {
            Entry::Segment(_) => Some(Cue::Kept),
            Entry::Rejected(_) => Some(Cue::Refused),
            Entry::Fault(fault) if fault.what == "lost" => Some(Cue::Trouble),
            _ => None,
        },
        What::Dwell { why, .. } if why.is_empty() => Some(Cue::Held),
        What::Window(State::Settling(_)) => Some(Cue::Window),
        What::Window(State::Steady(_)) => Some(Cue::Steady),
        What::Refused(_) => Some(Cue::Refused),
        // A rejected dwell is heard by its entry, a held window by its dwell.
        What::Dwell { .. } | What::Window(_) | What::Armed | What::Target(_) | What::SpanBegun => None,
    }
}

/// The cue for a window that was left: too slow or too fast; none while the speed is inside it.
pub fn off_speed(speed_kmh: f64, target_kmh: f64, tolerance_kmh: f64) -> Option<Cue> {
    let off = speed_kmh - target_kmh;
    match off.abs() > tolerance_kmh {
        true if off < 0.0 => Some(Cue::Slow),
        true => Some(Cue::Fast),
        false => None,
    }
}
