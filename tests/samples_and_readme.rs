//! What the repository shows is what the program makes: the sample streams come out of the simulator, and the
//! screen and the reduction in the README out of a sample stream. `STEADYTAP_UPDATE=1` writes them anew.

use ratatui::buffer::Buffer;
use ratatui::layout::Rect;
use std::collections::BTreeSet;
use std::path::{Path, PathBuf};
use steadytap::pipeline::{Event, Input, Pipeline};
use steadytap::reduction::{Options, reduce};
use steadytap::report;
use steadytap::screen::seen::Surroundings;
use steadytap::screen::{Face, Journal, View, messages, render};
use steadytap::session::{Session, codec};
use steadytap::shell::engine::{Arrival, Engine};
use steadytap::shell::journal::Journal as SessionFile;
use steadytap::shell::recorder::Recorder;
use steadytap::shell::rehold::header;
use steadytap::simulate::{Fault, FaultKind, Moment, Outing, STARTED, Scenario};
use steadytap::stream::command::Command;
use steadytap::stream::record::{Reader, Told};
use steadytap::units::StreamTime;

fn root() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
}

fn updating() -> bool {
    std::env::var_os("STEADYTAP_UPDATE").is_some()
}

/// A file of the repository is what was made here, or is written anew.
pub fn is_as_made(name: &str, made: &[u8]) {
    let path = root().join(name);
    if updating() {
        std::fs::write(&path, made).expect("the file can be written");
    }
    let kept = std::fs::read(&path).unwrap_or_default();
    assert!(kept == made, "{name} is not what is made now; run with STEADYTAP_UPDATE=1");
}

fn at(seconds: i64) -> StreamTime {
    StreamTime::from_micros(seconds * 1_000_000)
}

/// Drives a scenario through the engine, keys included; its record and its session as bytes.
fn drive(scenario: Scenario) -> (Vec<u8>, Vec<u8>) {
    let setup = steadytap::cli::van().expect("the van's files are good");
    let directory = tempfile::tempdir().expect("a temporary directory");
    let path = directory.path().join("van.session");
    let opened = SessionFile::open(&path, &header(&setup, Some(STARTED.to_string()))).expect("a new session");
    let recorder = Recorder::beside(&path, Some(STARTED)).expect("a new record");
    let mut engine = Engine::new(&setup, opened.journal, None, false).recording(Some(recorder));
    let port = |name: &str| setup.rig.ports.iter().position(|p| p.name == name).expect("a port of the rig");
    let mut outcomes = Vec::new();
    for moment in Outing::of(scenario) {
        let arrival = match moment {
            Moment::Line { at, port: name, bytes } => Arrival::Bytes { port: port(name), at, bytes },
            Moment::Event { at, port: name, word } => Arrival::Port { port: port(name), at, word: word.to_string() },
            Moment::Command { at, command } => Arrival::Command { at, command },
        };
        engine.take(arrival, &mut outcomes);
    }
    engine.finish(&mut outcomes);
    drop(engine);
    let read = |path: &Path| std::fs::read(path).expect("a file that was just written");
    (read(&path.with_extension("record")), read(&path))
}

fn short() -> Scenario {
    Scenario { seed: 1, short: true, faults: Vec::new() }
}

/// The short outing with one of each: a stuck tap, a saturated one, hostile bytes, no fix, a cable out.
fn faulty() -> Scenario {
    let fault = |kind, from, to| Fault { kind, from: at(from), to: at(to) };
    let faults = vec![
        fault(FaultKind::Hostile, 5, 12),
        fault(FaultKind::Stuck, 30, 60),
        fault(FaultKind::Saturated, 100, 118),
        fault(FaultKind::NoFix, 150, 158),
        fault(FaultKind::Unplugged, 170, 174),
        fault(FaultKind::BadChecksum, 200, 204),
    ];
    Scenario { seed: 2, short: true, faults }
}

#[test]
fn the_sample_streams_are_what_the_simulator_sends() {
    is_as_made("sample-streams/van-short.record", &drive(short()).0);
    is_as_made("sample-streams/van-faults.record", &drive(faulty()).0);
}

/// Replays a record as driven, in chunks of so many bytes; its session lines, and every event.
fn replay(record: &[u8], chunk: usize) -> (Pipeline, Vec<Event>) {
    let setup = steadytap::cli::van().expect("the van's files are good");
    let mut pipeline = Pipeline::new(&setup, None, true);
    let mut reader = Reader::new(Some(&setup.rig.ports));
    let mut events = Vec::new();
    for piece in record.chunks(chunk) {
        reader.push(piece, &mut |told| match told {
            Told::Line { at, port, line } => pipeline.step(Input::Line { port, at, line: &line }, &mut events),
            Told::Event { at, port, word } => pipeline.step(Input::Port { port, at, word: &word }, &mut events),
            Told::Command { at, words } => {
                let command = Command::parse(&words).expect("a command that was recorded");
                pipeline.step(Input::Command { at, command }, &mut events);
            }
        });
    }
    (pipeline, events)
}

