//! The promise: on live ports nothing that was said to be kept is lost, whatever is pulled out, killed or garbled; and
//! the screen always gives the terminal back. The ports are pairs of pseudo-terminals made here.
#![cfg(unix)]

use crate::same_bytes_same_session::{program, read, segments, van, van_outing};
use portable_pty::{CommandBuilder, PtySize, native_pty_system};
use std::fs::File;
use std::io::{BufRead, BufReader, Read, Write};
use std::path::{Path, PathBuf};
use std::process::{Child, Command as Process, Stdio};
use std::sync::{Arc, Mutex};
use std::time::{Duration, Instant};
use steadytap::pipeline::health::Condition;
use steadytap::session::{Entry, codec};
use steadytap::shell::engine::{Arrival, Engine};
use steadytap::shell::journal::Journal;
use steadytap::shell::rehold;
use steadytap::units::StreamTime;

const RIG: &str = r#"
steadytap = "rig 1"
[[port]]
name = "gauge"
device = "GAUGE"
baud = 115200
format = "columns"
columns = ["ms", "p1", "q"]
[[port]]
name = "gps"
device = "GPS"
baud = 9600
format = "nmea"
[[channel]]
name = "p1"
from = "gauge.p1"
quantity = "pressure"
unit = "Pa"
stale_s = 0.15
[[channel]]
name = "q"
from = "gauge.q"
quantity = "dynamic-pressure"
unit = "Pa"
stale_s = 0.15
[[channel]]
name = "speed"
from = "gps.speed"
quantity = "speed"
unit = "km/h"
stale_s = 0.5
[[channel]]
name = "track"
from = "gps.track"
quantity = "track"
unit = "deg"
"#;

const OUTING: &str = r#"
steadytap = "outing 1"
title = "Live ports (invented)"
rig = "rig.toml"
car = "van.toml"
watch = "speed"
targets_kmh = [100.0]
tolerance_kmh = 2.0
settle_s = 0.1
dwell_s = 0.3
out_track_deg = 90.0
passes = 2
resolve_pa = 5.0
[air]
temperature_c = 18.0
pressure_hpa = 1011.0
humidity_pct = 60.0
[[configuration]]
letter = "A"
name = "bare doors"
baseline = true
[[configuration]]
letter = "B"
name = "flaps"
[taps]
p1 = "base-high"
"#;

/// How long anything may take before a test gives up on it.
pub const PATIENCE: Duration = Duration::from_secs(10);

/// A cable's far end; `link` is where the near end is found. No child inherits it, so that dropping it pulls the cable.
fn plug(link: &Path) -> File {
    use rustix::pty::{OpenptFlags, grantpt, openpt, ptsname, unlockpt};
    let master = openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY | OpenptFlags::CLOEXEC).unwrap();
    grantpt(&master).unwrap();
    unlockpt(&master).unwrap();
    let device = ptsname(&master, Vec::new()).unwrap().into_string().unwrap();
    let beside = link.with_extension("new");
    std::os::unix::fs::symlink(device, &beside).unwrap();
    std::fs::rename(&beside, link).unwrap();
    File::from(master)
}

pub fn signal(kind: &str, pid: u32) {
    assert!(Process::new("kill").args([kind, &pid.to_string()]).status().unwrap().success());
}

pub fn wait_for<T>(what: &str, mut found: impl FnMut() -> Option<T>) -> T {
    let deadline = Instant::now() + PATIENCE;
    loop {
        if let Some(found) = found() {
            return found;
        }
        assert!(Instant::now() < deadline, "waited in vain for {what}");
        std::thread::sleep(Duration::from_millis(5));
    }
}

/// Lines that a running program has printed so far.
pub type Lines = Arc<Mutex<Vec<String>>>;

pub fn gather(from: impl Read + Send + 'static) -> (Lines, std::thread::JoinHandle<()>) {
    let lines = Lines::default();
    let to = lines.clone();
    let reader = std::thread::spawn(move || {
        let mut from = BufReader::new(from);
        let mut line = String::new();
        while from.read_line(&mut line).is_ok_and(|n| n > 0) {
            // Only what was said to the end was said.
            if line.ends_with('\n') {
                to.lock().unwrap().push(line.trim_end().to_string());
            }
            line.clear();
        }
    });
    (lines, reader)
}

