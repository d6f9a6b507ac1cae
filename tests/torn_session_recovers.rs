//! The promise: what was kept stays kept. A session file torn or flipped anywhere still gives every whole record, never
//! a wrong one, and opening it repairs the torn end, refuses a second writer and goes on where it stopped.

use crate::same_bytes_same_session::{arrivals, drive, read, segments, short, van};
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::sync::LazyLock;
use steadytap::config::Air;
use steadytap::session::codec::{self, decode, encode};
use steadytap::session::{
    AirChange, AirSource, Change, ChannelStatistics, DamageKind, Direction, End, Entry, Fault, Header, Rejected,
    Remark, Segment, SegmentAir, TapsChange, Void, Zero,
};
use steadytap::shell::engine::{Arrival, Engine};
use steadytap::shell::journal::Journal;
use steadytap::shell::{Trouble, rehold};
use steadytap::simulate::STARTED;
use steadytap::stream::command::Command;
use steadytap::units::StreamTime;

/// Bytes of the session of the short outing, driven through the engine.
static DRIVEN: LazyLock<Vec<u8>> = LazyLock::new(|| {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("a.session");
    drive(&van(), &path, arrivals(&van(), short(), usize::MAX));
    std::fs::read(path).unwrap()
});

fn at(s: f64) -> StreamTime {
    StreamTime::from_micros((s * 1e6) as i64)
}

fn header() -> Header {
    rehold::header(&van(), Some(STARTED.to_string()))
}

fn statistics() -> ChannelStatistics {
    ChannelStatistics {
        n: u64::MAX,
        mean: -0.1 - 0.2,
        sd: Some(f64::MIN_POSITIVE),
        min: -1.797_693_134_862_315_7e308,
        max: 5e-324,
        se: None,
        slope: Some(1.0 / 3.0),
        bins: vec![Some(-0.0), None, Some(123_456.789_012_345_67)],
    }
}

/// One of every kind, with values that are hard to write.
fn one_of_each() -> Vec<Entry> {
    let channels: BTreeMap<String, ChannelStatistics> = [("p1".to_string(), statistics())].into();
    let text = "Höhe \u{2192} \"312\" \\ \n\t\u{0}\u{7F}\u{1F690},\"sum\":\"00000000\"}".to_string();
    let air = Air { temperature_c: -3.25, pressure_hpa: 998.7, humidity_pct: 0.1 };
    let segment = Segment {
        id: u32::MAX,
        t0: at(0.000_001),
        t1: at(8_999_999_999.0),
        target_kmh: Some(99.999_999),
        stretch: 3,
        dwell: 2,
        configuration: "B".to_string(),
        direction: Direction::Back,
        track_deg: None,
        taps: [("p1".to_string(), "base-high".to_string())].into(),
        zero: None,
        air: SegmentAir { air, source: AirSource::Measured },
        gps_utc: Some("2026-06-14T09:12:00.000Z".to_string()),
        flags: vec!["by-hand".to_string(), "stuck:p1".to_string()],
        bin_s: 0.6,
        channels: channels.clone(),
    };
    let spoken = Remark { t: at(2.0), text };
    let change = |to: &str| Change { t: at(4.0), to: to.to_string() };
    vec![
        Entry::Session(Box::new(header())),
        Entry::Zero(Zero { id: 1, t0: at(0.0), t1: at(6.0), bin_s: 0.6, channels }),
        Entry::Segment(Box::new(segment)),
        Entry::Rejected(Rejected {
            t0: at(1.0),
            t1: at(7.0),
            target_kmh: 80.0,
            stretch: 1,
            dwell: 1,
            why: vec!["slope".to_string(), "saturated:p1".to_string()],
        }),
        Entry::Void(Void { t: at(1.5), segment: 7 }),
        Entry::Mark(spoken.clone()),
        Entry::Note(spoken),
        Entry::Configuration(change("B")),
        Entry::Direction(change("auto")),
        Entry::Taps(TapsChange { t: at(5.0), taps: [("p1".to_string(), "base-low".to_string())].into() }),
        Entry::Air(AirChange { t: at(6.0), air }),
        Entry::Fault(Fault { t: at(7.0), place: "gauge".to_string(), what: "lost".to_string() }),
        Entry::End(End { t: at(8.0) }),
    ]
}

