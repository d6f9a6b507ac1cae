//! The one key table: `(place, key)` → what happens; the help, the line of keys and the manual are printed out of it.
//!
//! [`press`] is a pure step of the [`Face`]: nothing is done here, only said as an [`Action`]. Only a press acts; a key held
//! down takes and voids once, whether the terminal reports repeats as such or as more presses.

mod acts;
pub mod bindings;

pub use bindings::Bindings;

use super::canvas::Canvas;
use super::theme::Role;
use super::{Face, Overlay, PromptKind, Spot, View};
use crate::config::Convert;
use crate::stream::command::Command;
use acts::*;
use crossterm::event::{KeyCode, KeyEvent, KeyEventKind, KeyModifiers};

pub(super) use acts::at_stake;
pub use acts::look;

/// What a key asks the shell to do.
#[derive(Clone, Debug, PartialEq)]
pub enum Action {
    /// A command for the pipeline, and for the record.
    Command(Command),
    /// Leave; it has been asked.
    Quit,
    /// Give the terminal back to the job control (Ctrl-Z).
    Suspend,
    /// Trouble has been seen: stop repeating its sound.
    Acknowledge,
    /// The guidance tone off, or on again.
    Guidance,
    /// Write a channel's calibration into the rig file.
    Calibrate {
        /// The channel.
        channel: String,
        /// What its raw figure means.
        convert: Convert,
    },
}

/// Where a key is pressed.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Place {
    /// The workshop with nothing over it.
    Bench,
    /// The road.
    Drive,
    /// Beside the road.
    Layby,
    /// The help.
    Help,
    /// "Leave?"
    Quit,
    /// "Void?"
    Void,
    /// "Leave Drive while the car moves?"
    Away,
    /// The list of configurations.
    Configuration,
    /// One segment looked into.
    Segment,
    /// The list of configurations to correct a segment's.
    Correct,
    /// A sensor against a reference.
    Calibration,
    /// A leak test.
    Leak,
    /// A hose's response.
    Step,
    /// A line of text.
    Prompt,
}

impl Place {
    /// All of them: the three places of the car, what asks or shows over them, the help.
    pub const ALL: [Self; 14] = [
        Self::Bench,
        Self::Drive,
        Self::Layby,
        Self::Quit,
        Self::Void,
        Self::Away,
        Self::Configuration,
        Self::Segment,
        Self::Correct,
        Self::Calibration,
        Self::Leak,
        Self::Step,
        Self::Prompt,
        Self::Help,
    ];
}

/// One row of the key table.
pub struct KeyRow {
    /// Its name in a file of keys; what has none stays where it is.
    pub name: &'static str,
    /// Where it acts.
    pub places: &'static [Place],
    /// The keys, with Control or without.
    pub keys: &'static [Key],
    /// What it does, as printed; empty for habits of every terminal.
    pub does: &'static str,
    /// One word for the line of keys, where it stands there.
    pub brief: Option<&'static str>,
    act: Act,
}

/// A key: its code, and whether Control is held.
pub type Key = (KeyCode, bool);
type Act = fn(&View, &mut Face) -> Option<Action>;

const BENCH: &[Place] = &[Place::Bench];
const DRIVE: &[Place] = &[Place::Drive];
const LAYBY: &[Place] = &[Place::Layby];
const EVERYWHERE: &[Place] = &Place::ALL;
const SPOTS: &[Place] = &[Place::Bench, Place::Drive, Place::Layby];
const OVER_DRIVE: &[Place] = &[Place::Drive, Place::Help, Place::Quit, Place::Void, Place::Away, Place::Configuration];
const LISTS: &[Place] = &[Place::Configuration, Place::Correct];
const TYPED: &[Place] = &[Place::Prompt, Place::Calibration];
/// What is laid over a place and can be backed out of.
const BOXES: &[Place] = EVERYWHERE.split_at(13).0.split_at(3).1;
/// The same and the help, but for "Leave?".
const NOT_ASKED: &[Place] = EVERYWHERE.split_at(4).1;

/// Two events of one key closer together than this are one press held down, µs of stream time.
const HELD_KEY_US: i64 = 700_000;

const fn row(
    name: &'static str,
    (places, keys): (&'static [Place], &'static [Key]),
    (does, brief): (&'static str, Option<&'static str>),
    act: Act,
) -> KeyRow {
    KeyRow { name, places, keys, does, brief, act }
}