/// The bench: two cables and the files.
pub struct Bench {
    pub dir: tempfile::TempDir,
    gauge: Option<File>,
    gps: Option<File>,
    tick: u64,
    started: Instant,
}

impl Bench {
    pub fn new() -> Self {
        let dir = tempfile::tempdir().unwrap();
        let link = |name: &str| dir.path().join(name);
        let (gauge, gps) = (plug(&link("tty-gauge")), plug(&link("tty-gps")));
        let rig = RIG.replace("GAUGE", link("tty-gauge").to_str().unwrap());
        std::fs::write(link("rig.toml"), rig.replace("GPS", link("tty-gps").to_str().unwrap())).unwrap();
        std::fs::write(link("outing.toml"), OUTING).unwrap();
        std::fs::copy(van_outing().with_file_name("van.toml"), link("van.toml")).unwrap();
        Self { dir, gauge: Some(gauge), gps: Some(gps), tick: 0, started: Instant::now() }
    }

    pub fn path(&self, name: &str) -> PathBuf {
        self.dir.path().join(name)
    }

    /// The record of `a.session`, held again as driven, makes the same bytes.
    pub fn replays_as_driven(&self) {
        let again = program()
            .args(["rehold", "a.record", "outing.toml", "--as-driven", "--session", "b.session"])
            .current_dir(self.dir.path())
            .output()
            .unwrap();
        assert!(again.status.success(), "{}", String::from_utf8_lossy(&again.stderr));
        let [a, b] = ["a.session", "b.session"].map(|name| std::fs::read(self.path(name)).unwrap());
        assert!(a == b, "not the same bytes");
    }

    fn gauge_line(&self) -> String {
        let wobble = (self.tick % 7) as f64;
        format!("{},{:.2},{:.2}\r\n", self.tick * 5, -90.0 + wobble, 471.0 - wobble)
    }

    /// One step of 5 ms: a line of the gauge, and of the GPS with every tenth.
    pub fn step(&mut self) {
        let line = self.gauge_line();
        if let Some(gauge) = &mut self.gauge {
            gauge.write_all(line.as_bytes()).unwrap();
        }
        if let Some(gps) = self.gps.as_mut().filter(|_| self.tick.is_multiple_of(10)) {
            let body = format!("GPRMC,091203.{:02},A,4500.00,N,03000.00,W,54.0,90.0,140626,,,A", self.tick / 10 % 100);
            let sum = body.bytes().fold(0, |sum, b| sum ^ b);
            gps.write_all(format!("${body}*{sum:02X}\r\n").as_bytes()).unwrap();
        }
        self.tick += 1;
        let due = self.started + Duration::from_millis(5 * self.tick);
        std::thread::sleep(due.saturating_duration_since(Instant::now()));
    }

    /// Time has passed in which nothing was fed.
    pub fn skip(&mut self) {
        self.started = Instant::now() - Duration::from_millis(5 * self.tick);
    }

    pub fn feed_until(&mut self, what: &str, mut done: impl FnMut() -> bool) {
        let deadline = Instant::now() + PATIENCE;
        while !done() {
            assert!(Instant::now() < deadline, "waited in vain for {what}");
            self.step();
        }
    }
}

/// `drive … --unattended` on the bench.
pub struct Drive {
    pub child: Child,
    pub lines: Lines,
    reader: std::thread::JoinHandle<()>,
}

impl Drive {
    pub fn start(bench: &mut Bench, session: &str, extra: &[&str]) -> Self {
        let home = bench.path("home");
        Self::start_in(bench, session, extra, &home)
    }

    /// With its data directory in `home`.
    pub fn start_in(bench: &mut Bench, session: &str, extra: &[&str], home: &Path) -> Self {
        let mut child = program()
            .env("XDG_DATA_HOME", home)
            .args(["drive", "outing.toml", "--unattended", "--session", session])
            .args(extra)
            .current_dir(bench.dir.path())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap();
        let (lines, reader) = gather(child.stdout.take().unwrap());
        // The record is made last, when both ports are open.
        wait_for("the record", || bench.path(session).with_extension("record").exists().then_some(()));
        bench.started = Instant::now() - Duration::from_millis(5 * bench.tick);
        Self { child, lines, reader }
    }