#[test]
fn every_kind_of_entry_is_read_as_it_was_written() {
    for entry in one_of_each() {
        let line = encode(&entry);
        assert!(line.starts_with("{\"kind\":\"") && line.ends_with("\"}\n"), "{line}");
        assert_eq!(line.matches('\n').count(), 1, "one line: {line}");
        assert_eq!(decode(line.trim_end_matches('\n').as_bytes()), Ok(entry), "{line}");
    }
}

/// Check value of CRC-32C over "123456789": the CRC catalogue (reveng.sourceforge.io, CRC-32/ISCSI), and the 32 bytes
/// of nought and of ones of RFC 3720, B.4 (there in the byte order of the wire).
#[test]
fn the_sum_is_crc_32c() {
    assert_eq!(codec::sum(b"123456789"), 0xE306_9283);
    assert_eq!(codec::sum(&[0x00; 32]), 0x8A91_36AA);
    assert_eq!(codec::sum(&[0xFF; 32]), 0x62A8_AB43);
    let line = encode(&Entry::End(End { t: at(8.0) }));
    let body = line.split(",\"sum\":").next().unwrap();
    assert_eq!(line, format!("{body},\"sum\":\"{:08x}\"}}\n", codec::sum(body.as_bytes())));
}

/// A file of every kind without the large header: each cut and flip of it can be read as a whole.
fn small() -> (Vec<u8>, Vec<Entry>) {
    let entries: Vec<Entry> = one_of_each().into_iter().skip(1).collect();
    (entries.iter().map(encode).collect::<String>().into_bytes(), entries)
}

fn starts(bytes: &[u8]) -> Vec<usize> {
    let ends = bytes.iter().enumerate().filter(|(_, c)| **c == b'\n').map(|(i, _)| i + 1);
    std::iter::once(0).chain(ends).collect()
}

#[test]
fn a_file_cut_at_any_byte_gives_all_whole_records_and_tells_the_torn_one() {
    let (bytes, entries) = small();
    let starts = starts(&bytes);
    for cut in 0..=bytes.len() {
        let contents = codec::read(&bytes[..cut]);
        // A line that lacks nothing but its line end is whole.
        let whole = starts.iter().skip(1).filter(|end| cut + 1 >= **end).count();
        assert_eq!(contents.entries, entries[..whole], "cut at {cut}");
        let torn = !starts.contains(&cut) && !starts.contains(&(cut + 1));
        let told: Vec<_> = contents.damage.iter().map(|d| (d.line, d.what.clone())).collect();
        let expected = if torn { vec![(whole + 1, DamageKind::Torn)] } else { Vec::new() };
        assert_eq!(told, expected, "cut at {cut}");
        assert_eq!(contents.end_missing, starts.contains(&(cut + 1)) && !starts.contains(&cut), "cut at {cut}");
        assert_eq!(contents.whole_length, if torn { starts[whole] } else { cut }, "cut at {cut}");
    }
}

#[test]
fn a_driven_session_cut_at_any_byte_gives_all_whole_records() {
    let bytes = &*DRIVEN;
    let starts = starts(bytes);
    let all = codec::read(bytes);
    // The whole file is read for one cut in fifty and for all about line ends; each cut line at every byte.
    for cut in 0..=bytes.len() {
        let near = starts.iter().any(|s| s.abs_diff(cut) < 3);
        let line = starts.iter().rposition(|s| *s <= cut).unwrap();
        let head = &bytes[starts[line]..cut];
        if starts.get(line + 1).is_some_and(|next| cut + 1 < *next) {
            assert!(decode(head).is_err(), "part of line {} was taken for whole at {cut}", line + 1);
        }
        if cut % 997 == 0 || near {
            let contents = codec::read(&bytes[..cut]);
            let whole = starts.iter().skip(1).filter(|end| cut + 1 >= **end).count();
            assert_eq!(contents.header.is_some(), whole > 0, "cut at {cut}");
            assert_eq!(contents.entries, all.entries[..whole.saturating_sub(1)], "cut at {cut}");
            assert!(contents.damage.len() <= 1, "cut at {cut}");
        }
    }
}