const fn plain(c: char) -> Key {
    (KeyCode::Char(c), false)
}

const fn bare(code: KeyCode) -> Key {
    (code, false)
}

const CTRL_C: Key = (KeyCode::Char('c'), true);
/// Habits of every terminal, which need no line in a help.
const UNPRINTED: (&str, Option<&str>) = ("", None);

/// Every key there is, in the order of the help.
#[rustfmt::skip]
pub const TABLE: &[KeyRow] = &[
    row("take", (OVER_DRIVE, &[plain(' ')]), ("take: keep the held dwell, or the next", Some("take")), take),
    row("take-remote", (EVERYWHERE, &[bare(KeyCode::PageDown)]), ("take, also in a text (remote: on)", None), take),
    row("void", (&[Place::Drive, Place::Layby], &[bare(KeyCode::PageUp)]), ("void the last one; asks (remote: back)", Some("void")), ask_void),
    row("place", (SPOTS, &[bare(KeyCode::Tab)]), ("the next place: Bench, Drive, Layby", Some("place")), |v, f| go(v, f, Spot::next)),
    row("place-back", (SPOTS, &[bare(KeyCode::BackTab)]), UNPRINTED, |v, f| go(v, f, Spot::before)),
    row("difference", (LAYBY, &[bare(KeyCode::Right)]), ("the next configuration (Left: back)", None), |_, f| turn_configuration(f, 1)),
    row("difference-back", (LAYBY, &[bare(KeyCode::Left)]), UNPRINTED, |_, f| turn_configuration(f, -1)),
    row("pane", (LAYBY, &[plain('v')]), ("view: warnings, segments, picture", Some("view")), next_pane),
    row("down", (LAYBY, &[bare(KeyCode::Down)]), ("down in segments, warnings (Up: up)", None), |v, f| scroll(v, f, 1)),
    row("up", (LAYBY, &[bare(KeyCode::Up)]), UNPRINTED, |v, f| scroll(v, f, -1)),
    row("look", (LAYBY, &[bare(KeyCode::Enter)]), ("look into the marked segment", Some("look")), look_into),
    row("picture", (LAYBY, &[plain('b')]), ("picture: difference, or levels", None), turn_picture),
    row("target-shown", (LAYBY, &[plain('t')]), ("the next speed that was driven", None), turn_target),
    row("channel", (BENCH, &[bare(KeyCode::Down)]), ("the next channel (Up: back)", None), |v, f| turn_channel(v, f, 1)),
    row("channel-back", (BENCH, &[bare(KeyCode::Up)]), UNPRINTED, |v, f| turn_channel(v, f, -1)),
    row("calibrate", (BENCH, &[plain('k')]), ("calibrate the marked sensor", Some("calibrate")), calibrate),
    row("leak", (BENCH, &[plain('e')]), ("leak test of its hose", Some("leak")), |_, f| lay(f, Overlay::Leak(None))),
    row("hose", (BENCH, &[plain('h')]), ("how fast its hose is", Some("hose")), |_, f| lay(f, Overlay::Step(None))),
    row("configuration", (SPOTS, &[plain('c')]), ("configuration that is fitted", Some("config")), choose_configuration),
    row("direction", (DRIVE, &[plain('d')]), ("direction: by track, out, back, other", Some("direction")), turn_direction),
    row("target", (DRIVE, &[plain('t')]), ("target: the next one of the outing", Some("target")), next_target),
    row("zero", (SPOTS, &[plain('z')]), ("zero all channels (vehicle at rest)", Some("zero")), |_, _| say(Command::Zero)),
    row("span", (DRIVE, &[plain('s')]), ("span by hand: begin, end", Some("span")), span),
    row("mark", (DRIVE, &[plain('m')]), ("mark this moment (lorry, gust)", Some("mark")), |_, _| say(Command::Mark(String::new()))),
    row("note", (SPOTS, &[plain('n')]), ("note: some words", Some("note")), |_, f| open(f, PromptKind::Note)),
    row("air", (SPOTS, &[plain('a')]), ("air measured by hand", None), |_, f| open(f, PromptKind::Air)),
    row("taps", (SPOTS, &[plain('p')]), ("taps: which channel sits on which", None), |_, f| open(f, PromptKind::Taps)),
    row("light", (SPOTS, &[plain('l')]), ("light: day, night, no colour", None), light),
    row("acknowledge", (SPOTS, &[bare(KeyCode::Esc)]), ("trouble seen: silence its sound", None), |_, _| Some(Action::Acknowledge)),
    row("guidance", (DRIVE, &[plain('g')]), ("alone: guidance tone off, on", None), |_, f| f.solo.then_some(Action::Guidance)),
    row("help", (SPOTS, &[plain('?')]), ("this help", Some("help")), help),
    row("leave", (SPOTS, &[plain('q'), CTRL_C]), ("leave; asks", Some("leave")), ask_quit),
    row("", (&[Place::Help], &[bare(KeyCode::Esc), bare(KeyCode::Enter), plain('?'), plain('q')]), ("closes", None), back_out),
    row("", (&[Place::Quit], &[bare(KeyCode::Enter), plain('q'), CTRL_C]), ("leaves", None), |_, _| Some(Action::Quit)),
    row("", (&[Place::Void], &[bare(KeyCode::Enter), bare(KeyCode::PageUp)]), ("voids", None), void),
    row("", (&[Place::Away], &[bare(KeyCode::Tab), bare(KeyCode::BackTab), bare(KeyCode::Enter)]), ("leaves Drive", None), away),
    row("", (LISTS, &[bare(KeyCode::Down), bare(KeyCode::Tab)]), ("next", None), |v, f| step(v, f, 1)),
    row("", (LISTS, &[bare(KeyCode::Up)]), ("before", None), |v, f| step(v, f, -1)),
    row("", (LISTS, &[bare(KeyCode::BackTab)]), UNPRINTED, |v, f| step(v, f, -1)),
    row("", (LISTS, &[bare(KeyCode::Enter)]), ("this one", None), fit),
    row("correct-configuration", (&[Place::Segment], &[plain('c')]), ("configuration was another", None), correct_configuration),
    row("correct-direction", (&[Place::Segment], &[plain('d')]), ("direction was another", None), correct_direction),
    row("void-segment", (&[Place::Segment], &[plain('x'), bare(KeyCode::PageUp)]), ("void", None), void_segment),
    row("restore", (&[Place::Segment], &[plain('u')]), ("counts again", None), restore),
    row("note-segment", (&[Place::Segment], &[plain('n')]), ("note", None), note_on_segment),
    row("", (&[Place::Calibration], &[bare(KeyCode::Enter)]), ("average at this reference", None), reference),
    row("", (&[Place::Calibration], &[plain('x')]), ("drop the last point", None), drop_point),
    row("", (&[Place::Calibration], &[plain('w')]), ("write into the rig file", None), write_calibration),
    row("", (&[Place::Leak], &[bare(KeyCode::Enter)]), ("the pressure is held from now", None), begin_leak),
    row("", (&[Place::Prompt], &[bare(KeyCode::Enter)]), ("done", None), submit),
    row("", (TYPED, &[bare(KeyCode::Backspace)]), ("rubs out", None), rub_out),
    row("", (TYPED, &[(KeyCode::Char('u'), true)]), UNPRINTED, start_again),
    row("", (BOXES, &[bare(KeyCode::Esc)]), ("backs out", None), back_out),
    row("", (NOT_ASKED, &[CTRL_C]), UNPRINTED, ask_quit),
    row("", (EVERYWHERE, &[(KeyCode::Char('z'), true)]), UNPRINTED, |_, _| Some(Action::Suspend)),
];

