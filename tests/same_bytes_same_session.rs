//! The promise: same bytes, same session. What was driven live, its record re-held as driven, and its record driven
//! again agree to the last bit, however the bytes were cut on the way.

use std::path::{Path, PathBuf};
use std::process::{Command as Process, Stdio};
use std::sync::LazyLock;
use steadytap::config::{Air, Setup};
use steadytap::pipeline::{Event, What};
use steadytap::session::{Direction, Entry, Segment, Session, codec};
use steadytap::shell::engine::{Arrival, Engine, Outcome};
use steadytap::shell::journal::Journal;
use steadytap::shell::recorder::Recorder;
use steadytap::shell::rehold::{self, Found, Task};
use steadytap::simulate::{Moment, Outing, STARTED, Scenario};
use steadytap::stream::command::{Command, DirectionWord};
use steadytap::units::StreamTime;

static SHORT: LazyLock<Vec<Moment>> =
    LazyLock::new(|| Outing::of(Scenario { seed: 1, short: true, ..Scenario::default() }).collect());

/// The short outing: A and B, once out and once back, at 100 km/h.
pub fn short() -> &'static [Moment] {
    &SHORT
}

/// The van's rig, car and outing.
pub fn van() -> Setup {
    steadytap::cli::van().expect("the van's own files are good")
}

/// Where the van's outing file lies.
pub fn van_outing() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("configs/van-outing.toml")
}

/// The real program.
pub fn program() -> Process {
    let mut process = Process::new(env!("CARGO_BIN_EXE_steadytap"));
    process.stdin(Stdio::null());
    process
}

fn seconds(s: f64) -> StreamTime {
    StreamTime::from_micros((s * 1e6).round() as i64)
}

/// What reaches the engine when these moments happen; bytes come in pieces of at most `piece`.
pub fn arrivals(setup: &Setup, moments: &[Moment], piece: usize) -> Vec<Arrival> {
    let index = |name: &str| setup.rig.ports.iter().position(|p| p.name == name).unwrap();
    let mut out = Vec::new();
    for moment in moments {
        match moment {
            Moment::Line { at, port, bytes } => {
                out.extend(bytes.chunks(piece).map(|bytes| Arrival::Bytes {
                    port: index(port),
                    at: *at,
                    bytes: bytes.to_vec(),
                }));
            }
            Moment::Event { at, port, word } => {
                out.push(Arrival::Port { port: index(port), at: *at, word: (*word).to_string() });
            }
            Moment::Command { at, command } => out.push(Arrival::Command { at: *at, command: command.clone() }),
        }
    }
    out
}

/// Drives through the real engine into a session file, with its record beside it.
pub fn drive(setup: &Setup, session: &Path, arrivals: Vec<Arrival>) -> Vec<Outcome> {
    let header = rehold::header(setup, Some(STARTED.to_string()));
    let opened = Journal::open(session, &header).unwrap();
    let recorder = Recorder::beside(session, Some(STARTED)).unwrap();
    let mut engine = Engine::new(setup, opened.journal, opened.before.as_ref(), false).recording(Some(recorder));
    let mut outcomes = Vec::new();
    arrivals.into_iter().for_each(|arrival| engine.take(arrival, &mut outcomes));
    engine.finish(&mut outcomes);
    outcomes
}

fn rehold_to(setup: &Setup, record: &Path, session: &Path, as_driven: bool) -> Found {
    let task = Task { record: record.to_path_buf(), csv: None, session: Some(session.to_path_buf()), as_driven };
    rehold::rehold(setup, &task).unwrap()
}

/// A session file that must be whole.
pub fn read(path: &Path) -> Session {
    let session = codec::read(&std::fs::read(path).unwrap()).session().unwrap();
    assert_eq!(session.damage, []);
    session
}

/// Its segments.
pub fn segments(session: &Session) -> Vec<Segment> {
    let segment = |e: &Entry| if let Entry::Segment(s) = e { Some((**s).clone()) } else { None };
    session.entries.iter().filter_map(segment).collect()
}

