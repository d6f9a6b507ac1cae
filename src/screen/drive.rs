//! The Drive screen: one glance tells the state, the speed and whether the held dwell is kept.
//!
//! The first nine rows never move: title, four rows of large signs, fate of the held dwell, place in the window,
//! progress, tag of the next segment. Below them the channels take what they need, then ports, messages and
//! the line of keys. States differ in word and in the shape of the title's rule and of the bar at the left, then in colour.

use super::canvas::Canvas;
use super::digits::{self, Size};
use super::figures::{Figures, clock, seconds};
use super::keys;
use super::rows;
use super::text::folded;
use super::theme::Role;
use super::{Face, Kept, Overlay, View, WindowState, below, layby};
use crate::units::Quantity;
use ratatui::layout::Rect;

/// Smallest size that shows everything.
const SMALLEST: (u16, u16) = (60, 20);
/// Alone, nothing is to be read before the car has stood for so long, s.
const READ_AFTER_S: f64 = 10.0;
/// Rows above the channels.
const HEAD_ROWS: u16 = 9;
/// Rows kept for ports and messages however many channels there are: trouble coming and going moves nothing.
const LEAST_BELOW: u16 = 2;
/// Columns of the widest large state word.
const STATE_COLUMNS: u16 = 45;

/// Whether the buffer is too small for the screen.
pub(super) fn too_small(canvas: &Canvas) -> bool {
    canvas.area().width < SMALLEST.0 || canvas.area().height < SMALLEST.1
}

/// What the state looks like.
struct Look {
    word: &'static str,
    role: Role,
    /// Signs of the rule, full and ASCII.
    rule: [char; 2],
    /// Signs of the bar, full and ASCII.
    bar: [char; 2],
}

fn look(view: &View) -> Look {
    let look = |word, role, rule, bar| Look { word, role, rule, bar };
    let kept = view.held.as_ref().map(|h| h.kept);
    match view.window.state {
        WindowState::NoSpeed => look("NO SPEED", Role::Off, ['·', '.'], [' ', ' ']),
        WindowState::TooSlow => look("OFF SLOW", Role::Off, ['·', '.'], ['▼', 'v']),
        WindowState::TooFast => look("OFF FAST", Role::Off, ['·', '.'], ['▲', '^']),
        WindowState::Settling => look("SETTLING", Role::Settling, ['░', ':'], ['░', ':']),
        WindowState::Steady => look("STEADY", Role::Steady, ['─', '-'], ['▒', '|']),
        WindowState::Held => match kept {
            Some(Kept::OnDisk(_)) => look("KEPT", Role::Kept, ['■', '#'], ['█', '#']),
            Some(Kept::Failed(_)) => look("NOT KEPT", Role::Trouble, ['!', '!'], ['!', '!']),
            _ => look("HELD", Role::Held, ['═', '='], ['▓', 'H']),
        },
    }
}

/// Draws the whole screen; for a driver alone only what a glance needs, and trouble.
pub(super) fn draw(view: &View, face: &Face, canvas: &mut Canvas) {
    let area = canvas.area();
    draw_title(view, canvas);
    draw_banner(view, canvas);
    draw_fate(view, canvas, area.y + 5);
    if face.solo {
        let room = Rect::new(area.x, area.y + 7, area.width, area.height - 7);
        let used = below::draw_trouble(view, canvas, room);
        let rest = Rect { y: room.y + used, height: room.height.saturating_sub(used), ..room };
        if view.stood_s.is_some_and(|s| s >= READ_AFTER_S) {
            draw_parked(view, canvas, rest);
        }
        return;
    }
    draw_gauge(view, canvas, area.y + 6);
    draw_progress(view, canvas, area.y + 7);
    draw_tag(view, canvas, area.y + 8);
    let bottom = area.bottom() - 1;
    keys::draw_line(canvas, face, bottom);
    let room = Rect::new(area.x, area.y + HEAD_ROWS, area.width, area.height - HEAD_ROWS - 1);
    draw_room(view, canvas, room);
}