fn lines(events: &[Event]) -> String {
    events.iter().filter_map(Event::entry).map(codec::encode).collect()
}

#[test]
fn every_sample_stream_gives_the_same_session_whole_and_in_pieces() {
    for name in ["van-short.record", "van-faults.record"] {
        let record = std::fs::read(root().join("sample-streams").join(name)).expect("the sample is in the repository");
        let whole = lines(&replay(&record, record.len()).1);
        assert!(whole.contains("\"kind\":\"segment\""), "{name} keeps nothing");
        assert!(whole == lines(&replay(&record, 7).1), "{name} in 7-byte pieces differs");
        assert!(whole == lines(&replay(&record, 1).1), "{name} in 1-byte pieces differs");
    }
}

#[test]
fn a_driven_session_replays_to_the_same_bytes() {
    for scenario in [short(), faulty()] {
        let (record, session) = drive(scenario);
        let (mut pipeline, mut events) = replay(&record, 4096);
        pipeline.finish(&mut events);
        let replayed = lines(&events);
        let driven = String::from_utf8(session).expect("a session is UTF-8");
        let (_, entries) = driven.split_once('\n').expect("a session has a header");
        assert!(entries == replayed, "the replay differs from what was driven");
    }
}

// ---------------------------------------------------------------- the README

/// What stands between the fences behind a marker.
fn block<'a>(readme: &'a str, marker: &str) -> (usize, &'a str) {
    let start = readme.find(marker).unwrap_or_else(|| panic!("the README has no {marker}"));
    let open = start + readme[start..].find("```text\n").expect("a block behind the marker") + "```text\n".len();
    let close = readme[open..].find("```").expect("the block ends");
    (open, &readme[open..open + close])
}

fn shows(marker: &str, wanted: &str) {
    let path = root().join("README.md");
    let readme = std::fs::read_to_string(&path).expect("there is a README");
    let (open, have) = block(&readme, marker);
    if updating() && have != wanted {
        let rest = &readme[open + have.len()..];
        std::fs::write(&path, format!("{}{wanted}{rest}", &readme[..open])).expect("the README can be written");
        return;
    }
    assert_eq!(have, wanted, "the README's {marker} is out of date; run with STEADYTAP_UPDATE=1");
}

#[test]
fn the_screen_in_the_readme_is_the_real_one() {
    let record = std::fs::read(root().join("sample-streams/van-short.record")).expect("the sample is there");
    let until = record.windows(4).position(|w| w == b"\n47.").expect("the sample is longer than 47 s") + 1;
    let (pipeline, events) = replay(&record[..until], 4096);
    let told: Vec<_> = events.iter().filter_map(|e| messages::message(e, true)).collect();
    let journal = Journal { file: "rear-flaps.session".to_string(), trouble: None, recording: true };
    let on_disk: BTreeSet<u32> = pipeline.logbook().segments().iter().map(|s| s.id).collect();
    let around = Surroundings {
        now: pipeline.now(),
        journal,
        on_disk: &on_disk,
        messages: &told[told.len() - 1..],
        findings: None,
        workshop: None,
        ended: false,
    };
    let mut buffer = Buffer::empty(Rect::new(0, 0, 80, 24));
    render(&View::of(&pipeline, around), &Face::default(), &mut buffer);
    let rows: Vec<String> = (0..24)
        .map(|y| (0..80).map(|x| buffer[(x, y)].symbol()).collect::<String>().trim_end().to_string() + "\n")
        .collect();
    shows("<!-- screen -->", &rows.concat());
}

#[test]
fn the_reduction_in_the_readme_is_the_real_one() {
    let (_, bytes) = drive(Scenario { seed: 1, short: false, faults: Vec::new() });
    let session: Session = codec::read(&bytes).session().expect("a whole session");
    let show = session.header.setup.outing.show.clone();
    let reduction = reduce(&[session], &Options { at_kmh: Some(100.0), baseline: None }).expect("one session");
    let text = report::text(&reduction, &show);
    let parts: Vec<&str> = text.split("\n\n").collect();
    let verdicts = parts.iter().filter(|p| p.contains("driven at 100 km/h, ") && p.contains("against"));
    shows("<!-- verdicts -->", &verdicts.map(|p| format!("{}\n", p.trim_end())).collect::<Vec<_>>().join("\n"));
}
