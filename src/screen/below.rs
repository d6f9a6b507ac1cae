//! Below the channels: how every port is, what happened last, and what to drive next.

use super::canvas::Canvas;
use super::figures::clock;
use super::theme::Role;
use super::{Message, PortHealth, PortState, View, Weight};
use ratatui::layout::Rect;

/// A message is news for this long, µs of stream time.
const NEWS_US: i64 = 8_000_000;

/// Ports first, then messages and the plan in the rest.
pub(super) fn draw(view: &View, canvas: &mut Canvas, mut area: Rect) {
    let used = draw_ports(view, canvas, area);
    area.y += used;
    area.height -= used;
    draw_messages(view, canvas, area);
}

/// A row a port where there is room, else all in one; returns the rows used.
pub(super) fn draw_ports(view: &View, canvas: &mut Canvas, area: Rect) -> u16 {
    let trouble = u16::from(view.journal.trouble.is_some());
    let every_port = view.ports.len() < usize::from(area.height.saturating_sub(trouble));
    let port_rows = if every_port { u16::try_from(view.ports.len()).unwrap_or(0) } else { 1 };
    if every_port {
        for (y, port) in (area.y..).zip(&view.ports) {
            draw_port(port, canvas, y);
        }
    } else {
        draw_ports_in_one(&view.ports, canvas, area.y);
    }
    port_rows
}

fn port_words(state: PortState) -> (&'static str, &'static str, Role) {
    match state {
        PortState::Waiting => ("waiting", "nothing came yet", Role::Base),
        PortState::Good => ("good", "", Role::Base),
        PortState::CheckBaud => ("CHECK BAUD", "bytes arrive but no line parses: check baud", Role::Trouble),
        PortState::Silent => ("SILENT", "nothing came for three seconds", Role::Trouble),
        PortState::Lost => ("LOST", "unplugged; it is looked for", Role::Trouble),
        PortState::NoFix => ("NO FIX", "it talks but has no fix", Role::Trouble),
    }
}

/// What is wrong with a port, and what to look at; none when all is well.
pub(super) fn port_trouble(port: &PortHealth) -> Option<&'static str> {
    let (_, meaning, role) = port_words(port.state);
    (role == Role::Trouble || port.state == PortState::Waiting).then_some(meaning)
}

fn port_rates(port: &PortHealth) -> String {
    format!("{:>6.1} lines/s {:>5.1} % rejected", port.lines_per_s.clamp(0.0, 9999.9), port.rejected_share * 100.0)
}

fn draw_port(port: &PortHealth, canvas: &mut Canvas, y: u16) {
    let area = canvas.area();
    let (word, meaning, role) = port_words(port.state);
    canvas.text((area.x + 2, y), 9, &port.name, Role::Base);
    canvas.text((area.x + 12, y), 12, &format!(" {word} "), role);
    canvas.text((area.x + 25, y), 32, &port_rates(port), Role::Quiet);
    let rest = area.width.saturating_sub(60);
    let said = match (&port.last_bad, meaning) {
        (Some((line, why)), "") => format!("last rejected: {why}: {line}"),
        (_, meaning) => meaning.to_string(),
    };
    if usize::from(rest) >= said.len() || meaning.is_empty() {
        canvas.text((area.x + 59, y), rest, &said, Role::Quiet);
    } else {
        canvas.fill(Rect::new(area.x + 25, y, area.width - 25, 1), ' ', Role::Base);
        canvas.text((area.x + 25, y), area.width - 26, &said, role);
    }
}

/// All ports in one row, troubled ones first and in full words.
fn draw_ports_in_one(ports: &[PortHealth], canvas: &mut Canvas, y: u16) {
    let area = canvas.area();
    let mut x = area.x + 2;
    let good = |port: &&PortHealth| matches!(port.state, PortState::Good | PortState::Waiting);
    let troubled = ports.iter().any(|p| !good(&p));
    let slot = (area.width - 2) / u16::try_from(ports.len().max(1)).unwrap_or(u16::MAX);
    for port in ports.iter().filter(|p| !good(p)).chain(ports.iter().filter(good)) {
        let (word, meaning, role) = port_words(port.state);
        let text = match (port.state, troubled) {
            (PortState::CheckBaud, _) => format!(" {} {meaning} ", port.name),
            (PortState::Good, false) if slot >= 36 => {
                format!(
                    "{} good {:>6.1}/s {:>5.1} % rejected",
                    port.name,
                    port.lines_per_s,
                    port.rejected_share * 100.0
                )
            }
            _ if good(&port) => format!("{} {word}", port.name),
            _ => format!(" {} {word} ", port.name),
        };
        let columns = if troubled { area.right().saturating_sub(x + 1) } else { slot.saturating_sub(1) };
        let used = canvas.text((x, y), columns, &text, role);
        x += if troubled { used + 2 } else { slot };
    }
}

fn draw_messages(view: &View, canvas: &mut Canvas, mut area: Rect) {
    if view.journal.trouble.is_some() && area.height > 0 {
        draw_disk(view, canvas, area.y);
        area.y += 1;
        area.height -= 1;
    }
    // News for a while, then what to drive next; with room both.
    let news = view.messages.last().is_some_and(|m| view.now.since(m.at) < NEWS_US);
    if area.height > 1 || (area.height == 1 && !news) {
        area.height -= 1;
        draw_plan(view, canvas, area.bottom());
    }
    let skip = view.messages.len().saturating_sub(usize::from(area.height));
    for (y, message) in (area.y..).zip(view.messages.iter().skip(skip)) {
        draw_message(message, canvas, y);
    }
}

fn draw_plan(view: &View, canvas: &mut Canvas, y: u16) {
    let area = canvas.area();
    let used = canvas.text((area.x + 2, y), 6, "plan ", Role::Quiet);
    let words = view.plan.as_deref().unwrap_or("all that was wanted is driven: park, and look at Layby");
    canvas.text((area.x + 2 + used, y), area.width - 3 - used, words, Role::Base);
}

fn draw_disk(view: &View, canvas: &mut Canvas, y: u16) {
    let area = canvas.area();
    if let Some(trouble) = &view.journal.trouble {
        canvas.text((area.x + 2, y), area.width - 3, &format!(" DISK: {trouble} "), Role::Trouble);
    }
}

/// What a driver alone should know of at the next stop: broken disk and ports, and nothing else.
///
/// Returns the rows used.
pub(super) fn draw_trouble(view: &View, canvas: &mut Canvas, area: Rect) -> u16 {
    canvas.text((area.x + 2, area.y), area.width - 3, "alone: drive by ear, read and type when parked", Role::Quiet);
    draw_disk(view, canvas, area.y + 1);
    let troubled = view.ports.iter().filter(|p| !matches!(p.state, PortState::Good | PortState::Waiting));
    let mut rows = 2;
    for (y, port) in (area.y + 2..area.bottom()).zip(troubled) {
        draw_port(port, canvas, y);
        rows += 1;
    }
    rows
}

fn draw_message(message: &Message, canvas: &mut Canvas, y: u16) {
    let area = canvas.area();
    let (mark, role) = match message.weight {
        Weight::Quiet => (' ', Role::Quiet),
        Weight::Good => ('+', Role::Base),
        Weight::Refused => ('?', Role::Off),
        Weight::Trouble => ('!', Role::Trouble),
    };
    canvas.text_right((area.x + 10, y), 8, &clock(message.at), Role::Quiet);
    canvas.put((area.x + 11, y), mark, role);
    canvas.text((area.x + 13, y), area.width - 14, &message.text, role);
}