/// Parked long enough to read: what to do now, and what the passes say so far.
fn draw_parked(view: &View, canvas: &mut Canvas, room: Rect) {
    let asks =
        view.asks.as_ref().map(|letter| format!("fit {letter}, then the remote's forward key (or Space) confirms it"));
    let plan = view.plan.as_ref().map(|plan| format!("plan: {plan}"));
    let verdicts = view.findings.iter().flat_map(|f| layby::verdicts(view, f));
    let lines = asks.into_iter().chain(plan).chain(verdicts).flat_map(|l| folded(&l, usize::from(room.width) - 4));
    for (y, line) in (room.y + 1..room.bottom()).zip(lines) {
        canvas.text((room.x + 2, y), room.width - 3, &line, Role::Base);
    }
}

/// Channels, ports and messages share what is left: channels first, then a line a port, then messages.
fn draw_room(view: &View, canvas: &mut Canvas, room: Rect) {
    let ports = u16::try_from(view.ports.len()).unwrap_or(u16::MAX);
    let used = rows::draw(view, canvas, room, (LEAST_BELOW, ports.saturating_add(5)));
    below::draw(view, canvas, Rect { y: room.y + used, height: room.height - used, ..room });
}

fn draw_title(view: &View, canvas: &mut Canvas) {
    let area = canvas.area();
    let Look { role, rule, .. } = look(view);
    let rule_role = if matches!(role, Role::Kept) { Role::Held } else { role };
    let sign = canvas.sign(rule[0], rule[1]);
    canvas.fill(Rect { height: 1, ..area }, sign, rule_role);
    let record = if view.journal.recording { "record on" } else { "NO RECORD" };
    let ended = if view.ended { "ENDED " } else { "" };
    let right = format!(" {record}  {ended}{} ", clock(view.now));
    let right_columns = 28;
    let file_right = area.right() - 1 - u16::try_from(right.len()).unwrap_or(right_columns).min(right_columns);
    let names = (file_right - area.x - 4) / 2;
    canvas.text((area.x + 2, area.y), names, &format!(" {} ", view.title), Role::Strong);
    canvas.text_right((file_right, area.y), names, &format!(" {} ", view.journal.file), Role::Quiet);
    canvas.text_right((area.right() - 1, area.y), right_columns, &right, Role::Quiet);
}

fn draw_banner(view: &View, canvas: &mut Canvas) {
    let area = canvas.area();
    let Look { word, role, bar, .. } = look(view);
    let banner = Rect::new(area.x, area.y + 1, area.width, 4);
    if matches!(role, Role::Kept | Role::Trouble) {
        canvas.fill(Rect { width: STATE_COLUMNS + 3, ..banner }, ' ', role);
    }
    let sign = canvas.sign(bar[0], bar[1]);
    let bar_role = if role == Role::Kept { Role::Held } else { role };
    canvas.fill(Rect { width: 1, ..banner }, sign, bar_role);
    let state = Rect::new(area.x + 2, banner.y, STATE_COLUMNS, 4);
    digits::draw(canvas, state, word, (Size::Large, false), role);
    let figures = Figures::of(Quantity::Speed, &view.show);
    let unit_columns = 5;
    let speed_left = state.right() + 2;
    let speed = Rect::new(speed_left, banner.y, area.right() - unit_columns - speed_left, 4);
    let speed_role = if role == Role::Off { Role::Off } else { Role::Strong };
    match view.window.speed_kmh.filter(|v| v.is_finite()) {
        Some(kmh) => digits::draw(canvas, speed, &figures.short(kmh), (Size::Large, true), speed_role),
        None => digits::draw(canvas, speed, "---", (Size::Large, true), Role::Off),
    }
    canvas.text((area.right() - unit_columns + 1, banner.y + 3), 4, figures.unit(), Role::Base);
    let kind = if view.window.airspeed { "air" } else { "road" };
    canvas.text((area.right() - unit_columns + 1, banner.y), 4, kind, Role::Quiet);
}

fn draw_fate(view: &View, canvas: &mut Canvas, y: u16) {
    let area = canvas.area();
    let count = format!("{:>3} kept", view.kept);
    let (text, role) = fate(view);
    canvas.text((area.x + 2, y), area.width - 26, &text, role);
    if let Some(begun) = view.span {
        let span = format!(" SPAN {} s ", seconds(view.now.since(begun) as f64 / 1e6));
        canvas.text_right((area.right() - 10, y), 14, &span, Role::Kept);
    }
    canvas.text_right((area.right() - 1, y), 8, &count, Role::Strong);
}

