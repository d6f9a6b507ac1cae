//! The car from its right-hand side, out of the taps' places, with the pressures as arrows normal to the body.
//!
//! Suction is drawn from the tap outward, a push from outside onto the tap; the head's sign tells which, then the colour. Braille
//! dots where the font has them, ASCII else.

use super::canvas::Canvas;
use super::theme::Role;
use crate::config::{Car, Tap};
use crate::report::{WHEEL_M, outline};
use ratatui::layout::Rect;

/// Room about the car, m.
const MARGIN_M: f64 = 0.5;
/// Length of the longest arrow, m.
const LONGEST_M: f64 = 0.9;
/// Arrows shorter than this are a dot, m.
const SHORTEST_M: f64 = 0.08;

/// A pressure at a tap; `sure`: it is more than its own half-width.
pub(super) struct Arrow<'a> {
    pub(super) tap: &'a Tap,
    pub(super) value: f64,
    pub(super) sure: bool,
}

/// Metres → dots of a cell grid, both axes to one scale.
struct Grid {
    area: Rect,
    /// Dots in a cell, across and down.
    dots: (u16, u16),
    left_m: f64,
    top_m: f64,
    per_dot_m: f64,
    set: Vec<bool>,
}

impl Grid {
    fn new(area: Rect, dots: (u16, u16), (low, high): ([f64; 2], [f64; 2])) -> Self {
        let (across, down) = (f64::from(area.width * dots.0), f64::from(area.height * dots.1));
        let (width, height) = (high[0] - low[0], high[1] - low[1]);
        let per_dot_m = (width / across.max(1.0)).max(height / down.max(1.0));
        Self {
            area,
            dots,
            left_m: low[0] - (across * per_dot_m - width) / 2.0,
            top_m: low[1] + height + (down * per_dot_m - height) / 2.0,
            per_dot_m,
            set: vec![false; usize::from(area.width * dots.0) * usize::from(area.height * dots.1)],
        }
    }

    fn dot(&mut self, [x, z]: [f64; 2]) {
        let (column, row) = ((x - self.left_m) / self.per_dot_m, (self.top_m - z) / self.per_dot_m);
        let across = usize::from(self.area.width * self.dots.0);
        let inside = column >= 0.0 && row >= 0.0 && (column as usize) < across;
        if let Some(dot) = self.set.get_mut(row as usize * across + column as usize).filter(|_| inside) {
            *dot = true;
        }
    }

    fn line(&mut self, a: [f64; 2], b: [f64; 2]) {
        let steps = ((b[0] - a[0]).hypot(b[1] - a[1]) / self.per_dot_m).ceil().clamp(1.0, 2000.0) as usize;
        for i in 0..=steps {
            let f = i as f64 / steps as f64;
            self.dot([a[0] + f * (b[0] - a[0]), a[1] + f * (b[1] - a[1])]);
        }
    }

    /// The cell in which a point lies.
    fn cell(&self, [x, z]: [f64; 2]) -> (u16, u16) {
        let column = (x - self.left_m) / self.per_dot_m / f64::from(self.dots.0);
        let row = (self.top_m - z) / self.per_dot_m / f64::from(self.dots.1);
        let clamp = |v: f64, most: u16| v.clamp(0.0, f64::from(most.saturating_sub(1))) as u16;
        (self.area.x + clamp(column, self.area.width), self.area.y + clamp(row, self.area.height))
    }

    /// Puts the dots into their cells.
    fn paint(&mut self, canvas: &mut Canvas, role: Role) {
        /// Bits of a Braille cell by row and column (Unicode block U+2800).
        const BRAILLE: [[u32; 2]; 4] = [[0x01, 0x08], [0x02, 0x10], [0x04, 0x20], [0x40, 0x80]];
        let across = usize::from(self.area.width * self.dots.0);
        for y in 0..self.area.height {
            for x in 0..self.area.width {
                let mut bits = 0;
                for (dy, row) in BRAILLE.iter().enumerate().take(usize::from(self.dots.1)) {
                    for (dx, bit) in row.iter().enumerate().take(usize::from(self.dots.0)) {
                        let at = (usize::from(y * self.dots.1) + dy) * across + usize::from(x * self.dots.0) + dx;
                        bits |= if self.set[at] { *bit } else { 0 };
                    }
                }
                if bits != 0 {
                    let sign = char::from_u32(0x2800 + bits).unwrap_or('.');
                    let sign = canvas.sign(sign, '.');
                    canvas.put((self.area.x + x, self.area.y + y), sign, role);
                }
            }
        }
        self.set.fill(false);
    }
}

