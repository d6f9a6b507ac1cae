//! What the next segment will be tagged with, what was kept, and what the person's commands do.
//!
//! Full dwells and commands → session entries. A dwell gets its tags when it is full; `take` keeps it with those, however much
//! later it is pressed before the next one holds.

mod asked;

use super::kept::{HeldDwell, KeptSegment};
use super::refusal::Refusal;
use super::{Event, What};
use crate::config::{Air, Configuration, Setup};
use crate::hold::Rule;
use crate::hold::dwell::{Dwell, Interval};
use crate::session::{
    AirChange, AirSource, Change, ChannelStatistics, Correction, Direction, End, Entry, Rejected, Remark, Segment,
    SegmentAir, Session, TapsChange, Void, Zero,
};
use crate::signal::Sample;
use crate::stream::command::{Command, DirectionWord};
use crate::units::{Quantity, StreamTime};
use std::collections::{BTreeMap, VecDeque};

/// Within this angle of the out track (or its reverse) a pass is out (or back), degrees.
const DIRECTION_WITHIN_DEG: f64 = 45.0;
/// Marks older than this cannot lie in a dwell that is still to come, µs.
const MARKS_KEPT_US: i64 = 3_600_000_000;

struct ChannelFacts {
    name: String,
    quantity: Quantity,
    stale_us: i64,
}

/// Whether the newest value of such a channel counts outside of dwells: the air, and the way they drive.
pub fn remembered(quantity: Quantity) -> bool {
    matches!(quantity, Quantity::Temperature | Quantity::Barometer | Quantity::Humidity | Quantity::Track)
}

struct Standing {
    since: StreamTime,
    samples: VecDeque<Sample>,
}

/// Tags, zeros, and what was kept.
pub struct Logbook {
    every: bool,
    channels: Vec<ChannelFacts>,
    watched: usize,
    angles: Vec<bool>,
    tap_names: Vec<String>,
    configurations: Vec<Configuration>,
    out_track_deg: Option<f64>,
    dwell_us: i64,
    longest_lag_us: i64,
    configuration: String,
    by_hand: Option<Direction>,
    taps: BTreeMap<String, String>,
    air: SegmentAir,
    aim_kmh: Option<f64>,
    zero: Option<Zero>,
    next_zero: u32,
    next_segment: u32,
    run: u32,
    held: Option<HeldDwell>,
    armed: bool,
    span: Option<Interval>,
    marks: VecDeque<StreamTime>,
    segments: Vec<KeptSegment>,
    speed: Option<(StreamTime, f64)>,
    standing: Option<Standing>,
    latest: Vec<Option<(StreamTime, f64)>>,
    utc_ms: Option<i64>,
}

impl Logbook {
    /// The logbook of an outing that begins, or that goes on after `before`.
    pub fn new(setup: &Setup, before: Option<&Session>) -> Self {
        let (rig, outing) = (&setup.rig, &setup.outing);
        let channels: Vec<ChannelFacts> = rig
            .channels
            .iter()
            .map(|c| ChannelFacts { name: c.name.clone(), quantity: c.quantity, stale_us: c.stale_us() })
            .collect();
        let source = if outing.air_stated { AirSource::Stated } else { AirSource::Assumed };
        let mut logbook = Self {
            every: false,
            watched: channels.iter().position(|c| c.name == outing.watch.channel()).unwrap_or(0),
            angles: channels.iter().map(|c| c.quantity == Quantity::Track).collect(),
            latest: vec![None; channels.len()],
            channels,
            tap_names: setup.car.taps.iter().map(|t| t.name.clone()).collect(),
            configurations: outing.configurations.clone(),
            out_track_deg: outing.out_track_deg,
            dwell_us: crate::units::micros(outing.dwell_s),
            longest_lag_us: rig.channels.iter().map(crate::config::Channel::lag_us).max().unwrap_or(0),
            configuration: outing.baseline().to_string(),
            by_hand: None,
            taps: outing.taps.clone(),
            air: SegmentAir { air: outing.air, source },
            aim_kmh: None,
            zero: None,
            next_zero: 1,
            next_segment: 1,
            run: 1,
            held: None,
            armed: false,
            span: None,
            marks: VecDeque::new(),
            segments: Vec::new(),
            speed: None,
            standing: None,
            utc_ms: None,
        };
        if let Some(session) = before {
            session.entries.iter().for_each(|entry| logbook.recall(entry));
        }
        logbook
    }

