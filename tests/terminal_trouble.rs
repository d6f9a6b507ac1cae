//! The promise: whatever becomes of the terminal, or of one of the threads, the outing goes on or ends in order, and what was kept is kept.
#![cfg(unix)]

use crate::live_ports::{Bench, Drive, STATES, Terminal, given_back, ids_said, signal, wait_for};
use crate::same_bytes_same_session::{read, segments};
use portable_pty::{Child, CommandBuilder, MasterPty, PtySize, native_pty_system};
use std::io::Read;
use std::path::Path;
use std::sync::mpsc;
use std::time::{Duration, Instant};
use steadytap::session::{Entry, codec};
use steadytap::shell::engine::Arrival;
use steadytap::shell::feed::Sender;
use steadytap::shell::going_on::{EndsRun, Gone, Left, with_screen};

/// The program in a terminal whose other end this test alone holds.
struct Held {
    child: Box<dyn Child + Send + Sync>,
    master: Box<dyn MasterPty + Send>,
    home: tempfile::TempDir,
}

fn held(words: &[&str]) -> Held {
    let home = tempfile::tempdir().unwrap();
    let size = PtySize { rows: 24, cols: 80, pixel_width: 0, pixel_height: 0 };
    let pair = native_pty_system().openpty(size).unwrap();
    let mut command = CommandBuilder::new(env!("CARGO_BIN_EXE_steadytap"));
    command.args(["rehearse", "--session"]);
    command.arg(home.path().join("a.session"));
    command.args(words);
    for (name, value) in [("TERM", "xterm-256color"), ("LC_ALL", "C.UTF-8")] {
        command.env(name, value);
    }
    command.env("XDG_DATA_HOME", home.path().join("data"));
    // The cautions of the first start were seen.
    std::fs::create_dir_all(home.path().join("data/steadytap")).unwrap();
    std::fs::write(home.path().join("data/steadytap/cautions-seen"), "").unwrap();
    let child = pair.slave.spawn_command(command).unwrap();
    Held { child, master: pair.master, home }
}

impl Held {
    /// Reads until these bytes were sent, then lets go of the terminal for good.
    fn hang_up_after(self, words: &str) -> (Box<dyn Child + Send + Sync>, tempfile::TempDir) {
        let mut reader = self.master.try_clone_reader().unwrap();
        let (mut sent, mut buffer) = (Vec::new(), [0; 4096]);
        while !String::from_utf8_lossy(&sent).contains(words) {
            let n = reader.read(&mut buffer).unwrap();
            assert!(n > 0, "it ended before it said {words}");
            sent.extend_from_slice(&buffer[..n]);
        }
        drop(reader);
        drop(self.master);
        (self.child, self.home)
    }
}

fn kept(session: &Path) -> usize {
    let entries = std::fs::read(session).map(|bytes| codec::read(&bytes).entries).unwrap_or_default();
    entries.iter().filter(|e| matches!(e, Entry::Segment(_))).count()
}

/// Processor time of a process so far, s (proc(5): fields 14 and 15 of `stat`, in hundredths).
#[cfg(target_os = "linux")]
fn processor_s(pid: u32) -> f64 {
    let stat = std::fs::read_to_string(format!("/proc/{pid}/stat")).unwrap();
    let fields: Vec<&str> = stat.rsplit(')').next().unwrap().split_whitespace().collect();
    (fields[11].parse::<f64>().unwrap() + fields[12].parse::<f64>().unwrap()) / 100.0
}

#[test]
fn without_its_terminal_a_run_goes_on_keeps_every_dwell_and_ends_at_a_signal() {
    let (mut child, home) = held(&["--fast", "20"]).hang_up_after("km/h");
    let pid = child.process_id().unwrap();
    let session = home.path().join("a.session");
    let before = kept(&session);
    wait_for("segments without a terminal", || (kept(&session) >= before + 3).then_some(()));
    assert!(child.try_wait().unwrap().is_none());
    #[cfg(target_os = "linux")]
    {
        let (spent, began) = (processor_s(pid), Instant::now());
        std::thread::sleep(Duration::from_secs(1));
        let share = (processor_s(pid) - spent) / began.elapsed().as_secs_f64();
        assert!(share < 0.6, "it spins: {share} of a processor");
    }
    signal("-TERM", pid);
    wait_for("the end", || child.try_wait().unwrap());
    assert!(matches!(read(&session).entries.last(), Some(Entry::End(_))));
    let record = std::fs::read_to_string(session.with_extension("record")).unwrap();
    assert!(record.contains(" @take every\n"), "the record says who kept");
}

#[test]
fn without_its_terminal_a_run_ends_with_its_stream() {
    let (mut child, home) = held(&["--fast", "max"]).hang_up_after("over");
    let status = wait_for("the end", || child.try_wait().unwrap());
    assert_eq!(status.exit_code(), 0);
    assert!(matches!(read(&home.path().join("a.session")).entries.last(), Some(Entry::End(_))));
}

#[test]
fn a_hang_up_signal_alone_leaves_the_run_going() {
    let terminal = Terminal::start(&["rehearse", "--fast", "20"], &[]);
    terminal.wait_to_see(&STATES);
    let pid = terminal.child.process_id().unwrap();
    signal("-HUP", pid);
    terminal.wait_to_see(&["kept "]);
    signal("-TERM", pid);
    let (status, sent, screen, _home) = terminal.end();
    assert_eq!(status, 0, "{}", screen.contents());
    given_back(&sent, &screen);
}

