//! The channels: held value first, live value quiet, fluctuation, flags, the last half minute.
//!
//! With room enough every channel is three rows high and its held value drawn large; with less a table of one line a
//! channel; with still less a table of two columns without traces; and what has no place is counted, not dropped silently.

use super::canvas::Canvas;
use super::digits::{self, Size};
use super::figures::Figures;
use super::theme::Role;
use super::{Row, View, WindowState};
use crate::units::Quantity;
use ratatui::layout::Rect;

/// How the channels stand.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Arrangement {
    /// Three rows a channel, in this many columns.
    Tiles(u16),
    /// One line a channel, in this many columns.
    Table(u16),
}

/// Columns of words beside the large value of a tile.
const TILE_WORDS: u16 = 16;
/// Columns of a large value, `-1234.5`.
const TILE_VALUE: u16 = 24;

/// Draws the channels at the top of `room` and leaves `least_below` rows free, `wish_below` where that costs no
/// large value; returns the rows used.
pub(super) fn draw(view: &View, canvas: &mut Canvas, room: Rect, (least_below, wish_below): (u16, u16)) -> u16 {
    let count = u16::try_from(view.rows.len()).unwrap_or(u16::MAX);
    let high = room.height.saturating_sub(least_below);
    let arrangement = arrange(count, (room.width, high), room.height.saturating_sub(wish_below));
    let rows = needed(arrangement, count).min(high);
    let area = Rect { height: rows, ..room };
    let (columns, each, head) = match arrangement {
        Arrangement::Tiles(columns) => (columns, 3, 0),
        Arrangement::Table(columns) => (columns, 1, 1),
    };
    let lines = rows.saturating_sub(head) / each;
    let places = usize::from(lines) * usize::from(columns);
    let shown = if places >= view.rows.len() { view.rows.len() } else { places.saturating_sub(1) };
    let width = area.width / columns.max(1);
    let cell = |i: usize| {
        let i = u16::try_from(i).unwrap_or(u16::MAX);
        let (column, line) = (i / lines.max(1), i % lines.max(1));
        Rect::new(area.x + column * width, area.y + head + line * each, width, each)
    };
    if head == 1 && rows > 0 {
        (0..columns)
            .for_each(|c| draw_table_head(view, canvas, Rect { x: area.x + c * width, width, height: 1, ..area }));
    }
    for (i, row) in view.rows.iter().take(shown).enumerate() {
        match arrangement {
            Arrangement::Tiles(_) => draw_tile(view, row, canvas, cell(i)),
            Arrangement::Table(_) => draw_line(view, row, canvas, cell(i)),
        }
    }
    if shown < view.rows.len() && places > 0 {
        let at = cell(shown);
        let hidden = &view.rows[shown..];
        let troubled = hidden.iter().any(|row| flag(row).is_some());
        let (words, role) = if troubled { (" more, look at Bench ", Role::Trouble) } else { (" more", Role::Strong) };
        canvas.text((at.x + 2, at.y), at.width, &format!("+{}{words}", hidden.len()), role);
    }
    rows
}

fn needed(arrangement: Arrangement, count: u16) -> u16 {
    match arrangement {
        Arrangement::Tiles(columns) => count.div_ceil(columns).saturating_mul(3),
        Arrangement::Table(columns) => count.div_ceil(columns).saturating_add(1),
    }
}

/// The first that fits: wide tiles with everything below, tiles, table, table in two columns.
fn arrange(count: u16, (width, high): (u16, u16), comfortable: u16) -> Arrangement {
    let tile = TILE_WORDS + TILE_VALUE;
    let candidates = [
        (Arrangement::Tiles(1), width >= tile + 20, comfortable),
        (Arrangement::Tiles(2), width >= 2 * tile, high),
        (Arrangement::Tiles(3), width >= 3 * tile, high),
        (Arrangement::Table(1), true, high),
    ];
    candidates
        .into_iter()
        .find(|(a, wide, high)| *wide && needed(*a, count) <= *high)
        .map_or(Arrangement::Table(2), |(a, ..)| a)
}

fn held_role(view: &View) -> Role {
    if view.window.state == WindowState::Held { Role::Held } else { Role::Base }
}

/// The flag that matters most, as a word.
fn flag(row: &Row) -> Option<&'static str> {
    if row.stale {
        Some("STALE")
    } else if row.saturated {
        Some("SAT")
    } else if row.stuck {
        Some("STUCK")
    } else {
        None
    }
}

/// A label at the left of its columns and, where there is room, the unit at their right.
fn draw_label(canvas: &mut Canvas, (x, y): (u16, u16), columns: u16, (label, role): (&str, Role), unit: &str) {
    let used = canvas.text((x, y), columns, label, role);
    if usize::from(columns - used) > unit.chars().count() {
        canvas.text_right((x + columns, y), columns - used, unit, Role::Quiet);
    }
}

fn draw_tile(view: &View, row: &Row, canvas: &mut Canvas, area: Rect) {
    let figures = Figures::of(row.quantity, &view.show);
    let x = area.x + 2;
    let words = TILE_WORDS - 3;
    draw_label(canvas, (x, area.y), words, (&row.label, Role::Strong), figures.unit_or(&row.unit));
    canvas.text((x, area.y + 1), words, &format!("live{:>8}", figures.signed(row.live)), Role::Quiet);
    match flag(row) {
        Some(flag) => canvas.text((x, area.y + 2), words, &format!(" {flag} "), Role::Trouble),
        None => canvas.text((x, area.y + 2), words, &format!("sd{:>7}", figures.spread(row.fluctuation)), Role::Quiet),
    };
    let value = Rect::new(area.x + TILE_WORDS, area.y, TILE_VALUE, 3);
    let role = held_role(view);
    match row.held.filter(|v| v.is_finite()) {
        Some(_) => digits::draw(canvas, value, figures.signed(row.held).trim_start(), (Size::Middle, true), role),
        None => canvas.text_right((value.right(), value.y + 1), value.width, "—", Role::Quiet),
    }
    let trace = Rect::new(value.right() + 3, area.y, area.width.saturating_sub(TILE_WORDS + TILE_VALUE + 4), 3);
    if trace.width >= 8 {
        draw_trace(row, &figures, canvas, trace);
    } else {
        draw_trace(row, &figures, canvas, Rect::new(x + 10, area.y + 2, 6, 1));
    }
}