    /// Takes in an entry of an earlier run of the same session.
    fn recall(&mut self, entry: &Entry) {
        match entry {
            Entry::Segment(s) => self.remember(s),
            Entry::Void(v) | Entry::Restore(v) => {
                let void = matches!(entry, Entry::Void(_));
                self.segments.iter_mut().filter(|s| s.id == v.segment).for_each(|s| s.void = void);
            }
            Entry::Correct(c) => self.retag(c),
            Entry::Zero(z) => {
                self.next_zero = z.id + 1;
                self.zero = Some(z.clone());
            }
            Entry::Configuration(c) => self.configuration.clone_from(&c.to),
            Entry::Direction(d) => {
                self.by_hand = match d.to.as_str() {
                    "out" => Some(Direction::Out),
                    "back" => Some(Direction::Back),
                    "other" => Some(Direction::Other),
                    _ => None,
                }
            }
            Entry::Taps(t) => self.taps.clone_from(&t.taps),
            Entry::Air(a) => self.air = SegmentAir { air: a.air, source: AirSource::Stated },
            Entry::End(_) => self.run += 1,
            Entry::Session(_) | Entry::Rejected(_) | Entry::Mark(_) | Entry::Note(_) | Entry::Fault(_) => {}
        }
    }

    fn remember(&mut self, s: &Segment) {
        self.next_segment = self.next_segment.max(s.id + 1);
        self.segments.push(KeptSegment {
            id: s.id,
            configuration: s.configuration.clone(),
            direction: s.direction,
            target_kmh: s.target_kmh,
            pass: (self.run, s.stretch),
            void: false,
        });
    }

    // ---------------------------------------------------------------- what comes in

    /// The samples of a frame, arrived at `at`.
    #[inline]
    pub fn frame(&mut self, at: StreamTime, samples: &[Sample]) {
        for sample in samples.iter().filter(|s| remembered(self.channels[s.channel].quantity)) {
            self.latest[sample.channel] = Some((at, sample.value));
        }
        if self.collecting() {
            samples.iter().for_each(|sample| self.collect(at, sample));
        }
    }

    /// Whether every sample counts now: for a zero, or for a span.
    #[inline]
    pub fn collecting(&self) -> bool {
        self.standing.is_some() || self.span.is_some()
    }

    /// Keeps a sample for a zero, and for the span that is running.
    fn collect(&mut self, at: StreamTime, sample: &Sample) {
        if let Some(standing) = &mut self.standing {
            let oldest = at.plus(-self.dwell_us - self.longest_lag_us);
            standing.samples.push_back(*sample);
            while standing.samples.front().is_some_and(|s| s.t < oldest) {
                standing.samples.pop_front();
            }
        }
        if let Some(span) = &mut self.span
            && span.contains(sample.t)
        {
            span.push(std::slice::from_ref(sample));
        }
    }

    /// The speed that tells whether the car stands; below `limit_kmh` it does.
    #[inline]
    pub fn speed(&mut self, at: StreamTime, kmh: f64, limit_kmh: f64) {
        self.speed = Some((at, kmh));
        if kmh >= limit_kmh {
            self.standing = None;
        } else if self.standing.is_none() {
            self.standing = Some(Standing { since: at, samples: VecDeque::new() });
        }
    }

    /// Time has come to `at`: an ended span whose last samples have arrived is kept.
    #[inline]
    pub fn advance(&mut self, at: StreamTime, out: &mut Vec<Event>) {
        if self.span.as_ref().is_some_and(|s| at >= s.end.plus(self.longest_lag_us)) {
            self.keep_span(at, out);
        }
    }