/// What became of the held dwell, in words.
fn fate(view: &View) -> (String, Role) {
    let figures = Figures::of(Quantity::Speed, &view.show);
    let armed = if view.armed { "; ARMED for the next" } else { "" };
    let Some(held) = &view.held else {
        return if view.armed {
            ("ARMED: the next full dwell is kept".into(), Role::Steady)
        } else {
            ("nothing held yet".into(), Role::Quiet)
        };
    };
    let speed = figures.short(held.target_kmh);
    match held.kept {
        Kept::No if view.armed => (format!("held at {speed}: not taken{armed}"), Role::Steady),
        Kept::No => (format!("held at {speed}: NOT TAKEN, Space keeps it"), Role::Held),
        Kept::Writing(id) => (format!("held at {speed}: {id} taken, writing{armed}"), Role::Held),
        Kept::OnDisk(id) => (format!(" held at {speed}: {id} KEPT on disk{armed} "), Role::Kept),
        Kept::Failed(id) => (format!(" held at {speed}: {id} NOT ON DISK, in memory only{armed} "), Role::Trouble),
    }
}

/// The window from edge to edge with the speed's place in it; the scale spans three windows.
fn draw_gauge(view: &View, canvas: &mut Canvas, y: u16) {
    let area = canvas.area();
    let window = &view.window;
    let figures = Figures::of(Quantity::Speed, &view.show);
    let width = format!("{} ±{}", figures.short(window.target_kmh), figures.short(window.tolerance_kmh));
    canvas.text((area.x + 2, y), 11, &width, Role::Base);
    let scale = Rect::new(area.x + 14, y, area.width - 15, 1);
    let (outside, inside) = (canvas.sign('·', '.'), canvas.sign('═', '='));
    canvas.fill(scale, outside, Role::Quiet);
    let left = scale.x + scale.width / 3;
    let right = scale.right() - 1 - scale.width / 3;
    canvas.fill(Rect { x: left, width: right - left + 1, ..scale }, inside, Role::Steady);
    canvas.put((left, y), '[', Role::Strong);
    canvas.put((right, y), ']', Role::Strong);
    let tick = canvas.sign('╪', '+');
    canvas.put((left + (right - left) / 2, y), tick, Role::Steady);
    let Some(kmh) = window.speed_kmh.filter(|v| v.is_finite()) else { return };
    let place = (kmh - window.target_kmh) / window.tolerance_kmh.max(1e-9);
    let half = f64::from(right - left) / 2.0;
    let column = f64::from(left) + half + place.clamp(-9.0, 9.0) * half;
    let (sign, column) = if column < f64::from(scale.x) {
        (canvas.sign('◄', '<'), scale.x)
    } else if column > f64::from(scale.right() - 1) {
        (canvas.sign('►', '>'), scale.right() - 1)
    } else {
        (canvas.sign('▼', 'V'), column.round() as u16)
    };
    canvas.put((column.min(scale.right() - 1), y), sign, look(view).role);
}

fn draw_progress(view: &View, canvas: &mut Canvas, y: u16) {
    let area = canvas.area();
    let window = &view.window;
    let (label, ends) = match window.state {
        WindowState::NoSpeed | WindowState::TooSlow | WindowState::TooFast => {
            canvas.text((area.x + 2, y), area.width - 3, &off_words(view), Role::Off);
            return;
        }
        WindowState::Settling => ("settling", "s to settle"),
        WindowState::Steady => ("dwell", "s to hold"),
        WindowState::Held => ("dwell", "s to next"),
    };
    canvas.text((area.x + 2, y), 9, label, Role::Base);
    let left = format!("{} {ends}", seconds(window.left_s));
    canvas.text_right((area.right() - 1, y), 17, &format!("{left:<17}"), Role::Strong);
    let bar = Rect::new(area.x + 14, y, area.width - 33, 1);
    let empty = canvas.sign('░', '.');
    canvas.fill(bar, empty, Role::Quiet);
    let share = if window.progress.is_finite() { window.progress.clamp(0.0, 1.0) } else { 0.0 };
    let full = Rect { width: (f64::from(bar.width) * share).round() as u16, ..bar };
    let sign = canvas.sign('█', '#');
    canvas.fill(full, sign, if window.state == WindowState::Settling { Role::Settling } else { Role::Steady });
}

