//! The promise: what `append` says is kept outlasts a power cut at any moment, whatever the disk answered before it.
//!
//! The disk is a model that keeps live bytes (what a read gives) and durable ones (what a power cut leaves) apart. It counts the calls,
//! fails at the n-th in every way a disk can, and drops what a failed sync should have written while it calls the pages clean, as Linux
//! does (PostgreSQL's "fsyncgate" of 2018; Rebello et al., USENIX ATC 2020, section 3). Every call is failed, and before every call
//! the power is cut.

use crate::same_bytes_same_session::van;
use std::collections::BTreeMap;
use std::io::{self, ErrorKind, Read, Write};
use std::path::{Path, PathBuf};
use std::sync::{Arc, LazyLock, Mutex};
use steadytap::session::{DamageKind, Entry, Header, Remark, codec};
use steadytap::shell::journal::Journal;
use steadytap::shell::rehold;
use steadytap::shell::storage::{Kind, Storage, StoredFile};
use steadytap::simulate::STARTED;
use steadytap::units::StreamTime;

static HEADER: LazyLock<Header> = LazyLock::new(|| rehold::header(&van(), Some(STARTED.to_string())));

/// How a call goes wrong.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Fault {
    /// The disk is full: nothing is written.
    Full,
    /// A part is written, the next write says that the disk is full.
    Torn,
    /// A write writes a part and says so; no failure.
    Short,
    /// Nothing is written, or synced, or made: input/output error. What was to be synced is dropped, and marked clean.
    Broken,
}

/// What a power cut leaves of the bytes that were written and not synced.
#[derive(Clone, Copy, Debug)]
enum Left {
    Nothing,
    Half,
    All,
    /// The length, but not the bytes.
    Zeros,
}

#[derive(Clone, Debug, Default)]
struct Node {
    live: Vec<u8>,
    durable: Vec<u8>,
    /// The name outlasts a power cut.
    named: bool,
    locked: bool,
}

#[derive(Clone, Debug, Default)]
pub struct Model {
    files: BTreeMap<PathBuf, Node>,
    calls: usize,
    fault: Option<(usize, Fault)>,
    /// After the fault every call in the first so many places fails as well.
    pub dead_places: usize,
    pub failed: bool,
    /// Free bytes.
    pub free: Option<u64>,
    /// The power is cut before this call; nothing that comes later happens.
    cut_at: Option<usize>,
}

const PLACES: [&str; 3] = ["/disk", "/data", "/tmp"];

enum Verdict {
    Do,
    DoHalf,
    Fail(ErrorKind),
}

impl Model {
    /// Nothing goes wrong yet.
    pub fn with_room(free: u64) -> Self {
        Self { free: Some(free), ..Self::default() }
    }

    fn verdict(&mut self, path: &Path) -> Verdict {
        let call = self.calls;
        self.calls += 1;
        if self.cut_at.is_some_and(|cut| call >= cut) {
            return Verdict::Fail(ErrorKind::BrokenPipe);
        }
        let here = self.fault.filter(|(at, _)| *at == call);
        let dead = self.failed && PLACES[..self.dead_places].iter().any(|p| path.starts_with(p));
        self.failed |= here.is_some();
        match here.map(|(_, fault)| fault) {
            Some(Fault::Full) => Verdict::Fail(ErrorKind::StorageFull),
            Some(Fault::Broken) => Verdict::Fail(ErrorKind::Other),
            Some(Fault::Short) => Verdict::DoHalf,
            Some(Fault::Torn) => {
                self.fault = Some((self.calls, Fault::Full));
                Verdict::DoHalf
            }
            None if dead => Verdict::Fail(ErrorKind::StorageFull),
            None => Verdict::Do,
        }
    }

    /// The power is cut: what is left becomes all there is.
    fn cut(&mut self, left: Left) {
        self.files.retain(|_, node| node.named);
        for node in self.files.values_mut() {
            let unsynced = node.live.get(node.durable.len()..).unwrap_or_default().to_vec();
            let mut after = node.durable.clone();
            match left {
                Left::Nothing => {}
                Left::Half => after.extend_from_slice(&unsynced[..unsynced.len() / 2]),
                Left::All => after.extend_from_slice(&unsynced),
                Left::Zeros => after.resize(after.len() + unsynced.len(), 0),
            }
            (node.live, node.durable, node.locked) = (after.clone(), after, false);
        }
        (self.fault, self.cut_at, self.failed) = (None, None, false);
    }

