//! A record and sessions of any length, out of the simulated van: for the benchmarks, and for the test of long sessions.

use steadytap::pipeline::{Event, Input, Pipeline};
use steadytap::session::{Entry, Session};
use steadytap::shell::rehold::header;
use steadytap::simulate::{Moment, Outing};
use steadytap::stream::command::Command;
use steadytap::stream::record::{self, Reader, Told};
use steadytap::units::StreamTime;

/// A whole simulated outing as the bytes of its record.
pub fn record() -> Vec<u8> {
    let mut out = Vec::new();
    record::write_header(&mut out, None);
    for moment in Outing::new(1) {
        match moment {
            Moment::Line { at, port, bytes } => record::write_line(&mut out, at, port, bytes.trim_ascii_end()),
            Moment::Event { at, port, word } => record::write_event(&mut out, at, port, word),
            Moment::Command { at, command } => record::write_command(&mut out, at, &command),
        }
    }
    out
}

/// Holds a record again, every dwell of it, with the person's other commands; what came of it.
pub fn rehold(record: &[u8]) -> Vec<Event> {
    let setup = steadytap::cli::van().expect("the van's files are good");
    let mut pipeline = Pipeline::new(&setup, None, false);
    let mut events = Vec::new();
    pipeline.step(Input::Command { at: StreamTime::ZERO, command: Command::TakeEvery }, &mut events);
    Reader::new(Some(&setup.rig.ports)).push(record, &mut |told| match told {
        Told::Line { at, port, line } => pipeline.step(Input::Line { port, at, line: &line }, &mut events),
        Told::Event { at, port, word } => pipeline.step(Input::Port { port, at, word: &word }, &mut events),
        Told::Command { at, words } => {
            let command = Command::parse(&words).expect("a command that was written");
            if !command.decides_what_is_kept() {
                pipeline.step(Input::Command { at, command }, &mut events);
            }
        }
    });
    pipeline.finish(&mut events);
    events
}

/// A session of just so many segments: the outing's own, over and over, each time as new passes.
pub fn session(segments: usize) -> Session {
    let setup = steadytap::cli::van().expect("the van's files are good");
    let mut entries: Vec<Entry> = rehold(&record()).iter().filter_map(|e| e.entry().cloned()).collect();
    let held = |entry: &Entry| if let Entry::Segment(s) = entry { Some((**s).clone()) } else { None };
    let own: Vec<_> = entries.iter().filter_map(held).collect();
    let last = own.last().expect("the van holds something");
    let (length_us, stretches) = (last.t1.micros(), last.stretch);
    entries.retain(|entry| !matches!(entry, Entry::Segment(_)));
    for (i, segment) in own.iter().cycle().take(segments).enumerate() {
        let (mut again, round) = (segment.clone(), i / own.len());
        again.id = u32::try_from(i + 1).expect("a short session");
        again.stretch += stretches * round as u32;
        again.t0 = again.t0.plus(length_us * round as i64);
        again.t1 = again.t1.plus(length_us * round as i64);
        entries.push(Entry::Segment(Box::new(again)));
    }
    Session { header: header(&setup, None), entries, damage: Vec::new() }
}
