//! The one owner of pipeline, session file and record: takes what arrives, in order, and says what came of it.

use super::journal::Journal;
use super::recorder::Recorder;
use crate::config::Setup;
use crate::pipeline::{Event, Input, Pipeline};
use crate::session::{Entry, Session};
use crate::stream::command::Command;
use crate::stream::splitter::{Piece, Splitter};
use crate::units::StreamTime;

/// Something that reached the program, stamped where it was read.
#[derive(Clone, Debug)]
pub enum Arrival {
    /// Bytes of a port, as they were read.
    Bytes {
        /// Index of the port in the rig.
        port: usize,
        /// When.
        at: StreamTime,
        /// What.
        bytes: Vec<u8>,
    },
    /// A whole line of a port, from a record or the rehearsal.
    Line {
        /// Index of the port in the rig.
        port: usize,
        /// When.
        at: StreamTime,
        /// Its bytes.
        line: Vec<u8>,
    },
    /// A port was lost or found, or cut a line.
    Port {
        /// Index of the port in the rig.
        port: usize,
        /// When.
        at: StreamTime,
        /// `lost`, `found`, `long-line`.
        word: String,
    },
    /// The person did something.
    Command {
        /// When.
        at: StreamTime,
        /// What.
        command: Command,
    },
    /// The stream is over; keys may still come.
    End,
    /// Somebody wants to leave: a key, a signal, the time that was asked for.
    Stop,
}

/// An event, and whether its segment is on a disk.
#[derive(Clone, Debug)]
pub struct Outcome {
    /// What came of an input.
    pub event: Event,
    /// For an entry: its line is on a disk. For anything else: true.
    pub on_disk: bool,
}

/// Pipeline, session file and record.
pub struct Engine {
    pipeline: Pipeline,
    splitters: Vec<Splitter>,
    journal: Journal,
    recorder: Option<Recorder>,
    /// Every good dwell is kept; what a replayed record says about keeping is passed over.
    every: bool,
    events: Vec<Event>,
    /// What is added to every stamp: a session that goes on does so after its last entry.
    shift_us: i64,
    last: StreamTime,
    /// Segments whose line is on a disk.
    pub on_disk: std::collections::BTreeSet<u32>,
}

impl Engine {
    /// Goes on after `before`; `seen` says whether anybody looks.
    pub fn new(setup: &Setup, journal: Journal, before: Option<&Session>, seen: bool) -> Self {
        let on_disk = before.iter().flat_map(|s| &s.entries).filter_map(|e| match e {
            Entry::Segment(s) => Some(s.id),
            _ => None,
        });
        Self {
            pipeline: Pipeline::new(setup, before, seen),
            splitters: setup.rig.ports.iter().map(|_| Splitter::default()).collect(),
            on_disk: on_disk.collect(),
            journal,
            recorder: None,
            every: false,
            events: Vec::new(),
            shift_us: 0,
            last: StreamTime::ZERO,
        }
    }

    /// Its ports were opened while they talked: what comes before their first line end is half a line.
    #[must_use]
    pub fn in_mid_line(mut self) -> Self {
        self.splitters.iter_mut().for_each(Splitter::skip_to_line_end);
        self
    }

    /// Moves every stamp by so much.
    #[must_use]
    pub fn shifted(self, shift_us: i64) -> Self {
        Self { shift_us, last: StreamTime::from_micros(shift_us), ..self }
    }

    /// Writes everything that arrives to a record.
    #[must_use]
    pub fn recording(self, recorder: Option<Recorder>) -> Self {
        Self { recorder, ..self }
    }

    /// Keeps every good dwell from `at` on. The record says so, and replays to the same session.
    pub fn keep_every(&mut self, at: StreamTime, out: &mut Vec<Outcome>) {
        self.every = false;
        self.command(at, Command::TakeEvery, out);
        self.every = true;
    }

    /// Takes in one arrival; what came of it is appended to `out`.
    pub fn take(&mut self, arrival: Arrival, out: &mut Vec<Outcome>) {
        match arrival {
            Arrival::Bytes { port, at, bytes } => self.bytes(port, at, &bytes, out),
            Arrival::Line { port, at, line } => {
                let at = self.stamp(at);
                self.stamped_line(port, at, &line, out);
            }
            Arrival::Port { port, at, word } => {
                let at = self.stamp(at);
                self.stamped_port(port, at, &word, out);
            }
            Arrival::Command { at, command } => self.command(at, command, out),
            Arrival::End | Arrival::Stop => {}
        }
    }

