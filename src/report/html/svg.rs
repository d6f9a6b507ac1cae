//! A few drawn parts, and scales between values and places: what a picture is made of.
//!
//! Every picture is [`WIDE`] units wide, so that its letters stay readable on a phone; colours and fonts are the page's. Places that are not
//! finite never reach the page.

use maud::{Markup, html};

/// Width of every picture.
pub(super) const WIDE: f64 = 340.0;
/// Values beyond are drawn at it.
const LARGEST: f64 = 1e12;
/// Ticks that an axis has about.
const TICKS: f64 = 5.0;

/// A place in a picture: right, down.
pub(super) type Place = [f64; 2];

/// A whole picture with its text alternative.
pub(super) fn picture(height: f64, title: &str, body: &Markup) -> Markup {
    html! {
        svg viewBox=(format!("0 0 {} {}", px(WIDE), px(height))) role="img" aria-label=(title) {
            title { (title) }
            (body)
        }
    }
}

/// A coordinate with at most two decimals.
pub(super) fn px(x: f64) -> String {
    let x = if x.is_finite() { x.clamp(-1e4, 1e4) } else { 0.0 };
    let text = format!("{x:.2}");
    let short = text.trim_end_matches('0').trim_end_matches('.');
    if short == "-0" { "0".to_string() } else { short.to_string() }
}

pub(super) fn line(from: Place, to: Place, class: &str) -> Markup {
    html! { line x1=(px(from[0])) y1=(px(from[1])) x2=(px(to[0])) y2=(px(to[1])) class=(class) {} }
}

pub(super) fn circle(at: Place, radius: f64, class: &str) -> Markup {
    html! { circle cx=(px(at[0])) cy=(px(at[1])) r=(px(radius)) class=(class) {} }
}

pub(super) fn area(from: Place, to: Place, class: &str) -> Markup {
    let (x, y) = (from[0].min(to[0]), from[1].min(to[1]));
    let (w, h) = ((from[0] - to[0]).abs(), (from[1] - to[1]).abs());
    html! { rect x=(px(x)) y=(px(y)) width=(px(w)) height=(px(h)) class=(class) {} }
}

fn points(places: &[Place]) -> String {
    places.iter().map(|p| format!("{},{}", px(p[0]), px(p[1]))).collect::<Vec<_>>().join(" ")
}

pub(super) fn curve(places: &[Place], class: &str) -> Markup {
    html! { polyline points=(points(places)) class=(class) {} }
}

pub(super) fn shape(places: &[Place], class: &str) -> Markup {
    html! { polygon points=(points(places)) class=(class) {} }
}

/// Words at a place; `class` may name their anchor (`middle`, `end`).
pub(super) fn words(at: Place, class: &str, text: &str) -> Markup {
    html! { text x=(px(at[0])) y=(px(at[1])) class=(class) { (text) } }
}

/// Names of the marks, in the order in which [`mark`] draws them.
pub(super) const MARKS: [&str; 6] = ["●", "◆", "■", "▲", "▼", "★"];

/// The mark of a series by its number: told apart by shape before colour.
pub(super) fn mark(number: usize, at: Place, class: &str) -> Markup {
    let [x, y] = at;
    let around = |corners: &[Place]| corners.iter().map(|c| [x + c[0], y + c[1]]).collect::<Vec<_>>();
    match number % MARKS.len() {
        0 => circle(at, 4.0, class),
        1 => shape(&around(&[[0.0, -5.5], [5.5, 0.0], [0.0, 5.5], [-5.5, 0.0]]), class),
        2 => shape(&around(&[[-4.0, -4.0], [4.0, -4.0], [4.0, 4.0], [-4.0, 4.0]]), class),
        3 => shape(&around(&[[0.0, -5.0], [5.0, 4.0], [-5.0, 4.0]]), class),
        4 => shape(&around(&[[0.0, 5.0], [5.0, -4.0], [-5.0, -4.0]]), class),
        _ => {
            let corner = |i: usize| {
                let (r, a) = (if i.is_multiple_of(2) { 6.0 } else { 2.6 }, std::f64::consts::PI * i as f64 / 5.0);
                [r * a.sin(), -r * a.cos()]
            };
            shape(&around(&(0..10).map(corner).collect::<Vec<_>>()), class)
        }
    }
}

/// A scale from values to one coordinate.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Axis {
    low: f64,
    high: f64,
    from: f64,
    to: f64,
    least_step: f64,
}

impl Axis {
    /// Over all finite values with a little room at both ends, drawn between two places; none without a value.
    pub(super) fn over(values: impl IntoIterator<Item = f64>, [from, to]: Place) -> Option<Self> {
        let finite = values.into_iter().filter(|v| v.is_finite()).map(|v| v.clamp(-LARGEST, LARGEST));
        let (low, high) = finite.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(v), h.max(v)));
        if low > high {
            return None;
        }
        let room = if high > low { 0.06 * (high - low) } else { 0.1 * high.abs().max(0.01) };
        Some(Self { low: low - room, high: high + room, from, to, least_step: 0.0 })
    }

    /// Over the whole numbers from 1 to `last`, marked as such.
    pub(super) fn counting(last: usize, [from, to]: Place) -> Self {
        Self { low: 0.5, high: last as f64 + 0.5, from, to, least_step: 1.0 }
    }

    /// Place of a value; one outside lies at the end.
    pub(super) fn at(&self, value: f64) -> f64 {
        let share = (value.clamp(self.low, self.high) - self.low) / (self.high - self.low);
        self.from + share * (self.to - self.from)
    }

    /// Whether a value lies on the axis.
    pub(super) fn shows(&self, value: f64) -> bool {
        (self.low..=self.high).contains(&value)
    }

    /// Round values on the axis, with their words.
    pub(super) fn ticks(&self) -> Vec<(f64, String)> {
        let rough = ((self.high - self.low) / TICKS).max(self.least_step);
        let power = 10f64.powf(rough.log10().floor());
        let step = [1.0, 2.0, 5.0, 10.0].into_iter().map(|s| s * power).find(|s| *s >= rough).unwrap_or(rough);
        let decimals = (-step.log10().floor()).clamp(0.0, 12.0) as usize;
        let (first, last) = ((self.low / step).ceil() as i64, (self.high / step).floor() as i64);
        (first..=last)
            .take(20)
            .map(|i| {
                let value = i as f64 * step;
                let text = if value.abs() < 1e5 { format!("{value:.decimals$}") } else { format!("{value:.0e}") };
                (value, text.replace('-', "−"))
            })
            .collect()
    }

    /// Drawn along the bottom of a field from `top` to `bottom`, with what it measures.
    pub(super) fn below(&self, [top, bottom]: Place, what: &str) -> Markup {
        html! {
            @for (value, text) in self.ticks() {
                (line([self.at(value), top], [self.at(value), bottom], "grid"))
                (words([self.at(value), bottom + 13.0], "middle", &text))
            }
            (line([self.from, bottom], [self.to, bottom], "axis"))
            (words([f64::midpoint(self.from, self.to), bottom + 28.0], "middle", what))
        }
    }

    /// Drawn along the left of a field from `left` to `right`, with what it measures above it.
    pub(super) fn beside(&self, [left, right]: Place, what: &str) -> Markup {
        html! {
            @for (value, text) in self.ticks() {
                (line([left, self.at(value)], [right, self.at(value)], "grid"))
                (words([left - 4.0, self.at(value) + 4.0], "end", &text))
            }
            (line([left, self.from], [left, self.to], "axis"))
            (words([2.0, self.from.min(self.to) - 8.0], "", what))
        }
    }
}