    pub fn said(&self, word: &str) -> usize {
        self.lines.lock().unwrap().iter().filter(|line| line.contains(word)).count()
    }

    /// Waits until it has ended: its status, what it said, what it complained of.
    pub fn end(mut self) -> (Option<i32>, Vec<String>, String) {
        let status = wait_for("the end", || self.child.try_wait().unwrap());
        self.reader.join().unwrap();
        let mut err = String::new();
        self.child.stderr.take().unwrap().read_to_string(&mut err).unwrap();
        (status.code(), std::mem::take(&mut self.lines.lock().unwrap()), err)
    }
}

pub fn ids_said(lines: &[String]) -> Vec<u32> {
    let words = lines.iter().map(|line| line.split(' ').collect::<Vec<_>>());
    words.filter(|w| w.get(1) == Some(&"kept")).map(|w| w[2].parse().unwrap()).collect()
}

pub fn ids_in(path: &Path) -> Vec<u32> {
    let contents = codec::read(&std::fs::read(path).unwrap());
    contents.entries.iter().filter_map(|e| if let Entry::Segment(s) = e { Some(s.id) } else { None }).collect()
}

#[test]
fn a_live_drive_keeps_what_its_record_replays_to() {
    let mut bench = Bench::new();
    let mut drive = Drive::start(&mut bench, "a.session", &["--for", "2"]);
    let ended = {
        let child = &mut drive.child;
        let mut ended = false;
        bench.feed_until("--for", || {
            ended = child.try_wait().unwrap().is_some();
            ended
        });
        ended
    };
    assert!(ended);
    let (status, said, err) = drive.end();
    assert_eq!(status, Some(0), "{err}");
    let kept = ids_said(&said);
    assert!(kept.len() >= 3, "{said:?}");
    assert_eq!(ids_in(&bench.path("a.session")), kept);
    let session = read(&bench.path("a.session"));
    assert!(matches!(session.entries.last(), Some(Entry::End(_))));
    for segment in segments(&session) {
        assert_eq!(segment.direction.word(), "out");
        let gauge = segment.channels["p1"].n;
        assert!((40..=75).contains(&gauge), "200 lines a second for 0.3 s are 60, not {gauge}");
    }
    bench.replays_as_driven();
}

#[test]
fn a_cable_pulled_in_mid_line_is_lost_and_found_and_no_segment_crosses_it() {
    let mut bench = Bench::new();
    let drive = Drive::start(&mut bench, "a.session", &[]);
    bench.feed_until("a segment", || drive.said(" kept ") >= 1);
    let line = bench.gauge_line();
    bench.gauge.as_mut().unwrap().write_all(&line.as_bytes()[..line.len() / 2]).unwrap();
    // Let it be read before it is torn out: a pair forgets what was not read.
    std::thread::sleep(Duration::from_millis(30));
    bench.gauge = None;
    bench.feed_until("lost", || drive.said(" lost gauge") == 1);
    let mut gauge = plug(&bench.path("tty-gauge"));
    bench.feed_until("found", || drive.said(" found gauge") == 1);
    gauge.write_all(b"1.25,333.00\r\n").unwrap(); // the rest of a line that began before
    bench.gauge = Some(gauge);
    let before = drive.said(" kept ");
    bench.feed_until("more segments", || drive.said(" kept ") >= before + 2);
    signal("-TERM", drive.child.id());
    let (status, said, err) = drive.end();
    assert_eq!(status, Some(3), "{err}");
    assert!(err.contains("port gauge was lost 1 times"), "{err}");
    let session = read(&bench.path("a.session"));
    assert_eq!(ids_said(&said), segments(&session).iter().map(|s| s.id).collect::<Vec<_>>());
    let fault = |word: &str| {
        session.entries.iter().find_map(|e| match e {
            Entry::Fault(f) if f.what == word && f.place == "gauge" => Some(f.t),
            _ => None,
        })
    };
    let (lost, found) = (fault("lost").unwrap(), fault("found").unwrap());
    let stale_us = 150_000;
    for s in segments(&session) {
        let apart = s.t1 <= lost.plus(stale_us) || s.t0 >= found.plus(-stale_us);
        assert!(apart, "segment {} from {} to {} lies across {lost} to {found}", s.id, s.t0, s.t1);
        assert!(s.channels["q"].max <= 471.0 && s.channels["q"].min >= 465.0, "a torn line was believed");
    }
    let record = std::fs::read_to_string(bench.path("a.record")).unwrap();
    assert!(record.contains("!gauge lost\n") && record.contains("!gauge found\n"));
    assert!(!record.contains("333.00"), "half a line stands in the record");
    let again = program()
        .args(["rehold", "a.record", "outing.toml", "--as-driven", "--session", "b.session"])
        .current_dir(bench.dir.path())
        .output()
        .unwrap();
    assert!(again.status.success());
    let [a, b] = ["a.session", "b.session"].map(|name| std::fs::read(bench.path(name)).unwrap());
    assert!(a == b, "not the same bytes");
}

