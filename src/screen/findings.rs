//! What the session says so far, for the place beside the road: its reduction, and its segments in short.
//!
//! A session → [`Findings`]; made away from the engine, shared with every view, never changed.

use super::text::safe;
use crate::config::Car;
use crate::reduction::{self, Options, Reduction};
use crate::session::{Direction, Segment, Session};
use crate::units::{Quantity, StreamTime};
use std::collections::BTreeMap;

/// The reduction of a session, and what it rests on.
#[derive(Clone, Debug)]
pub struct Findings {
    /// Counts the reductions of a run, so that two can be told apart.
    pub number: u64,
    /// The reduction, or why there is none.
    pub reduction: Result<Reduction, String>,
    /// The car, for the picture.
    pub car: Car,
    /// Every segment, in order, as it stands now.
    pub segments: Vec<SegmentLine>,
}

impl PartialEq for Findings {
    fn eq(&self, other: &Self) -> bool {
        self.number == other.number
    }
}

/// One segment in short.
#[derive(Clone, Debug, PartialEq)]
pub struct SegmentLine {
    /// Its number.
    pub id: u32,
    /// First moment, and last.
    pub from_to: [StreamTime; 2],
    /// What was fitted.
    pub configuration: String,
    /// Which way.
    pub direction: Direction,
    /// Target, km/h; none for a span.
    pub target_kmh: Option<f64>,
    /// It was withdrawn.
    pub void: bool,
    /// Why the reduction leaves it out, or a part of it.
    pub left_out: Vec<String>,
    /// Its channels, taps first.
    pub channels: Vec<ChannelLine>,
}

/// One channel of a segment.
#[derive(Clone, Debug, PartialEq)]
pub struct ChannelLine {
    /// Tap where it sat on one, else the channel.
    pub label: String,
    /// What it measures.
    pub quantity: Quantity,
    /// Samples.
    pub n: u64,
    /// Mean less the zero that the segment rests on.
    pub mean: f64,
    /// Standard deviation, and standard error of the mean.
    pub sd: Option<f64>,
    /// Second of the two.
    pub se: Option<f64>,
}

impl Findings {
    /// Reduces a session and lists its segments.
    pub fn of(session: &Session, number: u64) -> Self {
        let reduction = reduction::reduce(std::slice::from_ref(session), &Options::default());
        let mut why: BTreeMap<u32, Vec<String>> = BTreeMap::new();
        for left_out in reduction.iter().flat_map(|r| &r.left_out) {
            why.entry(left_out.segment).or_default().push(safe(&left_out.why));
        }
        let zeros: BTreeMap<u32, _> = session.zeros().map(|z| (z.id, &z.channels)).collect();
        let line = |(segment, void): (std::borrow::Cow<'_, Segment>, bool)| SegmentLine {
            id: segment.id,
            from_to: [segment.t0, segment.t1],
            configuration: segment.configuration.clone(),
            direction: segment.direction,
            target_kmh: segment.target_kmh,
            void,
            left_out: why.remove(&segment.id).unwrap_or_default(),
            channels: channels(session, &segment, |channel| {
                let zero = segment.zero.and_then(|id| zeros.get(&id)).and_then(|z| z.get(channel));
                zero.map_or(0.0, |s| s.mean)
            }),
        };
        let segments = session.segments().into_iter().map(line).collect();
        let reduction = reduction.map_err(|e| e.to_string());
        Self { number, reduction, car: session.header.setup.car.clone(), segments }
    }

    /// Letters that are compared with the baseline, in the order of the outing.
    pub fn compared(&self) -> Vec<&str> {
        let Ok(r) = &self.reduction else { return Vec::new() };
        r.configurations.iter().map(|c| c.letter.as_str()).filter(|letter| *letter != r.baseline).collect()
    }
}

/// Taps first, then q, then the others, each in rig order.
fn channels(session: &Session, segment: &Segment, zero: impl Fn(&str) -> f64) -> Vec<ChannelLine> {
    let rig = &session.header.setup.rig;
    let line = |c: &crate::config::Channel| {
        let s = segment.channels.get(&c.name)?;
        let pressure = matches!(c.quantity, Quantity::Pressure | Quantity::DynamicPressure);
        Some(ChannelLine {
            label: safe(segment.taps.get(&c.name).unwrap_or(&c.name)),
            quantity: c.quantity,
            n: s.n,
            mean: s.mean - if pressure { zero(&c.name) } else { 0.0 },
            sd: s.sd,
            se: s.se,
        })
    };
    let mut ordered: Vec<&crate::config::Channel> = rig.channels.iter().collect();
    ordered.sort_by_key(|c| match c.quantity {
        _ if segment.taps.contains_key(&c.name) => 0,
        Quantity::DynamicPressure => 1,
        _ => 2,
    });
    ordered.into_iter().filter_map(line).collect()
}
