//! What was kept, in short, and the dwell that can still be.

use crate::session::{Direction, Segment};

/// A segment in short, for counting passes.
#[derive(Clone, Debug, PartialEq)]
pub struct KeptSegment {
    /// Its number.
    pub id: u32,
    /// What was fitted.
    pub configuration: String,
    /// Which way.
    pub direction: Direction,
    /// Target speed; none for a span.
    pub target_kmh: Option<f64>,
    /// Which run of the session and which stretch of that.
    pub pass: (u32, u32),
    /// It was withdrawn.
    pub void: bool,
}

/// The passes of one kind: runs and stretches that gave a segment that counts.
pub fn passes_of(segments: &[KeptSegment], (letter, way, target_kmh): (&str, Direction, f64)) -> Vec<(u32, u32)> {
    let same = segments
        .iter()
        .filter(|s| !s.void && s.configuration == letter && s.direction == way && s.target_kmh == Some(target_kmh));
    let mut passes: Vec<(u32, u32)> = same.map(|s| s.pass).collect();
    passes.sort_unstable();
    passes.dedup();
    passes
}

/// The dwell whose values stand still.
#[derive(Clone, Debug, PartialEq)]
pub struct HeldDwell {
    /// As it will stand in the file; its id is 0 until it is kept.
    pub segment: Segment,
    /// Its number once it was kept.
    pub kept: Option<u32>,
}
