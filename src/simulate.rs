//! The rehearsal: a seed → the bytes that the ports of an invented van would send on a whole outing, when each
//! line would arrive, and the keys that its passenger would press. No clock, no file, no hardware.
//!
//! **All of it is invented**: van, road, air, gauge, the flaps and what they do; no vehicle was measured. An
//! invented high-roof van with five taps on port `gauge` (`ms,p1,p2,p3,p4,p5,q,t_air,p_air,rh`, 50 Hz) and a GPS on
//! port `gps` (RMC 5 Hz, GGA 1 Hz) drives out (90°) and back at 80 and 100 km/h with bare doors (A), flaps of 120 mm
//! (B) and of 240 mm (C), in the order A B C A … A. Wind of 2.3 m/s with gusts, a driver who wanders, hoses that lag by
//! [`LAG_S`], drifting zeros, a probe in the van's own upstream field ([`PROBE_FACTOR`]), a lorry on the tenth run and
//! a gauge cable that slips out on the fifteenth. A zero valve joins both sides of the sensors while the van stands.
//!
//! The truth is exported ([`true_cp`]), so that a reduction can be held against it. The same scenario gives the same
//! bytes on every machine. The single constants stand, with their units, in the files of this room.

mod chance;
mod ports;
mod road;
mod van;

pub use ports::{GAUGE, GPS};
pub use van::{LAG_S, PROBE_FACTOR, true_cp};

use crate::stream::command::Command;
use crate::units::StreamTime;
use chance::Chance;
use road::{Drive, Incident};
use std::collections::BTreeMap;

/// UTC of stream time 0 as the GPS tells it, RFC 3339; invented.
pub const STARTED: &str = "2026-06-14T09:12:00Z";

/// How long the cable stays out, µs.
const UNPLUGGED_US: i64 = 4_000_000;

/// One thing that happens on an outing.
#[derive(Clone, Debug, PartialEq)]
pub enum Moment {
    /// A line has come in.
    Line {
        /// When its last byte was read.
        at: StreamTime,
        /// Which port.
        port: &'static str,
        /// Its bytes with their end (CR LF, or what the fault left of it); none where the cable was torn out.
        bytes: Vec<u8>,
    },
    /// A port was lost or found.
    Event {
        /// When.
        at: StreamTime,
        /// Which port.
        port: &'static str,
        /// `lost` or `found`.
        word: &'static str,
    },
    /// What the passenger does; whoever presses the keys himself leaves these out.
    Command {
        /// When.
        at: StreamTime,
        /// What.
        command: Command,
    },
}

impl Moment {
    /// When it happens.
    pub const fn at(&self) -> StreamTime {
        match self {
            Self::Line { at, .. } | Self::Event { at, .. } | Self::Command { at, .. } => *at,
        }
    }
}

/// Which outing is simulated.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Scenario {
    /// Of everything that chance decides.
    pub seed: u64,
    /// Four minutes (A and B, once out and once back, 100 km/h only, no incident) instead of forty.
    pub short: bool,
    /// What goes wrong besides.
    pub faults: Vec<Fault>,
}

/// Something that goes wrong for a while.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Fault {
    /// What.
    pub kind: FaultKind,
    /// From when (inclusive).
    pub from: StreamTime,
    /// Until when (exclusive).
    pub to: StreamTime,
}

/// What can go wrong on the wires.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum FaultKind {
    /// The gauge is read at a wrong speed: bytes with high bits.
    WrongBaud,
    /// The GPS has no fix: RMC with status V, GGA with quality 0.
    NoFix,
    /// Column p4 stands at the lower end of its range.
    Saturated,
    /// Column p2 keeps its value.
    Stuck,
    /// This port says nothing, though it is plugged in.
    Silent(&'static str),
    /// Every seventh line of the gauge has control bytes, or numbers that are none.
    Hostile,
    /// The gauge's lines have a field too many.
    ExtraField,
    /// One bit of every GPS sentence is flipped.
    BadChecksum,
    /// The gauge's controller starts anew at `from`: banner, and its clock from zero.
    Reset,
    /// The gauge's cable is out: the last line is cut, `lost`; and `found` at the end.
    Unplugged,
}

/// A simulated outing: its moments in order of time. The full one lasts about forty minutes of stream time.
///
/// ```
/// use steadytap::simulate::{Moment, Outing};
/// let first = Outing::new(1).next();
/// assert!(matches!(first, Some(Moment::Line { port: "gauge", .. })));
/// ```
#[derive(Clone, Debug)]
pub struct Outing {
    drive: Drive,
    body: van::Body,
    gauge: ports::Gauge,
    gps: ports::Gps,
    faults: Vec<Fault>,
    tick: u64,
    /// What was made but may still be preceded by something: by time, then by the order of making.
    pending: BTreeMap<(StreamTime, u64), Moment>,
    made: u64,
    over: bool,
}

impl Outing {
    /// The full outing with its lorry and its slipped cable.
    pub fn new(seed: u64) -> Self {
        Self::of(Scenario { seed, ..Scenario::default() })
    }

    /// The outing of a scenario.
    pub fn of(scenario: Scenario) -> Self {
        let Scenario { seed, short, faults } = scenario;
        let plan = if short { road::short_plan() } else { road::full_plan() };
        Self {
            drive: Drive::new(plan, Chance::new(seed, 1)),
            body: van::Body::new(seed),
            gauge: ports::Gauge::new(seed),
            gps: ports::Gps::new(seed),
            faults,
            tick: 0,
            pending: BTreeMap::new(),
            made: 0,
            over: false,
        }
    }

    fn step(&mut self) {
        let Some((motion, commands)) = self.drive.step() else {
            self.over = true;
            return;
        };
        let now = ports::moment_of(self.tick);
        match motion.incident {
            Some(Incident::Lorry) => self.body.meet_lorry(),
            Some(Incident::Unplugged) => {
                self.faults.push(Fault { kind: FaultKind::Unplugged, from: now, to: now.plus(UNPLUGGED_US) });
            }
            None => {}
        }
        let reading = self.body.step(&motion);
        let mut out: Vec<Moment> = commands.into_iter().map(|command| Moment::Command { at: now, command }).collect();
        self.gauge.step(self.tick, reading, &self.faults, &mut out);
        self.gps.step(self.tick, &motion, &self.faults, &mut out);
        for moment in out {
            self.pending.insert((moment.at(), self.made), moment);
            self.made += 1;
        }
        self.tick += 1;
    }
}

impl Iterator for Outing {
    type Item = Moment;

    fn next(&mut self) -> Option<Moment> {
        // What later steps make is not earlier than their own moment.
        while !self.over && self.pending.first_key_value().is_none_or(|((at, _), _)| *at >= ports::moment_of(self.tick))
        {
            self.step();
        }
        self.pending.pop_first().map(|(_, moment)| moment)
    }
}
