//! Where arrivals come from: ports, a record, or the simulated van; each on threads of its own.

use super::Trouble;
use super::clock::StreamClock;
use super::engine::Arrival;
use super::going_on::EndsRun;
use super::player::{Pace, Source};
use super::serial;
use crate::config::Rig;
use crate::simulate::{self, Moment};
use crate::stream::record::Tally;
use crate::units::StreamTime;
use std::sync::mpsc::{self, Receiver, SyncSender};
use std::thread::JoinHandle;

/// Arrivals of a record that wait for the engine; ports wait without a limit, they cannot be held up.
const AHEAD: usize = 4096;

/// Where arrivals go.
#[derive(Clone)]
pub enum Sender {
    /// Never blocks.
    Free(mpsc::Sender<Arrival>),
    /// Blocks when the engine is behind.
    Bounded(SyncSender<Arrival>),
}

impl Sender {
    /// False when nobody listens any more.
    pub fn send(&self, arrival: Arrival) -> bool {
        match self {
            Self::Free(sender) => sender.send(arrival).is_ok(),
            Self::Bounded(sender) => sender.send(arrival).is_ok(),
        }
    }
}

/// A source that has not started yet.
pub enum Feed {
    /// Open serial ports.
    Ports(Vec<serial::Reader>),
    /// A record.
    Record(Box<Source>, Pace),
    /// The simulated van.
    Van(Box<simulate::Outing>, Pace),
}

/// A source that is running.
pub struct Running {
    /// Arrivals in order.
    pub arrivals: Receiver<Arrival>,
    /// For keys and signals.
    pub sender: Sender,
    /// The world's clock, for sources that have no time of their own.
    pub clock: Option<StreamClock>,
    /// What the record held beside good lines, once it was played.
    pub played: Option<JoinHandle<Result<Tally, Trouble>>>,
}

impl Feed {
    /// Starts the threads.
    pub fn start(self, rig: &Rig) -> Running {
        match self {
            Self::Ports(readers) => ports(readers),
            Self::Record(source, pace) => record(source, pace),
            Self::Van(outing, pace) => van(*outing, pace, rig.clone()),
        }
    }
}

fn ports(readers: Vec<serial::Reader>) -> Running {
    let (sender, arrivals) = mpsc::channel();
    let clock = StreamClock::start(StreamTime::ZERO, Some(1.0));
    for reader in readers {
        let sender = sender.clone();
        std::thread::spawn(move || {
            let _guard = EndsRun(Sender::Free(sender.clone()));
            reader.run(clock, |arrival| sender.send(arrival).is_ok());
        });
    }
    Running { arrivals, sender: Sender::Free(sender), clock: Some(clock), played: None }
}

fn record(mut source: Box<Source>, pace: Pace) -> Running {
    let (sender, arrivals) = mpsc::sync_channel(AHEAD);
    let to = sender.clone();
    let played = std::thread::spawn(move || {
        let _guard = EndsRun(Sender::Bounded(to.clone()));
        let played = source.play(pace, &mut |arrival| to.send(arrival).is_ok());
        let _ = to.send(Arrival::End);
        played.map(|()| source.tally().clone())
    });
    Running { arrivals, sender: Sender::Bounded(sender), clock: None, played: Some(played) }
}

fn van(outing: simulate::Outing, pace: Pace, rig: Rig) -> Running {
    let (sender, arrivals) = mpsc::sync_channel(AHEAD);
    let to = sender.clone();
    std::thread::spawn(move || {
        let _guard = EndsRun(Sender::Bounded(to.clone()));
        let clock = StreamClock::start(StreamTime::ZERO, pace.speed());
        for moment in outing {
            let Some((at, arrival)) = van_arrival(&rig, moment) else { continue };
            if let Some(wait) = clock.until(at) {
                std::thread::sleep(wait);
            }
            if to.send(arrival).is_err() {
                return;
            }
        }
        let _ = to.send(Arrival::End);
    });
    Running { arrivals, sender: Sender::Bounded(sender), clock: None, played: None }
}

/// The van sends bytes, and they go through the same splitter and decoder as a port's.
fn van_arrival(rig: &Rig, moment: Moment) -> Option<(StreamTime, Arrival)> {
    let index = |name: &str| rig.ports.iter().position(|p| p.name == name);
    Some(match moment {
        Moment::Line { at, port, bytes } => (at, Arrival::Bytes { port: index(port)?, at, bytes }),
        Moment::Event { at, port, word } => (at, Arrival::Port { port: index(port)?, at, word: word.to_string() }),
        Moment::Command { at, command } => (at, Arrival::Command { at, command }),
    })
}
