//! The three files as a whole: which kind one is, one alone, and all together.
//!
//! [`Source`]s → [`Setup`] with warnings, or every problem of all three files. Nothing here opens a file:
//! an outing names its rig and its car relative to itself, [`outing_head`] says how, and the shell loads them.

use super::cursor::Table;
use super::names::{Known, nearest};
use super::outing::{self, Fitted};
use super::problem::{Log, Place, Problem, Source, shown, visible};
use super::{Setup, car, rig};
use toml::de::DeTable;

/// Longest text that is read, in bytes.
pub const LARGEST: usize = 4 << 20;
/// The version of each of the three formats that is read.
const VERSION: &str = "1";

/// What a file is, by its `steadytap` line.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// Ports and channels.
    Rig,
    /// Geometry.
    Car,
    /// The test.
    Outing,
}

impl Kind {
    /// The word in the `steadytap` line.
    pub fn word(self) -> &'static str {
        match self {
            Self::Rig => "rig",
            Self::Car => "car",
            Self::Outing => "outing",
        }
    }

    fn of(line: &str) -> Option<Self> {
        let word = line.split(' ').next()?;
        [Self::Rig, Self::Car, Self::Outing].into_iter().find(|kind| kind.word() == word)
    }
}

/// Which other files an outing rests on, as it names them: relative to itself.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Head {
    /// Path of the rig.
    pub rig: String,
    /// Where it is named.
    pub rig_place: Place,
    /// Path of the car.
    pub car: String,
    /// Where it is named.
    pub car_place: Place,
}

/// A sound setup, and what is odd about it.
#[derive(Clone, Debug, PartialEq)]
pub struct Checked {
    /// The setup.
    pub setup: Setup,
    /// Warnings; no errors.
    pub warnings: Vec<Problem>,
}

/// What a file says it is, of whatever version; `None` if it does not say, or is larger than [`LARGEST`].
/// Faults elsewhere in the file do not matter.
pub fn kind(source: &Source) -> Option<Kind> {
    if source.text.len() > LARGEST {
        return None;
    }
    let (document, _) = DeTable::parse_recoverable(&source.text);
    Kind::of(document.get_ref().get("steadytap")?.get_ref().as_str()?)
}

/// The paths of rig and car.
///
/// # Errors
/// Every problem of the lines that this needs; the rest of the file is not looked at.
pub fn outing_head(outing: &Source) -> Result<Head, Vec<Problem>> {
    let (head, problems) = open(outing, Kind::Outing, Unread::Pass, |root| {
        let (rig, car) = (outing::path(root, "rig"), outing::path(root, "car"));
        let ((rig, rig_at), (car, car_at)) = (rig?, car?);
        Some(Head { rig, rig_place: root.log.place(rig_at), car, car_place: root.log.place(car_at) })
    });
    head.flatten().ok_or(problems)
}

/// The three files together.
///
/// # Errors
/// Every problem of all three, warnings among them: the outing's first, then the rig's, then the car's.
pub fn setup(outing: &Source, rig: &Source, car: &Source) -> Result<Checked, Vec<Problem>> {
    let (rig, rig_problems) = read_rig(rig);
    let (car, car_problems) = read_car(car, &rig.channels);
    let fitted = Fitted { channels: &rig.channels, taps: &car.taps };
    let (outing, mut problems) = open(outing, Kind::Outing, Unread::Refuse, |root| outing::read(root, &fitted));
    problems.extend(rig_problems);
    problems.extend(car_problems);
    match (outing.flatten(), rig.rig, car.car) {
        (Some(outing), Some(rig), Some(car)) if !problems.iter().any(Problem::is_error) => {
            Ok(Checked { setup: Setup { rig, car, outing }, warnings: problems })
        }
        _ => Err(problems),
    }
}

/// Every problem of a rig.
pub fn check_rig(source: &Source) -> Vec<Problem> {
    read_rig(source).1
}

/// Every problem of a car, as far as it shows without the rig.
pub fn check_car(source: &Source) -> Vec<Problem> {
    read_car(source, &Known::new("channel", false)).1
}

