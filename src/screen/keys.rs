//! The one key table: `(place, key)` → what happens; the help and the line of keys are printed out of it.
//!
//! [`press`] is a pure step of the [`Face`]: nothing is done here, only said as an [`Action`]. Only a press acts; a key held
//! down takes and voids once, whether the terminal reports repeats as such or as more presses.

use super::canvas::Canvas;
use super::theme::Role;
use super::{Face, Kept, Overlay, Prompt, PromptKind, View};
use crate::session::Direction;
use crate::stream::command::{Command, DirectionWord, LONGEST_TEXT};
use crossterm::event::{KeyCode, KeyEvent, KeyEventKind, KeyModifiers};

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
}

/// Where a key is pressed.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Place {
    /// The Drive screen with nothing over it.
    Drive,
    /// The help.
    Help,
    /// "Leave?"
    Quit,
    /// "Void?"
    Void,
    /// The list of configurations.
    Configuration,
    /// A line of text.
    Prompt,
}

/// One row of the key table.
pub struct KeyRow {
    /// Where it acts.
    pub places: &'static [Place],
    /// The keys, with Control or without.
    pub keys: &'static [(KeyCode, bool)],
    /// The keys as printed; empty for habits of every terminal.
    pub shown: &'static str,
    /// What it does, as printed.
    pub does: &'static str,
    /// One word for the line of keys, where it stands there.
    pub brief: Option<&'static str>,
    act: fn(&View, &mut Face) -> Option<Action>,
}

const DRIVE: &[Place] = &[Place::Drive];
const UNTYPED: &[Place] = &[Place::Drive, Place::Help, Place::Quit, Place::Void, Place::Configuration];
const EVERYWHERE: &[Place] =
    &[Place::Drive, Place::Help, Place::Quit, Place::Void, Place::Configuration, Place::Prompt];

/// Two events of one key closer together than this are one press held down, µs of stream time.
const HELD_KEY_US: i64 = 700_000;

type Keys = &'static [(KeyCode, bool)];
type Act = fn(&View, &mut Face) -> Option<Action>;

const fn row(
    (places, keys): (&'static [Place], Keys),
    (shown, does): (&'static str, &'static str),
    brief: Option<&'static str>,
    act: Act,
) -> KeyRow {
    KeyRow { places, keys, shown, does, brief, act }
}

const fn plain(c: char) -> (KeyCode, bool) {
    (KeyCode::Char(c), false)
}

const fn bare(code: KeyCode) -> (KeyCode, bool) {
    (code, false)
}

/// Every key there is, in the order of the help.
#[rustfmt::skip]
pub const TABLE: &[KeyRow] = &[
    row((UNTYPED, &[plain(' ')]), ("Space", "take: keep the held dwell, or the next"), Some("take"), take),
    row((EVERYWHERE, &[bare(KeyCode::PageDown)]), ("PageDown", "take, also in a text (remote: on)"), None, take),
    row((DRIVE, &[bare(KeyCode::PageUp)]), ("PageUp", "void the last one; asks (remote: back)"), Some("void"), ask_void),
    row((DRIVE, &[plain('c')]), ("c", "configuration that is fitted"), Some("config"), choose_configuration),
    row((DRIVE, &[plain('d')]), ("d", "direction: by track, out, back, other"), Some("direction"), turn_direction),
    row((DRIVE, &[plain('t')]), ("t", "target: the next one of the outing"), Some("target"), next_target),
    row((DRIVE, &[plain('z')]), ("z", "zero all channels (vehicle at rest)"), Some("zero"), |_, _| say(Command::Zero)),
    row((DRIVE, &[plain('s')]), ("s", "span by hand: begin, end"), Some("span"), span),
    row((DRIVE, &[plain('m')]), ("m", "mark this moment (lorry, gust)"), Some("mark"), |_, _| say(Command::Mark(String::new()))),
    row((DRIVE, &[plain('n')]), ("n", "note: some words"), Some("note"), |_, f| open(f, PromptKind::Note)),
    row((DRIVE, &[plain('a')]), ("a", "air measured by hand"), None, |_, f| open(f, PromptKind::Air)),
    row((DRIVE, &[plain('p')]), ("p", "taps: which channel sits on which"), None, |_, f| open(f, PromptKind::Taps)),
    row((DRIVE, &[plain('l')]), ("l", "light: day, night, no colour"), None, light),
    row((DRIVE, &[bare(KeyCode::Esc)]), ("Esc", "trouble seen: silence its sound"), None, |_, _| Some(Action::Acknowledge)),
    row((DRIVE, &[plain('?')]), ("?", "this help"), Some("help"), help),
    row((DRIVE, &[plain('q'), CTRL_C]), ("q Ctrl-C", "leave; asks"), Some("leave"), ask_quit),
    row((&[Place::Help], &[bare(KeyCode::Esc), bare(KeyCode::Enter), plain('?'), plain('q')]), ("Esc", "closes"), None, back_out),
    row((&[Place::Quit], &[bare(KeyCode::Enter), plain('q'), CTRL_C]), ("Enter q", "leaves"), None, |_, _| Some(Action::Quit)),
    row((&[Place::Void], &[bare(KeyCode::Enter), bare(KeyCode::PageUp)]), ("Enter PageUp", "voids"), None, void),
    row((&[Place::Configuration], &[bare(KeyCode::Down), bare(KeyCode::Tab)]), ("Down Tab", "next"), None, |v, f| step(v, f, 1)),
    row((&[Place::Configuration], &[bare(KeyCode::Up), bare(KeyCode::BackTab)]), ("Up", "before"), None, |v, f| step(v, f, -1)),
    row((&[Place::Configuration], &[bare(KeyCode::Enter)]), ("Enter", "this one"), None, fit),
    row((&[Place::Prompt], &[bare(KeyCode::Enter)]), ("Enter", "done"), None, submit),
    row((&[Place::Prompt], &[bare(KeyCode::Backspace)]), ("Backspace", "rubs out"), None, rub_out),
    row((&[Place::Prompt], &[(KeyCode::Char('u'), true)]), ("Ctrl-U", "empties"), None, start_again),
    row((&[Place::Quit, Place::Void, Place::Configuration, Place::Prompt], &[bare(KeyCode::Esc)]), ("Esc", "backs out"), None, back_out),
    row((&[Place::Help, Place::Void, Place::Configuration, Place::Prompt], &[CTRL_C]), UNPRINTED, None, ask_quit),
    row((EVERYWHERE, &[(KeyCode::Char('z'), true)]), UNPRINTED, None, |_, _| Some(Action::Suspend)),
];

/// Habits of every terminal, which need no line in a help.
const UNPRINTED: (&str, &str) = ("", "");
const CTRL_C: (KeyCode, bool) = (KeyCode::Char('c'), true);

/// What a box prints of its own keys.
pub(super) fn keys_of(place: Place) -> String {
    let own = TABLE.iter().filter(|row| row.places.contains(&place) && !row.places.contains(&Place::Drive));
    let words: Vec<String> =
        own.filter(|row| !row.does.is_empty()).map(|row| format!("{} {}", row.shown, row.does)).collect();
    words.join("  ")
}

/// The rows that the help prints.
pub(super) fn help_rows() -> impl Iterator<Item = &'static KeyRow> {
    TABLE.iter().filter(|row| row.places.contains(&Place::Drive) && !row.does.is_empty())
}