/// Commands put among moments, each after everything of its time.
fn with(moments: &[Moment], commands: &[(f64, Command)]) -> Vec<Moment> {
    let mut all = moments.to_vec();
    all.extend(commands.iter().map(|(at, command)| Moment::Command { at: seconds(*at), command: command.clone() }));
    all.sort_by_key(Moment::at);
    all
}

fn refusals(outcomes: &[Outcome]) -> Vec<String> {
    let refused = |e: &Event| if let What::Refused(why) = &e.what { Some(why.to_string()) } else { None };
    outcomes.iter().filter_map(|o| refused(&o.event)).collect()
}

fn same_file(a: &Path, b: &Path) {
    let (a, b) = (std::fs::read_to_string(a).unwrap(), std::fs::read_to_string(b).unwrap());
    for (i, (a, b)) in a.lines().zip(b.lines()).enumerate() {
        let same = a.bytes().zip(b.bytes()).take_while(|(a, b)| a == b).count();
        let part = |line: &str| {
            String::from_utf8_lossy(&line.as_bytes()[same.saturating_sub(60)..]).chars().take(160).collect::<String>()
        };
        assert!(a == b, "line {} from byte {same}:\n  {}\n  {}", i + 1, part(a), part(b));
    }
    assert_eq!(a.len(), b.len());
}

#[test]
fn the_record_of_a_short_outing_gives_the_driven_session_again_byte_for_byte() {
    let (setup, dir) = (van(), tempfile::tempdir().unwrap());
    let [driven, again] = ["a.session", "b.session"].map(|name| dir.path().join(name));
    drive(&setup, &driven, arrivals(&setup, short(), usize::MAX));
    assert!(segments(&read(&driven)).len() >= 4, "the passenger takes at least one dwell a pass");
    let found = rehold_to(&setup, &dir.path().join("a.record"), &again, true);
    assert_eq!((found.damaged, found.unknown_command, found.lines[2]), (0, 0, 0));
    same_file(&driven, &again);
}

#[test]
fn the_record_of_a_full_outing_gives_the_driven_session_again_byte_for_byte() {
    let (setup, dir) = (van(), tempfile::tempdir().unwrap());
    let [driven, again] = ["a.session", "b.session"].map(|name| dir.path().join(name));
    let moments: Vec<Moment> = Outing::new(3).collect();
    drive(&setup, &driven, arrivals(&setup, &moments, usize::MAX));
    let session = read(&driven);
    assert!(segments(&session).len() >= 26, "13 blocks out and back");
    assert!(session.entries.iter().any(|e| matches!(e, Entry::Fault(f) if f.what == "lost")));
    rehold_to(&setup, &dir.path().join("a.record"), &again, true);
    same_file(&driven, &again);
}

/// Every key there is, some of them with words that a record must carry unharmed.
fn all_keys() -> Vec<(f64, Command)> {
    let taps = [("p1", "base-low"), ("p2", "base-high")].map(|(c, t)| (c.to_string(), t.to_string()));
    vec![
        (1.0, Command::Air(Air { temperature_c: -3.25, pressure_hpa: 998.7, humidity_pct: 33.3 })),
        (2.0, Command::Note("Höhenmesser \u{2192} 312 m \\x41 \\ \"quoted\" \u{1F690}\ttab".to_string())),
        (2.5, Command::Note("  two  blanks, and blanks about  ".to_string())),
        (2.6, Command::Note("two\nlines\r".to_string())),
        (2.7, Command::Note("é".repeat(700))),
        (2.8, Command::Note("cut at this blank: ".repeat(200)[..499].to_string() + " and more")),
        (3.0, Command::Target(90.0)),
        (20.0, Command::SpanBegin),
        (35.5, Command::SpanEnd),
        (40.0, Command::Mark(String::new())),
        (41.0, Command::Mark("lorry \u{7F}\u{85}".to_string())),
        (60.0, Command::Direction(DirectionWord::By(Direction::Back))),
        (80.0, Command::Direction(DirectionWord::Auto)),
        (90.0, Command::Void(1)),
        (91.0, Command::Void(1)),
        (92.0, Command::Void(99)),
        (92.5, Command::Restore(1)),
        (92.6, Command::Restore(1)),
        (93.0, Command::CorrectConfiguration(1, "C".to_string())),
        (93.5, Command::CorrectConfiguration(1, "Q".to_string())),
        (94.0, Command::CorrectDirection(1, Direction::Other)),
        (110.0, Command::Taps(taps.into())),
        (111.0, Command::Taps([("p1".to_string(), "no-such-tap".to_string())].into())),
        (112.0, Command::Configuration("C".to_string())),
        (113.0, Command::Configuration("Q".to_string())),
        (115.0, Command::Zero),
        (150.0, Command::Take),
        (150.0, Command::Take),
        (200.0, Command::SpanBegin),
    ]
}