const MASKS: [u8; 5] = [0x01, 0x20, 0x40, 0x80, 0xFF];

#[test]
fn a_file_with_any_byte_flipped_gives_every_other_record_and_never_a_wrong_one() {
    let (mut bytes, entries) = small();
    let starts = starts(&bytes);
    for place in 0..bytes.len() {
        let line = starts.iter().rposition(|s| *s <= place).unwrap();
        let line_end = starts[line + 1] == place + 1;
        for mask in MASKS {
            bytes[place] ^= mask;
            let contents = codec::read(&bytes);
            bytes[place] ^= mask;
            let mut expected = entries.clone();
            expected.remove(line);
            if line_end && line < expected.len() {
                expected.remove(line); // the flipped line end glues the next line to it
            }
            assert_eq!(contents.entries, expected, "byte {place} flipped by {mask:02x}");
            assert!(!contents.damage.is_empty(), "byte {place} flipped by {mask:02x} is not told");
            assert!(contents.damage.iter().all(|d| d.line == line + 1 || d.line == line + 2));
        }
    }
}

#[test]
fn no_line_of_a_driven_session_is_believed_with_any_byte_flipped() {
    let bytes = &*DRIVEN;
    for line in bytes.split(|c| *c == b'\n').filter(|line| !line.is_empty()) {
        let mut line = line.to_vec();
        assert!(decode(&line).is_ok());
        for place in 0..line.len() {
            for mask in [0x01, 0x80] {
                line[place] ^= mask;
                assert!(decode(&line).is_err(), "byte {place} flipped by {mask:02x}");
                line[place] ^= mask;
            }
        }
    }
}

#[test]
fn bytes_of_anything_else_are_no_entries() {
    let mut state = 0x2545_F491_4F6C_DD1D_u64;
    let mut noise = || {
        state ^= state << 13;
        state ^= state >> 7;
        state ^= state << 17;
        state
    };
    for _ in 0..2000 {
        let length = (noise() % 300) as usize;
        let bytes: Vec<u8> = (0..length).map(|_| noise() as u8).collect();
        let contents = codec::read(&bytes);
        assert!(contents.header.is_none() && contents.entries.is_empty());
    }
    // A right sum over an object that is no entry, a header twice, a schema of the future.
    let summed = |body: &str| format!("{body},\"sum\":\"{:08x}\"}}\n", codec::sum(body.as_bytes()));
    for body in ["{\"kind\":\"weather\",\"t\":1.0", "{\"kind\":\"end\"", "{\"kind\":\"end\",\"t\":\"x\"", "[1", ""] {
        let contents = codec::read(summed(body).as_bytes());
        assert!(
            matches!(contents.damage[..], [steadytap::session::Damage { line: 1, what: DamageKind::Entry(_) }]),
            "{body}"
        );
    }
    let newer = Entry::Session(Box::new(Header { schema: "steadytap.session/2".to_string(), ..header() }));
    let contents = codec::read(encode(&newer).as_bytes());
    assert!(contents.header.is_none());
    assert!(contents.damage[0].what.to_string().contains("steadytap.session/2"), "{}", contents.damage[0].what);
}

// ---------------------------------------------------------------- on opening

fn open_error(path: &Path) -> Trouble {
    match Journal::open(path, &header()) {
        Ok(_) => panic!("{} was opened", path.display()),
        Err(trouble) => {
            assert!(trouble.hint.is_some(), "no remedy: {trouble}");
            assert!(trouble.to_string().contains(path.file_name().unwrap().to_str().unwrap()), "no place: {trouble}");
            trouble
        }
    }
}

fn names(dir: &Path) -> Vec<String> {
    let mut names: Vec<String> =
        std::fs::read_dir(dir).unwrap().map(|e| e.unwrap().file_name().into_string().unwrap()).collect();
    names.sort();
    names
}

