//! What others ask of the logbook: screen, solo, and the engine; nothing changes by it.

use super::Logbook;
use crate::config::Air;
use crate::pipeline::kept::{HeldDwell, KeptSegment, passes_of};
use crate::session::{Direction, Zero};
use crate::units::{Quantity, StreamTime};
use std::collections::BTreeMap;

impl Logbook {
    /// For how long the car has stood, s; none while it moves or nobody knows.
    pub fn stood_s(&self, now: StreamTime) -> Option<f64> {
        self.standing.as_ref().map(|s| now.since(s.since) as f64 / 1e6)
    }
    /// Letter of the configuration that is fitted.
    pub fn configuration(&self) -> &str {
        &self.configuration
    }
    /// The direction set by hand, if it was.
    pub fn by_hand(&self) -> Option<Direction> {
        self.by_hand
    }
    /// Direction that a segment would get now.
    pub fn direction(&self) -> Direction {
        let track = self.channels.iter().position(|c| c.quantity == Quantity::Track);
        let latest = track.and_then(|i| self.latest[i]).map(|(_, deg)| deg);
        self.by_hand.unwrap_or_else(|| self.direction_of(latest))
    }
    /// Channel → tap as it is now.
    pub fn taps(&self) -> &BTreeMap<String, String> {
        &self.taps
    }
    /// The target chosen by key, km/h.
    pub fn aim_kmh(&self) -> Option<f64> {
        self.aim_kmh
    }
    /// The dwell that is held.
    pub fn held(&self) -> Option<&HeldDwell> {
        self.held.as_ref()
    }
    /// `take` waits for the next full dwell.
    pub fn armed(&self) -> bool {
        self.armed
    }
    /// When the open span began.
    pub fn span(&self) -> Option<StreamTime> {
        self.span.as_ref().filter(|s| s.end == StreamTime::NEVER).map(|s| s.start)
    }
    /// Everything kept, in order, void ones too.
    pub fn segments(&self) -> &[KeptSegment] {
        &self.segments
    }
    /// The last zero.
    pub fn zero(&self) -> Option<&Zero> {
        self.zero.as_ref()
    }
    /// The last zero of a channel, 0 before the first.
    pub fn zero_of(&self, channel: usize) -> f64 {
        let name = &self.channels[channel].name;
        self.zero.as_ref().and_then(|z| z.channels.get(name)).map_or(0.0, |s| s.mean)
    }
    /// The air as stated.
    pub fn stated_air(&self) -> Air {
        self.air.air
    }
    /// Which pass the next segment belongs to, from 1. `stretch` is the one that is running and has given a dwell.
    pub fn pass(&self, target_kmh: f64, stretch: Option<u32>) -> u32 {
        let passes = passes_of(&self.segments, (&self.configuration, self.direction(), target_kmh));
        let running = stretch.is_some_and(|s| passes.contains(&(self.run, s)));
        u32::try_from(passes.len()).unwrap_or(u32::MAX).saturating_add(u32::from(!running))
    }
}