#[test]
fn every_key_replays_to_the_same_bytes() {
    let (setup, dir) = (van(), tempfile::tempdir().unwrap());
    let [driven, again] = ["a.session", "b.session"].map(|name| dir.path().join(name));
    let outcomes = drive(&setup, &driven, arrivals(&setup, &with(short(), &all_keys()), usize::MAX));
    assert!(refusals(&outcomes).len() >= 4, "{:?}", refusals(&outcomes));
    let kinds: std::collections::BTreeSet<String> =
        read(&driven).entries.iter().filter_map(|e| codec::encode(e).split('"').nth(3).map(str::to_string)).collect();
    for kind in [
        "zero",
        "segment",
        "void",
        "restore",
        "correct",
        "mark",
        "note",
        "configuration",
        "direction",
        "taps",
        "air",
        "end",
    ] {
        assert!(kinds.contains(kind), "{kind} among {kinds:?}");
    }
    let found = rehold_to(&setup, &dir.path().join("a.record"), &again, true);
    assert_eq!(found.unknown_command, 0);
    same_file(&driven, &again);
}

#[test]
fn segments_do_not_depend_on_how_the_bytes_were_cut() {
    let (setup, dir) = (van(), tempfile::tempdir().unwrap());
    let whole = dir.path().join("whole.session");
    drive(&setup, &whole, arrivals(&setup, short(), usize::MAX));
    for piece in [1, 7] {
        let cut = dir.path().join(format!("{piece}.session"));
        drive(&setup, &cut, arrivals(&setup, short(), piece));
        same_file(&whole, &cut);
        same_file(&whole.with_extension("record"), &cut.with_extension("record"));
    }
}

/// Runs the real program on a record fed through standard input in pieces of `piece` bytes.
fn fed_through_stdin(record: &[u8], piece: usize, session: &Path) {
    use std::io::Write;
    let mut child = program()
        .args(["drive", "--stream", "-", "--unattended", "--no-record", "--fast", "max", "--session"])
        .arg(session)
        .arg(van_outing())
        .stdin(Stdio::piped())
        .stdout(Stdio::null())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    let mut stdin = child.stdin.take().unwrap();
    record.chunks(piece).for_each(|chunk| stdin.write_all(chunk).unwrap());
    drop(stdin);
    let output = child.wait_with_output().unwrap();
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
}

#[test]
fn a_record_driven_again_unattended_gives_what_rehold_gives() {
    let (setup, dir) = (van(), tempfile::tempdir().unwrap());
    let driven = dir.path().join("a.session");
    let mut keys = all_keys();
    keys.retain(|(_, c)| !matches!(c, Command::Target(_)));
    drive(&setup, &driven, arrivals(&setup, &with(short(), &keys), usize::MAX));
    let record = dir.path().join("a.record");
    let held_again = dir.path().join("b.session");
    rehold_to(&setup, &record, &held_again, false);
    let expected = segments(&read(&held_again));
    assert!(expected.len() >= 4, "at least one full dwell a pass");
    assert!(expected.iter().all(|s| s.target_kmh.is_some()), "spans are passed over where every dwell is kept");

    let bytes = std::fs::read(&record).unwrap();
    // The head of the record comes in single bytes and in sevens: a pipe may hand it over like that.
    for piece in [usize::MAX, 7, 1] {
        let session = dir.path().join(format!("pipe-{piece}.session"));
        fed_through_stdin(&bytes, piece, &session);
        assert_eq!(segments(&read(&session)), expected, "pieces of {piece}");
    }
    let session = dir.path().join("file.session");
    driven_from(&record, &session);
    assert_eq!(segments(&read(&session)), expected);
    // And the record that this drive wrote gives this drive's session again, byte for byte.
    let third = dir.path().join("third.session");
    rehold_to(&setup, &dir.path().join("file.record"), &third, true);
    same_file(&session, &third);
}