    /// UTC of the last GPS fix, ms since 1970.
    pub fn utc(&mut self, utc_ms: Option<i64>) {
        self.utc_ms = utc_ms.or(self.utc_ms);
    }

    /// The stream has ended.
    pub fn finish(&mut self, now: StreamTime, out: &mut Vec<Event>) {
        if let Some(span) = &mut self.span {
            span.end = span.end.min(now);
            self.keep_span(now, out);
        }
        self.write(now, Entry::End(End { t: now }), out);
    }

    /// A dwell is full.
    pub fn full(&mut self, at: StreamTime, dwell: Dwell, rule: &Rule, out: &mut Vec<Event>) {
        let target_kmh = rule.targets_kmh[dwell.target];
        let mut segment = self.segment(&dwell.interval);
        segment.target_kmh = Some(target_kmh);
        segment.stretch = dwell.stretch;
        segment.dwell = u32::try_from(dwell.k + 1).unwrap_or(u32::MAX);
        let why = self.refusals(&dwell.interval, &segment, rule);
        let (stretch, number, flags) = (segment.stretch, segment.dwell, segment.flags.clone());
        let (t0, t1) = (segment.t0, segment.t1);
        let good = why.is_empty();
        out.push(Event { at, what: What::Dwell { dwell: Box::new(dwell), target_kmh, why: why.clone(), flags } });
        if !good {
            let rejected = Rejected { t0, t1, target_kmh, stretch, dwell: number, why };
            return self.write(at, Entry::Rejected(rejected), out);
        }
        self.held = Some(HeldDwell { segment, kept: None });
        if self.armed || self.every {
            self.keep_held(at, out);
        }
    }

    /// Does what the person asked for.
    pub fn command(&mut self, at: StreamTime, command: Command, out: &mut Vec<Event>) {
        let done = match command {
            Command::TakeEvery => {
                self.every = true;
                Ok(())
            }
            Command::Take => {
                self.take(at, out);
                Ok(())
            }
            Command::SpanBegin => self.span_begin(at, out),
            Command::SpanEnd => self.span_end(at, out),
            Command::Void(id) => self.void(at, (id, true), out),
            Command::Restore(id) => self.void(at, (id, false), out),
            Command::CorrectConfiguration(id, letter) => self.correct(at, id, (Some(letter), None), out),
            Command::CorrectDirection(id, way) => self.correct(at, id, (None, Some(way)), out),
            Command::Zero => self.take_zero(at, out),
            Command::Configuration(letter) => self.fit(at, letter, out),
            Command::Direction(way) => {
                self.by_hand = if let DirectionWord::By(way) = way { Some(way) } else { None };
                let to = self.by_hand.map_or("auto", Direction::word).to_string();
                self.write(at, Entry::Direction(Change { t: at, to }), out);
                Ok(())
            }
            Command::Target(kmh) => {
                self.aim_kmh = Some(kmh);
                out.push(Event { at, what: What::Target(kmh) });
                Ok(())
            }
            Command::Mark(text) => {
                self.mark(at, text, out);
                Ok(())
            }
            Command::Note(text) => {
                self.write(at, Entry::Note(Remark { t: at, text }), out);
                Ok(())
            }
            Command::Taps(map) => self.move_taps(at, map, out),
            Command::Air(air) => {
                self.air = SegmentAir { air, source: AirSource::Stated };
                self.write(at, Entry::Air(AirChange { t: at, air }), out);
                Ok(())
            }
        };
        if let Err(refusal) = done {
            out.push(Event { at, what: What::Refused(refusal) });
        }
    }

    // ---------------------------------------------------------------- what comes of it

    fn write(&self, at: StreamTime, entry: Entry, out: &mut Vec<Event>) {
        out.push(Event { at, what: What::Entry(Box::new(entry)) });
    }