#[test]
fn a_torn_tail_is_moved_aside_and_the_next_line_starts_clean() {
    let starts = starts(&DRIVEN);
    let all = codec::read(&DRIVEN);
    let last = starts.len() - 2;
    for cut in [starts[last] + 1, starts[last - 1] + 700, starts[2] + 40] {
        let dir = tempfile::tempdir().unwrap();
        let path = dir.path().join("a.session");
        std::fs::write(&path, &DRIVEN[..cut]).unwrap();
        let whole = *starts.iter().rfind(|s| **s <= cut).unwrap();
        let opened = Journal::open(&path, &header()).unwrap();
        assert_eq!(opened.repaired, Some(dir.path().join("a.session.torn")));
        assert_eq!(std::fs::read(dir.path().join("a.session.torn")).unwrap(), [&DRIVEN[whole..cut], b"\n"].concat());
        assert_eq!(std::fs::read(&path).unwrap(), DRIVEN[..whole]);
        let before = opened.before.unwrap();
        let mut journal = opened.journal;
        let fault = Entry::Fault(Fault { t: at(999.0), place: "gauge".to_string(), what: "lost".to_string() });
        assert!(journal.append(&[&fault]) && journal.all_on_disk());
        let after = read(&path);
        assert_eq!(after.entries[..after.entries.len() - 1], before.entries);
        assert_eq!(after.entries.last(), Some(&fault));
        assert_eq!(before.entries, all.entries[..before.entries.len()]);
    }
}

#[test]
fn a_last_line_without_its_line_end_only_gets_one() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("a.session");
    std::fs::write(&path, &DRIVEN[..DRIVEN.len() - 1]).unwrap();
    let opened = Journal::open(&path, &header()).unwrap();
    assert_eq!(opened.repaired, None);
    assert_eq!(std::fs::read(&path).unwrap(), *DRIVEN);
    assert_eq!(names(dir.path()), ["a.session"]);
}

#[test]
fn a_bad_sum_in_the_middle_costs_that_record_alone() {
    let starts = starts(&DRIVEN);
    let all = codec::read(&DRIVEN);
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("a.session");
    let mut bytes = DRIVEN.clone();
    bytes[starts[2] + 30] ^= 4;
    std::fs::write(&path, &bytes).unwrap();
    let before = Journal::open(&path, &header()).unwrap().before.unwrap();
    assert_eq!(before.damage.iter().map(|d| (d.line, d.what.clone())).collect::<Vec<_>>(), [(3, DamageKind::Sum)]);
    assert_eq!(before.entries.len(), all.entries.len() - 1);
    assert_eq!(std::fs::read(&path).unwrap(), bytes, "damage is left as it lies");
}

#[test]
fn a_second_writer_is_refused_and_the_first_goes_on_unharmed() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("a.session");
    let mut first = Journal::open(&path, &header()).unwrap().journal;
    let note = |n: u32| Entry::Note(Remark { t: at(f64::from(n)), text: format!("note {n}") });
    assert!(first.append(&[&note(1)]));
    let trouble = open_error(&path);
    assert!(trouble.what.contains("another steadytap is writing"), "{trouble}");
    #[cfg(target_os = "linux")]
    assert!(trouble.what.contains(&format!("process {}", std::process::id())), "{trouble}");
    assert!(first.append(&[&note(2), &note(3)]));
    assert_eq!(first.trouble(), None);
    assert_eq!(read(&path).entries, [note(1), note(2), note(3)]);
    drop(first);
    assert!(Journal::open(&path, &header()).is_ok(), "the next one may");
}