/// What a box prints of its own keys.
pub(super) fn keys_of(face: &Face, place: Place) -> String {
    let own = TABLE.iter().filter(|row| row.places.contains(&place) && !row.places.contains(&Place::Drive));
    let words: Vec<String> = own
        .filter(|row| !row.does.is_empty())
        .map(|row| format!("{} {}", face.bindings.shown(row), row.does))
        .collect();
    words.join("  ")
}

/// The rows that the help of a place prints.
pub fn help_rows(spot: Spot) -> impl Iterator<Item = &'static KeyRow> {
    let place = of_spot(spot);
    TABLE.iter().filter(move |row| row.places.contains(&place) && !row.does.is_empty())
}

const fn of_spot(spot: Spot) -> Place {
    match spot {
        Spot::Bench => Place::Bench,
        Spot::Drive => Place::Drive,
        Spot::Layby => Place::Layby,
    }
}

/// The place that the face is in.
pub fn place(face: &Face) -> Place {
    match face.overlay {
        Overlay::None | Overlay::Safety => of_spot(face.spot),
        Overlay::Help => Place::Help,
        Overlay::Quit => Place::Quit,
        Overlay::Void(_) => Place::Void,
        Overlay::Away(_) => Place::Away,
        Overlay::Configuration(_) => Place::Configuration,
        Overlay::Segment(_) => Place::Segment,
        Overlay::Correct(..) => Place::Correct,
        Overlay::Calibration(_) => Place::Calibration,
        Overlay::Leak(_) => Place::Leak,
        Overlay::Step(_) => Place::Step,
        Overlay::Prompt(_) => Place::Prompt,
    }
}