    fn take(&mut self, at: StreamTime, out: &mut Vec<Event>) {
        if self.held.as_ref().is_some_and(|h| h.kept.is_none()) {
            self.keep_held(at, out);
        } else {
            self.armed = true;
            out.push(Event { at, what: What::Armed });
        }
    }

    fn keep_held(&mut self, at: StreamTime, out: &mut Vec<Event>) {
        let Some(held) = &mut self.held else { return };
        held.segment.id = self.next_segment;
        held.kept = Some(self.next_segment);
        let segment = held.segment.clone();
        self.armed = false;
        self.remember(&segment);
        self.write(at, Entry::Segment(Box::new(segment)), out);
    }

    /// An interval with the tags of this moment; target, stretch and dwell are the caller's.
    fn segment(&self, interval: &Interval) -> Segment {
        let channels = self.statistics(interval);
        let track = self.channels.iter().find(|c| c.quantity == Quantity::Track);
        let track_deg = track.and_then(|c| channels.get(&c.name)).map(|s| s.mean);
        Segment {
            id: 0,
            t0: interval.start,
            t1: interval.end,
            target_kmh: None,
            stretch: 0,
            dwell: 0,
            configuration: self.configuration.clone(),
            direction: self.by_hand.unwrap_or_else(|| self.direction_of(track_deg)),
            track_deg,
            taps: self.taps.clone(),
            zero: self.zero.as_ref().map(|z| z.id),
            air: self.air_over(&channels, interval.end),
            gps_utc: self.utc_ms.and_then(chrono::DateTime::from_timestamp_millis).map(rfc3339),
            flags: self.flags(interval),
            bin_s: interval.bin_us as f64 / 1e6,
            channels,
        }
    }

    fn statistics(&self, interval: &Interval) -> BTreeMap<String, ChannelStatistics> {
        let each = self.channels.iter().zip(&interval.channels);
        each.filter_map(|(c, a)| Some((c.name.clone(), a.finish()?))).collect()
    }

    /// The air of an interval: measured channel by channel where there is one, else as stated.
    fn air_over(&self, channels: &BTreeMap<String, ChannelStatistics>, end: StreamTime) -> SegmentAir {
        let measured = |quantity| {
            let (i, c) = self.channels.iter().enumerate().find(|(_, c)| c.quantity == quantity)?;
            let mean = channels.get(&c.name).map(|s| s.mean);
            let latest = || self.latest[i].filter(|(at, _)| end.since(*at) <= c.stale_us).map(|(_, x)| x);
            mean.or_else(latest)
        };
        let stated = self.air;
        let temperature = measured(Quantity::Temperature);
        let pressure = measured(Quantity::Barometer).map(|pa| pa / 100.0);
        let humidity = measured(Quantity::Humidity);
        let all = temperature.is_some() && pressure.is_some() && humidity.is_some();
        SegmentAir {
            air: Air {
                temperature_c: temperature.unwrap_or(stated.air.temperature_c),
                pressure_hpa: pressure.unwrap_or(stated.air.pressure_hpa),
                humidity_pct: humidity.unwrap_or(stated.air.humidity_pct),
            },
            source: if all { AirSource::Measured } else { stated.source },
        }
    }

    fn direction_of(&self, track_deg: Option<f64>) -> Direction {
        let (Some(track), Some(out)) = (track_deg, self.out_track_deg) else { return Direction::Other };
        let off = ((track - out + 180.0).rem_euclid(360.0) - 180.0).abs();
        if off <= DIRECTION_WITHIN_DEG {
            Direction::Out
        } else if off >= 180.0 - DIRECTION_WITHIN_DEG {
            Direction::Back
        } else {
            Direction::Other
        }
    }

