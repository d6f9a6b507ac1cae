//! Collects every channel's samples into the dwells of the running stretch, and hands out full ones.
//!
//! A sample belongs to a dwell by its own time (arrival less lag). A complete dwell is handed out once no sample of it can still be
//! on its way: at the first input that arrives the longest lag after its end. Without lags that is the completing sample.

use super::statistics::{Accumulator, Place};
use super::{Change, Rule, State, Stretch};
use crate::signal::Sample;
use crate::units::StreamTime;
use std::collections::VecDeque;

/// Bins of a dwell: twenty, unless they would be longer than a second (Methods: 0.5–1 s bins, at least twenty, else shorter).
const BINS: i64 = 20;
const LONGEST_BIN_US: i64 = 1_000_000;

/// One interval with every channel's accumulator.
#[derive(Clone, Debug)]
pub struct Interval {
    /// First moment (inclusive).
    pub start: StreamTime,
    /// Last moment (exclusive).
    pub end: StreamTime,
    /// Width of its bins, µs.
    pub bin_us: i64,
    /// By channel index.
    pub channels: Vec<Accumulator>,
}

impl Interval {
    /// An empty interval; `angles` says by channel whether its values are degrees on a circle.
    pub fn new(start: StreamTime, end: StreamTime, angles: &[bool]) -> Self {
        let length = end.since(start).max(1);
        let bin_us = ((length + BINS - 1) / BINS).clamp(1, LONGEST_BIN_US);
        let bins =
            if end == StreamTime::NEVER { 0 } else { usize::try_from((length + bin_us - 1) / bin_us).unwrap_or(0) };
        let channels = angles.iter().map(|angle| Accumulator::new(*angle, bins)).collect();
        Self { start, end, bin_us, channels }
    }

    /// Whether a moment lies in it.
    #[inline]
    pub fn contains(&self, t: StreamTime) -> bool {
        self.start <= t && t < self.end
    }

    /// Adds samples of one moment that lies in it.
    #[inline]
    pub fn push(&mut self, samples: &[Sample]) {
        let Some(first) = samples.first() else { return };
        let us = first.t.since(self.start);
        let place = Place { us, bin: usize::try_from(us / self.bin_us).unwrap_or(0) };
        for sample in samples {
            self.channels[sample.channel].push(place, sample.value, sample.saturated);
        }
    }

    /// Its length, µs.
    pub fn length_us(&self) -> i64 {
        self.end.since(self.start)
    }
}

/// A dwell, complete or collecting.
#[derive(Clone, Debug)]
pub struct Dwell {
    /// Index of the target.
    pub target: usize,
    /// Which stretch of those that gave a dwell, from 1; 0 while collecting.
    pub stretch: u32,
    /// Which dwell of the stretch, from 0.
    pub k: i64,
    /// Its samples.
    pub interval: Interval,
}

/// The window and its dwells.
#[derive(Debug)]
pub struct Hold {
    rule: Rule,
    state: State,
    angles: Vec<bool>,
    /// Longest lag of any channel, µs.
    longest_lag_us: i64,
    /// Complete ones first, then collecting ones of the running stretch, each in time order.
    dwells: VecDeque<Dwell>,
    /// Stretches that gave a dwell.
    stretches: u32,
    /// Samples that may lie in a stretch that is only about to open; kept where the settling time is no longer than a lag.
    recent: Option<VecDeque<Sample>>,
}

impl Hold {
    /// Off, with nothing collected.
    pub fn new(rule: Rule, angles: Vec<bool>, longest_lag_us: i64) -> Self {
        let recent = (rule.settle_us <= longest_lag_us).then(VecDeque::new);
        Self { rule, state: State::Off, angles, longest_lag_us, dwells: VecDeque::new(), stretches: 0, recent }
    }

    /// The window's figures.
    pub fn rule(&self) -> &Rule {
        &self.rule
    }

    /// The window's state as of the last watched sample.
    pub fn state(&self) -> &State {
        &self.state
    }

    /// Adds a target to those watched, and gives its index.
    pub fn add_target(&mut self, kmh: f64) -> usize {
        self.rule.targets_kmh.push(kmh);
        self.rule.targets_kmh.len() - 1
    }

