//! The promise: whatever bytes come from a port, a file or a person, no reader panics, none believes what is no finite number, and none
//! depends on where the bytes were cut. The seeds stand in `tests/corpus`; each is read as it is and changed at random.

use crate::same_bytes_same_session::{arrivals, drive, segments, short, van};
use proptest::prelude::*;
use proptest::sample::Index;
use proptest::test_runner::{Config, TestCaseError, TestRunner};
use std::path::Path;
use steadytap::config::{self, LineFormat, Source};
use steadytap::session::{Segment, codec};
use steadytap::shell::engine::Arrival;
use steadytap::shell::speaker::wav;
use steadytap::stream::command::Command;
use steadytap::stream::splitter::{LONGEST_LINE, Piece, Splitter};
use steadytap::stream::{Decoder, record};

/// Changed copies of each seed.
const CASES: u32 = 400;

/// One change: where, how, with which byte.
type Change = (Index, u8, u8);

fn changed(seed: &[u8], changes: &[Change]) -> Vec<u8> {
    let mut bytes = seed.to_vec();
    for (place, how, byte) in changes {
        if bytes.is_empty() {
            return bytes;
        }
        let at = place.index(bytes.len());
        let run = usize::from(*byte) % 40 + 1;
        match how % 7 {
            0 => bytes[at] ^= 1 << (byte % 8),
            1 => bytes[at] = *byte,
            2 => bytes.insert(at, *byte),
            3 => bytes.truncate(at),
            4 => drop(bytes.drain(at..bytes.len().min(at + run))),
            5 => {
                let piece = bytes[at..bytes.len().min(at + run)].to_vec();
                bytes.splice(at..at, piece.repeat(usize::from(*byte) % 5));
            }
            _ => bytes.splice(at..at, SPICE[usize::from(*byte) % SPICE.len()].iter().copied()).for_each(drop),
        }
    }
    bytes
}

const SPICE: [&[u8]; 10] =
    [b"nan", b"1e999", b"-", b"\n", b"\r\n", b"\"", b"\\x", b"\x1b]0;x\x07", b"18446744073709551616", b"[[[[[[[["];

/// Reads every seed of a kind, and its changed copies, with `read`.
fn with_corpus(kind: &str, read: impl Fn(&[u8]) -> Result<(), TestCaseError>) {
    let directory = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/corpus").join(kind);
    let mut seeds: Vec<_> = std::fs::read_dir(directory).unwrap().map(|e| e.unwrap().path()).collect();
    seeds.sort();
    assert!(!seeds.is_empty(), "no seeds of {kind}");
    for path in seeds {
        let seed = std::fs::read(&path).unwrap();
        let name = path.display();
        read(&seed).unwrap_or_else(|e| panic!("{name}: {e}"));
        let config = Config { cases: CASES, failure_persistence: None, ..Config::default() };
        let changes = prop::collection::vec(any::<Change>(), 1..6);
        let done = TestRunner::new(config).run(&changes, |changes| read(&changed(&seed, &changes)));
        done.unwrap_or_else(|e| panic!("{name}: {e}"));
    }
}

fn pieces(bytes: &[u8], chunk: usize) -> Vec<Vec<u8>> {
    let (mut splitter, mut out) = (Splitter::default(), Vec::new());
    for bytes in bytes.chunks(chunk) {
        splitter.push(bytes, |piece| match piece {
            Piece::Line(line) | Piece::Cut(line) => out.push(line.to_vec()),
        });
    }
    out
}

#[test]
fn no_line_makes_a_decoder_panic_or_believe_what_is_not_finite() {
    let rig = van().rig;
    with_corpus("lines", |bytes| {
        let lines = pieces(bytes, 4096);
        prop_assert_eq!(&lines, &pieces(bytes, 7));
        prop_assert!(lines.iter().all(|line| line.len() <= LONGEST_LINE));
        for format in [LineFormat::Columns, LineFormat::Pairs, LineFormat::Json, LineFormat::Nmea] {
            let mut port = rig.ports[0].clone();
            port.format = format;
            let mut decoder = Decoder::new(&rig, &port);
            for line in &lines {
                if let Ok(values) = decoder.decode(line) {
                    prop_assert!(values.iter().flatten().all(|v| v.is_finite()), "{values:?}");
                }
            }
        }
        Ok(())
    });
}