#[test]
fn a_terminal_that_nobody_reads_does_not_hang_the_end() {
    let mut held = held(&["--fast", "20"]);
    let session = held.home.path().join("a.session");
    wait_for("segments", || (kept(&session) >= 1).then_some(()));
    let asked = Instant::now();
    signal("-TERM", held.child.process_id().unwrap());
    wait_for("the end", || held.child.try_wait().unwrap());
    assert!(asked.elapsed() < Duration::from_secs(5), "{:?}", asked.elapsed());
    assert!(matches!(read(&session).entries.last(), Some(Entry::End(_))));
}

#[test]
fn ctrl_z_gives_the_terminal_back_and_a_continued_job_draws_itself_anew() {
    let mut terminal = Terminal::start(&["rehearse", "--fast", "20"], &[]);
    terminal.wait_to_see(&STATES);
    let pid = terminal.child.process_id().unwrap();
    let count = |terminal: &Terminal, what: &str| {
        let seen = terminal.seen.lock().unwrap();
        String::from_utf8_lossy(&seen.1).matches(what).count()
    };
    terminal.press("\x1a");
    wait_for("the terminal back", || (count(&terminal, "\x1b[?1049l") == 1).then_some(()));
    #[cfg(target_os = "linux")]
    wait_for("a stopped job", || {
        let stat = std::fs::read_to_string(format!("/proc/{pid}/stat")).unwrap();
        (stat.rsplit(')').next().unwrap().trim().starts_with('T')).then_some(())
    });
    #[cfg(not(target_os = "linux"))]
    std::thread::sleep(Duration::from_millis(500));
    signal("-CONT", pid);
    wait_for("the screen again", || (count(&terminal, "\x1b[?1049h") == 2).then_some(()));
    terminal.wait_to_see(&STATES);
    terminal.press("?");
    terminal.wait_to_see(&["zero all channels"]);
    signal("-TERM", pid);
    let (status, sent, screen, _home) = terminal.end();
    assert_eq!(status, 0);
    given_back(&sent, &screen);
}

#[test]
fn a_screen_that_breaks_ends_the_run_and_one_that_has_gone_does_not() {
    let (sender, arrivals) = mpsc::channel();
    let sender = Sender::Free(sender);
    let gone = Gone::default();
    let stopped = || matches!(arrivals.try_recv(), Ok(Arrival::Stop));
    let broke = with_screen(&sender, &gone, || panic!("told in a test"));
    assert!(broke.unwrap_err().to_string().contains("the screen broke") && stopped() && !gone.is_so());
    assert!(with_screen(&sender, &gone, || Ok(Left::Asked)).is_ok() && stopped() && !gone.is_so());
    assert!(with_screen(&sender, &gone, || Ok(Left::TerminalGone)).is_ok() && !stopped() && gone.is_so());
}

#[test]
fn a_source_that_breaks_ends_the_run() {
    let (sender, arrivals) = mpsc::channel();
    let breaks = |breaks: bool| {
        let sender = sender.clone();
        let _ = std::thread::spawn(move || {
            let _guard = EndsRun(Sender::Free(sender));
            assert!(!breaks, "told in a test");
        })
        .join();
    };
    breaks(false);
    assert!(arrivals.try_recv().is_err());
    breaks(true);
    assert!(matches!(arrivals.try_recv(), Ok(Arrival::Stop)));
}

#[test]
fn a_program_that_slept_says_so_and_no_segment_lies_across() {
    let mut bench = Bench::new();
    let drive = Drive::start(&mut bench, "a.session", &[]);
    bench.feed_until("a segment", || drive.said(" kept ") >= 1);
    signal("-STOP", drive.child.id());
    std::thread::sleep(Duration::from_millis(5_600));
    signal("-CONT", drive.child.id());
    bench.skip();
    bench.feed_until("suspended", || drive.said(" suspended gauge") == 1 && drive.said(" suspended gps") == 1);
    let before = drive.said(" kept ");
    bench.feed_until("more segments", || drive.said(" kept ") >= before + 2);
    signal("-TERM", drive.child.id());
    let (_, said, err) = drive.end();
    assert!(err.contains("the disk has room for at least "), "said at the start: {err}");
    let session = read(&bench.path("a.session"));
    assert_eq!(ids_said(&said), segments(&session).iter().map(|s| s.id).collect::<Vec<_>>(), "{err}");
    let woke = session.entries.iter().find_map(|e| match e {
        Entry::Fault(f) if f.what == "suspended" => Some(f.t),
        _ => None,
    });
    let woke = woke.expect("an entry of the session");
    for s in segments(&session) {
        let apart = s.t1 <= woke.plus(-5_000_000) || s.t0 >= woke.plus(-200_000);
        assert!(apart, "segment {} from {} to {} lies across the sleep until {woke}", s.id, s.t0, s.t1);
    }
    assert!(std::fs::read_to_string(bench.path("a.record")).unwrap().contains(" !gauge suspended\n"));
    bench.replays_as_driven();
}