    /// What a read of this file gives.
    pub fn bytes(&self, path: &str) -> Option<&[u8]> {
        self.files.get(Path::new(path)).map(|node| node.live.as_slice())
    }

    /// The notes in all sessions.
    fn notes(&self) -> Vec<String> {
        let whole = self.files.iter().filter(|(path, _)| path.extension().is_some_and(|e| e == "session"));
        let entries = whole.flat_map(|(_, node)| codec::read(&node.live).entries);
        let mut notes: Vec<String> =
            entries.filter_map(|e| if let Entry::Note(n) = e { Some(n.text) } else { None }).collect();
        notes.sort();
        notes.dedup();
        notes
    }
}

/// The model as a storage.
#[derive(Clone, Default)]
pub struct Shelf(pub Arc<Mutex<Model>>);

struct Handle {
    shelf: Shelf,
    path: PathBuf,
    at: usize,
}

impl Shelf {
    pub fn model(&self) -> std::sync::MutexGuard<'_, Model> {
        self.0.lock().unwrap()
    }

    fn make(&self, path: &Path, new: bool) -> io::Result<Box<dyn StoredFile>> {
        let mut model = self.model();
        if let Verdict::Fail(kind) = model.verdict(path) {
            return Err(kind.into());
        }
        if new && model.files.contains_key(path) {
            return Err(ErrorKind::AlreadyExists.into());
        }
        model.files.entry(path.to_path_buf()).or_default();
        Ok(Box::new(Handle { shelf: self.clone(), path: path.to_path_buf(), at: 0 }))
    }
}

impl Storage for Shelf {
    fn kind(&self, path: &Path) -> Kind {
        if self.model().files.contains_key(path) { Kind::Plain } else { Kind::Missing }
    }

    fn open(&self, path: &Path) -> io::Result<Box<dyn StoredFile>> {
        self.make(path, false)
    }

    fn create(&self, path: &Path) -> io::Result<Box<dyn StoredFile>> {
        self.make(path, true)
    }

    fn sync_directory(&self, path: &Path) -> io::Result<()> {
        let mut model = self.model();
        if let Verdict::Fail(kind) = model.verdict(path) {
            return Err(kind.into());
        }
        let directory = path.parent();
        model.files.iter_mut().filter(|(p, _)| p.parent() == directory).for_each(|(_, node)| node.named = true);
        Ok(())
    }

    fn remove(&self, path: &Path) {
        let mut model = self.model();
        if let Verdict::Do = model.verdict(path) {
            model.files.remove(path);
        }
    }

    fn free_space(&self, _: &Path) -> Option<u64> {
        self.model().free
    }

    fn fallbacks(&self) -> Vec<PathBuf> {
        PLACES[1..].iter().map(PathBuf::from).collect()
    }
}

impl Read for Handle {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let model = self.shelf.model();
        let rest = &model.files[&self.path].live[self.at..];
        let n = rest.len().min(buffer.len());
        buffer[..n].copy_from_slice(&rest[..n]);
        self.at += n;
        Ok(n)
    }
}

impl Write for Handle {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        let mut model = self.shelf.model();
        let n = match model.verdict(&self.path) {
            Verdict::Do => bytes.len(),
            Verdict::DoHalf => bytes.len().div_ceil(2),
            Verdict::Fail(kind) => return Err(kind.into()),
        };
        let node = model.files.get_mut(&self.path).unwrap();
        node.live.extend_from_slice(&bytes[..n]);
        Ok(n)
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

impl StoredFile for Handle {
    fn lock(&self) -> bool {
        let mut model = self.shelf.model();
        !std::mem::replace(&mut model.files.get_mut(&self.path).unwrap().locked, true)
    }

    fn sync_data(&self) -> io::Result<()> {
        let mut model = self.shelf.model();
        let verdict = model.verdict(&self.path);
        let cut = model.cut_at.is_some_and(|cut| model.calls > cut);
        let node = model.files.get_mut(&self.path).unwrap();
        match verdict {
            Verdict::Fail(kind) => {
                if !cut {
                    // Dropped, and marked clean: a hole that no later sync fills, though a read still shows the bytes.
                    node.durable.resize(node.live.len(), 0);
                }
                Err(kind.into())
            }
            Verdict::Do | Verdict::DoHalf => {
                let from = node.durable.len();
                let fresh = node.live[from..].to_vec();
                node.durable.extend_from_slice(&fresh);
                Ok(())
            }
        }
    }

    fn is_named(&self) -> bool {
        self.shelf.model().files.contains_key(&self.path)
    }

