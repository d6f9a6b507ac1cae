//! The live path and its replay: one input at a time in, events out.
//!
//! Lines → decoder → samples → hold → dwells, and the person's commands → `logbook` → session entries. Same inputs, same
//! entries, byte for byte: nothing in here knows the time of day, a file or a port.

pub mod health;
pub mod kept;
pub mod logbook;
pub mod plan;
pub mod refusal;

use crate::config::{Channel, Setup, Watch};
use crate::hold::dwell::{Dwell, Hold};
use crate::hold::{Rule, State};
use crate::reduction::air;
use crate::session::{Entry, Fault, Session};
use crate::signal::eye::Eye;
use crate::signal::{Sample, Wiring};
use crate::stream::command::Command;
use crate::stream::{Decoder, Reject};
use crate::units::{KMH_PER_M_S, Quantity, StreamTime};
use health::Health;
use logbook::Logbook;
use refusal::Refusal;

/// Below this ground speed the car stands, km/h.
const STANDING_KMH: f64 = 1.0;
/// Where only an airspeed is known: what a drifted q zero and a breeze may show at standstill, km/h (about 10 Pa).
const STANDING_AIRSPEED_KMH: f64 = 15.0;

/// One thing that reaches the instrument, with its stream time. Times never go back.
#[derive(Clone, Debug)]
pub enum Input<'a> {
    /// A whole line of a port.
    Line {
        /// Index of the port in the rig.
        port: usize,
        /// When its terminator was read.
        at: StreamTime,
        /// Its bytes.
        line: &'a [u8],
    },
    /// A port was lost or found, or cut a line.
    Port {
        /// Index of the port in the rig.
        port: usize,
        /// When.
        at: StreamTime,
        /// `lost`, `found`, `long-line`.
        word: &'a str,
    },
    /// The person did something.
    Command {
        /// When.
        at: StreamTime,
        /// What.
        command: Command,
    },
}

/// Something that came of an input.
#[derive(Clone, Debug)]
pub struct Event {
    /// Time of that input.
    pub at: StreamTime,
    /// What came of it.
    pub what: What,
}

impl Event {
    /// The entry, if it is one.
    pub fn entry(&self) -> Option<&Entry> {
        if let What::Entry(entry) = &self.what { Some(entry) } else { None }
    }
}

/// What an input led to.
#[derive(Clone, Debug)]
pub enum What {
    /// A line for the session file.
    Entry(Box<Entry>),
    /// A dwell is full: its values are held, unless `why` says why they cannot be.
    Dwell {
        /// The dwell.
        dwell: Box<Dwell>,
        /// Target speed, km/h.
        target_kmh: f64,
        /// `slope`, `saturated:CH`, `stale:CH`; empty for a good one.
        why: Vec<String>,
        /// `marked`, `stuck:CH` and the like.
        flags: Vec<String>,
    },
    /// The window's state changed.
    Window(State),
    /// `take` waits for the next full dwell.
    Armed,
    /// The aim is another target, km/h.
    Target(f64),
    /// A span began.
    SpanBegun,
    /// A command could not be done.
    Refused(Refusal),
}

/// The instrument without its ports, files and screen.
pub struct Pipeline {
    setup: Setup,
    decoders: Vec<Decoder>,
    wiring: Vec<Wiring>,
    hold: Hold,
    watched: usize,
    /// The ground-speed channel that tells whether the car stands, where that is not the watched one.
    standing: Option<usize>,
    logbook: Logbook,
    /// What the eye sees, by channel; empty when nobody looks.
    eyes: Vec<Eye>,
    /// Health by port.
    health: Vec<Health>,
    /// By port: its samples matter even where no window is near, to the window, the logbook or the eye.
    matters: Vec<bool>,
    /// Room for the samples of a frame.
    samples: Vec<Sample>,
    now: StreamTime,
}