/// Why the window is off, and by how much.
fn off_words(view: &View) -> String {
    let window = &view.window;
    let (Some(kmh), Some(way)) = (
        window.speed_kmh,
        match window.state {
            WindowState::TooSlow => Some(("too slow", "below")),
            WindowState::TooFast => Some(("too fast", "above")),
            _ => None,
        },
    ) else {
        return "no speed: nothing received, or stale".into();
    };
    let figures = Figures::of(Quantity::Speed, &view.show);
    let gap = (kmh - window.target_kmh).abs() - window.tolerance_kmh;
    format!("{}: {} {} {} the window", way.0, figures.short(gap.max(0.0)), figures.unit(), way.1)
}

fn draw_tag(view: &View, canvas: &mut Canvas, y: u16) {
    let area = canvas.area();
    let tag = &view.tag;
    let used = canvas.text((area.x + 2, y), 6, "next ", Role::Quiet);
    let x = area.x + 2 + used;
    let used = canvas.text((x, y), 8, &format!("[{}]", tag.configuration), Role::Strong);
    let wide = area.width >= 72;
    let fixed = if wide { 49 } else { 34 };
    let at = area.right() - fixed;
    canvas.text((x + used + 1, y), at.saturating_sub(x + used + 2), &tag.name, Role::Base);
    let used = canvas.text((at, y), 5, tag.direction, Role::Strong).max(5);
    if wide {
        let how = if tag.by_hand { "by key" } else { "by track" };
        canvas.text((at + 6, y), 8, how, Role::Quiet);
    }
    let pass_at = if wide { at + 16 } else { at + used + 1 };
    canvas.text((pass_at, y), 14, &format!("pass {:>2} of {}", tag.pass, tag.wanted), Role::Base);
    let (zero, role) = zero_age(view.zero_age_s, wide);
    canvas.text_right((area.right() - 1, y), 17, &zero, role);
}

fn zero_age(age_s: Option<f64>, wide: bool) -> (String, Role) {
    match age_s.filter(|s| s.is_finite() && *s >= 0.0) {
        None if wide => (" NEVER ZEROED ".into(), Role::Trouble),
        None => (" NO ZERO ".into(), Role::Trouble),
        Some(s) => {
            let minutes = (s / 60.0).floor().min(999.0);
            let ago = if wide { " ago" } else { "" };
            (format!("zero {minutes:>3.0} min{ago}"), Role::Quiet)
        }
    }
}

/// On fewer cells: what it needs, then state, speed and fate on the lines there are; and what waits for a key.
pub(super) fn draw_small(view: &View, face: &Face, canvas: &mut Canvas) {
    let area = canvas.area();
    let figures = Figures::of(Quantity::Speed, &view.show);
    let speed = view.window.speed_kmh.map_or("---".to_string(), |v| figures.short(v));
    let Look { word, role, .. } = look(view);
    let asks = match &face.overlay {
        Overlay::None => None,
        Overlay::Safety => Some("drive safely: any key".to_string()),
        Overlay::Help => Some("help is open: Esc".to_string()),
        Overlay::Quit => Some("leave? Enter or Esc".to_string()),
        Overlay::Void(id) => Some(format!("void {id}? Enter or Esc")),
        Overlay::Configuration(_) | Overlay::Correct(..) => Some("configuration? letter or Esc".to_string()),
        Overlay::Away(_) => Some("the car moves: Tab leaves Drive, Esc".to_string()),
        Overlay::Segment(id) => Some(format!("segment {id} is open: Esc")),
        Overlay::Calibration(_) | Overlay::Leak(_) | Overlay::Step(_) => Some("a tool is open: Esc".to_string()),
        Overlay::Prompt(prompt) => Some(format!("text: {}", prompt.text)),
    };
    let needs = format!("steadytap needs {} × {}, this is {} × {}", SMALLEST.0, SMALLEST.1, area.width, area.height);
    let lines = [
        Some((word.to_string(), role)),
        Some((format!("{speed} {}", figures.unit()), Role::Strong)),
        Some(fate(view)),
        view.journal.trouble.as_ref().map(|t| (format!("DISK: {t}"), Role::Trouble)),
        asks.map(|a| (a, Role::Strong)),
        Some((format!("{} kept", view.kept), Role::Base)),
        Some((needs, Role::Quiet)),
    ];
    for (y, (text, role)) in (area.y..area.bottom()).zip(lines.into_iter().flatten()) {
        canvas.text((area.x, y), area.width, text.trim(), role);
    }
}
