//! The notes of every cue: the rhythm tells them apart, the contour says good or bad.
//!
//! Pitches lie within a fourth, 523–698 Hz (C5 to F5 of the equal-tempered scale), so that the fourth harmonic of the highest
//! stays below 3 kHz. Confirmations are shorter than 0.4 s.

use super::Cue;
use crate::session::Direction;

/// C5, Hz.
pub const LOW_HZ: f64 = 523.25;
/// E♭5, Hz.
const MIDDLE_HZ: f64 = 622.25;
/// F5, Hz.
pub const HIGH_HZ: f64 = 698.46;

/// One note; its pitch glides evenly from its first to its last moment.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Note {
    /// Silence before it, ms.
    pub rest_ms: u32,
    /// Its length with both ramps, ms.
    pub length_ms: u32,
    /// Pitch at its beginning, Hz.
    pub from_hz: f64,
    /// … at its end.
    pub to_hz: f64,
}

const fn note(rest_ms: u32, length_ms: u32, hz: f64) -> Note {
    Note { rest_ms, length_ms, from_hz: hz, to_hz: hz }
}

/// Notes that follow each other by these rests and lengths, at these pitches.
fn notes<const N: usize>(rhythm_ms: [(u32, u32); N], pitches_hz: [f64; N]) -> Vec<Note> {
    std::iter::zip(rhythm_ms, pitches_hz).map(|((rest, length), hz)| note(rest, length, hz)).collect()
}

/// The notes of a cue.
pub fn notes_of(cue: Cue) -> Vec<Note> {
    const SHORT_SHORT_LONG: [(u32, u32); 3] = [(0, 70), (30, 70), (30, 170)];
    const SHORT_LONG_SHORT: [(u32, u32); 3] = [(0, 70), (30, 170), (30, 70)];
    const LONG_SHORT_SHORT: [(u32, u32); 3] = [(0, 170), (30, 70), (30, 70)];
    const THREE_AND_TWO: [(u32, u32); 5] = [(0, 80), (50, 80), (50, 80), (150, 80), (50, 80)];
    match cue {
        Cue::Window => vec![note(0, 100, MIDDLE_HZ)],
        Cue::Steady => notes([(0, 80), (30, 80)], [LOW_HZ, MIDDLE_HZ]),
        Cue::Held => notes([(0, 220), (40, 100)], [LOW_HZ, HIGH_HZ]),
        Cue::Kept => notes(SHORT_SHORT_LONG, [LOW_HZ, MIDDLE_HZ, HIGH_HZ]),
        Cue::Refused => notes([(0, 80), (90, 200)], [HIGH_HZ, LOW_HZ]),
        Cue::Slow => notes(LONG_SHORT_SHORT, [HIGH_HZ, MIDDLE_HZ, LOW_HZ]),
        Cue::Fast => notes(SHORT_LONG_SHORT, [LOW_HZ, MIDDLE_HZ, HIGH_HZ]),
        Cue::Next { configuration_index, direction } => next(configuration_index, direction),
        Cue::AllDone => notes([(0, 90), (40, 90), (40, 90), (40, 300)], [LOW_HZ, MIDDLE_HZ, LOW_HZ, HIGH_HZ]),
        Cue::Trouble => notes(THREE_AND_TWO, [HIGH_HZ, HIGH_HZ, HIGH_HZ, LOW_HZ, LOW_HZ]),
    }
}

/// A note for every letter, in fives so that they can be counted; then a pair that goes up for out and down for back.
fn next(configuration_index: usize, direction: Direction) -> Vec<Note> {
    let letters = (0..=configuration_index.min(25)).map(|i| {
        let rest_ms = match i {
            0 => 0,
            i if i % 5 == 0 => 200,
            _ => 70,
        };
        note(rest_ms, 70, MIDDLE_HZ)
    });
    let (first, second) = match direction {
        Direction::Out => (LOW_HZ, HIGH_HZ),
        Direction::Back => (HIGH_HZ, LOW_HZ),
        Direction::Other => (MIDDLE_HZ, MIDDLE_HZ),
    };
    letters.chain([note(300, 150, first), note(40, 150, second)]).collect()
}

/// How long the notes last together, ms.
pub fn length_ms(notes: &[Note]) -> u32 {
    notes.iter().map(|n| n.rest_ms + n.length_ms).sum()
}