    fn flags(&self, interval: &Interval) -> Vec<String> {
        let mut flags = Vec::new();
        if self.marks.iter().any(|t| interval.contains(*t)) {
            flags.push("marked".to_string());
        }
        let pressures = || {
            let both = self.channels.iter().zip(&interval.channels);
            both.filter(|(c, _)| matches!(c.quantity, Quantity::Pressure | Quantity::DynamicPressure))
        };
        // A value that stands still is stuck only beside living ones.
        if pressures().any(|(_, a)| a.n() > 1 && !a.still()) {
            flags
                .extend(pressures().filter(|(_, a)| a.n() >= 5 && a.still()).map(|(c, _)| format!("stuck:{}", c.name)));
        }
        for (i, (c, a)) in self.channels.iter().zip(&interval.channels).enumerate() {
            if !self.essential(i) && a.saturated() {
                flags.push(format!("saturated:{}", c.name));
            }
        }
        flags
    }

    /// Whether a dwell is worth nothing without this channel: the watched one, q, and all that sit on taps.
    fn essential(&self, channel: usize) -> bool {
        let facts = &self.channels[channel];
        channel == self.watched || facts.quantity == Quantity::DynamicPressure || self.taps.contains_key(&facts.name)
    }

    /// Why a full dwell cannot be held.
    fn refusals(&self, interval: &Interval, segment: &Segment, rule: &Rule) -> Vec<String> {
        let mut why = Vec::new();
        let watched = segment.channels.get(&self.channels[self.watched].name);
        if let (Some(limit), Some(slope)) = (rule.slope_kmh_s, watched.and_then(|s| s.slope))
            && slope.abs() > limit
        {
            why.push("slope".to_string());
        }
        for (i, (c, a)) in self.channels.iter().zip(&interval.channels).enumerate() {
            if self.essential(i) && a.saturated() {
                why.push(format!("saturated:{}", c.name));
            }
            if self.essential(i) && a.longest_gap_us(interval.length_us()) > c.stale_us {
                why.push(format!("stale:{}", c.name));
            }
        }
        why
    }

    /// Withdraws a segment, or lets it count again.
    fn void(&mut self, at: StreamTime, (id, void): (u32, bool), out: &mut Vec<Event>) -> Result<(), Refusal> {
        let segment = self.segments.iter_mut().find(|s| s.id == id).ok_or(Refusal::NoSuchSegment(id))?;
        if std::mem::replace(&mut segment.void, void) == void {
            return Err(if void { Refusal::AlreadyVoid(id) } else { Refusal::NotVoid(id) });
        }
        let line = Void { t: at, segment: id };
        self.write(at, if void { Entry::Void(line) } else { Entry::Restore(line) }, out);
        Ok(())
    }

    fn correct(
        &mut self,
        at: StreamTime,
        segment: u32,
        (configuration, direction): (Option<String>, Option<Direction>),
        out: &mut Vec<Event>,
    ) -> Result<(), Refusal> {
        if !self.segments.iter().any(|s| s.id == segment) {
            return Err(Refusal::NoSuchSegment(segment));
        }
        configuration.iter().try_for_each(|letter| self.known(letter))?;
        let correction = Correction { t: at, segment, configuration, direction };
        self.retag(&correction);
        self.write(at, Entry::Correct(correction), out);
        Ok(())
    }

    fn retag(&mut self, correction: &Correction) {
        for s in self.segments.iter_mut().filter(|s| s.id == correction.segment) {
            correction.apply(&mut s.configuration, &mut s.direction);
        }
    }

    fn known(&self, letter: &str) -> Result<(), Refusal> {
        if self.configurations.iter().any(|c| c.letter == letter) {
            return Ok(());
        }
        let known: Vec<&str> = self.configurations.iter().map(|c| c.letter.as_str()).collect();
        Err(Refusal::NoSuchConfiguration { letter: letter.to_string(), known: known.join(", ") })
    }