#[test]
fn a_port_opened_in_mid_line_believes_no_half_line() {
    let mut bench = Bench::new();
    // Fewer columns: a half line could pass for a whole one, were its first number cut.
    let rig = std::fs::read_to_string(bench.path("rig.toml")).unwrap();
    std::fs::write(bench.path("rig.toml"), rig.replace("\"ms\", \"p1\", \"q\"", "\"p1\", \"q\"")).unwrap();
    let drive = Drive::start(&mut bench, "a.session", &[]);
    let gauge = bench.gauge.as_mut().unwrap();
    gauge.write_all(b"1.00,7777.00\r\n").unwrap(); // was -31.00
    for _ in 0..20 {
        gauge.write_all(b"-31.00,470.00\r\n").unwrap();
    }
    wait_for("the record", || {
        let record = std::fs::read_to_string(bench.path("a.record")).unwrap();
        record.contains("-31.00,470.00").then_some(())
    });
    signal("-TERM", drive.child.id());
    drive.end();
    let record = std::fs::read_to_string(bench.path("a.record")).unwrap();
    assert!(!record.contains("7777.00"), "{record}");
}

#[test]
fn sigterm_and_sigint_end_a_drive_in_order() {
    for kind in ["-TERM", "-INT", "-HUP"] {
        let mut bench = Bench::new();
        let drive = Drive::start(&mut bench, "a.session", &[]);
        bench.feed_until("a segment", || drive.said(" kept ") >= 1);
        signal(kind, drive.child.id());
        let (status, said, err) = drive.end();
        assert_eq!(status, Some(0), "{kind}: {err}");
        assert!(said.iter().any(|line| line.ends_with(" end")), "{kind}: {said:?}");
        let session = read(&bench.path("a.session"));
        assert!(matches!(session.entries.last(), Some(Entry::End(_))), "{kind}");
        assert!(said.last().unwrap().starts_with("record /"), "{kind}: {said:?}");
        assert!(said.iter().any(|line| line.starts_with("session /")), "{kind}: {said:?}");
    }
}