/// The place that the face is in.
pub fn place(face: &Face) -> Place {
    match face.overlay {
        Overlay::None | Overlay::Safety => Place::Drive,
        Overlay::Help => Place::Help,
        Overlay::Quit => Place::Quit,
        Overlay::Void(_) => Place::Void,
        Overlay::Configuration(_) => Place::Configuration,
        Overlay::Prompt(_) => Place::Prompt,
    }
}

/// One key event: changes the face, and says what is to be done beyond it. Caps Lock makes no other key.
pub fn press(view: &View, face: &mut Face, key: KeyEvent) -> Option<Action> {
    let here = place(face);
    let rubbing = here == Place::Prompt && matches!(key.code, KeyCode::Char(_) | KeyCode::Backspace);
    let acts = key.kind == KeyEventKind::Press || (key.kind == KeyEventKind::Repeat && rubbing);
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
    let found = TABLE.iter().find(|row| row.places.contains(&here) && row.keys.contains(&(code, control)));
    match (found, key.code) {
        (Some(row), _) if !other => (row.act)(view, face),
        (None, KeyCode::Char(c)) if !control && here == Place::Prompt => type_in(face, c),
        (None, KeyCode::Char(c)) if !control && here == Place::Configuration => fit_letter(view, face, c),
        _ => None,
    }
}