impl Pipeline {
    /// Ready for the first input. `before` is the session that this run goes on with; `seen` says whether anybody looks.
    pub fn new(setup: &Setup, before: Option<&Session>, seen: bool) -> Self {
        let (rig, outing) = (&setup.rig, &setup.outing);
        let decoders: Vec<Decoder> = rig.ports.iter().map(|p| Decoder::new(rig, p)).collect();
        let wiring = decoders.iter().enumerate().map(|(i, d)| Wiring::new(rig, i, |f| d.slot(f))).collect();
        let index = |name: &str| rig.channels.iter().position(|c| c.name == name);
        let watched = index(outing.watch.channel()).expect("a checked outing watches a channel of its rig");
        let rule = Rule::new(outing, rig.channels[watched].stale_us());
        let angles = rig.channels.iter().map(|c| c.quantity == Quantity::Track).collect();
        let longest_lag = rig.channels.iter().map(crate::config::Channel::lag_us).max().unwrap_or(0);
        let eyes = if seen { rig.channels.iter().map(Eye::new).collect() } else { Vec::new() };
        let standing = match outing.watch {
            Watch::Channel(_) => None,
            Watch::Airspeed(_) => rig.channels.iter().position(|c| c.quantity == Quantity::Speed),
        };
        let matters =
            |(i, c): (usize, &Channel)| seen || i == watched || Some(i) == standing || logbook::remembered(c.quantity);
        let names: Vec<_> = rig.channels.iter().enumerate().filter(|c| matters(*c)).map(|(_, c)| &c.port).collect();
        Self {
            matters: rig.ports.iter().map(|p| names.contains(&&p.name)).collect(),
            decoders,
            wiring,
            hold: Hold::new(rule, angles, longest_lag),
            watched,
            standing,
            logbook: Logbook::new(setup, before),
            eyes,
            health: rig.ports.iter().map(|_| Health::default()).collect(),
            samples: vec![Sample::default(); rig.channels.len()],
            now: StreamTime::ZERO,
            setup: setup.clone(),
        }
    }

    /// Takes in one input and appends what came of it.
    pub fn step(&mut self, input: Input<'_>, out: &mut Vec<Event>) {
        match input {
            Input::Line { port, at, line } => self.line(port, at, line, out),
            Input::Port { port, at, word } => {
                self.advance(at, out);
                self.port_event(port, at, word, out);
            }
            Input::Command { at, command } => {
                self.advance(at, out);
                self.command(at, command, out);
            }
        }
    }

    /// The stream has ended: what was still waiting for late samples is handed out.
    pub fn finish(&mut self, out: &mut Vec<Event>) {
        let now = self.now;
        while let Some(dwell) = self.hold.due(StreamTime::NEVER) {
            self.full(now, dwell, out);
        }
        self.logbook.finish(now, out);
    }

    /// Bytes arrived at a port, whether they made lines or not; for the eye only.
    pub fn heard(&mut self, port: usize, at: StreamTime) {
        self.health[port].heard(at);
    }

    #[inline]
    fn advance(&mut self, at: StreamTime, out: &mut Vec<Event>) {
        self.now = at;
        while let Some(dwell) = self.hold.due(at) {
            self.full(at, dwell, out);
        }
        self.logbook.advance(at, out);
    }

    #[inline]
    fn line(&mut self, port: usize, at: StreamTime, line: &[u8], out: &mut Vec<Event>) {
        self.advance(at, out);
        let values = match self.decoders[port].decode(line) {
            Ok(values) if self.matters[port] || !self.hold.idle(at) || self.logbook.collecting() => values,
            Ok(_) => return self.health[port].good(at, self.decoders[port].gps().no_fix),
            Err(why) => return self.rejected(port, at, line, why),
        };
        let count = self.wiring[port].samples(at, values, &mut self.samples);
        if !self.eyes.is_empty() {
            self.wiring[port].raw(values).for_each(|(channel, raw)| self.eyes[channel].raw(raw));
        }
        let no_fix = self.decoders[port].gps().no_fix;
        self.health[port].good(at, no_fix);
        if let Some(watched) = self.samples[..count].iter().find(|s| s.channel == self.watched).copied() {
            self.watch(at, &watched, out);
        }
        let samples = &self.samples[..count];
        self.hold.frame(samples);
        match self.standing {
            None => self.logbook.frame(at, samples),
            Some(standing) => self.log_standing(at, standing, count),
        }
        if !self.eyes.is_empty() {
            self.samples[..count].iter().for_each(|s| self.eyes[s.channel].push(at, s));
        }
        self.advance(at, out);
    }