/// One key event: changes the face, and says what is to be done beyond it. Caps Lock makes no other key.
pub fn press(view: &View, face: &mut Face, key: KeyEvent) -> Option<Action> {
    let here = place(face);
    let rubbing = TYPED.contains(&here) && matches!(key.code, KeyCode::Char(_) | KeyCode::Backspace);
    let scrolling = matches!(key.code, KeyCode::Up | KeyCode::Down);
    let acts = key.kind == KeyEventKind::Press || (key.kind == KeyEventKind::Repeat && (rubbing || scrolling));
    if key.kind == KeyEventKind::Release || held_down(view, face, key.code) || !acts {
        return None;
    }
    if face.overlay == Overlay::Safety {
        face.overlay = Overlay::None;
    }
    // AltGr comes as Control and Alt together on some systems; it types, it commands nothing.
    let alt_gr = key.modifiers.contains(KeyModifiers::CONTROL | KeyModifiers::ALT);
    let control = !alt_gr && key.modifiers.contains(KeyModifiers::CONTROL);
    let other = key.modifiers.intersects(KeyModifiers::ALT | KeyModifiers::SUPER | KeyModifiers::META) && !alt_gr;
    let code = match key.code {
        KeyCode::Char(c) if control || here != Place::Prompt => KeyCode::Char(c.to_ascii_lowercase()),
        code => code,
    };
    let pressed = |row: &&KeyRow| row.places.contains(&here) && face.bindings.of(row).contains(&(code, control));
    match (TABLE.iter().find(pressed), key.code) {
        (Some(row), _) if !other => (row.act)(view, face),
        (None, KeyCode::Char(c)) if !control && TYPED.contains(&here) => type_in(face, c),
        (None, KeyCode::Char(c)) if !control && LISTS.contains(&here) => fit_letter(view, face, c),
        _ => None,
    }
}

/// Text pasted by the terminal: into a prompt it goes as if typed, elsewhere it is nothing.
pub fn paste(face: &mut Face, text: &str) {
    if TYPED.contains(&place(face)) {
        text.chars().for_each(|c| drop(type_in(face, c)));
    }
}

/// Notes when a taking or voiding key came, and says whether it is still the same press.
fn held_down(view: &View, face: &mut Face, code: KeyCode) -> bool {
    let once = matches!(code, KeyCode::Char(' ') | KeyCode::PageDown | KeyCode::PageUp);
    if !once || (place(face) == Place::Prompt && code == KeyCode::Char(' ')) {
        return false;
    }
    let before = face.last_key.replace((code, view.now));
    !view.ended && before.is_some_and(|(last, at)| last == code && (0..HELD_KEY_US).contains(&view.now.since(at)))
}

/// The one line of keys: help and leave always, at its end, and before them as many as fit.
pub(super) fn draw_line(canvas: &mut Canvas, face: &Face, y: u16) {
    let area = canvas.area();
    let here = of_spot(face.spot);
    let rows: Vec<(String, &str)> = TABLE
        .iter()
        .filter(|row| row.places.contains(&here))
        .filter_map(|row| Some((face.bindings.shown(row).split(' ').next()?.to_string(), row.brief?)))
        .collect();
    let columns = |(shown, brief): &(String, &str)| u16::try_from(shown.len() + brief.len() + 3).unwrap_or(u16::MAX);
    let (first, last) = rows.split_at(rows.len().saturating_sub(2));
    let mut room = area.width.saturating_sub(3 + last.iter().map(columns).sum::<u16>());
    let fitting = first.iter().take_while(|row| {
        let fits = columns(row) <= room;
        room = room.saturating_sub(columns(row));
        fits
    });
    let mut x = area.x + 2;
    for (shown, brief) in fitting.chain(last) {
        x += canvas.text((x, y), area.width, shown, Role::Strong) + 1;
        x += canvas.text((x, y), area.width, brief, Role::Quiet) + 2;
    }
}
