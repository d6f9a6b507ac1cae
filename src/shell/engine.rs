//! The one owner of pipeline, session file and record: takes what arrives, in order, and says what came of it.

use super::journal::Journal;
use super::recorder::Recorder;
use super::space::{Judgement, Space};
use crate::config::Setup;
use crate::pipeline::{Event, Input, Pipeline, What};
use crate::session::{Entry, Fault, Session};
use crate::stream::command::Command;
use crate::stream::splitter::{Piece, Splitter};
use crate::units::StreamTime;
use std::time::Instant;

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
    /// It was handed out before, when its line was on no disk yet.
    pub again: bool,
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
    /// Segments that wait in memory for a disk.
    waiting: Vec<Event>,
    space: Space,
    /// What became of records that stopped.
    stopped: Vec<String>,
    /// Bytes of records before the present one.
    recorded: u64,
    notices: Vec<String>,
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
            waiting: Vec::new(),
            space: Space::new(&setup.rig),
            stopped: Vec::new(),
            recorded: 0,
            notices: Vec::new(),
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
        if !on_disk {
            self.waiting.extend(events.iter().filter(|e| segment(e).is_some()).cloned());
        } else if !entries.is_empty() {
            self.on_disk.extend(events.iter().filter_map(segment));
            self.landed(out);
        }
        let outcome = |event: Event| Outcome { on_disk: on_disk || event.entry().is_none(), event, again: false };
        out.extend(events.into_iter().map(outcome));
    }

    /// What waited in memory is on a disk now.
    fn landed(&mut self, out: &mut Vec<Outcome>) {
        self.on_disk.extend(self.waiting.iter().filter_map(segment));
        out.extend(self.waiting.drain(..).map(|event| Outcome { event, on_disk: true, again: true }));
    }

    /// Looks after disk and record; to be called several times a second.
    pub fn look_after(&mut self, now: Instant, out: &mut Vec<Outcome>) {
        self.tell_of_record(out);
        if !self.space.due(now) {
            return;
        }
        if !self.journal.all_on_disk() && self.journal.append(&[]) {
            self.landed(out);
        }
        let Some(free) = self.recorder.as_ref().and_then(|r| self.journal.storage().free_space(r.path())) else {
            return;
        };
        let recorded = self.recorder.as_ref().filter(|r| r.trouble().is_none()).map(|r| self.recorded + r.written());
        match self.space.judge(now, free, recorded) {
            Judgement::Fine => {}
            Judgement::Low(words) => self.notices.push(words),
            Judgement::Stop => {
                self.recorder.iter_mut().for_each(Recorder::give_way);
                self.tell_of_record(out);
            }
            Judgement::Room => self.record_again(out),
        }
    }

    /// A record that stopped is an event, once.
    fn tell_of_record(&mut self, out: &mut Vec<Outcome>) {
        let trouble = self.recorder.as_ref().and_then(Recorder::trouble);
        if let Some(trouble) = trouble.filter(|t| self.stopped.last().is_none_or(|told| told != t)) {
            self.stopped.push(trouble.to_string());
            self.fault("record", "stopped", out);
        }
    }

    /// There is room again: the next record begins here.
    fn record_again(&mut self, out: &mut Vec<Outcome>) {
        let Some(old) = self.recorder.as_ref().filter(|r| r.waits_for_space()) else { return };
        let Ok(mut new) = old.another() else { return };
        if self.every {
            new.command(self.last, &Command::TakeEvery);
        }
        self.recorded += old.written();
        self.recorder = Some(new);
        self.fault("record", "resumed", out);
    }

    fn fault(&mut self, place: &str, what: &str, out: &mut Vec<Outcome>) {
        let fault = Fault { t: self.last, place: place.to_string(), what: what.to_string() };
        self.events.push(Event { at: self.last, what: What::Entry(Box::new(Entry::Fault(fault))) });
        self.settle(out);
    }

    /// What should be said, beside events, since the last call.
    pub fn notices(&mut self) -> Vec<String> {
        std::mem::take(&mut self.notices)
    }

    /// Records that stopped, in words.
    pub fn stopped(&self) -> &[String] {
        &self.stopped
    }

    /// Nothing arrived for a while: what is due on the record is written.
    pub fn idle(&mut self, now: StreamTime) {
        if let Some(recorder) = &mut self.recorder {
            recorder.due(now);
        }
    }

    /// The stream is over: what waits is kept, and the session gets its end.
    pub fn finish(&mut self, out: &mut Vec<Outcome>) {
        if let Some(recorder) = &mut self.recorder {
            recorder.flush();
        }
        self.tell_of_record(out);
        self.pipeline.finish(&mut self.events);
        self.settle(out);
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

/// The number of a segment.
fn segment(event: &Event) -> Option<u32> {
    if let Some(Entry::Segment(s)) = event.entry() { Some(s.id) } else { None }
}
