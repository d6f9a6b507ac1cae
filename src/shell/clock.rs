//! The monotonic clock behind stream time, and the wall clock for the one instant that ties them.

use crate::units::StreamTime;
use chrono::{DateTime, SecondsFormat, Utc};
use std::time::{Duration, Instant};

/// Stream time of the world now: real time, or a multiple of it for a replay.
#[derive(Clone, Copy, Debug)]
pub struct StreamClock {
    origin: Instant,
    base: StreamTime,
    /// Stream seconds in a real second; none: the stream is not paced, and has no clock of its own.
    speed: Option<f64>,
}

impl StreamClock {
    /// Starts now at `base`.
    pub fn start(base: StreamTime, speed: Option<f64>) -> Self {
        Self { origin: Instant::now(), base, speed }
    }

    /// Stream time now; never moved by steps of the wall clock.
    pub fn now(&self) -> StreamTime {
        let elapsed = self.origin.elapsed().as_micros() as f64;
        self.base.plus((elapsed * self.speed.unwrap_or(0.0)) as i64)
    }

    /// Real time left until `at`; none when it has passed or nothing is paced.
    pub fn until(&self, at: StreamTime) -> Option<Duration> {
        let real_us = at.since(self.base) as f64 / self.speed?;
        Duration::from_micros(real_us.max(0.0) as u64).checked_sub(self.origin.elapsed())
    }
}

/// The instant now, as headers write it.
pub fn utc_now() -> DateTime<Utc> {
    Utc::now()
}

/// RFC 3339 with milliseconds.
pub fn rfc3339(instant: DateTime<Utc>) -> String {
    instant.to_rfc3339_opts(SecondsFormat::Millis, true)
}

/// A local date and time for a file name.
pub fn file_stamp() -> String {
    chrono::Local::now().format("%Y%m%d-%H%M%S").to_string()
}