#[test]
fn what_is_not_our_session_is_refused_and_not_touched() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("a.session");
    let mut other = header();
    other.setup.outing.tolerance_kmh += 0.5;
    let files: [(&str, Vec<u8>); 6] = [
        ("another setup", encode(&Entry::Session(Box::new(other.clone()))).into_bytes()),
        ("another setup, torn", [encode(&Entry::Session(Box::new(other))).as_bytes(), b"{\"kind\":\"no"].concat()),
        ("a shopping list without a line end", b"milk\nbread".to_vec()),
        ("one word", b"milk".to_vec()),
        ("a record", b"# steadytap record 1\n1.000000 gauge 1,2\n2.000000 gauge 1".to_vec()),
        ("a torn header", DRIVEN[..400].to_vec()),
    ];
    for (what, bytes) in files {
        std::fs::write(&path, &bytes).unwrap();
        open_error(&path);
        assert!(std::fs::read(&path).unwrap() == bytes, "{what} was changed");
        assert_eq!(names(dir.path()), ["a.session"], "{what}");
    }
}

#[test]
fn a_session_that_cannot_be_a_file_is_refused_with_the_remedy() {
    let dir = tempfile::tempdir().unwrap();
    let folder = dir.path().join("folder.session");
    std::fs::create_dir(&folder).unwrap();
    open_error(&folder);
    let trouble = open_error(&dir.path().join("nowhere/a.session"));
    assert!(trouble.hint.unwrap().contains("make the directory"));
    assert_eq!(names(dir.path()), ["folder.session"]);
}

#[cfg(unix)]
#[test]
fn a_session_that_is_a_link_or_a_socket_is_refused() {
    let dir = tempfile::tempdir().unwrap();
    let [target, link] = ["target", "link.session"].map(|name| dir.path().join(name));
    std::os::unix::fs::symlink(&target, &link).unwrap();
    open_error(&link);
    assert!(!target.exists(), "made through a dangling link");
    std::fs::write(&target, b"mine").unwrap();
    open_error(&link);
    assert_eq!(std::fs::read(&target).unwrap(), b"mine");
    let socket = dir.path().join("socket.session");
    let _listener = std::os::unix::net::UnixListener::bind(&socket).unwrap();
    open_error(&socket);
    assert!(!std::fs::metadata(&socket).unwrap().is_file(), "the socket is as it was");
}

#[cfg(target_os = "linux")]
#[test]
fn a_directory_that_may_not_be_written_gives_an_error_and_no_file() {
    use std::os::unix::fs::PermissionsExt;
    let dir = tempfile::tempdir().unwrap();
    let locked = dir.path().join("locked");
    std::fs::create_dir(&locked).unwrap();
    std::fs::set_permissions(&locked, std::fs::Permissions::from_mode(0o555)).unwrap();
    // The super-user writes anywhere: then a file system that nobody can write to stands in.
    let path = match std::fs::write(locked.join("probe"), b"") {
        Ok(()) => PathBuf::from("/proc/a.session"),
        Err(_) => locked.join("a.session"),
    };
    open_error(&path);
    assert!(!path.exists());
}

/// A file system of `kib` KiB, unmounted when dropped; none where this process may not mount.
#[cfg(target_os = "linux")]
pub struct Tiny(pub tempfile::TempDir);

#[cfg(target_os = "linux")]
impl Tiny {
    pub fn new(kib: usize) -> Option<Self> {
        let dir = tempfile::tempdir().unwrap();
        let mounted = std::process::Command::new("mount")
            .args(["-t", "tmpfs", "-o", &format!("size={kib}k"), "tmpfs"])
            .arg(dir.path())
            .output();
        if mounted.is_ok_and(|m| m.status.success()) {
            return Some(Self(dir));
        }
        eprintln!("skipped: this process may not mount a small file system, so a full disk is not tried");
        None
    }
}

#[cfg(target_os = "linux")]
impl Drop for Tiny {
    fn drop(&mut self) {
        let _ = std::process::Command::new("umount").arg(self.0.path()).status();
    }
}

#[cfg(target_os = "linux")]
#[test]
fn a_disk_that_is_full_from_the_start_gives_an_error_and_no_half_file() {
    let Some(disk) = Tiny::new(16) else { return };
    let place = disk.0.path();
    // Fill it but for less than a header.
    let _ = std::fs::write(place.join("filler"), vec![0; 14 * 1024]);
    let trouble = open_error(&place.join("a.session"));
    assert!(trouble.hint.as_ref().is_some_and(|h| h.contains("free some space")), "{trouble}");
    assert_eq!(names(place), ["filler"], "half a file was left");
}

