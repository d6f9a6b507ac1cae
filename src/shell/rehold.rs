//! `rehold`: the same hold rule over a record again, as fast as it goes.

use super::player::Source;
use super::{Trouble, files};
use crate::config::Setup;
use crate::hold::dwell::Dwell;
use crate::pipeline::{Event, Input, Pipeline, What};
use crate::session::codec;
use crate::session::{Entry, Header, SCHEMA};
use crate::stream::command::Command;
use crate::stream::record::Told;
use crate::units::StreamTime;
use std::path::{Path, PathBuf};

/// What to do with a record.
#[derive(Clone, Debug)]
pub struct Task {
    /// The record; `-` is standard input.
    pub record: PathBuf,
    /// Where the table goes.
    pub csv: Option<PathBuf>,
    /// Where the session goes.
    pub session: Option<PathBuf>,
    /// Obey the record's own take, span and void.
    pub as_driven: bool,
}

/// What was found on the way.
#[derive(Clone, Debug, Default)]
pub struct Found {
    /// Good lines of ports, rejected ones, and those of unknown ports.
    pub lines: [u64; 3],
    /// Damaged lines of the record.
    pub damaged: u64,
    /// Full dwells, and those that could not be held.
    pub dwells: [u64; 2],
    /// Commands that are not understood.
    pub unknown_command: u64,
}

struct Run<'a> {
    setup: &'a Setup,
    pipeline: Pipeline,
    as_driven: bool,
    events: Vec<Event>,
    table: Option<csv::Writer<Vec<u8>>>,
    session: Option<String>,
    found: Found,
}

/// Re-holds a record.
///
/// # Errors
/// [`Trouble`] when the record or an output cannot be used; then no output is written.
pub fn rehold(setup: &Setup, task: &Task) -> Result<Found, Trouble> {
    if let Some(path) = task.session.as_deref().filter(|p| p.exists()) {
        let hint = "give another name; nothing was overwritten";
        return Err(Trouble::new("the session exists already").at(path.display()).hint(hint));
    }
    files::spares(task.csv.as_deref(), std::slice::from_ref(&task.record))?;
    let mut source = Source::open(&task.record, Some(&setup.rig))?;
    let mut run = Run {
        setup,
        pipeline: Pipeline::new(setup, None, false),
        as_driven: task.as_driven,
        events: Vec::new(),
        table: task.csv.as_ref().map(|_| table()),
        session: task.session.as_ref().map(|_| String::new()),
        found: Found::default(),
    };
    if !task.as_driven {
        run.pipeline.step(Input::Command { at: StreamTime::ZERO, command: Command::TakeEvery }, &mut run.events);
    }
    let progress = super::progress::Progress::new("re-holding", source.size);
    while source.next(&mut |told| run.told(&told))? {
        progress.at(source.bytes());
    }
    progress.done();
    run.pipeline.finish(&mut run.events);
    run.settle();
    run.found.damaged = source.tally().damaged;
    run.found.lines[2] = source.tally().unknown_port;
    let started = source.tally().started.clone();
    run.write(task, started)
}

impl Run<'_> {
    #[inline]
    fn told(&mut self, told: &Told<'_>) {
        match told {
            Told::Line { at, port, line } => {
                self.pipeline.step(Input::Line { port: *port, at: *at, line }, &mut self.events);
            }
            Told::Event { at, port, word } => {
                self.pipeline.step(Input::Port { port: *port, at: *at, word }, &mut self.events);
            }
            Told::Command { at, words } => match Command::parse(words) {
                Ok(command) if !self.as_driven && command.decides_what_is_kept() => {}
                Ok(command) => self.pipeline.step(Input::Command { at: *at, command }, &mut self.events),
                Err(_) => self.found.unknown_command += 1,
            },
        }
        if !self.events.is_empty() {
            self.settle();
        }
    }

    fn settle(&mut self) {
        for event in self.events.drain(..) {
            match &event.what {
                What::Entry(entry) => {
                    if let Some(session) = &mut self.session {
                        session.push_str(&codec::encode(entry));
                    }
                }
                What::Dwell { dwell, target_kmh, why, flags } => {
                    self.found.dwells[0] += 1;
                    self.found.dwells[1] += u64::from(!why.is_empty());
                    if let Some(table) = &mut self.table {
                        rows(table, self.setup, (dwell, *target_kmh), [why, flags]);
                    }
                }
                _ => {}
            }
        }
    }

    fn write(mut self, task: &Task, started: Option<String>) -> Result<Found, Trouble> {
        for port in 0..self.setup.rig.ports.len() {
            self.found.lines[0] += self.pipeline.health(port).good;
            self.found.lines[1] += self.pipeline.health(port).rejected;
        }
        if let (Some(path), Some(session)) = (&task.session, &self.session) {
            let header = header(self.setup, started);
            let mut bytes = codec::encode(&Entry::Session(Box::new(header)));
            bytes.push_str(session);
            files::write_new(path, bytes.as_bytes())?;
        }
        if let (Some(path), Some(table)) = (&task.csv, self.table) {
            let bytes = table.into_inner().expect("writing to memory cannot fail");
            files::write(Path::new(path), &bytes).inspect_err(|_| {
                // Written a moment ago, by us: of two outputs that belong together, none or both.
                task.session.iter().for_each(|session| drop(std::fs::remove_file(session)));
            })?;
        }
        Ok(self.found)
    }
}

/// The first line of a session of this program.
pub fn header(setup: &Setup, started: Option<String>) -> Header {
    Header { schema: SCHEMA.to_string(), version: env!("CARGO_PKG_VERSION").to_string(), started, setup: setup.clone() }
}

fn table() -> csv::Writer<Vec<u8>> {
    let mut table = csv::Writer::from_writer(Vec::new());
    let head =
        ["stretch", "target_kmh", "dwell", "t_start", "t_end", "channel", "n", "mean", "sd", "min", "max", "flags"];
    table.write_record(head).expect("writing to memory cannot fail");
    table
}

/// One row a channel that has a sample; flags are the channel's own and those of the whole dwell.
fn rows(table: &mut csv::Writer<Vec<u8>>, setup: &Setup, (dwell, target): (&Dwell, f64), words: [&Vec<String>; 2]) {
    for (channel, accumulator) in setup.rig.channels.iter().zip(&dwell.interval.channels) {
        let Some(s) = accumulator.finish() else { continue };
        let mut flags: Vec<&str> = words
            .into_iter()
            .flatten()
            .filter_map(|word| match word.split_once(':') {
                Some((word, name)) => (name == channel.name).then_some(word),
                None => Some(word.as_str()),
            })
            .collect();
        if !words[0].is_empty() {
            flags.push("rejected");
        }
        let interval = &dwell.interval;
        let row = [
            dwell.stretch.to_string(),
            target.to_string(),
            (dwell.k + 1).to_string(),
            interval.start.to_string(),
            interval.end.to_string(),
            channel.name.clone(),
            s.n.to_string(),
            s.mean.to_string(),
            s.sd.map(|sd| sd.to_string()).unwrap_or_default(),
            s.min.to_string(),
            s.max.to_string(),
            flags.join(" "),
        ];
        table.write_record(row).expect("writing to memory cannot fail");
    }
}
