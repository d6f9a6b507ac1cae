//! The promise: under disk trouble the record goes before the session, the session goes on elsewhere before a segment is lost, and both
//! are said. First on the model disk of `crash_model`, then the program itself on disks that are full, broken or pulled away.

use crate::crash_model::{Model, Shelf};
use crate::same_bytes_same_session::{arrivals, drive, program, read, segments, short, van};
use std::path::Path;
use std::sync::{Arc, Mutex};
use std::time::{Duration, Instant};
use steadytap::session::{Entry, codec};
use steadytap::shell::engine::{Engine, Outcome};
use steadytap::shell::journal::Journal;
use steadytap::shell::recorder::Recorder;
use steadytap::shell::rehold;
use steadytap::simulate::STARTED;

const MIB: u64 = 1 << 20;
const SESSION: &str = "/disk/a.session";

/// The short outing on a model disk; `change` is called at each tenth of it.
fn on_model(mut change: impl FnMut(usize, &mut Model)) -> (Shelf, Vec<Outcome>, Engine, Vec<String>) {
    let shelf = Shelf(Arc::new(Mutex::new(Model::with_room(1000 * MIB))));
    let header = rehold::header(&van(), Some(STARTED.to_string()));
    let storage = Arc::new(shelf.clone());
    let journal = Journal::open_on(storage.clone(), Path::new(SESSION), &header).unwrap().journal;
    let recorder = Recorder::beside_on(storage, Path::new(SESSION), Some(STARTED)).unwrap();
    let mut engine = Engine::new(&van(), journal, None, false).recording(Some(recorder));
    let (mut out, mut notices, began) = (Vec::new(), Vec::new(), Instant::now());
    let all = arrivals(&van(), short(), usize::MAX);
    let tenth = all.len().div_ceil(10);
    for (n, arrival) in all.into_iter().enumerate() {
        if n % tenth == 0 {
            change(n / tenth, &mut shelf.model());
            engine.look_after(began + Duration::from_secs(11 * (n / tenth) as u64), &mut out);
            notices.extend(engine.notices());
        }
        engine.take(arrival, &mut out);
    }
    engine.finish(&mut out);
    (shelf, out, engine, notices)
}

fn undisturbed() -> Vec<Entry> {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("a.session");
    drive(&van(), &path, arrivals(&van(), short(), usize::MAX));
    read(&path).entries
}

fn faults(entries: &[Entry]) -> Vec<String> {
    let fault = |e: &Entry| if let Entry::Fault(f) = e { Some(format!("{} {}", f.what, f.place)) } else { None };
    entries.iter().filter_map(fault).filter(|f| f.ends_with(" record")).collect()
}

fn without_record_faults(entries: Vec<Entry>) -> Vec<Entry> {
    entries.into_iter().filter(|e| !matches!(e, Entry::Fault(f) if f.place == "record")).collect()
}

#[test]
fn the_record_gives_way_before_the_session_and_another_begins_when_there_is_room() {
    let (shelf, _, engine, _) = on_model(|tenth, model| {
        model.free = Some(match tenth {
            0..3 => 1000 * MIB,
            3..7 => 2 * MIB,
            _ => 900 * MIB,
        });
    });
    let model = shelf.model();
    let session = codec::read(model.bytes(SESSION).unwrap()).session().unwrap();
    assert_eq!(faults(&session.entries), ["stopped record", "resumed record"]);
    assert_eq!(without_record_faults(session.entries), undisturbed(), "not one entry is another");
    assert_eq!(engine.journal().trouble(), None);
    assert!(engine.stopped()[0].contains("/disk/a.record") && engine.stopped()[0].contains("nearly full"));
    let records = ["/disk/a.record", "/disk/a.2.record"].map(|path| model.bytes(path).unwrap().to_vec());
    assert!(records.iter().all(|r| r.starts_with(b"# steadytap record 1\n# started") && r.ends_with(b"\n")));
    let first = |r: &[u8]| {
        let text = String::from_utf8_lossy(r).into_owned();
        let at = |line: Option<&str>| line.unwrap().split(' ').next().unwrap().parse::<f64>().unwrap();
        (at(text.lines().nth(2)), at(text.lines().last()))
    };
    let (one, two) = (first(&records[0]), first(&records[1]));
    assert!(one.1 < two.0 && two.0 > 2.0 * one.1, "the gap is where the disk was full: {one:?} {two:?}");
}

#[test]
fn a_disk_that_lasts_less_than_an_hour_is_told_once() {
    let (.., notices) = on_model(|tenth, model| model.free = Some(if tenth < 4 { 1000 * MIB } else { 20 * MIB }));
    assert_eq!(notices.len(), 1, "{notices:?}");
    // 20 MiB at (115200 + 9600) / 10 bytes a second and 30 % over them: 20971520 / 16224 s are 21.5 minutes.
    let rate = steadytap::shell::space::most_bytes_per_s(&van().rig);
    let minutes = (20 * MIB) as f64 / rate / 60.0;
    assert!(minutes < 60.0);
    assert!(notices.iter().all(|n| n.contains("free some space")), "{notices:?}");
}

