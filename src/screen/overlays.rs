//! What lies over the Drive screen: the help, two questions, the list of configurations, a line of text.
//!
//! Each is a box in the lower part, so that state, speed and fate stay in sight; only the help covers more.

use super::canvas::Canvas;
use super::keys::{Place, at_stake, help_rows, keys_of};
use super::text::{safe, width};
use super::theme::Role;
use super::{Face, Overlay, Prompt, PromptKind, SAFETY, View};
use ratatui::layout::Rect;

/// Draws the overlay that is open.
pub(super) fn draw(view: &View, face: &Face, canvas: &mut Canvas) {
    match &face.overlay {
        Overlay::None => {}
        Overlay::Safety => draw_safety(canvas),
        Overlay::Help => draw_help(canvas),
        Overlay::Quit => draw_quit(view, canvas),
        Overlay::Void(id) => draw_void(*id, canvas),
        Overlay::Configuration(at) => draw_configurations(view, *at, canvas),
        Overlay::Prompt(prompt) => draw_prompt(prompt, canvas),
    }
}

/// An empty box with a title, at the bottom above the line of keys; returns its inside.
fn panel(canvas: &mut Canvas, (columns, rows): (u16, u16), title: &str) -> Rect {
    let area = canvas.area();
    let (columns, rows) = (columns.min(area.width), (rows + 2).min(area.height));
    let x = area.x + (area.width - columns) / 2;
    let outer = Rect::new(x, area.bottom() - rows - u16::from(rows < area.height), columns, rows);
    canvas.fill(outer, ' ', Role::Base);
    let (across, along) = (canvas.sign('─', '-'), canvas.sign('│', '|'));
    for y in [outer.top(), outer.bottom() - 1] {
        canvas.fill(Rect { y, height: 1, ..outer }, across, Role::Strong);
    }
    for x in [outer.left(), outer.right() - 1] {
        canvas.fill(Rect { x, width: 1, ..outer }, along, Role::Strong);
    }
    let corners = [('┌', outer.left(), outer.top()), ('┐', outer.right() - 1, outer.top())];
    let feet = [('└', outer.left(), outer.bottom() - 1), ('┘', outer.right() - 1, outer.bottom() - 1)];
    for (corner, x, y) in corners.into_iter().chain(feet) {
        let sign = canvas.sign(corner, '+');
        canvas.put((x, y), sign, Role::Strong);
    }
    canvas.text((outer.x + 2, outer.y), outer.width - 4, &format!(" {title} "), Role::Strong);
    Rect::new(outer.x + 2, outer.y + 1, outer.width - 4, outer.height - 2)
}

fn draw_safety(canvas: &mut Canvas) {
    let rows = u16::try_from(SAFETY.len() + 1).unwrap_or(u16::MAX);
    let inside = panel(canvas, (80, rows), "Before you drive");
    for (y, line) in (inside.top()..inside.bottom()).zip(SAFETY.into_iter().chain(["any key goes on"])) {
        canvas.text((inside.x, y), inside.width, line, Role::Base);
    }
}

/// The key table; where the screen is low it covers the line of keys too.
fn draw_help(canvas: &mut Canvas) {
    let rows = u16::try_from(help_rows().count()).unwrap_or(u16::MAX);
    let inside = panel(canvas, (60, rows), &format!("keys: {}", keys_of(Place::Help)));
    for (y, row) in (inside.top()..inside.bottom()).zip(help_rows()) {
        canvas.text((inside.x, y), 9, row.shown, Role::Strong);
        canvas.text((inside.x + 10, y), inside.width - 10, row.does, Role::Base);
    }
}

fn draw_quit(view: &View, canvas: &mut Canvas) {
    let inside = panel(canvas, (56, 4), "Leave?");
    let kept = format!("{} segments kept in {}", view.kept, view.journal.file);
    canvas.text((inside.x, inside.y), inside.width, &kept, Role::Base);
    if let Some(stake) = at_stake(view) {
        canvas.text((inside.x, inside.y + 1), inside.width, stake, Role::Off);
    }
    canvas.text((inside.x, inside.y + 3), inside.width, &keys_of(Place::Quit), Role::Strong);
}

fn draw_void(id: u32, canvas: &mut Canvas) {
    let inside = panel(canvas, (56, 3), &format!("Void segment {id}?"));
    canvas.text((inside.x, inside.y), inside.width, "It stays in the file and no longer counts.", Role::Base);
    canvas.text((inside.x, inside.y + 2), inside.width, &keys_of(Place::Void), Role::Strong);
}

fn draw_configurations(view: &View, at: usize, canvas: &mut Canvas) {
    let most = usize::from(canvas.area().height.saturating_sub(6).min(12));
    let count = view.configurations.len();
    let rows = u16::try_from(count.min(most) + 2).unwrap_or(4);
    let inside = panel(canvas, (60, rows), "Which configuration is fitted? Its letter, or");
    let skip = (at + 1).saturating_sub(most);
    for (y, (i, (letter, name))) in (inside.y..).zip(view.configurations.iter().enumerate().skip(skip).take(most)) {
        let (mark, role) = if i == at { (canvas.sign('►', '>'), Role::Held) } else { (' ', Role::Base) };
        canvas.put((inside.x, y), mark, role);
        canvas.text((inside.x + 2, y), inside.width - 2, &format!("{letter}  {name}"), role);
    }
    let last = inside.bottom().saturating_sub(1);
    canvas.text((inside.x, last), inside.width, &keys_of(Place::Configuration), Role::Strong);
}

fn draw_prompt(prompt: &Prompt, canvas: &mut Canvas) {
    let (title, asks) = match prompt.kind {
        PromptKind::Note => ("Note", "some words"),
        PromptKind::Air => ("Air", "temperature °C, pressure hPa, humidity %, as 18.5 1011 60"),
        PromptKind::Taps => ("Taps", "channel=tap, as p1=base-high p2=base-low"),
    };
    let columns = canvas.area().width - 4;
    let inside = panel(canvas, (columns, 4), title);
    let tail = tail(&safe(&prompt.text), usize::from(inside.width.saturating_sub(3)));
    canvas.text((inside.x, inside.y), inside.width, asks, Role::Quiet);
    canvas.put((inside.x, inside.y + 1), '>', Role::Strong);
    let used = canvas.text((inside.x + 2, inside.y + 1), inside.width - 3, &tail, Role::Strong);
    let cursor = canvas.sign('█', '_');
    canvas.put((inside.x + 2 + used, inside.y + 1), cursor, Role::Held);
    if let Some(complaint) = &prompt.complaint {
        canvas.text((inside.x, inside.y + 2), inside.width, complaint, Role::Off);
    }
    canvas.text((inside.x, inside.y + 3), inside.width, &keys_of(Place::Prompt), Role::Strong);
}

/// The end of a safe text that fits in so many columns.
fn tail(text: &str, columns: usize) -> String {
    let mut kept: Vec<char> = Vec::new();
    let mut used = 0;
    for c in text.chars().rev() {
        used += width(c.encode_utf8(&mut [0; 4]));
        if used > columns {
            break;
        }
        kept.push(c);
    }
    kept.iter().rev().collect()
}