/// Kills at moments that a small generator deals out, on live ports and on the simulated van.
#[test]
fn whatever_was_said_to_be_kept_before_a_kill_is_in_the_file() {
    let mut state = 0x9E37_79B9_u64;
    let mut below = |n: u64| {
        state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (state >> 33) % n
    };
    let mut kept_in_all = 0;
    for round in 0..200 {
        let dir = tempfile::tempdir().unwrap();
        let path = dir.path().join("a.session");
        let mut child = program()
            .args(["rehearse", "--unattended", "--fast", "max", "--seed", &round.to_string(), "--session"])
            .arg(&path)
            .stdout(Stdio::piped())
            .stderr(Stdio::null())
            .spawn()
            .unwrap();
        let (lines, reader) = gather(child.stdout.take().unwrap());
        let enough = below(12) as usize;
        wait_for("segments", || (ids_said(&lines.lock().unwrap()).len() > enough).then_some(()));
        std::thread::sleep(Duration::from_micros(below(20_000)));
        child.kill().unwrap();
        child.wait().unwrap();
        reader.join().unwrap();
        kept_in_all += survived(&path, &lines.lock().unwrap());
        let opened = Journal::open(&path, &rehold::header(&van(), None)).map(|o| o.before.unwrap().damage);
        let damage = opened.expect("a killed session can be gone on with");
        assert!(damage.iter().all(|d| d.what == steadytap::session::DamageKind::Torn), "{damage:?}");
    }
    for _ in 0..4 {
        let mut bench = Bench::new();
        let mut drive = Drive::start(&mut bench, "a.session", &[]);
        let enough = below(3) as usize;
        bench.feed_until("segments", || drive.said(" kept ") > enough);
        (0..below(60)).for_each(|_| bench.step());
        drive.child.kill().unwrap();
        let path = bench.path("a.session");
        let (_, said, _) = drive.end();
        kept_in_all += survived(&path, &said);
    }
    assert!(kept_in_all >= 600, "only {kept_in_all} segments were tried");
}

fn survived(path: &Path, said: &[String]) -> usize {
    let (said, found) = (ids_said(said), ids_in(path));
    assert!(found.starts_with(&said), "said {said:?}, in the file {found:?}");
    assert!(found.len() <= said.len() + 1, "an entry is said before the next is written");
    said.len()
}

// ---------------------------------------------------------------- a wrong speed

/// The engine on the van's rig, with nothing but noise on its gauge.
fn condition_after(seconds: f64, noise: impl Fn(u64) -> Vec<u8>) -> Condition {
    let dir = tempfile::tempdir().unwrap();
    let journal = Journal::open(&dir.path().join("a.session"), &rehold::header(&van(), None)).unwrap().journal;
    let mut engine = Engine::new(&van(), journal, None, true);
    let mut out = Vec::new();
    let mut at = StreamTime::from_micros(1_000_000);
    let begin = at;
    let mut n = 0;
    while at.since(begin) as f64 <= seconds * 1e6 {
        engine.take(Arrival::Bytes { port: 0, at, bytes: noise(n) }, &mut out);
        (at, n) = (at.plus(20_000), n + 1);
    }
    engine.pipeline().health(0).condition(at)
}

#[test]
fn a_wrong_speed_is_told_within_three_seconds() {
    let byte = |n: u64, i: u64| (n.wrapping_mul(31).wrapping_add(i.wrapping_mul(2_654_435_761)) >> 5) as u8 | 0x80;
    let without_end = |n: u64| (0..40).map(|i| byte(n, i)).collect::<Vec<u8>>();
    let with_ends = |n: u64| [without_end(n), b"\n".to_vec()].concat();
    let good = |n: u64| format!("{n},1,2,3,4,5,471,18,1011,60\r\n").into_bytes();
    assert_eq!(condition_after(2.9, without_end), Condition::CheckBaud);
    assert_eq!(condition_after(2.9, with_ends), Condition::CheckBaud);
    assert_eq!(condition_after(2.9, good), Condition::Good);
    assert_ne!(condition_after(0.5, with_ends), Condition::CheckBaud, "not at once: a port may begin in mid-line");
}

#[test]
fn a_port_of_noise_makes_status_three() {
    let mut bench = Bench::new();
    let drive = Drive::start(&mut bench, "a.session", &[]);
    for _ in 0..30 {
        bench.gauge.as_mut().unwrap().write_all(b"\x80\x9b1mP\xff\xfe\x00\x1b[2J\n").unwrap();
    }
    wait_for("the record", || {
        std::fs::read_to_string(bench.path("a.record")).unwrap().contains("\\x1B[2J").then_some(())
    });
    signal("-TERM", drive.child.id());
    let (status, said, err) = drive.end();
    assert_eq!(status, Some(3), "{err}");
    assert!(err.contains("lines of port gauge were rejected"), "{err}");
    assert!(said.iter().all(|line| !line.contains('\u{1b}')) && !err.contains('\u{1b}'));
}

