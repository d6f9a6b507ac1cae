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

/// The eye's view of one channel.
#[derive(Clone, Debug)]
pub struct Eye {
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
            damping_us: micros(channel.damping_s),
            stale_us: channel.stale_us(),
            damped: None,
            last: None,
            changed: StreamTime::ZERO,
            saturated: None,
            trace: VecDeque::with_capacity(TRACE_POINTS + 1),
        }
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
        let step = at.micros().div_euclid(TRACE_STEP_US);
        match self.trace.back_mut() {
            Some((s, sum, n)) if *s == step => {
                *sum += x;
                *n += 1;
            }
            _ => {
                self.trace.push_back((step, x, 1));
                if self.trace.len() > TRACE_POINTS {
                    self.trace.pop_front();
                }
            }
        }
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

/// Share of a step that a first-order lag of `tau_us` follows within `dt_us`; 1 without a lag.
fn first_order_gain(dt_us: i64, tau_us: i64) -> f64 {
    if tau_us <= 0 { 1.0 } else { 1.0 - (-(dt_us as f64) / tau_us as f64).exp() }
}
