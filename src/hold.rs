//! The speed window: watched samples → off, settling, steady, held; every channel's samples → full dwells.
//!
//! The rule is exact, so that live, replay and re-hold agree to the last bit. With t₀ the time of a stretch's
//! first sample, dwell k covers the half-open interval [t₀ + settle + k·dwell, t₀ + settle + (k+1)·dwell) and is complete as
//! soon as a sample inside the window arrives at or after its end. Times are whole microseconds.
//!
//! | state | a watched sample … | next |
//! | --- | --- | --- |
//! | off | outside every window | off |
//! | off | inside a window | settling of a new stretch (steady if settle is 0) |
//! | settling, steady, held | inside the same window, in time | by its age: settling, steady, or held once a dwell is complete |
//! | settling, steady, held | inside another target's window, or after a gap longer than stale | settling of a new stretch |
//! | settling, steady, held | outside every window | off |
//!
//! With several targets the nearest whose window contains the sample is the one. `dwell` collects the statistics, `statistics` owns their formulas.

pub mod dwell;
pub mod statistics;

use crate::config::Outing;
use crate::units::{StreamTime, micros};

/// The window's figures.
#[derive(Clone, Debug, PartialEq)]
pub struct Rule {
    /// Target speeds, km/h.
    pub targets_kmh: Vec<f64>,
    /// Half width, km/h.
    pub tolerance_kmh: f64,
    /// Settling time, µs.
    pub settle_us: i64,
    /// Length of a dwell, µs; positive.
    pub dwell_us: i64,
    /// Largest speed slope of a dwell, km/h per s.
    pub slope_kmh_s: Option<f64>,
    /// Longest gap of the watched channel within a stretch, µs.
    pub stale_us: i64,
}

impl Rule {
    /// The outing's rule; `stale_us` is the watched channel's.
    pub fn new(outing: &Outing, stale_us: i64) -> Self {
        Self {
            targets_kmh: outing.targets_kmh.clone(),
            tolerance_kmh: outing.tolerance_kmh,
            settle_us: micros(outing.settle_s),
            dwell_us: micros(outing.dwell_s),
            slope_kmh_s: outing.slope,
            stale_us,
        }
    }

    /// Index of the nearest target whose window contains `kmh`; of two equally near ones the first.
    #[inline]
    pub fn target_of(&self, kmh: f64) -> Option<usize> {
        let mut best = None;
        let mut nearest = self.tolerance_kmh;
        for (i, target) in self.targets_kmh.iter().enumerate() {
            let distance = (kmh - target).abs();
            if distance < nearest || (distance == nearest && best.is_none()) {
                (best, nearest) = (Some(i), distance);
            }
        }
        best
    }

    /// The target nearest to a speed, whether its window contains it or not, km/h.
    pub fn nearest_kmh(&self, kmh: f64) -> Option<f64> {
        self.targets_kmh.iter().copied().min_by(|a, b| (a - kmh).abs().total_cmp(&(b - kmh).abs()))
    }

    /// First moment of dwell `k` of a stretch that began at `t0`.
    pub fn dwell_start(&self, t0: StreamTime, k: i64) -> StreamTime {
        t0.plus(self.settle_us + k * self.dwell_us)
    }
}

/// A run of watched samples in one window.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Stretch {
    /// Index into [`Rule::targets_kmh`].
    pub target: usize,
    /// Time of its first sample.
    pub t0: StreamTime,
    /// Time of its last sample so far.
    pub last: StreamTime,
    /// Complete dwells so far.
    pub complete: i64,
}

/// State of the speed window.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum State {
    /// Outside every window, or no watched sample yet.
    Off,
    /// Inside, younger than `settle`.
    Settling(Stretch),
    /// Inside and averaging.
    Steady(Stretch),
    /// A full dwell has been averaged.
    Held(Stretch),
}

/// What one watched sample did.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Change {
    /// A stretch ended before this sample.
    pub closed: bool,
    /// A stretch begins with it.
    pub opened: Option<Stretch>,
    /// Dwells `from..to` of the stretch are complete with it.
    pub completed: (i64, i64),
}

impl State {
    /// The stretch, inside a window.
    pub fn stretch(&self) -> Option<&Stretch> {
        match self {
            Self::Off => None,
            Self::Settling(s) | Self::Steady(s) | Self::Held(s) => Some(s),
        }
    }

    /// Takes in one watched sample, by the table above.
    pub fn step(&mut self, rule: &Rule, t: StreamTime, kmh: f64) -> Change {
        let target = rule.target_of(kmh);
        match (*self, target) {
            (Self::Off, None) => Change::default(),
            (Self::Off, Some(target)) => self.open(rule, t, target),
            (Self::Settling(s) | Self::Steady(s) | Self::Held(s), Some(target))
                if s.target == target && t.since(s.last) <= rule.stale_us =>
            {
                let complete = (t.since(s.t0) - rule.settle_us).div_euclid(rule.dwell_us).max(0);
                let completed = (s.complete, complete.max(s.complete));
                *self = Self::by_age(rule, Stretch { last: t, complete: completed.1, ..s });
                Change { completed, ..Change::default() }
            }
            (_, Some(target)) => Change { closed: true, ..self.open(rule, t, target) },
            (_, None) => {
                *self = Self::Off;
                Change { closed: true, ..Change::default() }
            }
        }
    }

    fn open(&mut self, rule: &Rule, t: StreamTime, target: usize) -> Change {
        let stretch = Stretch { target, t0: t, last: t, complete: 0 };
        *self = Self::by_age(rule, stretch);
        Change { opened: Some(stretch), ..Change::default() }
    }

    fn by_age(rule: &Rule, s: Stretch) -> Self {
        if s.complete > 0 {
            Self::Held(s)
        } else if s.last.since(s.t0) >= rule.settle_us {
            Self::Steady(s)
        } else {
            Self::Settling(s)
        }
    }
}