/// Text pasted by the terminal: into a prompt it goes as if typed, elsewhere it is nothing.
pub fn paste(face: &mut Face, text: &str) {
    if place(face) == Place::Prompt {
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

fn say(command: Command) -> Option<Action> {
    Some(Action::Command(command))
}

fn back_out(_: &View, face: &mut Face) -> Option<Action> {
    face.overlay = Overlay::None;
    None
}

/// Taking answers no question: it closes it, so that a remote's forward key undoes its back key.
fn take(_: &View, face: &mut Face) -> Option<Action> {
    if !matches!(face.overlay, Overlay::Prompt(_)) {
        face.overlay = Overlay::None;
    }
    say(Command::Take)
}

fn ask_void(view: &View, face: &mut Face) -> Option<Action> {
    if let Some(id) = view.last_segment {
        face.overlay = Overlay::Void(id);
    }
    None
}

fn void(_: &View, face: &mut Face) -> Option<Action> {
    match std::mem::take(&mut face.overlay) {
        Overlay::Void(id) => say(Command::Void(id)),
        _ => None,
    }
}

fn ask_quit(_: &View, face: &mut Face) -> Option<Action> {
    face.overlay = Overlay::Quit;
    None
}

fn help(_: &View, face: &mut Face) -> Option<Action> {
    face.overlay = Overlay::Help;
    None
}

fn light(_: &View, face: &mut Face) -> Option<Action> {
    face.theme = face.theme.next();
    None
}

fn span(view: &View, _: &mut Face) -> Option<Action> {
    say(if view.span.is_some() { Command::SpanEnd } else { Command::SpanBegin })
}

fn turn_direction(view: &View, _: &mut Face) -> Option<Action> {
    let next = match (view.tag.by_hand, view.tag.direction) {
        (false, _) => DirectionWord::By(Direction::Out),
        (true, "out") => DirectionWord::By(Direction::Back),
        (true, "back") => DirectionWord::By(Direction::Other),
        (true, _) => DirectionWord::Auto,
    };
    say(Command::Direction(next))
}

fn next_target(view: &View, _: &mut Face) -> Option<Action> {
    let targets = &view.targets_kmh;
    let now = targets.iter().position(|t| *t == view.window.target_kmh);
    let next = now.map_or(0, |i| (i + 1) % targets.len());
    targets.get(next).filter(|t| **t != view.window.target_kmh).and_then(|t| say(Command::Target(*t)))
}

fn choose_configuration(view: &View, face: &mut Face) -> Option<Action> {
    let now = view.configurations.iter().position(|(letter, _)| *letter == view.tag.configuration);
    face.overlay = Overlay::Configuration(now.unwrap_or(0));
    None
}

fn step(view: &View, face: &mut Face, by: isize) -> Option<Action> {
    if let (Overlay::Configuration(at), count @ 1..) = (&mut face.overlay, view.configurations.len()) {
        *at = (*at % count).wrapping_add_signed(by).wrapping_add(count) % count;
    }
    None
}

fn fit(view: &View, face: &mut Face) -> Option<Action> {
    match std::mem::take(&mut face.overlay) {
        Overlay::Configuration(at) => {
            view.configurations.get(at).and_then(|(letter, _)| say(Command::Configuration(letter.clone())))
        }
        _ => None,
    }
}

/// Its own letter first, then the other case, then its number in the list.
fn fit_letter(view: &View, face: &mut Face, typed: char) -> Option<Action> {
    let all = &view.configurations;
    let is = |wanted: &str| all.iter().position(|(letter, _)| letter == wanted);
    let typed_word = typed.to_string();
    let number = typed.to_digit(10).and_then(|d| (d as usize).checked_sub(1)).filter(|i| *i < all.len());
    let at = is(&typed_word).or_else(|| is(&typed_word.to_uppercase())).or_else(|| is(&typed_word.to_lowercase()));
    face.overlay = Overlay::Configuration(at.or(number)?);
    fit(view, face)
}

fn open(face: &mut Face, kind: PromptKind) -> Option<Action> {
    face.overlay = Overlay::Prompt(Prompt { kind, text: String::new(), complaint: None });
    None
}

fn type_in(face: &mut Face, c: char) -> Option<Action> {
    if let Overlay::Prompt(prompt) = &mut face.overlay {
        prompt.complaint = None;
        let separator = matches!(c, '\u{2028}' | '\u{2029}');
        if !c.is_control() && !separator && prompt.text.chars().count() < LONGEST_TEXT {
            prompt.text.push(c);
        }
    }
    None
}

fn rub_out(_: &View, face: &mut Face) -> Option<Action> {
    if let Overlay::Prompt(prompt) = &mut face.overlay {
        prompt.text.pop();
        prompt.complaint = None;
    }
    None
}

fn start_again(_: &View, face: &mut Face) -> Option<Action> {
    if let Overlay::Prompt(prompt) = &mut face.overlay {
        prompt.text.clear();
        prompt.complaint = None;
    }
    None
}

/// What was typed goes through the words of the record, so that a prompt accepts just what a replay does.
fn submit(_: &View, face: &mut Face) -> Option<Action> {
    let Overlay::Prompt(prompt) = &mut face.overlay else { return None };
    let word = match prompt.kind {
        PromptKind::Note => "note",
        PromptKind::Air => "air",
        PromptKind::Taps => "taps",
    };
    match Command::parse(&format!("{word} {}", prompt.text)) {
        Ok(command) => {
            face.overlay = Overlay::None;
            say(command)
        }
        Err(complaint) => {
            prompt.complaint = Some(complaint.to_string());
            None
        }
    }
}

/// Whether leaving now would lose something, in words.
pub(super) fn at_stake(view: &View) -> Option<&'static str> {
    match view.held.as_ref().map(|h| h.kept) {
        Some(Kept::Writing(_)) => Some("A segment is still being written."),
        Some(Kept::Failed(_)) => Some("A segment is NOT ON DISK and would be lost."),
        Some(Kept::No) => Some("The held dwell was not taken."),
        _ if view.span.is_some() => Some("A span is open."),
        _ => None,
    }
}

/// The one line of keys: help and leave always, at its end, and before them as many as fit.
pub(super) fn draw_line(canvas: &mut Canvas, y: u16) {
    let area = canvas.area();
    let rows: Vec<(&str, &str)> =
        TABLE.iter().filter_map(|row| Some((row.shown.split(' ').next()?, row.brief?))).collect();
    let columns = |(shown, brief): &(&str, &str)| u16::try_from(shown.len() + brief.len() + 3).unwrap_or(u16::MAX);
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
