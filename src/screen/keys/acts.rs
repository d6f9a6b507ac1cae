//! What the keys do: each a pure step of the face, or an action for the shell.

use super::Action;
use crate::screen::bench::{self, Calibrating};
use crate::screen::layby::Pane;
use crate::screen::{Face, Kept, Overlay, Prompt, PromptKind, Spot, View};
use crate::session::Direction;
use crate::stream::command::{Command, DirectionWord, LONGEST_TEXT};

/// Above this the car does not walk any more, km/h.
const WALKING_KMH: f64 = 6.0;

pub(super) fn say(command: Command) -> Option<Action> {
    Some(Action::Command(command))
}

pub(super) fn back_out(_: &View, face: &mut Face) -> Option<Action> {
    face.overlay = Overlay::None;
    None
}

/// Taking answers no question: it closes it, so that a remote's forward key undoes its back key.
///
/// Alone every dwell is kept anyway: the key confirms, parked, that the next configuration was fitted.
pub(super) fn take(view: &View, face: &mut Face) -> Option<Action> {
    if face.solo {
        face.overlay = Overlay::None;
        return view.asks.clone().and_then(|letter| say(Command::Configuration(letter)));
    }
    if !matches!(face.overlay, Overlay::Prompt(_)) {
        face.overlay = Overlay::None;
    }
    say(Command::Take)
}

pub(super) fn ask_void(view: &View, face: &mut Face) -> Option<Action> {
    // Alone nobody reads a question; Layby restores what should not have gone.
    if face.solo {
        return view.last_segment.and_then(|id| say(Command::Void(id)));
    }
    let marked = marked_segment(view, face).filter(|_| face.spot == Spot::Layby && face.layby.pane == Pane::Segments);
    if let Some(id) = marked.or(view.last_segment) {
        face.overlay = Overlay::Void(id);
    }
    None
}

pub(super) fn void(_: &View, face: &mut Face) -> Option<Action> {
    match std::mem::take(&mut face.overlay) {
        Overlay::Void(id) => say(Command::Void(id)),
        _ => None,
    }
}

pub(super) fn ask_quit(view: &View, face: &mut Face) -> Option<Action> {
    if face.solo && face.spot == Spot::Drive && moves(view) {
        return None;
    }
    face.overlay = Overlay::Quit;
    None
}

pub(super) fn help(_: &View, face: &mut Face) -> Option<Action> {
    face.overlay = Overlay::Help;
    None
}

pub(super) fn light(_: &View, face: &mut Face) -> Option<Action> {
    face.theme = face.theme.next();
    None
}

pub(super) fn span(view: &View, _: &mut Face) -> Option<Action> {
    say(if view.span.is_some() { Command::SpanEnd } else { Command::SpanBegin })
}

pub(super) fn turn_direction(view: &View, _: &mut Face) -> Option<Action> {
    let next = match (view.tag.by_hand, view.tag.direction) {
        (false, _) => DirectionWord::By(Direction::Out),
        (true, "out") => DirectionWord::By(Direction::Back),
        (true, "back") => DirectionWord::By(Direction::Other),
        (true, _) => DirectionWord::Auto,
    };
    say(Command::Direction(next))
}

pub(super) fn next_target(view: &View, _: &mut Face) -> Option<Action> {
    let targets = &view.targets_kmh;
    let now = targets.iter().position(|t| *t == view.window.target_kmh);
    let next = now.map_or(0, |i| (i + 1) % targets.len());
    targets.get(next).filter(|t| **t != view.window.target_kmh).and_then(|t| say(Command::Target(*t)))
}

pub(super) fn choose_configuration(view: &View, face: &mut Face) -> Option<Action> {
    let now = view.configurations.iter().position(|(letter, _)| *letter == view.tag.configuration);
    face.overlay = Overlay::Configuration(now.unwrap_or(0));
    None
}

pub(super) fn step(view: &View, face: &mut Face, by: isize) -> Option<Action> {
    if let (Overlay::Configuration(at) | Overlay::Correct(_, at), count @ 1..) =
        (&mut face.overlay, view.configurations.len())
    {
        *at = (*at % count).wrapping_add_signed(by).wrapping_add(count) % count;
    }
    None
}

pub(super) fn fit(view: &View, face: &mut Face) -> Option<Action> {
    let letter = |at: usize| view.configurations.get(at).map(|(letter, _)| letter.clone());
    match std::mem::take(&mut face.overlay) {
        Overlay::Configuration(at) => say(Command::Configuration(letter(at)?)),
        Overlay::Correct(id, at) => say(Command::CorrectConfiguration(id, letter(at)?)),
        _ => None,
    }
}