/// Columns of a table line, from its left: label, held, live, spread, flag, trace; a missing one has no width.
struct Columns {
    label: u16,
    held: u16,
    live: u16,
    spread: u16,
}

impl Columns {
    fn of(width: u16) -> Self {
        let (live, spread) = if width >= 40 { (8, 6) } else { (0, 0) };
        Self { label: (width - 15 - live - spread).min(16), held: 8, live, spread }
    }
}

fn draw_table_head(view: &View, canvas: &mut Canvas, area: Rect) {
    let columns = Columns::of(area.width);
    let mut right = area.x + 1 + columns.label;
    let unit = Figures::of(Quantity::Pressure, &view.show).unit();
    canvas.text((area.x + 2, area.y), columns.label, &format!("tap {unit}"), Role::Quiet);
    for (word, columns) in [("held", columns.held), ("live", columns.live), ("sd", columns.spread)] {
        right += columns;
        canvas.text_right((right, area.y), columns, word, Role::Quiet);
    }
    if area.width >= 60 {
        canvas.text((right + 7, area.y), area.right() - right - 7, "last half minute", Role::Quiet);
    }
}

fn draw_line(view: &View, row: &Row, canvas: &mut Canvas, area: Rect) {
    let figures = Figures::of(row.quantity, &view.show);
    let columns = Columns::of(area.width);
    let mut right = area.x + 1 + columns.label;
    let of_head = row.quantity == Quantity::Pressure;
    let unit = if of_head { "" } else { figures.unit_or(&row.unit) };
    draw_label(canvas, (area.x + 2, area.y), columns.label - 1, (&row.label, Role::Base), unit);
    let held = if held_role(view) == Role::Held { Role::Held } else { Role::Strong };
    let cells = [
        (figures.signed(row.held), columns.held, held),
        (figures.signed(row.live), columns.live, Role::Quiet),
        (figures.spread(row.fluctuation), columns.spread, Role::Quiet),
    ];
    for (text, columns, role) in cells {
        right += columns;
        canvas.text_right((right, area.y), columns, &text, role);
    }
    if let Some(flag) = flag(row) {
        canvas.text((right + 1, area.y), 5, flag, Role::Trouble);
    }
    if area.width >= 60 {
        let trace = Rect::new(right + 7, area.y, area.right() - right - 8, 1);
        draw_trace(row, &figures, canvas, trace);
    }
}

/// The whole trace, the newest at the right; where it is longer than the area is wide, neighbouring points are averaged.
fn points(trace: &[Option<f64>], width: usize) -> Vec<Option<f64>> {
    let count = trace.len().min(width);
    let bucket = |i: usize| &trace[i * trace.len() / count..(i + 1) * trace.len() / count];
    let mean = |bucket: &[Option<f64>]| {
        let good: Vec<f64> = bucket.iter().flatten().copied().filter(|v| v.is_finite()).collect();
        (!good.is_empty()).then(|| good.iter().map(|v| v / good.len() as f64).sum())
    };
    (0..count).map(|i| mean(bucket(i))).collect()
}

/// The scale is the row's own, but never finer than sixteen of the smallest steps shown, so that the noise of a still
/// sensor looks still.
fn draw_trace(row: &Row, figures: &Figures, canvas: &mut Canvas, area: Rect) {
    let points = points(&row.trace, usize::from(area.width));
    let (low, high) = points.iter().flatten().fold((f64::MAX, f64::MIN), |(l, h), v| (l.min(*v), h.max(*v)));
    if low > high {
        return;
    }
    let middle = low / 2.0 + high / 2.0;
    let half = (high / 2.0 - low / 2.0).max(8.0 * figures.step());
    let steps: u16 = if canvas.plain() || area.height > 1 { 3 } else { 8 };
    let levels = steps * area.height;
    let first = area.right() - u16::try_from(points.len()).unwrap_or(area.width);
    for (x, point) in (first..).zip(&points) {
        let Some(value) = point else { continue };
        let share = ((value - middle) / half + 1.0) / 2.0;
        let level = (share * f64::from(levels - 1)).round().clamp(0.0, f64::from(levels - 1)) as u16;
        draw_point(canvas, (x, area), (level, steps));
    }
}

/// One point: its part of the cell out of three, or filled in eighths where one row is all there is.
fn draw_point(canvas: &mut Canvas, (x, area): (u16, Rect), (level, steps): (u16, u16)) {
    const EIGHTHS: [char; 8] = ['▁', '▂', '▃', '▄', '▅', '▆', '▇', '█'];
    const THIRDS: [(char, char); 3] = [('▄', '_'), ('■', '-'), ('▀', '"')];
    let part = usize::from(level % steps);
    let sign = if steps == 8 { EIGHTHS[part] } else { canvas.sign(THIRDS[part].0, THIRDS[part].1) };
    canvas.put((x, area.bottom() - 1 - level / steps), sign, Role::Quiet);
}