// ---------------------------------------------------------------- the screen

/// The program in a terminal of 80 × 24.
pub struct Terminal {
    pub child: Box<dyn portable_pty::Child + Send + Sync>,
    keys: Box<dyn Write + Send>,
    pub seen: Arc<Mutex<(vt100::Parser, Vec<u8>)>>,
    reader: std::thread::JoinHandle<()>,
    home: tempfile::TempDir,
    _master: Box<dyn portable_pty::MasterPty + Send>,
}

impl Terminal {
    pub fn start(words: &[&str], environment: &[(&str, &str)]) -> Self {
        let home = tempfile::tempdir().unwrap();
        let pair =
            native_pty_system().openpty(PtySize { rows: 24, cols: 80, pixel_width: 0, pixel_height: 0 }).unwrap();
        let mut command = CommandBuilder::new(env!("CARGO_BIN_EXE_steadytap"));
        command.args(words);
        command.env_remove("NO_COLOR");
        for (name, value) in [
            ("TERM", "xterm-256color"),
            ("LANG", "C.UTF-8"),
            ("LC_ALL", "C.UTF-8"),
            ("HOME", home.path().to_str().unwrap()),
        ] {
            command.env(name, value);
        }
        command.env("XDG_DATA_HOME", home.path().join("data"));
        // The cautions of the first start were seen.
        std::fs::create_dir_all(home.path().join("data/steadytap")).unwrap();
        std::fs::write(home.path().join("data/steadytap/cautions-seen"), "").unwrap();
        environment.iter().for_each(|(name, value)| command.env(name, value));
        let child = pair.slave.spawn_command(command).unwrap();
        drop(pair.slave);
        let keys = pair.master.take_writer().unwrap();
        let mut output = pair.master.try_clone_reader().unwrap();
        let seen =
            Arc::new(Mutex::new((vt100::Parser::new(24.try_into().unwrap(), 80.try_into().unwrap(), 200), Vec::new())));
        let to = seen.clone();
        let reader = std::thread::spawn(move || {
            let mut buffer = [0; 4096];
            while let Ok(n @ 1..) = output.read(&mut buffer) {
                let mut to = to.lock().unwrap();
                to.0.process(&buffer[..n]);
                to.1.extend_from_slice(&buffer[..n]);
            }
        });
        Self { child, keys, seen, reader, home, _master: pair.master }
    }

    pub fn screen(&self) -> String {
        self.seen.lock().unwrap().0.screen().contents()
    }

    pub fn press(&mut self, keys: &str) {
        self.keys.write_all(keys.as_bytes()).unwrap();
        self.keys.flush().unwrap();
    }

    pub fn wait_to_see(&self, words: &[&str]) {
        let deadline = Instant::now() + PATIENCE;
        while !words.iter().any(|word| self.screen().contains(word)) {
            assert!(Instant::now() < deadline, "waited in vain for {words:?}\n{}", self.screen());
            std::thread::sleep(Duration::from_millis(5));
        }
    }

    /// Waits until it has ended: its status, all that it sent, the screen that it left.
    pub fn end(mut self) -> (u32, String, vt100::Screen, tempfile::TempDir) {
        let status = wait_for("the end", || self.child.try_wait().unwrap());
        drop((self.keys, self._master));
        self.reader.join().unwrap();
        let seen = self.seen.lock().unwrap();
        (status.exit_code(), String::from_utf8_lossy(&seen.1).into_owned(), seen.0.screen().clone(), self.home)
    }
}

/// Every way in has its way out: screen, cursor, pasting.
pub fn given_back(sent: &str, screen: &vt100::Screen) {
    for (on, off) in [("\x1b[?1049h", "\x1b[?1049l"), ("\x1b[?25l", "\x1b[?25h"), ("\x1b[?2004h", "\x1b[?2004l")] {
        let (last_on, last_off) = (sent.rfind(on), sent.rfind(off));
        assert!(last_on.is_some() && last_off > last_on, "{on:?} is not undone");
    }
    assert!(!screen.alternate_screen() && !screen.hide_cursor() && !screen.bracketed_paste());
}