    /// Samples one by one, those behind the ground speed with what it tells.
    fn log_standing(&mut self, at: StreamTime, standing: usize, count: usize) {
        for sample in &self.samples[..count] {
            self.logbook.frame(at, std::slice::from_ref(sample));
            if sample.channel == standing {
                self.logbook.speed(at, sample.value, STANDING_KMH);
            }
        }
    }

    fn watch(&mut self, at: StreamTime, sample: &Sample, out: &mut Vec<Event>) {
        let kmh = self.watched_kmh(sample.value);
        if self.standing.is_none() {
            let airspeed = matches!(self.setup.outing.watch, Watch::Airspeed(_));
            self.logbook.speed(at, kmh, if airspeed { STANDING_AIRSPEED_KMH } else { STANDING_KMH });
        }
        let before = std::mem::discriminant(self.hold.state());
        let change = self.hold.watch(sample.t, kmh);
        if change.opened.is_some() || std::mem::discriminant(self.hold.state()) != before {
            out.push(Event { at, what: What::Window(*self.hold.state()) });
        }
    }

    /// The newest watched speed while it is fresh, km/h; none when nobody looks.
    pub fn speed_kmh(&self, now: StreamTime) -> Option<f64> {
        let eye = self.eye(self.watched).filter(|eye| !eye.stale(now))?;
        eye.latest().map(|value| self.watched_kmh(value))
    }

    /// The watched quantity in km/h: a speed as it is, a dynamic pressure as the airspeed that makes it.
    pub fn watched_kmh(&self, value: f64) -> f64 {
        match self.setup.outing.watch {
            Watch::Channel(_) => value,
            Watch::Airspeed(_) => {
                let q = (value - self.logbook.zero_of(self.watched)).max(0.0);
                (2.0 * q / air::density(&self.logbook.stated_air())).sqrt() * KMH_PER_M_S
            }
        }
    }

    #[cold]
    fn rejected(&mut self, port: usize, at: StreamTime, line: &[u8], why: Reject) {
        self.health[port].bad(at, line, why);
    }

    fn port_event(&mut self, port: usize, at: StreamTime, word: &str, out: &mut Vec<Event>) {
        self.health[port].event(at, word);
        let place = self.setup.rig.ports[port].name.clone();
        let fault = Entry::Fault(Fault { t: at, place, what: word.to_string() });
        out.push(Event { at, what: What::Entry(Box::new(fault)) });
    }

    fn command(&mut self, at: StreamTime, command: Command, out: &mut Vec<Event>) {
        if let Command::Target(kmh) = command {
            let targets = &self.hold.rule().targets_kmh;
            if !targets.contains(&kmh) {
                self.hold.add_target(kmh);
            }
        }
        self.logbook.command(at, command, out);
    }

    fn full(&mut self, at: StreamTime, dwell: Dwell, out: &mut Vec<Event>) {
        self.logbook.utc(self.decoders.iter().filter_map(|d| d.gps().utc_ms).max());
        self.logbook.full(at, dwell, self.hold.rule(), out);
    }

    /// What the outing rests on.
    pub fn setup(&self) -> &Setup {
        &self.setup
    }
    /// The speed window.
    pub fn hold(&self) -> &Hold {
        &self.hold
    }
    /// Tags, zeros, and what was kept.
    pub fn logbook(&self) -> &Logbook {
        &self.logbook
    }
    /// The eye on a channel; none when nobody looks.
    pub fn eye(&self, channel: usize) -> Option<&Eye> {
        self.eyes.get(channel)
    }
    /// Health of a port.
    pub fn health(&self, port: usize) -> &Health {
        &self.health[port]
    }
    /// Index of the watched channel.
    pub fn watched(&self) -> usize {
        self.watched
    }
    /// Time of the last input.
    pub fn now(&self) -> StreamTime {
        self.now
    }
}
