//! The monotonic clock behind stream time, and the wall clock for the one instant that ties them.

use crate::units::StreamTime;
use chrono::{DateTime, SecondsFormat, Utc};
use std::time::Duration;

/// Stream time of the world now: real time, or a multiple of it for a replay.
#[derive(Clone, Copy, Debug)]
pub struct StreamClock {
    /// What [`awake_or_asleep`] said at the start.
    origin: Duration,
    base: StreamTime,
    /// Stream seconds in a real second; none: the stream is not paced, and has no clock of its own.
    speed: Option<f64>,
}

impl StreamClock {
    /// Starts now at `base`.
    pub fn start(base: StreamTime, speed: Option<f64>) -> Self {
        Self { origin: awake_or_asleep(), base, speed }
    }

    /// Stream time now; never moved by steps of the wall clock.
    pub fn now(&self) -> StreamTime {
        let elapsed = self.elapsed().as_micros() as f64;
        self.base.plus((elapsed * self.speed.unwrap_or(0.0)) as i64)
    }

    /// Real time left until `at`; none when it has passed or nothing is paced.
    pub fn until(&self, at: StreamTime) -> Option<Duration> {
        let real_us = at.since(self.base) as f64 / self.speed?;
        Duration::from_micros(real_us.max(0.0) as u64).checked_sub(self.elapsed())
    }
}

impl StreamClock {
    fn elapsed(&self) -> Duration {
        awake_or_asleep().saturating_sub(self.origin)
    }
}

/// Time since some moment; it never goes back, and counts while the computer sleeps: `CLOCK_BOOTTIME`.
#[cfg(target_os = "linux")]
pub fn awake_or_asleep() -> Duration {
    use rustix::time::{ClockId, clock_gettime};
    let now = clock_gettime(ClockId::Boottime);
    Duration::new(now.tv_sec.unsigned_abs(), u32::try_from(now.tv_nsec).unwrap_or(0))
}

/// Time since some moment; it never goes back. Whether it counts while the computer sleeps is up to the system.
#[cfg(not(target_os = "linux"))]
pub fn awake_or_asleep() -> Duration {
    static FIRST: std::sync::LazyLock<std::time::Instant> = std::sync::LazyLock::new(std::time::Instant::now);
    FIRST.elapsed()
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
