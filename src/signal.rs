//! Frames → samples: scaling to the units used inside, lag, saturation; and what the eye sees of them.
//!
//! Raw field → [`crate::config::Convert`] → figure in the channel's unit → range check → value inside. A sample's time is the moment
//! its line ended less the channel's lag. Nothing is averaged or dropped here.

pub mod eye;

use crate::config::{Channel, Convert, Rig};
use crate::units::{StreamTime, Unit};

/// One value of one channel.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Sample {
    /// Index of the channel in the rig.
    pub channel: usize,
    /// When it was so: arrival less lag.
    pub t: StreamTime,
    /// Value in the unit used inside.
    pub value: f64,
    /// At an end of its range, or beyond.
    pub saturated: bool,
}

/// Turns raw fields of one channel into samples.
#[derive(Clone, Debug)]
pub struct Scaler {
    convert: Convert,
    unit: Unit,
    low: f64,
    high: f64,
    lag_us: i64,
}

impl Scaler {
    /// The scaler of a channel.
    pub fn new(channel: &Channel) -> Self {
        let mut range = channel.range.unwrap_or([f64::NEG_INFINITY, f64::INFINITY]);
        if let (None, Convert::Points(points)) = (channel.range, &channel.convert) {
            // Beyond its calibration a channel cannot be trusted, whatever the figure.
            let ends = [points[0][1], points[points.len() - 1][1]];
            range = [ends[0].min(ends[1]), ends[0].max(ends[1])];
        }
        Self {
            convert: channel.convert.clone(),
            unit: channel.to_inside(),
            low: range[0],
            high: range[1],
            lag_us: channel.lag_us(),
        }
    }

    /// Value in the unit used inside, and whether the channel was saturated.
    #[inline]
    pub fn scale(&self, raw: f64) -> (f64, bool) {
        let figure = self.figure(raw);
        (self.unit.to_inside(figure), figure <= self.low || figure >= self.high)
    }

    /// The figure in the channel's own unit.
    #[inline]
    fn figure(&self, raw: f64) -> f64 {
        match &self.convert {
            Convert::Linear { gain, offset } => raw * gain + offset,
            Convert::Points(points) => between(points, raw),
            Convert::Ratiometric { supply, zero, span, full } => (raw / supply - zero) / span * full,
        }
    }
}

/// The straight line through the two points about `x`; beyond the ends the last line goes on.
fn between(points: &[[f64; 2]], x: f64) -> f64 {
    let right = points.partition_point(|p| p[0] < x).clamp(1, points.len() - 1);
    let [[x0, y0], [x1, y1]] = [points[right - 1], points[right]];
    y0 + (y1 - y0) * (x - x0) / (x1 - x0)
}

/// The channels of one port: which slot of its decoder feeds which channel.
#[derive(Debug)]
pub struct Wiring {
    links: Vec<Link>,
}

#[derive(Debug)]
struct Link {
    slot: usize,
    channel: usize,
    scaler: Scaler,
}

impl Wiring {
    /// The wiring of the port at `index`; `slot` finds a field of its decoder.
    pub fn new(rig: &Rig, index: usize, slot: impl Fn(&str) -> Option<usize>) -> Self {
        let name = &rig.ports[index].name;
        let links = rig.channels.iter().enumerate().filter(|(_, c)| &c.port == name);
        let links =
            links.filter_map(|(channel, c)| slot(&c.field).map(|slot| Link { slot, channel, scaler: Scaler::new(c) }));
        Self { links: links.collect() }
    }

    /// The fields of one frame that feed a channel, as they came: (channel, raw), for the eye.
    pub fn raw<'w>(&'w self, values: &'w [Option<f64>]) -> impl Iterator<Item = (usize, f64)> + 'w {
        self.links.iter().filter_map(|link| Some((link.channel, values[link.slot]?)))
    }

    /// Fills in the samples of one frame, in rig order, and says how many; `out` has room for all channels of the rig.
    #[inline]
    pub fn samples(&self, at: StreamTime, values: &[Option<f64>], out: &mut [Sample]) -> usize {
        let mut count = 0;
        for link in &self.links {
            if let (Some(raw), Some(place)) = (values[link.slot], out.get_mut(count)) {
                let (value, saturated) = link.scaler.scale(raw);
                let t = at.plus(-link.scaler.lag_us);
                *place = Sample { channel: link.channel, t, value, saturated };
                count += 1;
            }
        }
        count
    }
}