/// Every problem of an outing, as far as it shows without rig and car.
pub fn check_outing(source: &Source) -> Vec<Problem> {
    let (channels, taps) = (Known::new("channel", false), Known::new("tap", false));
    let fitted = Fitted { channels: &channels, taps: &taps };
    open(source, Kind::Outing, Unread::Refuse, |root| outing::read(root, &fitted)).1
}

fn read_rig(source: &Source) -> (rig::Draft, Vec<Problem>) {
    let (draft, problems) = open(source, Kind::Rig, Unread::Refuse, rig::read);
    (draft.unwrap_or(rig::Draft { rig: None, channels: Known::new("channel", false) }), problems)
}

fn read_car(source: &Source, channels: &Known<rig::ChannelFacts>) -> (car::Draft, Vec<Problem>) {
    let (draft, problems) = open(source, Kind::Car, Unread::Refuse, |root| car::read(root, channels));
    (draft.unwrap_or(car::Draft { car: None, taps: Known::new("tap", false) }), problems)
}

/// What to do about keys that were not asked for.
#[derive(PartialEq)]
enum Unread {
    Refuse,
    Pass,
}

/// Parses one file of the kind wanted and reads it; `None` if it cannot be begun.
fn open<T>(
    source: &Source,
    wanted: Kind,
    unread: Unread,
    read: impl FnOnce(&mut Table) -> T,
) -> (Option<T>, Vec<Problem>) {
    let log = Log::new(source);
    if source.text.len() > LARGEST {
        let what = format!("this file has {} bytes, more than the {LARGEST} that are read", source.text.len());
        log.error(0, what, "is it the right file? A rig, car or outing has a few pages");
        return (None, log.finish());
    }
    let (document, faults) = DeTable::parse_recoverable(&source.text);
    let mut last_line = 0;
    for fault in &faults {
        let at = fault.span().map_or(0, |span| span.start);
        let line = log.line(at);
        // What follows on the same line mostly follows from the first.
        if line != last_line && !log.full() {
            log.error(
                at,
                format!("not TOML: {}", visible(fault.message())),
                "put this right first; the rest of the file is read after it",
            );
        }
        last_line = line;
    }
    let result = (faults.is_empty()).then(|| {
        let mut root = Table::root(&log, document.get_ref());
        right_kind(&mut root, wanted).then(|| {
            let result = read(&mut root);
            if unread == Unread::Refuse {
                root.finish();
            }
            result
        })
    });
    (result.flatten(), log.finish())
}

/// Whether it is worth reading on: a file of another kind or version would give nothing but false alarms.
fn right_kind(root: &mut Table, wanted: Kind) -> bool {
    let word = wanted.word();
    let right = format!("steadytap = \"{word} {VERSION}\"");
    let Some(value) = root.optional("steadytap") else {
        root.log.error(
            root.at,
            format!("no `steadytap` line says that this is a {word} file"),
            format!("begin the file with {right}"),
        );
        return true;
    };
    let Some(text) = value.text() else { return true };
    let version = text.split_once(' ').map(|(_, version)| version);
    match Kind::of(text) {
        Some(kind) if kind != wanted => {
            value.refuse(format!("this is a {} file, not a {word} file", kind.word()), "name the right file");
            false
        }
        Some(_) if version == Some(VERSION) => true,
        Some(_) => {
            let what = format!("`steadytap` is \"{}\": version {VERSION} of {word} files is read", shown(text));
            value.refuse(what, format!("write {right}, or take the program that belongs to the file"));
            false
        }
        None => {
            let guess = text.split(' ').next().and_then(|w| nearest(w, ["rig", "car", "outing"].into_iter()));
            let hint =
                guess.map_or(right.clone(), |w| format!("did you mean \"{w} {VERSION}\"? Here it should be {right}"));
            value.refuse(format!("`steadytap` is \"{}\", which names no kind of file", shown(text)), hint);
            true
        }
    }
}