/// What stands at the left of the large state word, whichever it is.
pub const STATES: [&str; 5] = ["\n▼ ", "\n▲ ", "\n░ ", "\n▒ ", "\n▓ "];
const HELD: [&str; 1] = ["\n▓ "];

#[test]
fn a_rehearsal_is_seen_within_a_second_obeys_its_keys_and_gives_the_terminal_back() {
    let began = Instant::now();
    let mut terminal = Terminal::start(&["rehearse", "--fast", "20"], &[]);
    terminal.wait_to_see(&STATES);
    assert!(began.elapsed() < Duration::from_secs(1), "{:?}", began.elapsed());
    terminal.wait_to_see(&HELD);
    terminal.press(" ");
    terminal.wait_to_see(&["kept ", "the next full dwell will be kept"]);
    terminal.press("?");
    terminal.wait_to_see(&["zero all channels"]);
    terminal.press("\x1b");
    wait_for("the help's end", || (!terminal.screen().contains("zero all channels")).then_some(()));
    terminal.press("q");
    terminal.wait_to_see(&["Leave", "leave?"]);
    terminal.press("\r");
    let (status, sent, screen, home) = terminal.end();
    assert_eq!(status, 0, "{}", screen.contents());
    given_back(&sent, &screen);
    let after = &sent[sent.rfind("\x1b[?1049l").unwrap()..];
    let path = after.lines().find_map(|line| line.strip_prefix("session ")).expect("the session is named at the end");
    let path = PathBuf::from(path.trim());
    assert!(path.starts_with(home.path()), "{}", path.display());
    let session = read(&path);
    assert!(matches!(session.entries.last(), Some(Entry::End(_))));
    let record = after.lines().find_map(|line| line.strip_prefix("record ")).expect("and the record");
    assert!(Path::new(record.trim()).exists());
}

#[test]
fn a_signal_gives_the_terminal_back_and_ends_the_session() {
    for kind in ["-TERM", "-INT"] {
        let terminal = Terminal::start(&["rehearse", "--fast", "20"], &[]);
        terminal.wait_to_see(&STATES);
        signal(kind, terminal.child.process_id().unwrap());
        let (status, sent, screen, _home) = terminal.end();
        assert_eq!(status, 0, "{kind}\n{}", screen.contents());
        given_back(&sent, &screen);
        let path = sent.lines().rev().find_map(|line| line.strip_prefix("session ")).unwrap().trim().to_string();
        assert!(matches!(read(Path::new(&path)).entries.last(), Some(Entry::End(_))), "{kind}");
    }
}

/// Select Graphic Rendition (ECMA-48, 8.3.117) parameters that set a colour; 39 and 49 give the terminal's own back.
fn colours(sent: &str) -> Vec<String> {
    let sequences = sent.split("\x1b[").skip(1);
    let parameters = sequences.filter_map(|s| {
        let end = s.find(|c: char| !(c.is_ascii_digit() || c == ';'))?;
        s[end..].starts_with('m').then(|| s[..end].to_string())
    });
    let is_colour = |p: &str| p.parse::<u32>().is_ok_and(|p| matches!(p, 30..=38 | 40..=48 | 90..=107));
    parameters.filter(|p| p.split(';').next().is_some_and(is_colour)).collect()
}

#[test]
fn no_color_gives_no_colour() {
    for (environment, coloured) in [(&[][..], true), (&[("NO_COLOR", "1")][..], false)] {
        let terminal = Terminal::start(&["rehearse", "--fast", "50"], environment);
        terminal.wait_to_see(&HELD);
        signal("-TERM", terminal.child.process_id().unwrap());
        let (_, sent, _, _home) = terminal.end();
        assert_eq!(!colours(&sent).is_empty(), coloured, "{:?}", colours(&sent).first());
    }
}

