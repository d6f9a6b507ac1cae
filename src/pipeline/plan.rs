//! The plan: which pass of those that the outing wants comes next.
//!
//! What is fitted is driven to its end first, at one target after another, each way in turn; then the next configuration that lacks passes.
//! The reduction knows better which pass is worth most once all wanted ones are driven.

use super::kept::{KeptSegment, passes_of};
use crate::config::Outing;
use crate::session::Direction;

/// The next pass that the outing wants.
#[derive(Clone, Debug, PartialEq)]
pub struct Planned {
    /// What is to be fitted.
    pub configuration: String,
    /// Which way.
    pub direction: Direction,
    /// How fast, km/h.
    pub target_kmh: f64,
    /// Which pass of that kind it is, from 1.
    pub pass: u32,
}

/// The next wanted pass; none when all are driven.
///
/// *Input* what was kept, the outing, the letter that is fitted.
pub fn next(segments: &[KeptSegment], outing: &Outing, fitted: &str) -> Option<Planned> {
    let ways: &[Direction] =
        if outing.out_track_deg.is_some() { &[Direction::Out, Direction::Back] } else { &[Direction::Other] };
    let letters = outing.configurations.iter().map(|c| c.letter.as_str());
    let order = std::iter::once(fitted).chain(letters.filter(|letter| *letter != fitted));
    for letter in order {
        for target_kmh in &outing.targets_kmh {
            let driven = |way: &Direction| {
                u32::try_from(passes_of(segments, (letter, *way, *target_kmh)).len()).unwrap_or(u32::MAX)
            };
            // With as many the one as the other: the other way than last.
            let last = segments.iter().rfind(|s| !s.void).map(|s| s.direction);
            let way = ways.iter().min_by_key(|way| (driven(way), last == Some(**way)))?;
            if driven(way) < outing.passes {
                let (configuration, direction) = (letter.to_string(), *way);
                return Some(Planned { configuration, direction, target_kmh: *target_kmh, pass: driven(way) + 1 });
            }
        }
    }
    None
}
