//! What the eye sees of a channel: a damped value, a short trace, and whether it is alive.
//!
//! Nothing here ever reaches an average; averages are of undamped samples.

use super::Sample;
use crate::config::Channel;
use crate::units::{StreamTime, micros};
use std::collections::VecDeque;

/// One point of the trace, µs.
const TRACE_STEP_US: i64 = 500_000;
/// Points of the trace: half a minute.
pub const TRACE_POINTS: usize = 60;
/// A value that stands still for this long beside living ones is stuck, µs.
const STUCK_US: i64 = 5_000_000;
/// Saturation stays visible for this long, µs.
const SATURATED_US: i64 = 1_000_000;

/// Newest samples that are kept for the workshop.
const FINE: usize = 4096;
/// One bin of the long trace, µs, and how many are kept: two minutes.
const COARSE_STEP_US: i64 = 250_000;
const COARSE: usize = 480;
/// Time over which rate and noise are taken, µs.
const RECENT_US: i64 = 2_000_000;

/// One sample as the workshop looks at it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Seen {
    /// When it arrived.
    pub at: StreamTime,
    /// The field as it came.
    pub raw: f64,
    /// In the unit used inside.
    pub value: f64,
}

/// The eye's view of one channel.
#[derive(Clone, Debug)]
pub struct Eye {
    raw: f64,
    fine: VecDeque<Seen>,
    coarse: VecDeque<(i64, f64, u32)>,
    damping_us: i64,
    stale_us: i64,
    damped: Option<f64>,
    last: Option<(StreamTime, f64)>,
    changed: StreamTime,
    saturated: Option<StreamTime>,
    trace: VecDeque<(i64, f64, u32)>,
}

impl Eye {
    /// The eye on a channel.
    pub fn new(channel: &Channel) -> Self {
        Self {
            raw: f64::NAN,
            fine: VecDeque::new(),
            coarse: VecDeque::new(),
            damping_us: micros(channel.damping_s),
            stale_us: channel.stale_us(),
            damped: None,
            last: None,
            changed: StreamTime::ZERO,
            saturated: None,
            trace: VecDeque::with_capacity(TRACE_POINTS + 1),
        }
    }

    /// The field that the next sample is made of.
    pub fn raw(&mut self, raw: f64) {
        self.raw = raw;
    }

    /// Takes in a sample that arrived at `at`.
    pub fn push(&mut self, at: StreamTime, sample: &Sample) {
        let x = sample.value;
        self.damped = Some(match (self.damped, self.last) {
            (Some(y), Some((before, _))) if at.since(before) <= self.stale_us => {
                y + (x - y) * first_order_gain(at.since(before), self.damping_us)
            }
            _ => x,
        });
        if self.last.is_none_or(|(_, before)| before != x) {
            self.changed = at;
        }
        self.last = Some((at, x));
        if sample.saturated {
            self.saturated = Some(at);
        }
        self.fine.push_back(Seen { at, raw: self.raw, value: x });
        if self.fine.len() > FINE {
            self.fine.pop_front();
        }
        bin(&mut self.trace, (at.micros().div_euclid(TRACE_STEP_US), TRACE_POINTS), x);
        bin(&mut self.coarse, (at.micros().div_euclid(COARSE_STEP_US), COARSE), x);
    }

    /// The newest samples, oldest first.
    pub fn fine(&self) -> impl DoubleEndedIterator<Item = &Seen> {
        self.fine.iter()
    }

    /// Means of a quarter second over the last two minutes: (s, value), oldest first.
    pub fn coarse(&self) -> impl Iterator<Item = (f64, f64)> {
        self.coarse
            .iter()
            .map(|(step, sum, n)| ((*step as f64 + 0.5) * COARSE_STEP_US as f64 / 1e6, sum / f64::from(*n)))
    }

    /// Samples a second and their standard deviation, over the last two seconds.
    pub fn rate_and_noise(&self, now: StreamTime) -> (f64, Option<f64>) {
        let recent: Vec<f64> =
            self.fine().rev().take_while(|s| now.since(s.at) <= RECENT_US).map(|s| s.value).collect();
        let n = recent.len() as f64;
        let mean = recent.iter().sum::<f64>() / n;
        let noise = (recent.iter().map(|x| (x - mean).powi(2)).sum::<f64>() / (n - 1.0)).sqrt();
        (n / (RECENT_US as f64 / 1e6), (n > 1.0).then_some(noise))
    }

    /// The damped value; none when nothing ever came.
    pub fn live(&self) -> Option<f64> {
        self.damped
    }

    /// The newest value, undamped.
    pub fn latest(&self) -> Option<f64> {
        self.last.map(|(_, value)| value)
    }

    /// Nothing for longer than the channel's limit, or nothing yet.
    pub fn stale(&self, now: StreamTime) -> bool {
        self.last.is_none_or(|(at, _)| now.since(at) > self.stale_us)
    }

    /// At an end of its range within the last second.
    pub fn saturated(&self, now: StreamTime) -> bool {
        self.saturated.is_some_and(|at| now.since(at) <= SATURATED_US)
    }

    /// It still arrives but has stood still for five seconds.
    pub fn still(&self, now: StreamTime) -> bool {
        !self.stale(now) && now.since(self.changed) >= STUCK_US
    }

    /// The last half minute, oldest first.
    pub fn trace(&self, now: StreamTime) -> Vec<Option<f64>> {
        let newest = now.micros().div_euclid(TRACE_STEP_US);
        let mut points = vec![None; TRACE_POINTS];
        for (step, sum, n) in &self.trace {
            let back = usize::try_from(newest - step).unwrap_or(0);
            if back < TRACE_POINTS {
                points[TRACE_POINTS - 1 - back] = Some(sum / f64::from(*n));
            }
        }
        points
    }
}

/// Adds a value to the newest of so many bins.
fn bin(bins: &mut VecDeque<(i64, f64, u32)>, (step, most): (i64, usize), x: f64) {
    match bins.back_mut() {
        Some((s, sum, n)) if *s == step => {
            *sum += x;
            *n += 1;
        }
        _ => {
            bins.push_back((step, x, 1));
            if bins.len() > most {
                bins.pop_front();
            }
        }
    }
}

/// Share of a step that a first-order lag of `tau_us` follows within `dt_us`; 1 without a lag.
fn first_order_gain(dt_us: i64, tau_us: i64) -> f64 {
    if tau_us <= 0 { 1.0 } else { 1.0 - (-(dt_us as f64) / tau_us as f64).exp() }
}