/// Its own letter first, then the other case, then its number in the list.
pub(super) fn fit_letter(view: &View, face: &mut Face, typed: char) -> Option<Action> {
    let all = &view.configurations;
    let is = |wanted: &str| all.iter().position(|(letter, _)| letter == wanted);
    let typed_word = typed.to_string();
    let number = typed.to_digit(10).and_then(|d| (d as usize).checked_sub(1)).filter(|i| *i < all.len());
    let at = is(&typed_word).or_else(|| is(&typed_word.to_uppercase())).or_else(|| is(&typed_word.to_lowercase()));
    let at = at.or(number)?;
    match &mut face.overlay {
        Overlay::Configuration(marked) | Overlay::Correct(_, marked) => *marked = at,
        _ => return None,
    }
    fit(view, face)
}

pub(super) fn open(face: &mut Face, kind: PromptKind) -> Option<Action> {
    face.overlay = Overlay::Prompt(Prompt { kind, text: String::new(), complaint: None });
    None
}

pub(super) fn type_in(face: &mut Face, c: char) -> Option<Action> {
    match &mut face.overlay {
        Overlay::Prompt(prompt) => {
            prompt.complaint = None;
            let separator = matches!(c, '\u{2028}' | '\u{2029}');
            if !c.is_control() && !separator && prompt.text.chars().count() < LONGEST_TEXT {
                prompt.text.push(c);
            }
        }
        Overlay::Calibration(c2) if matches!(c, '0'..='9' | '.' | '-' | '+' | 'e' | 'm') && c2.text.len() < 16 => {
            c2.text.push(c)
        }
        _ => {}
    }
    None
}

pub(super) fn rub_out(_: &View, face: &mut Face) -> Option<Action> {
    match &mut face.overlay {
        Overlay::Prompt(prompt) => {
            prompt.text.pop();
            prompt.complaint = None;
        }
        Overlay::Calibration(c) => drop(c.text.pop()),
        _ => {}
    }
    None
}

pub(super) fn start_again(_: &View, face: &mut Face) -> Option<Action> {
    match &mut face.overlay {
        Overlay::Prompt(prompt) => {
            prompt.text.clear();
            prompt.complaint = None;
        }
        Overlay::Calibration(c) => c.text.clear(),
        _ => {}
    }
    None
}