    /// Times never go back, whichever thread stamped them.
    fn stamp(&mut self, at: StreamTime) -> StreamTime {
        self.last = self.last.max(at.plus(self.shift_us));
        self.last
    }

    fn bytes(&mut self, port: usize, at: StreamTime, bytes: &[u8], out: &mut Vec<Outcome>) {
        let at = self.stamp(at);
        if bytes.is_empty() {
            return self.idle(at);
        }
        self.pipeline.heard(port, at);
        let mut splitter = std::mem::take(&mut self.splitters[port]);
        splitter.push(bytes, |piece| match piece {
            Piece::Line(line) => self.stamped_line(port, at, line, out),
            Piece::Cut(line) => {
                self.stamped_line(port, at, line, out);
                self.stamped_port(port, at, "long-line", out);
            }
        });
        self.splitters[port] = splitter;
    }

    fn stamped_line(&mut self, port: usize, at: StreamTime, line: &[u8], out: &mut Vec<Outcome>) {
        if let Some(recorder) = &mut self.recorder {
            recorder.line(at, &self.pipeline.setup().rig.ports[port].name, line);
        }
        self.pipeline.step(Input::Line { port, at, line }, &mut self.events);
        self.settle(out);
    }

    fn stamped_port(&mut self, port: usize, at: StreamTime, word: &str, out: &mut Vec<Outcome>) {
        match word {
            "lost" => self.splitters[port].reset(),
            "found" => self.splitters[port].skip_to_line_end(),
            _ => {}
        }
        if let Some(recorder) = &mut self.recorder {
            recorder.event(at, &self.pipeline.setup().rig.ports[port].name, word);
        }
        self.pipeline.step(Input::Port { port, at, word }, &mut self.events);
        self.settle(out);
    }

    fn command(&mut self, at: StreamTime, command: Command, out: &mut Vec<Outcome>) {
        let at = self.stamp(at);
        // What is obeyed is what the record's words say, so that a replay obeys the same.
        let command = Command::parse(&command.to_string()).unwrap_or(command);
        if self.every && command.decides_what_is_kept() {
            return;
        }
        if let Some(recorder) = &mut self.recorder {
            recorder.command(at, &command);
        }
        self.pipeline.step(Input::Command { at, command }, &mut self.events);
        self.settle(out);
    }

    /// Writes the entries of the last input and passes its events on.
    fn settle(&mut self, out: &mut Vec<Outcome>) {
        if self.events.is_empty() {
            return;
        }
        let events = std::mem::take(&mut self.events);
        let entries: Vec<&Entry> = events.iter().filter_map(Event::entry).collect();
        let on_disk = entries.is_empty() || self.journal.append(&entries);
        if on_disk {
            self.on_disk
                .extend(entries.iter().filter_map(|e| if let Entry::Segment(s) = e { Some(s.id) } else { None }));
        }
        out.extend(events.into_iter().map(|event| Outcome { on_disk: on_disk || event.entry().is_none(), event }));
    }

    /// Nothing arrived for a while: what is due on the record is written.
    pub fn idle(&mut self, now: StreamTime) {
        if let Some(recorder) = &mut self.recorder {
            recorder.due(now);
        }
    }

    /// The stream is over: what waits is kept, and the session gets its end.
    pub fn finish(&mut self, out: &mut Vec<Outcome>) {
        self.pipeline.finish(&mut self.events);
        self.settle(out);
        if let Some(recorder) = &mut self.recorder {
            recorder.flush();
        }
    }

    /// What is added to every stamp, µs.
    pub fn shift_us(&self) -> i64 {
        self.shift_us
    }
    /// The pipeline, for the screen.
    pub fn pipeline(&self) -> &Pipeline {
        &self.pipeline
    }
    /// The session file.
    pub fn journal(&self) -> &Journal {
        &self.journal
    }
    /// The record, if one is written.
    pub fn recorder(&self) -> Option<&Recorder> {
        self.recorder.as_ref()
    }
}