    fn take_zero(&mut self, at: StreamTime, out: &mut Vec<Event>) -> Result<(), Refusal> {
        let stale_us = self.channels[self.watched].stale_us;
        let (_, kmh) = self.speed.filter(|(t, _)| at.since(*t) <= stale_us).ok_or(Refusal::NoSpeed)?;
        let standing = self.standing.as_ref().ok_or(Refusal::Moving(kmh))?;
        let start = standing.since.max(at.plus(-self.dwell_us));
        let need_us = self.dwell_us / 2;
        if at.since(start) < need_us {
            let (have_s, need_s) = (at.since(start) as f64 / 1e6, need_us as f64 / 1e6);
            return Err(Refusal::StandLonger { have_s, need_s });
        }
        let mut interval = Interval::new(start, at, &self.angles);
        for sample in standing.samples.iter().filter(|s| s.t >= start && s.t < at) {
            interval.push(std::slice::from_ref(sample));
        }
        let zero = Zero {
            id: self.next_zero,
            t0: start,
            t1: at,
            bin_s: interval.bin_us as f64 / 1e6,
            channels: self.statistics(&interval),
        };
        self.next_zero += 1;
        self.zero = Some(zero.clone());
        self.write(at, Entry::Zero(zero), out);
        Ok(())
    }

    fn fit(&mut self, at: StreamTime, letter: String, out: &mut Vec<Event>) -> Result<(), Refusal> {
        self.known(&letter)?;
        self.configuration.clone_from(&letter);
        self.write(at, Entry::Configuration(Change { t: at, to: letter }), out);
        Ok(())
    }

    fn mark(&mut self, at: StreamTime, text: String, out: &mut Vec<Event>) {
        self.marks.push_back(at);
        while self.marks.front().is_some_and(|t| at.since(*t) > MARKS_KEPT_US) {
            self.marks.pop_front();
        }
        self.write(at, Entry::Mark(Remark { t: at, text }), out);
    }

    fn move_taps(
        &mut self,
        at: StreamTime,
        map: BTreeMap<String, String>,
        out: &mut Vec<Event>,
    ) -> Result<(), Refusal> {
        let mut taps = self.taps.clone();
        for (channel, tap) in map {
            if !self.channels.iter().any(|c| c.name == channel && c.quantity == Quantity::Pressure) {
                return Err(Refusal::Taps(format!("the rig has no pressure channel `{channel}`")));
            }
            if !self.tap_names.contains(&tap) {
                return Err(Refusal::Taps(format!("the car has no tap `{tap}`")));
            }
            taps.insert(channel, tap);
        }
        let mut seen: Vec<&String> = taps.values().collect();
        seen.sort();
        if let Some(twice) = seen.windows(2).find(|w| w[0] == w[1]) {
            return Err(Refusal::Taps(format!(
                "tap `{}` would be on two channels; name both in one command",
                twice[0]
            )));
        }
        self.taps = taps.clone();
        self.write(at, Entry::Taps(TapsChange { t: at, taps }), out);
        Ok(())
    }

    fn span_begin(&mut self, at: StreamTime, out: &mut Vec<Event>) -> Result<(), Refusal> {
        if self.span.is_some() {
            return Err(Refusal::SpanOpen);
        }
        self.span = Some(Interval::new(at, StreamTime::NEVER, &self.angles));
        out.push(Event { at, what: What::SpanBegun });
        Ok(())
    }

    fn span_end(&mut self, at: StreamTime, out: &mut Vec<Event>) -> Result<(), Refusal> {
        let span = self.span.as_mut().filter(|s| s.end == StreamTime::NEVER).ok_or(Refusal::NoSpan)?;
        span.end = at;
        self.advance(at, out);
        Ok(())
    }

    fn keep_span(&mut self, at: StreamTime, out: &mut Vec<Event>) {
        let Some(span) = self.span.take() else { return };
        let mut segment = self.segment(&span);
        segment.id = self.next_segment;
        segment.flags.insert(0, "by-hand".to_string());
        self.remember(&segment);
        self.write(at, Entry::Segment(Box::new(segment)), out);
    }
}

fn rfc3339(instant: chrono::DateTime<chrono::Utc>) -> String {
    instant.to_rfc3339_opts(chrono::SecondsFormat::Millis, true)
}