    /// Takes in a watched sample; its own statistics go through [`Hold::frame`] afterwards.
    #[inline]
    pub fn watch(&mut self, t: StreamTime, kmh: f64) -> Change {
        let change = self.state.step(&self.rule, t, kmh);
        if change != Change::default() {
            self.follow(&change);
        }
        change
    }

    fn follow(&mut self, change: &Change) {
        if change.closed {
            self.dwells.retain(|d| d.stretch > 0);
        }
        if let (Some(stretch), Some(recent)) = (&change.opened, &mut self.recent) {
            let from = self.rule.dwell_start(stretch.t0, 0);
            let early: Vec<Sample> = recent.drain(..).filter(|s| s.t >= from).collect();
            self.frame(&early);
        }
        let (from, to) = change.completed;
        if from < to {
            self.stretches += u32::from(from == 0);
            for k in from..to {
                let stretch = self.stretches;
                if let Some(dwell) = self.dwell(k) {
                    dwell.stretch = stretch;
                }
            }
        }
    }

    /// Dwell `k` of the running stretch, begun if need be.
    fn dwell(&mut self, k: i64) -> Option<&mut Dwell> {
        let s = *self.state.stretch()?;
        let start = self.rule.dwell_start(s.t0, k);
        let at = self.dwells.partition_point(|d| d.interval.start < start);
        if self.dwells.get(at).is_none_or(|d| d.interval.start != start) {
            let interval = Interval::new(start, start.plus(self.rule.dwell_us), &self.angles);
            self.dwells.insert(at, Dwell { target: s.target, stretch: 0, k, interval });
        }
        self.dwells.get_mut(at)
    }

    /// Adds the samples of a frame, of any channels, to the dwells they lie in.
    #[inline]
    pub fn frame(&mut self, samples: &[Sample]) {
        for moment in samples.chunk_by(|a, b| a.t == b.t) {
            self.moment(moment);
        }
    }

    /// Adds samples of one moment, one or more.
    #[inline]
    fn moment(&mut self, samples: &[Sample]) {
        let t = samples[0].t;
        if let Some(dwell) = self.dwells.iter_mut().find(|d| d.interval.contains(t)) {
            dwell.interval.push(samples);
        } else if let Some(k) = self.running(t)
            && let Some(dwell) = self.dwell(k)
        {
            dwell.interval.push(samples);
        }
        // Kept though a dwell has them: the stretch may turn out to have ended before them, and another to have begun.
        if let Some(recent) = &mut self.recent {
            recent.extend(samples);
            while recent.front().is_some_and(|s| t.since(s.t) > 2 * self.longest_lag_us) {
                recent.pop_front();
            }
        }
    }

    /// Whether no sample that arrives at `at` can lie in a dwell, not even in one that begins later.
    #[inline]
    pub fn idle(&self, at: StreamTime) -> bool {
        let before = |stretch: &Stretch| at < self.rule.dwell_start(stretch.t0, 0);
        self.dwells.is_empty() && self.recent.is_none() && self.state.stretch().is_none_or(before)
    }

    /// Which dwell of the running stretch is to be begun for a moment; none when the stretch cannot reach it.
    #[inline]
    fn running(&self, t: StreamTime) -> Option<i64> {
        let s = self.state.stretch()?;
        let age = t.since(self.rule.dwell_start(s.t0, 0));
        if age < 0 || t.since(s.last) > self.rule.stale_us + self.longest_lag_us {
            return None;
        }
        let k = age / self.rule.dwell_us;
        (k >= s.complete).then_some(k)
    }

    /// The next complete dwell that no input from `arrival` on can still add to.
    #[inline]
    pub fn due(&mut self, arrival: StreamTime) -> Option<Dwell> {
        let first = self.dwells.front()?;
        let due = first.stretch > 0 && arrival >= first.interval.end.plus(self.longest_lag_us);
        if due { self.dwells.pop_front() } else { None }
    }

    /// Stretches that gave a dwell so far.
    pub fn stretches(&self) -> u32 {
        self.stretches
    }

    /// The running dwell, for the eye.
    pub fn collecting(&self) -> Option<&Dwell> {
        self.dwells.iter().find(|d| d.stretch == 0)
    }
}
