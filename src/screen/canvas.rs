//! A buffer that cannot be written outside of, and that only [`safe`] text reaches.

use super::text::{ascii, safe, width};
use super::theme::{Role, Theme, style};
use ratatui::buffer::Buffer;
use ratatui::layout::Rect;
use ratatui::style::Style;

/// A buffer with a theme; every write is clipped to it.
pub(super) struct Canvas<'a> {
    buffer: &'a mut Buffer,
    theme: Theme,
    plain: bool,
}

impl<'a> Canvas<'a> {
    /// Clears the buffer to the theme's ground.
    pub(super) fn new(buffer: &'a mut Buffer, theme: Theme, plain: bool) -> Self {
        let mut canvas = Self { buffer, theme, plain };
        canvas.fill(canvas.area(), ' ', Role::Base);
        canvas
    }

    pub(super) fn area(&self) -> Rect {
        self.buffer.area
    }

    /// The first sign, or the second where only ASCII is drawn.
    pub(super) fn sign(&self, full: char, plain: char) -> char {
        if self.plain { plain } else { full }
    }

    pub(super) fn plain(&self) -> bool {
        self.plain
    }

    fn style(&self, role: Role) -> Style {
        style(self.theme, role)
    }

    /// Writes text in at most `columns`, cut with an ellipsis; returns the columns used.
    pub(super) fn text(&mut self, (x, y): (u16, u16), columns: u16, text: &str, role: Role) -> u16 {
        let area = self.area();
        if x < area.left() || x >= area.right() || y < area.top() || y >= area.bottom() {
            return 0;
        }
        let columns = columns.min(area.right() - x);
        let mut shown = safe(text);
        if self.plain {
            shown = ascii(&shown);
        }
        let style = self.style(role);
        if width(&shown) <= usize::from(columns) {
            let end = self.buffer.set_stringn(x, y, &shown, usize::from(columns), style).0;
            self.buffer.set_style(Rect::new(x, y, end - x, 1), style);
            return end - x;
        }
        if columns > 0 {
            self.buffer.set_stringn(x, y, &shown, usize::from(columns) - 1, style);
            self.buffer.set_style(Rect::new(x, y, columns, 1), style);
            let ellipsis = self.sign('…', '~');
            self.put((x + columns - 1, y), ellipsis, role);
        }
        columns
    }

    /// Writes text so that it ends just before column `right`.
    pub(super) fn text_right(&mut self, (right, y): (u16, u16), columns: u16, text: &str, role: Role) {
        let shown = if self.plain { ascii(&safe(text)) } else { safe(text) };
        let wide = u16::try_from(width(&shown)).unwrap_or(u16::MAX).min(columns);
        self.text((right.saturating_sub(wide), y), wide, text, role);
    }

    /// A rule in the first row with words at its left and at its right.
    pub(super) fn heading(&mut self, left: &str, right: &str) {
        let area = self.area();
        let rule = self.sign('─', '-');
        self.fill(Rect { height: 1, ..area }, rule, Role::Quiet);
        self.text((area.x + 2, area.y), area.width / 2, &format!(" {left} "), Role::Strong);
        self.text_right((area.right() - 1, area.y), area.width / 2 - 2, &format!(" {right} "), Role::Quiet);
    }

    /// One sign in one cell.
    pub(super) fn put(&mut self, at: (u16, u16), sign: char, role: Role) {
        let style = self.style(role);
        if let Some(cell) = self.buffer.cell_mut(at) {
            cell.set_char(sign).set_style(style);
        }
    }

    /// The same sign over an area.
    pub(super) fn fill(&mut self, area: Rect, sign: char, role: Role) {
        let area = area.intersection(self.area());
        let style = self.style(role);
        for y in area.top()..area.bottom() {
            self.close_wide((area.left(), y));
            for x in area.left()..area.right() {
                self.buffer[(x, y)].reset();
                self.buffer[(x, y)].set_char(sign).set_style(style);
            }
        }
    }

    /// A wide sign that would reach into this cell from its left gives way to a blank.
    fn close_wide(&mut self, (x, y): (u16, u16)) {
        if x > self.area().left() && width(self.buffer[(x - 1, y)].symbol()) > 1 {
            self.buffer[(x - 1, y)].set_char(' ');
        }
    }
}