#[cfg(target_os = "linux")]
#[test]
fn a_disk_that_fills_costs_no_entry() {
    let Some(disk) = Tiny::new(64) else { return };
    let path = disk.0.path().join("full-disk-test.session");
    let mut journal = Journal::open(&path, &header()).unwrap().journal;
    let notes: Vec<Entry> =
        (0..40).map(|n| Entry::Note(Remark { t: at(f64::from(n)), text: format!("{n} ").repeat(1000) })).collect();
    for note in &notes {
        assert!(journal.append(&[note]), "an entry that is on no disk");
    }
    let trouble = journal.trouble().expect("the disk was full, and that is said").to_string();
    let rescued = journal.path().to_path_buf();
    assert!(trouble.contains(&*path.to_string_lossy()) && trouble.contains(&*rescued.to_string_lossy()), "{trouble}");
    assert_ne!(rescued, path);
    let after = read(&rescued);
    let _ = std::fs::remove_file(&rescued);
    assert_eq!(after.entries, notes);
    // What did fit on the full disk is still good there.
    let left = codec::read(&std::fs::read(&path).unwrap());
    assert_eq!(left.entries, notes[..left.entries.len()]);
}

// ---------------------------------------------------------------- going on

/// The short outing again, later.
fn again(shift_s: f64) -> Vec<Arrival> {
    let mut list = arrivals(&van(), short(), usize::MAX);
    let shift_us = (shift_s * 1e6) as i64;
    for arrival in &mut list {
        match arrival {
            Arrival::Bytes { at, .. }
            | Arrival::Line { at, .. }
            | Arrival::Port { at, .. }
            | Arrival::Command { at, .. } => *at = at.plus(shift_us),
            Arrival::End | Arrival::Stop => {}
        }
    }
    list
}

#[test]
fn a_session_gone_on_with_keeps_ids_configuration_and_zero() {
    let (dir, setup) = (tempfile::tempdir().unwrap(), van());
    let path = dir.path().join("a.session");
    std::fs::write(&path, &*DRIVEN).unwrap();
    let first = read(&path);
    let zeros = |entries: &[Entry]| entries.iter().filter(|e| matches!(e, Entry::Zero(_))).count();
    // No zero and no configuration in the second run: those of the first still hold.
    let mut second = again(1000.0);
    second.retain(|a| !matches!(a, Arrival::Command { command: Command::Zero | Command::Configuration(_), .. }));
    drive(&setup, &path, second);
    let both = read(&path);
    assert_eq!(both.entries[..first.entries.len()], first.entries, "the first run is as it was");
    let kept = segments(&both);
    let ids: Vec<u32> = kept.iter().map(|s| s.id).collect();
    assert_eq!(ids, (1..=u32::try_from(ids.len()).unwrap()).collect::<Vec<_>>(), "numbers go on");
    let (old, new) = kept.split_at(segments(&first).len());
    assert!(!new.is_empty());
    let last_zero = u32::try_from(zeros(&first.entries)).unwrap();
    assert_eq!(old.last().unwrap().configuration, "B");
    assert!(new.iter().all(|s| s.configuration == "B" && s.zero == Some(last_zero)));
    assert_eq!(both.entries.iter().filter(|e| matches!(e, Entry::End(_))).count(), 2);
    assert!(dir.path().join("a.record").exists(), "the second run has a record of its own");
}

#[test]
fn a_session_gone_on_with_knows_what_is_on_the_disk() {
    let (dir, setup) = (tempfile::tempdir().unwrap(), van());
    let path = dir.path().join("a.session");
    std::fs::write(&path, &*DRIVEN).unwrap();
    let opened = Journal::open(&path, &header()).unwrap();
    let engine = Engine::new(&setup, opened.journal, opened.before.as_ref(), true);
    let ids: Vec<u32> = segments(opened.before.as_ref().unwrap()).iter().map(|s| s.id).collect();
    assert_eq!(engine.on_disk.iter().copied().collect::<Vec<_>>(), ids);
}