    fn truncate(&self, length: u64) -> io::Result<()> {
        let mut model = self.shelf.model();
        if let Verdict::Fail(kind) = model.verdict(&self.path) {
            return Err(kind.into());
        }
        let node = model.files.get_mut(&self.path).unwrap();
        node.live.truncate(length as usize);
        node.durable.truncate(length as usize);
        Ok(())
    }
}

fn note(n: usize) -> Entry {
    Entry::Note(Remark { t: StreamTime::from_micros(n as i64), text: format!("note {n:03}") })
}

const BATCHES: [&[usize]; 5] = [&[1], &[2, 3], &[4], &[5], &[6]];

/// What a run said was kept, and whether it began at all.
struct Said {
    kept: Vec<String>,
    all: bool,
    trouble: Option<String>,
    path: PathBuf,
}

/// Opens and appends; each batch that is kept makes everything before it kept too.
fn run(shelf: &Shelf, from: usize) -> Option<Said> {
    let mut journal = Journal::open_on(Arc::new(shelf.clone()), Path::new("/disk/a.session"), &HEADER).ok()?.journal;
    let mut said = Said { kept: Vec::new(), all: true, trouble: None, path: PathBuf::new() };
    let mut appended = Vec::new();
    for batch in BATCHES {
        let entries: Vec<Entry> = batch.iter().map(|n| note(from + n)).collect();
        appended.extend(batch.iter().map(|n| format!("note {:03}", from + n)));
        let on_disk = journal.append(&entries.iter().collect::<Vec<_>>());
        assert_eq!(on_disk, journal.all_on_disk());
        if on_disk {
            said.kept.clone_from(&appended);
        }
        said.all = on_disk;
    }
    said.trouble = journal.trouble().map(str::to_string);
    said.path = journal.path().to_path_buf();
    Some(said)
}

fn model(fault: Option<(usize, Fault)>, dead_places: usize, cut_at: Option<usize>) -> Shelf {
    Shelf(Arc::new(Mutex::new(Model { fault, dead_places, cut_at, ..Model::default() })))
}

/// Cuts the power, and holds what was said against what is left. True when something was said.
fn survives(shelf: &Shelf, said: Option<&Said>, left: Left, case: &str) -> bool {
    let kept = said.map(|s| s.kept.as_slice()).unwrap_or_default();
    let mut after = shelf.model().clone();
    after.cut(left);
    let found = after.notes();
    assert!(kept.iter().all(|k| found.contains(k)), "{case}: said {kept:?}, left {found:?}");
    // It opens again, gives every whole line, and goes on.
    let again = Shelf(Arc::new(Mutex::new(after)));
    let Ok(opened) = Journal::open_on(Arc::new(again.clone()), Path::new("/disk/a.session"), &HEADER) else {
        assert!(kept.is_empty(), "{case}: it does not open again");
        return false;
    };
    if let Some(before) = &opened.before {
        let whole = before.damage.iter().all(|d| d.what == DamageKind::Torn || d.what == DamageKind::NoSum);
        assert!(whole, "{case}: {:?}", before.damage);
    }
    let mut journal = opened.journal;
    assert!(journal.append(&[&note(999)]), "{case}: it does not go on");
    drop(journal);
    again.model().cut(Left::Nothing);
    let found = again.model().notes();
    assert!(kept.iter().all(|k| found.contains(k)) && found.contains(&"note 999".to_string()), "{case}: {found:?}");
    !kept.is_empty()
}

fn calls_of_a_good_run() -> usize {
    let shelf = model(None, 0, None);
    let said = run(&shelf, 0).unwrap();
    assert!(said.all && said.kept.len() == 6 && said.trouble.is_none());
    let calls = shelf.model().calls;
    assert!(calls >= 12, "a header and five batches are written and synced: {calls}");
    calls
}

const LEFT: [Left; 4] = [Left::Nothing, Left::Half, Left::All, Left::Zeros];
const FAULTS: [Fault; 4] = [Fault::Full, Fault::Torn, Fault::Short, Fault::Broken];

#[test]
fn a_power_cut_before_any_call_costs_nothing_that_was_said_to_be_kept() {
    let mut spoken = 0;
    for cut in 0..=calls_of_a_good_run() {
        for left in LEFT {
            let shelf = model(None, 0, Some(cut));
            let said = run(&shelf, 0);
            spoken += usize::from(survives(&shelf, said.as_ref(), left, &format!("cut at {cut}, {left:?}")));
        }
    }
    assert!(spoken >= 32, "{spoken}");
}

#[test]
fn whatever_call_fails_and_wherever_the_power_goes_later_what_was_said_to_be_kept_is_there() {
    let (calls, mut cases, mut rescued) = (calls_of_a_good_run(), 0, 0);
    for at in 0..calls {
        for fault in FAULTS {
            for dead in 0..=PLACES.len() {
                let whole = model(Some((at, fault)), dead, None);
                let said = run(&whole, 0);
                if let Some(said) = &said {
                    // All the places dead, nothing is claimed; one alive, nothing is lost.
                    let moved = said.path.starts_with("/data") || said.path.starts_with("/tmp");
                    assert_eq!(said.trouble.is_some(), moved || !said.all, "call {at} {fault:?} {dead}");
                    assert!(said.all || dead == PLACES.len(), "call {at} {fault:?} {dead}: a good place was not taken");
                    rescued += usize::from(moved);
                }
                for cut in at..=whole.model().calls {
                    for left in LEFT {
                        let shelf = model(Some((at, fault)), dead, Some(cut));
                        let said = run(&shelf, 0);
                        survives(
                            &shelf,
                            said.as_ref(),
                            left,
                            &format!("call {at} {fault:?}, {dead} dead, cut at {cut}, {left:?}"),
                        );
                        cases += 1;
                    }
                }
            }
        }
    }
    eprintln!("{cases} power cuts, {rescued} sessions moved");
    assert!(cases > 5_000 && rescued > 50, "{cases} {rescued}");
}

#[test]
fn a_program_killed_and_started_again_says_nothing_of_lines_that_a_power_cut_still_takes() {
    for cut in 0..=calls_of_a_good_run() {
        let shelf = model(None, 0, Some(cut));
        run(&shelf, 0);
        // Killed, not cut: what is live stays live, the locks go.
        {
            let mut model = shelf.model();
            model.cut_at = None;
            model.files.values_mut().for_each(|node| node.locked = false);
        }
        let Ok(opened) = Journal::open_on(Arc::new(shelf.clone()), Path::new("/disk/a.session"), &HEADER) else {
            continue;
        };
        let before: Vec<Entry> = opened.before.map(|s| s.entries).unwrap_or_default();
        shelf.model().cut(Left::Nothing);
        let found = shelf.model().notes();
        for entry in before {
            let Entry::Note(n) = entry else { continue };
            assert!(found.contains(&n.text), "killed before call {cut}: {} was believed, and lost", n.text);
        }
    }
}

#[test]
fn a_place_that_fails_later_gives_way_to_the_next_and_keeps_all_lines() {
    let calls = calls_of_a_good_run();
    // The first failure at a middle call, then again in the fallback place.
    let shelf = model(Some((calls / 2, Fault::Broken)), 1, None);
    let mut journal = Journal::open_on(Arc::new(shelf.clone()), Path::new("/disk/a.session"), &HEADER).unwrap().journal;
    for n in 0..40 {
        if n == 20 {
            let mut model = shelf.model();
            (model.dead_places, model.failed) = (2, true);
        }
        assert!(journal.append(&[&note(n)]), "{n}");
    }
    assert_eq!(journal.path(), Path::new("/tmp/rescued-1-a.session"));
    assert!(journal.trouble().unwrap().contains("/tmp/rescued-1-a.session"));
    shelf.model().cut(Left::Nothing);
    assert_eq!(shelf.model().notes().len(), 40);
}

#[test]
fn with_no_place_left_nothing_is_claimed_and_space_that_comes_back_takes_all() {
    let shelf = model(Some((6, Fault::Full)), 3, None);
    let mut journal = Journal::open_on(Arc::new(shelf.clone()), Path::new("/disk/a.session"), &HEADER).unwrap().journal;
    let claimed: Vec<bool> = (0..6).map(|n| journal.append(&[&note(n)])).collect();
    assert_eq!(claimed, [true, false, false, false, false, false]);
    assert!(!journal.all_on_disk() && journal.trouble().unwrap().contains("nothing more is on the disk"));
    let names: Vec<PathBuf> = shelf.model().files.keys().cloned().collect();
    assert_eq!(names, [Path::new("/disk/a.session")], "no half files lie about");
    shelf.model().failed = false;
    assert!(journal.append(&[&note(6)]) && journal.all_on_disk());
    shelf.model().cut(Left::Nothing);
    assert_eq!(shelf.model().notes().len(), 7, "what waited in memory is on the disk too");
}