#[test]
fn what_waited_in_memory_is_said_to_be_kept_once_there_is_room_again() {
    let (shelf, out, engine, _) = on_model(|tenth, model| {
        model.dead_places = 3;
        model.failed = (2..9).contains(&tenth);
    });
    let segment = |o: &Outcome| if let Some(Entry::Segment(s)) = o.event.entry() { Some(s.id) } else { None };
    let ids = |keep: &dyn Fn(&Outcome) -> bool| out.iter().filter(|o| keep(o)).filter_map(segment).collect::<Vec<_>>();
    let (not, again) = (ids(&|o| !o.on_disk), ids(&|o| o.again));
    assert!(not.len() >= 2, "{not:?}");
    assert_eq!(again, not, "each is said to be kept when it is, once");
    assert!(engine.journal().all_on_disk());
    let path = engine.journal().path().to_str().unwrap();
    assert_eq!(path, "/data/rescued-1-a.session");
    let session = codec::read(shelf.model().bytes(path).unwrap()).session().unwrap();
    assert_eq!(without_record_faults(session.entries), undisturbed());
    assert_eq!(engine.on_disk.len(), ids(&|o| o.on_disk).len());
}

// ---------------------------------------------------------------- the program itself

#[cfg(target_os = "linux")]
mod real {
    use super::*;
    use crate::live_ports::{Bench, Drive, ids_in, ids_said, signal};
    use crate::torn_session_recovers::Tiny;
    use std::process::{Command, Output};

    /// A rehearsal after `prefix` on the command line, its data directory in `home`.
    fn rehearse(prefix: &[&str], session: &Path, home: &Path) -> Output {
        let ours = program();
        let mut command = match prefix.split_first() {
            Some((first, rest)) => {
                let mut command = Command::new(first);
                command.args(rest).arg(ours.get_program());
                command
            }
            None => Command::new(ours.get_program()),
        };
        command.args(["rehearse", "--unattended", "--fast", "max", "--session"]).arg(session);
        command.env("XDG_DATA_HOME", home).output().unwrap()
    }

    /// Every segment that was said to be kept is in the file that the end names; gives the file.
    fn all_there(output: &Output) -> std::path::PathBuf {
        let said: Vec<String> = String::from_utf8_lossy(&output.stdout).lines().map(str::to_string).collect();
        let path = said.iter().find_map(|line| line.strip_prefix("session ")).expect("the end names the session");
        let (kept, found) = (ids_said(&said), ids_in(Path::new(path)));
        assert!(!kept.is_empty() && kept == found, "said {kept:?}, in {path} {found:?}");
        path.into()
    }

    #[test]
    fn a_disk_that_fills_costs_the_record_and_no_segment() {
        let Some(disk) = Tiny::new(6 * 1024) else { return };
        let home = tempfile::tempdir().unwrap();
        let output = rehearse(&[], &disk.0.path().join("a.session"), home.path());
        let (out, err) = (String::from_utf8_lossy(&output.stdout), String::from_utf8_lossy(&output.stderr));
        assert_eq!(output.status.code(), Some(3), "{err}");
        assert!(out.lines().any(|line| line.ends_with(" stopped record")), "{err}");
        assert!(err.contains("a.record stopped: No space left") || err.contains("nearly full"), "{err}");
        let path = all_there(&output);
        let entries = read(&path).entries;
        assert_eq!(faults(&entries)[0], "stopped record");
        // The same drive with room for all.
        let roomy = home.path().join("b.session");
        rehearse(&[], &roomy, home.path());
        assert_eq!(without_record_faults(entries), without_record_faults(read(&roomy).entries));
    }

    #[test]
    fn a_sync_that_fails_moves_the_session_and_it_is_said_where() {
        if !Command::new("strace").args(["-f", "true"]).output().is_ok_and(|o| o.status.success()) {
            eprintln!("skipped: strace cannot trace here, so no sync is made to fail");
            return;
        }
        for call in ["fdatasync", "write"] {
            let (dir, home) = (tempfile::tempdir().unwrap(), tempfile::tempdir().unwrap());
            let session = dir.path().join("a.session");
            let only = format!("--trace-path={}", session.display());
            let inject = format!("--inject={call}:error=EIO:when=5");
            let null = ["-o", "/dev/null"];
            let prefix = ["strace", "-f", null[0], null[1], &only, &format!("--trace={call}"), &inject];
            let output = rehearse(&prefix, &session, home.path());
            let err = String::from_utf8_lossy(&output.stderr);
            assert_eq!(output.status.code(), Some(3), "{call}: {err}");
            let path = all_there(&output);
            assert!(path.starts_with(home.path()), "{call}: {}", path.display());
            assert!(err.contains("Input/output error") && err.contains(path.to_str().unwrap()), "{call}: {err}");
            let left = codec::read(&std::fs::read(&session).unwrap());
            assert!(left.entries.len() < read(&path).entries.len(), "the failed file was trusted again");
        }
    }

    #[test]
    fn a_directory_that_is_pulled_away_costs_no_segment() {
        let mut bench = Bench::new();
        let home = bench.path("home");
        std::fs::create_dir(bench.path("out")).unwrap();
        let mut drive = Drive::start_in(&mut bench, "out/a.session", &[], &home);
        bench.feed_until("a segment", || drive.said(" kept ") >= 1);
        std::fs::remove_dir_all(bench.path("out")).unwrap();
        let before = drive.said(" kept ");
        bench.feed_until("more", || drive.said(" kept ") >= before + 2);
        signal("-TERM", drive.child.id());
        let status = bench_end(&mut drive);
        let (_, said, err) = drive.end();
        assert_eq!(status, Some(3), "{err}");
        assert!(err.contains("the file was removed"), "{err}");
        let path = said.iter().find_map(|line| line.strip_prefix("session ")).unwrap();
        assert!(path.contains("/home/"), "{path}");
        assert_eq!(ids_said(&said), segments(&read(Path::new(path))).iter().map(|s| s.id).collect::<Vec<_>>());
    }

    fn bench_end(drive: &mut Drive) -> Option<i32> {
        crate::live_ports::wait_for("the end", || drive.child.try_wait().unwrap()).code()
    }
}