/// Draws car and arrows; the longest arrow is the largest value.
pub(super) fn draw(car: &Car, arrows: &[Arrow<'_>], canvas: &mut Canvas, area: Rect) {
    if area.width < 20 || area.height < 5 || car.taps.is_empty() {
        return;
    }
    let points = || car.taps.iter().map(|t| [t.at[0], t.at[2]]);
    let wheels = [-WHEEL_M, car.wheelbase_m + WHEEL_M];
    let room = MARGIN_M + LONGEST_M;
    let low = [points().map(|p| p[0]).fold(wheels[0], f64::min) - room, -0.1];
    let high =
        [points().map(|p| p[0]).fold(wheels[1], f64::max) + room, points().map(|p| p[1]).fold(1.0, f64::max) + room];
    // Without Braille a cell is one dot, and twice as high as wide: the scale is the cells' then.
    let dots = if canvas.plain() { (1, 1) } else { (2, 4) };
    let mut grid = Grid::new(area, dots, (low, high));
    grid.line([low[0], 0.0], [high[0], 0.0]);
    for axle in [0.0, car.wheelbase_m] {
        wheel(&mut grid, [axle, WHEEL_M]);
    }
    let ring = outline(Some(car), &car.taps.iter().collect::<Vec<_>>()).ring;
    for (i, point) in ring.iter().enumerate() {
        grid.line(*point, ring[(i + 1) % ring.len()]);
    }
    grid.paint(canvas, Role::Quiet);
    let largest = arrows.iter().map(|a| a.value.abs()).fold(0.0, f64::max);
    for arrow in arrows.iter().filter(|a| a.value.is_finite() && largest > 0.0) {
        draw_arrow(arrow, largest, &mut grid, canvas);
    }
}

fn wheel(grid: &mut Grid, [x, z]: [f64; 2]) {
    for i in 0..48 {
        let angle = std::f64::consts::TAU * f64::from(i) / 48.0;
        grid.dot([x + WHEEL_M * angle.cos(), z + WHEEL_M * angle.sin()]);
    }
}

fn draw_arrow(arrow: &Arrow<'_>, largest: f64, grid: &mut Grid, canvas: &mut Canvas) {
    let (at, normal) = ([arrow.tap.at[0], arrow.tap.at[2]], [arrow.tap.normal[0], arrow.tap.normal[2]]);
    let in_plane = normal[0].hypot(normal[1]);
    let suction = arrow.value < 0.0;
    let role = match (arrow.sure, suction) {
        (false, _) => Role::Quiet,
        (true, true) => Role::Steady,
        (true, false) => Role::Off,
    };
    let length = LONGEST_M * arrow.value.abs() / largest;
    // A tap on the side faces the eye: out of the body is towards it.
    if in_plane < 0.5 || length < SHORTEST_M {
        let facing = in_plane < 0.5 && length >= SHORTEST_M;
        let sign = match (facing, suction) {
            (false, _) => canvas.sign('·', 'o'),
            (true, true) => canvas.sign('◉', 'O'),
            (true, false) => canvas.sign('×', 'x'),
        };
        let cell = grid.cell(at);
        return canvas.put(cell, sign, role);
    }
    let unit = normal.map(|n| n / in_plane);
    let far = [at[0] + unit[0] * length, at[1] + unit[1] * length];
    grid.line(at, far);
    grid.paint(canvas, role);
    let (head, towards) = if suction { (far, unit) } else { (at, unit.map(|n| -n)) };
    let sign = match (towards[0].abs() > towards[1].abs(), towards[0] > 0.0, towards[1] > 0.0) {
        (true, true, _) => canvas.sign('►', '>'),
        (true, false, _) => canvas.sign('◄', '<'),
        (false, _, true) => canvas.sign('▲', '^'),
        (false, _, false) => canvas.sign('▼', 'v'),
    };
    let cell = grid.cell(head);
    canvas.put(cell, sign, role);
}