#[test]
fn the_screen_on_live_ports_tells_a_wrong_speed_and_a_pulled_cable() {
    let mut bench = Bench::new();
    let (outing, session) = (bench.path("outing.toml"), bench.path("a.session"));
    let terminal = Terminal::start(&["drive", outing.to_str().unwrap(), "--session", session.to_str().unwrap()], &[]);
    wait_for("the session", || session.exists().then_some(()));
    let began = Instant::now();
    while !terminal.screen().contains("baud") {
        assert!(began.elapsed() < Duration::from_millis(3500), "{}", terminal.screen());
        bench.gauge.as_mut().unwrap().write_all(b"\x80\x9b\xff\xfe\xf0\x91").unwrap();
        std::thread::sleep(Duration::from_millis(10));
    }
    bench.gauge = None;
    terminal.wait_to_see(&["port gauge lost"]);
    bench.gauge = Some(plug(&bench.path("tty-gauge")));
    terminal.wait_to_see(&["port gauge is back"]);
    signal("-TERM", terminal.child.process_id().unwrap());
    let (status, sent, screen, _home) = terminal.end();
    assert_eq!(status, 3, "{}", screen.contents());
    given_back(&sent, &screen);
}

/// The van's own passenger drives the day; the one beside the road goes through all places, corrects and restores a segment, and Layby
/// says of every tap what the session reduces to.
#[test]
fn a_passenger_goes_through_all_places_and_layby_says_what_the_session_reduces_to() {
    let mut terminal = Terminal::start(&["rehearse", "--fast", "max"], &[]);
    terminal.wait_to_see(&["the stream is over"]);
    let tab = |terminal: &mut Terminal, place: &str| {
        terminal.press("\t");
        terminal.wait_to_see(&[place]);
    };
    tab(&mut terminal, "LAYBY");
    terminal.press("v");
    terminal.wait_to_see(&["segments"]);
    terminal.press("\r");
    terminal.wait_to_see(&["configuration was another"]);
    terminal.press("d");
    wait_for("the correction", || terminal.screen().contains(" back ").then_some(()));
    terminal.press("x");
    terminal.wait_to_see(&["no longer counts"]);
    terminal.press("\r");
    terminal.wait_to_see(&["VOID"]);
    terminal.press("\r");
    terminal.wait_to_see(&["counts again"]);
    terminal.press("u\x1b");
    wait_for("the segment again", || (!terminal.screen().contains("VOID")).then_some(()));
    tab(&mut terminal, "BENCH");
    terminal.wait_to_see(&["gauge"]);
    tab(&mut terminal, "too");
    tab(&mut terminal, "LAYBY");
    std::thread::sleep(Duration::from_millis(600));
    let seen = terminal.screen();
    terminal.press("q\r");
    let (status, sent, _, _home) = terminal.end();
    assert_eq!(status, 0);
    let path = sent.lines().rev().find_map(|line| line.strip_prefix("session ")).unwrap().trim().to_string();
    let session = read(Path::new(&path));
    let kinds = |is: fn(&Entry) -> bool| session.entries.iter().filter(|e| is(e)).count();
    assert_eq!(kinds(|e| matches!(e, Entry::Void(_))), 1);
    assert_eq!(kinds(|e| matches!(e, Entry::Restore(_))), 1);
    assert_eq!(kinds(|e| matches!(e, Entry::Correct(_))), 1);
    let r = steadytap::reduction::reduce(&[session], &Default::default()).unwrap();
    let mut rows = 0;
    for c in r.comparisons.iter().filter(|c| c.target_kmh == r.at_kmh && c.configuration == "B") {
        let word = match (c.verdict.word(), c.passes_needed) {
            ("changed", _) => "changed".to_string(),
            ("no-change", _) => "no change".to_string(),
            (_, Some(n)) => format!("{n} more"),
            _ => "undecided".to_string(),
        };
        let line = seen
            .lines()
            .find(|l| l.contains(&c.tap) && l.matches('±').count() == 2)
            .unwrap_or_else(|| panic!("{}\n{seen}", c.tap));
        let first = line.split('±').nth(1).unwrap();
        assert!(first.contains(&word), "{} is {word}, Layby says {line}", c.tap);
        let figure = format!("{:.1}", (c.delta.value * r.at_q_pa).abs());
        assert!(line.split('±').next().unwrap().contains(&figure), "{figure} in {line}");
        rows += 1;
    }
    assert_eq!(rows, 5, "{seen}");
}