/// What was typed goes through the words of the record, so that a prompt accepts just what a replay does.
pub(super) fn submit(_: &View, face: &mut Face) -> Option<Action> {
    let Overlay::Prompt(prompt) = &mut face.overlay else { return None };
    let words = match prompt.kind {
        PromptKind::Note => format!("note {}", prompt.text),
        PromptKind::NoteOn(id) if !prompt.text.trim().is_empty() => format!("note segment {id}: {}", prompt.text),
        PromptKind::NoteOn(_) => "note".to_string(),
        PromptKind::Air => format!("air {}", prompt.text),
        PromptKind::Taps => format!("taps {}", prompt.text),
    };
    match Command::parse(&words) {
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
pub(in crate::screen) fn at_stake(view: &View) -> Option<&'static str> {
    match view.held.as_ref().map(|h| h.kept) {
        Some(Kept::Writing(_)) => Some("A segment is still being written."),
        Some(Kept::Failed(_)) => Some("A segment is NOT ON DISK and would be lost."),
        Some(Kept::No) => Some("The held dwell was not taken."),
        _ if view.span.is_some() => Some("A span is open."),
        _ => None,
    }
}

// ---------------------------------------------------------------- places

/// Goes to another place; away from Drive on the move only when asked again, alone not at all.
pub(super) fn go(view: &View, face: &mut Face, to: fn(Spot) -> Spot) -> Option<Action> {
    let to = to(face.spot);
    match (face.spot == Spot::Drive && moves(view), face.solo) {
        (false, _) => face.spot = to,
        (true, false) => face.overlay = Overlay::Away(to),
        (true, true) => {}
    }
    None
}

fn moves(view: &View) -> bool {
    view.window.speed_kmh.is_some_and(|v| v > WALKING_KMH)
}

pub(super) fn away(_: &View, face: &mut Face) -> Option<Action> {
    if let Overlay::Away(to) = std::mem::take(&mut face.overlay) {
        face.spot = to;
    }
    None
}

pub(super) fn lay(face: &mut Face, overlay: Overlay) -> Option<Action> {
    face.overlay = overlay;
    None
}

// ---------------------------------------------------------------- beside the road

pub(super) fn turn_configuration(face: &mut Face, by: isize) -> Option<Action> {
    // Counted modulo what there is when it is drawn.
    const ROUND: usize = 5040;
    face.layby.configuration = (face.layby.configuration % ROUND + ROUND).wrapping_add_signed(by);
    None
}

pub(super) fn turn_target(_: &View, face: &mut Face) -> Option<Action> {
    face.layby.target = face.layby.target.wrapping_add(1);
    None
}

pub(super) fn next_pane(_: &View, face: &mut Face) -> Option<Action> {
    face.layby.pane = face.layby.pane.next();
    None
}

pub(super) fn turn_picture(_: &View, face: &mut Face) -> Option<Action> {
    face.layby.levels = !face.layby.levels;
    None
}

pub(super) fn scroll(view: &View, face: &mut Face, by: isize) -> Option<Action> {
    let Some(findings) = &view.findings else { return None };
    let warnings = findings.reduction.as_ref().map_or(0, |r| r.flags.len());
    let (at, count) = match face.layby.pane {
        Pane::Segments => (&mut face.layby.segment, findings.segments.len()),
        Pane::Warnings | Pane::Picture => (&mut face.layby.warning, warnings),
    };
    *at = (*at).min(count.saturating_sub(1)).saturating_add_signed(by).min(count.saturating_sub(1));
    None
}

/// The segment that is marked, counted from the newest.
fn marked_segment(view: &View, face: &Face) -> Option<u32> {
    let segments = &view.findings.as_ref()?.segments;
    let back = face.layby.segment.min(segments.len().checked_sub(1)?);
    segments.get(segments.len() - 1 - back).map(|s| s.id)
}

pub(super) fn look_into(view: &View, face: &mut Face) -> Option<Action> {
    if let Some(id) = marked_segment(view, face) {
        face.layby.pane = Pane::Segments;
        face.overlay = Overlay::Segment(id);
    }
    None
}

pub(super) fn correct_configuration(view: &View, face: &mut Face) -> Option<Action> {
    let Overlay::Segment(id) = face.overlay else { return None };
    let segment = view.findings.as_ref()?.segments.iter().find(|s| s.id == id)?;
    let now = view.configurations.iter().position(|(letter, _)| *letter == segment.configuration);
    lay(face, Overlay::Correct(id, now.unwrap_or(0)))
}

pub(super) fn correct_direction(view: &View, face: &mut Face) -> Option<Action> {
    let Overlay::Segment(id) = face.overlay else { return None };
    let segment = view.findings.as_ref()?.segments.iter().find(|s| s.id == id)?;
    let next = match segment.direction {
        Direction::Out => Direction::Back,
        Direction::Back => Direction::Other,
        Direction::Other => Direction::Out,
    };
    say(Command::CorrectDirection(id, next))
}

pub(super) fn void_segment(_: &View, face: &mut Face) -> Option<Action> {
    let Overlay::Segment(id) = face.overlay else { return None };
    lay(face, Overlay::Void(id))
}

pub(super) fn restore(_: &View, face: &mut Face) -> Option<Action> {
    let Overlay::Segment(id) = face.overlay else { return None };
    say(Command::Restore(id))
}

pub(super) fn note_on_segment(_: &View, face: &mut Face) -> Option<Action> {
    let Overlay::Segment(id) = face.overlay else { return None };
    open(face, PromptKind::NoteOn(id))
}

// ---------------------------------------------------------------- in the workshop

pub(super) fn turn_channel(view: &View, face: &mut Face, by: isize) -> Option<Action> {
    let count = view.bench.as_ref().map_or(0, |b| b.rows.len());
    let at = face.bench.channel.min(count.saturating_sub(1));
    face.bench.channel = at.saturating_add_signed(by).min(count.saturating_sub(1));
    None
}

pub(super) fn calibrate(_: &View, face: &mut Face) -> Option<Action> {
    lay(face, Overlay::Calibration(Calibrating::default()))
}

pub(super) fn reference(view: &View, face: &mut Face) -> Option<Action> {
    let bench = view.bench.as_ref()?;
    let unit = &bench.rows.get(face.bench.channel)?.unit;
    if let Overlay::Calibration(c) = &mut face.overlay {
        match c.typed(unit, bench.air.as_ref()) {
            Some(value) => (c.pending, c.told) = (Some((value, view.now)), None),
            None => c.told = Some("type what the reference shows first, as 250, -98.07 or 35.2mm".to_string()),
        }
        c.text.clear();
    }
    None
}

pub(super) fn drop_point(_: &View, face: &mut Face) -> Option<Action> {
    if let Overlay::Calibration(c) = &mut face.overlay {
        (c.pending, c.told) = (None, None);
        c.points.pop();
    }
    None
}

pub(super) fn write_calibration(view: &View, face: &mut Face) -> Option<Action> {
    let row = view.bench.as_ref().and_then(|b| b.rows.get(face.bench.channel))?;
    let Overlay::Calibration(c) = &mut face.overlay else { return None };
    match c.fit() {
        Some(fit) => Some(Action::Calibrate { channel: row.channel.clone(), convert: fit.convert() }),
        None => {
            c.told = Some("nothing to write: two points or more are needed".to_string());
            None
        }
    }
}

pub(super) fn begin_leak(view: &View, face: &mut Face) -> Option<Action> {
    lay(face, Overlay::Leak(Some(view.now)))
}

/// A new view has come: what waits for the instrument looks at it.
pub fn look(view: &View, face: &mut Face) {
    let Some(bench) = &view.bench else { return };
    match &mut face.overlay {
        Overlay::Calibration(c) => c.look(bench),
        Overlay::Step(found) => *found = bench::step(bench).or(*found),
        _ => {}
    }
}