#[test]
fn a_record_is_read_the_same_however_it_is_cut_and_its_times_never_go_back() {
    let ports = van().rig.ports;
    with_corpus("record", |bytes| {
        let read = |chunk: usize| {
            let mut reader = record::Reader::new(Some(&ports));
            let mut told = Vec::new();
            for bytes in bytes.chunks(chunk) {
                reader.push(bytes, &mut |t| {
                    let at = match &t {
                        record::Told::Line { at, .. }
                        | record::Told::Event { at, .. }
                        | record::Told::Command { at, .. } => *at,
                    };
                    told.push((at, format!("{t:?}")));
                });
            }
            reader.finish();
            (told, reader.tally)
        };
        let (told, tally) = read(4096);
        prop_assert_eq!(&(told.clone(), tally.clone()), &read(5));
        prop_assert!(told.is_sorted_by_key(|(at, _)| *at));
        prop_assert!(tally.good + tally.damaged <= tally.lines);
        Ok(())
    });
}

#[test]
fn a_session_never_gives_an_entry_that_was_not_written() {
    let seed = std::fs::read(Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/corpus/session/small")).unwrap();
    let written = codec::read(&seed);
    assert!(written.header.is_some() && written.entries.len() > 8 && written.damage.is_empty());
    with_corpus("session", |bytes| {
        let read = codec::read(bytes);
        prop_assert!(read.whole_length <= bytes.len());
        prop_assert!(read.entries.iter().all(|e| written.entries.contains(e)), "made up: {:?}", read.entries);
        prop_assert!(read.header.as_ref().is_none_or(|h| Some(h) == written.header.as_ref()));
        Ok(())
    });
}

#[test]
fn no_configuration_file_makes_a_reader_panic() {
    with_corpus("toml", |bytes| {
        let source = Source::new("a.toml".to_string(), String::from_utf8_lossy(bytes).into_owned());
        let _ = config::kind(&source);
        let _ = config::outing_head(&source);
        let lists = [config::check_rig(&source), config::check_car(&source), config::check_outing(&source)];
        for problem in lists.iter().flatten() {
            let told = format!("{problem:?}");
            prop_assert!(problem.place.line >= 1 && problem.place.column >= 1, "{told}");
            prop_assert!(!problem.what.chars().any(|c| c.is_control() && c != '\n'), "{told}");
        }
        let _ = config::setup(&source, &source, &source);
        Ok(())
    });
}

#[test]
fn no_wav_file_makes_its_reader_panic_and_what_it_gives_is_short_and_finite() {
    with_corpus("wav", |bytes| {
        if let Ok(wave) = wav::decode(bytes) {
            prop_assert!(wave.samples.iter().all(|s| s.is_finite() && s.abs() <= 0.801));
            prop_assert!(wave.samples.len() as u64 <= 5 * u64::from(wave.rate));
        }
        Ok(())
    });
}

#[test]
fn what_a_command_says_of_itself_is_the_same_command() {
    with_corpus("words", |bytes| {
        for line in String::from_utf8_lossy(bytes).lines() {
            if let Ok(command) = Command::parse(line) {
                prop_assert_eq!(Command::parse(&command.to_string()), Ok(command));
            }
        }
        Ok(())
    });
}

/// An NMEA sentence an hour later, its sum put right (NMEA 0183: XOR of what stands between `$` and `*`).
fn an_hour_later(line: &[u8]) -> Option<Vec<u8>> {
    let text = std::str::from_utf8(line).ok()?.trim_end().strip_prefix('$')?;
    let mut fields: Vec<String> = text.split('*').next()?.split(',').map(str::to_string).collect();
    let hour: u32 = fields.get(1)?.get(..2)?.parse().ok()?;
    fields[1].replace_range(..2, &format!("{:02}", (hour + 1) % 24));
    let body = fields.join(",");
    let sum = body.bytes().fold(0, |sum, b| sum ^ b);
    Some(format!("${body}*{sum:02X}\r\n").into_bytes())
}

#[test]
fn a_gps_clock_that_jumps_is_stored_and_moves_nothing_else() {
    let drive_with = |jump: bool| {
        let mut all = arrivals(&van(), short(), usize::MAX);
        let (half, mut jumped) = (all.len() / 2, 0);
        for arrival in &mut all[half..] {
            if let (true, Arrival::Bytes { bytes, .. }) = (jump, arrival)
                && let Some(later) = an_hour_later(bytes)
            {
                (*bytes, jumped) = (later, jumped + 1);
            }
        }
        let dir = tempfile::tempdir().unwrap();
        let path = dir.path().join("a.session");
        drive(&van(), &path, all);
        (segments(&crate::same_bytes_same_session::read(&path)), jumped)
    };
    let (before, (after, jumped)) = (drive_with(false).0, drive_with(true));
    let differing = before.iter().zip(&after).filter(|(a, b)| a.gps_utc != b.gps_utc).count();
    assert!(jumped > 100 && differing > 0 && differing < before.len(), "{jumped} sentences, {differing} segments");
    let without = |list: Vec<Segment>| list.into_iter().map(|s| Segment { gps_utc: None, ..s }).collect::<Vec<_>>();
    assert_eq!(without(before), without(after));
}
