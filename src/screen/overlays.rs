//! What lies over a place: the help, questions, lists, a segment, the tools of the workshop, a line of text.
//!
//! Each is a box in the lower part, so that state, speed and fate stay in sight; only the help covers more.

use super::canvas::Canvas;
use super::figures::Figures;
use super::keys::{Place, at_stake, help_rows, keys_of};
use super::layby::segment_words;
use super::text::{folded, safe, width};
use super::theme::Role;
use super::{Face, Overlay, Prompt, PromptKind, SAFETY, Spot, View, bench};
use ratatui::layout::Rect;

/// Draws the overlay that is open.
pub(super) fn draw(view: &View, face: &Face, canvas: &mut Canvas) {
    match &face.overlay {
        Overlay::None => {}
        Overlay::Safety => draw_safety(canvas),
        Overlay::Help => draw_help(face, canvas),
        Overlay::Quit => draw_quit(view, face, canvas),
        Overlay::Void(id) => draw_void(*id, face, canvas),
        Overlay::Away(to) => draw_away(*to, face, canvas),
        Overlay::Configuration(at) => {
            draw_configurations(view, *at, (face, "Which configuration is fitted? Its letter, or"), canvas);
        }
        Overlay::Correct(id, at) => {
            draw_configurations(view, *at, (face, &format!("What was fitted in segment {id}? Its letter, or")), canvas);
        }
        Overlay::Segment(id) => draw_segment(view, *id, face, canvas),
        Overlay::Calibration(c) => {
            draw_tool(("Calibration", Place::Calibration), &bench::calibration_lines(view, face, c), face, canvas);
        }
        Overlay::Leak(since) => {
            draw_tool(("Leak test", Place::Leak), &bench::leak_lines(view, face, *since), face, canvas);
        }
        Overlay::Step(found) => draw_tool(("Hose", Place::Step), &bench::step_lines(view, face, *found), face, canvas),
        Overlay::Prompt(prompt) => draw_prompt(prompt, face, canvas),
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

/// The key table of the place; where the screen is low it covers the line of keys too.
fn draw_help(face: &Face, canvas: &mut Canvas) {
    let rows = u16::try_from(help_rows(face.spot).count()).unwrap_or(u16::MAX);
    let title = format!("{} keys: {}", face.spot.word(), keys_of(face, Place::Help));
    let inside = panel(canvas, (60, rows), &title);
    for (y, row) in (inside.top()..inside.bottom()).zip(help_rows(face.spot)) {
        let used = canvas.text((inside.x, y), inside.width, &face.bindings.shown(row), Role::Strong).max(9) + 1;
        canvas.text((inside.x + used, y), inside.width.saturating_sub(used), row.does, Role::Base);
    }
}

fn draw_away(to: Spot, face: &Face, canvas: &mut Canvas) {
    let inside = panel(canvas, (56, 3), "The car moves");
    let words = format!("{} is for a parked car; the driver looks at the road.", to.word());
    canvas.text((inside.x, inside.y), inside.width, &words, Role::Off);
    canvas.text((inside.x, inside.y + 2), inside.width, &keys_of(face, Place::Away), Role::Strong);
}

/// One segment: its tags, its channels with mean, spread and standard error.
fn draw_segment(view: &View, id: u32, face: &Face, canvas: &mut Canvas) {
    let found = view.findings.as_ref().and_then(|f| f.segments.iter().find(|s| s.id == id));
    let Some(segment) = found else { return };
    let keys = folded(&keys_of(face, Place::Segment), usize::from(canvas.area().width.min(76)) - 5);
    let foot = u16::try_from(keys.len()).unwrap_or(1);
    let rows = u16::try_from(segment.channels.len() + 3).unwrap_or(u16::MAX).saturating_add(foot);
    let inside = panel(canvas, (76, rows.min(canvas.area().height - 2)), &format!("Segment {id}"));
    canvas.text((inside.x, inside.y), inside.width, &segment_words(view, segment), Role::Strong);
    let seconds = segment.from_to[1].since(segment.from_to[0]) as f64 / 1e6;
    let why = if segment.left_out.is_empty() { String::new() } else { format!("; {}", segment.left_out.join(", ")) };
    canvas.text((inside.x, inside.y + 1), inside.width, &format!("averaged over {seconds:.1} s{why}"), Role::Quiet);
    canvas.text(
        (inside.x, inside.y + 2),
        inside.width,
        &format!("{:<18}{:>12} {:<6}{:>10}{:>10}{:>8}", "", "mean", "", "sd", "± se", "n"),
        Role::Quiet,
    );
    let last = inside.bottom() - foot;
    for (y, c) in (inside.y + 3..last).zip(&segment.channels) {
        let figures = Figures::of(c.quantity, &view.show);
        let (mean, sd, se) = (figures.signed(Some(c.mean)), figures.spread(c.sd), figures.spread(c.se));
        let label: String = c.label.chars().take(17).collect();
        let text = format!("{label:<18}{mean:>12} {:<6}{sd:>10}{se:>10}{:>8}", figures.unit(), c.n);
        canvas.text((inside.x, y), inside.width, &text, Role::Base);
    }
    for (y, line) in (last..inside.bottom()).zip(&keys) {
        canvas.text((inside.x, y), inside.width, line, Role::Strong);
    }
}

/// A tool of the workshop.
fn draw_tool((title, place): (&str, Place), lines: &[(String, Role)], face: &Face, canvas: &mut Canvas) {
    let columns = canvas.area().width.saturating_sub(4).min(96);
    let mut folds: Vec<(String, Role)> = Vec::new();
    for (line, role) in lines {
        folds.extend(folded(line, usize::from(columns) - 5).into_iter().map(|l| (l, *role)));
    }
    let keys = folded(&keys_of(face, place), usize::from(columns) - 5);
    folds.push((String::new(), Role::Base));
    folds.extend(keys.into_iter().map(|l| (l, Role::Strong)));
    let inside = panel(canvas, (columns, u16::try_from(folds.len()).unwrap_or(u16::MAX)), title);
    for (y, (line, role)) in (inside.top()..inside.bottom()).zip(&folds) {
        canvas.text((inside.x, y), inside.width, line, *role);
    }
}

fn draw_quit(view: &View, face: &Face, canvas: &mut Canvas) {
    let inside = panel(canvas, (56, 4), "Leave?");
    let kept = format!("{} segments kept in {}", view.kept, view.journal.file);
    canvas.text((inside.x, inside.y), inside.width, &kept, Role::Base);
    if let Some(stake) = at_stake(view) {
        canvas.text((inside.x, inside.y + 1), inside.width, stake, Role::Off);
    }
    canvas.text((inside.x, inside.y + 3), inside.width, &keys_of(face, Place::Quit), Role::Strong);
}

fn draw_void(id: u32, face: &Face, canvas: &mut Canvas) {
    let inside = panel(canvas, (56, 3), &format!("Void segment {id}?"));
    canvas.text((inside.x, inside.y), inside.width, "It stays in the file and no longer counts.", Role::Base);
    canvas.text((inside.x, inside.y + 2), inside.width, &keys_of(face, Place::Void), Role::Strong);
}

fn draw_configurations(view: &View, at: usize, (face, title): (&Face, &str), canvas: &mut Canvas) {
    let most = usize::from(canvas.area().height.saturating_sub(6).min(12));
    let count = view.configurations.len();
    let rows = u16::try_from(count.min(most) + 2).unwrap_or(4);
    let inside = panel(canvas, (60, rows), title);
    let skip = (at + 1).saturating_sub(most);
    for (y, (i, (letter, name))) in (inside.y..).zip(view.configurations.iter().enumerate().skip(skip).take(most)) {
        let (mark, role) = if i == at { (canvas.sign('►', '>'), Role::Held) } else { (' ', Role::Base) };
        canvas.put((inside.x, y), mark, role);
        canvas.text((inside.x + 2, y), inside.width - 2, &format!("{letter}  {name}"), role);
    }
    let last = inside.bottom().saturating_sub(1);
    canvas.text((inside.x, last), inside.width, &keys_of(face, Place::Configuration), Role::Strong);
}

fn draw_prompt(prompt: &Prompt, face: &Face, canvas: &mut Canvas) {
    let (title, asks) = match prompt.kind {
        PromptKind::Note => ("Note", "some words"),
        PromptKind::NoteOn(_) => ("Note on this segment", "some words"),
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
    canvas.text((inside.x, inside.y + 3), inside.width, &keys_of(face, Place::Prompt), Role::Strong);
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