/// Drives a record as a stream, as the user would on the command line.
fn driven_from(record: &Path, session: &Path) {
    let output = program()
        .args(["drive", "--unattended", "--fast", "max", "--stream"])
        .arg(record)
        .arg("--session")
        .arg(session)
        .arg(van_outing())
        .output()
        .unwrap();
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
}

#[test]
fn a_record_without_a_head_still_gives_the_driven_session_again() {
    let (setup, dir) = (van(), tempfile::tempdir().unwrap());
    let driven = dir.path().join("a.session");
    drive(&setup, &driven, arrivals(&setup, short(), usize::MAX));
    let text = std::fs::read_to_string(dir.path().join("a.record")).unwrap();
    let bare = dir.path().join("bare.record");
    std::fs::write(&bare, text.lines().skip(2).map(|line| format!("{line}\n")).collect::<String>()).unwrap();
    let session = dir.path().join("c.session");
    driven_from(&bare, &session);
    assert_eq!(read(&session).header.started, None);
    let again = dir.path().join("d.session");
    rehold_to(&setup, &dir.path().join("c.record"), &again, true);
    same_file(&session, &again);
}

/// A small generator, so that a failure comes again.
struct Dice(u64);

impl Dice {
    fn below(&mut self, n: usize) -> usize {
        self.0 = self.0.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (self.0 >> 33) as usize % n
    }
}

#[test]
fn whatever_stands_in_a_record_it_is_re_held_without_a_crash_and_the_same_way_twice() {
    let (setup, dir) = (van(), tempfile::tempdir().unwrap());
    let first: Vec<Moment> = short().iter().take_while(|m| m.at() < seconds(60.0)).cloned().collect();
    drive(&setup, &dir.path().join("a.session"), arrivals(&setup, &with(&first, &all_keys()), usize::MAX));
    let good = std::fs::read(dir.path().join("a.record")).unwrap();
    let mut dice = Dice(7);
    let tokens: [&[u8]; 14] = [
        b"8999999999.000000 ",
        b"9000000000.000000 ",
        b"-1.000000 ",
        b"0.000001 ",
        b" @take\n",
        b" @span begin\n",
        b" @target 999.9\n",
        b" @void 4294967295\n",
        b"!gauge lost\n",
        b",1e308,-1e308",
        b"\\xZZ\\",
        b"\n\n",
        b"nan",
        b"\xFF\x00",
    ];
    for round in 0..60 {
        let mut bytes = good.clone();
        for _ in 0..=dice.below(30) {
            let place = dice.below(bytes.len());
            match dice.below(4) {
                0 => bytes[place] ^= 1 << dice.below(8),
                1 => {
                    let token = tokens[dice.below(tokens.len())];
                    bytes.splice(place..place, token.iter().copied());
                }
                2 => drop(bytes.drain(place..(place + dice.below(400)).min(bytes.len()))),
                // At the beginning of a line, where a token is a head.
                _ => {
                    let start = bytes[..place].iter().rposition(|c| *c == b'\n').map_or(0, |i| i + 1);
                    let token = tokens[dice.below(5)];
                    bytes.splice(start..start, token.iter().copied());
                }
            }
        }
        let record = dir.path().join("odd.record");
        std::fs::write(&record, &bytes).unwrap();
        let sessions = [1, 2].map(|n| dir.path().join(format!("{round}-{n}.session")));
        let as_driven = round % 2 == 0;
        for session in &sessions {
            rehold_to(&setup, &record, session, as_driven);
        }
        read(&sessions[0]);
        same_file(&sessions[0], &sessions[1]);
        sessions.iter().for_each(|session| std::fs::remove_file(session).unwrap());
    }
}
