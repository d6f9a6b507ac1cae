//! The car from its right side with the pressures on it: arrows along the normals of the body, outward for suction and onto it for pressure.
//!
//! Only what the car file says is drawn: taps, the contour, the wheelbase. The head of an arrow tells the sign, before its colour does.

use super::figure::Figure;
use super::sheet::{Sheet, figure, table};
use super::svg::{Place, WIDE, circle, curve, line, picture, shape, words};
use crate::config::Tap;
use crate::reduction::compare::Verdict;
use crate::report::{WHEEL_M, outline};
use crate::text::safe;
use maud::{Markup, html};

/// Room for arrows round the car.
const ROOM: f64 = 62.0;
/// Longest arrow.
const LONGEST: f64 = 44.0;
/// Length of an arrow of nothing.
const SHORTEST: f64 = 4.0;
/// Tallest drawing of a body.
const TALLEST: f64 = 190.0;
/// A normal with less than this share in the plane of the drawing faces sideways.
const SIDEWAYS: f64 = 0.3;

/// One arrow to be drawn.
struct Arrow<'a> {
    tap: &'a Tap,
    number: usize,
    figure: Figure<'a>,
    /// Drawn with a broken shaft and an open head: not told from no change.
    faint: bool,
}

pub(super) fn section(sheet: &Sheet<'_>) -> Markup {
    let Some(target) = sheet.main_target() else { return html! {} };
    let taps = sheet.taps();
    let r = sheet.r;
    let mut figures = Vec::new();
    let level = |tap: &str| {
        let same = |l: &crate::reduction::compare::Level| {
            l.tap == tap && l.configuration == r.baseline && l.target_kmh == target
        };
        r.levels.iter().position(same).map(|i| (sheet.level(i), false))
    };
    let baseline = sheet.fitted(&r.baseline);
    figures.push((format!("{baseline}: pressures"), arrows(&taps, level)));
    for group in sheet.groups().iter().filter(|g| g.target_kmh == target) {
        let change = |tap: &str| {
            let i = group.of.iter().find(|i| r.comparisons[**i].tap == tap)?;
            Some((sheet.change(*i), r.comparisons[*i].verdict != Verdict::Changed))
        };
        let title = format!("{} against {baseline}: differences", sheet.fitted(group.configuration));
        figures.push((title, arrows(&taps, change)));
    }
    figures.retain(|(_, arrows)| !arrows.is_empty());
    html! {
        section aria-labelledby="car" {
            h2 #car { "On the car" }
            @if !figures.is_empty() {
                p.soft { "From passes driven at " (target) " km/h, pressures " (sheet.at()) ". The car from its side, front to the left; taps stand where the car file has them. \
                          A head away from the body is suction, or a pressure that fell (blue); a head on the body is pressure, or one that rose (orange). Broken and open: \
                          not told from no change. A ring: the tap faces sideways, with a dot for an arrow away from the body, a cross for one onto it." }
                p.soft { (outline_words(sheet)) " The wheels are for orientation: the wheelbase is the car file's, their size is not." }
                div.figures { @for (title, arrows) in &figures { (drawing(sheet, title, arrows)) } }
            }
            (levels(sheet))
        }
    }
}

fn arrows<'a>(taps: &[&'a Tap], of: impl Fn(&str) -> Option<(Figure<'a>, bool)>) -> Vec<Arrow<'a>> {
    let numbered = taps.iter().enumerate();
    let made = numbered.filter_map(|(i, tap)| {
        let (figure, faint) = of(&tap.name)?;
        figure.value.is_finite().then_some(Arrow { tap, number: i + 1, figure, faint })
    });
    made.collect()
}

/// From metres to the picture.
struct View {
    left_m: f64,
    scale: f64,
    road: f64,
}

impl View {
    fn over(points: &[[f64; 2]], wheelbase_m: f64) -> Self {
        let fold = |start: f64, of: fn(f64, f64) -> f64, k: usize| points.iter().map(|p| p[k]).fold(start, of);
        let (left_m, right_m) = (fold(-WHEEL_M, f64::min, 0), fold(wheelbase_m + WHEEL_M, f64::max, 0));
        let top_m = fold(2.0 * WHEEL_M, f64::max, 1);
        let scale = ((WIDE - 2.0 * ROOM) / (right_m - left_m)).min(TALLEST / top_m);
        // Centred where the height is what limits it.
        let spare = (WIDE - 2.0 * ROOM) / scale - (right_m - left_m);
        Self { left_m: left_m - spare / 2.0, scale, road: ROOM + top_m * scale }
    }

    fn at(&self, [x, z]: [f64; 2]) -> Place {
        [ROOM + (x - self.left_m) * self.scale, self.road - z * self.scale]
    }
}

fn drawing(sheet: &Sheet<'_>, title: &str, arrows: &[Arrow<'_>]) -> Markup {
    let taps = sheet.taps();
    let wheelbase = sheet.car().map_or(0.0, |c| c.wheelbase_m);
    let points: Vec<[f64; 2]> = taps.iter().map(|t| [t.at[0], t.at[2]]).collect();
    let view = View::over(&points, wheelbase);
    let largest = arrows.iter().map(|a| a.figure.value.abs()).fold(0.0, f64::max);
    let body = html! {
        (drawn_outline(sheet, &view))
        (line([10.0, view.road], [WIDE - 10.0, view.road], "axis"))
        @for x in [0.0, wheelbase] { (circle(view.at([x, WHEEL_M]), WHEEL_M * view.scale, "wheel")) }
        @for arrow in arrows { (drawn(arrow, &view, largest)) }
        (words([10.0, view.road + 16.0], "small faint", "← front"))
        (words([WIDE - 10.0, view.road + 16.0], "small faint end", "rear →"))
    };
    let longest = format!("{} {}", sheet.pa(largest), sheet.unit.name);
    let caption = html! {
        strong { (title) } ". "
        "The longest arrow is " (longest) "."
        ol { @for a in arrows { li value=(a.number) { (safe(&a.tap.name)) " " (a.figure) } } }
    };
    // Arrows under the floor need room, the words under the road too.
    figure(&picture(view.road + 24.0, &format!("Side view of the car, {title}"), &body), &caption)
}

fn outline_words(sheet: &Sheet<'_>) -> &'static str {
    if outline(sheet.car(), &sheet.taps()).is_body {
        "The outline joins the taps of the contour."
    } else {
        "The broken line goes round taps and wheels and is not the body: the car file has no contour."
    }
}

/// The contour, or a broken line round taps and wheels where the car file has none.
fn drawn_outline(sheet: &Sheet<'_>, view: &View) -> Markup {
    let outline = outline(sheet.car(), &sheet.taps());
    let mut ring: Vec<Place> = outline.ring.into_iter().map(|p| view.at(p)).collect();
    if outline.is_body {
        return shape(&ring, "body");
    }
    ring.extend(ring.first().copied());
    curve(&ring, "edge")
}

fn drawn(arrow: &Arrow<'_>, view: &View, largest: f64) -> Markup {
    let value = arrow.figure.value;
    let at = view.at([arrow.tap.at[0], arrow.tap.at[2]]);
    let share = if largest > 0.0 { value.abs() / largest } else { 0.0 };
    let [nx, _, nz] = arrow.tap.normal;
    let flat = nx.hypot(nz);
    let away = value < 0.0;
    let title = html! { title { (arrow.number) " " (safe(&arrow.tap.name)) ": " (arrow.figure.words()) } };
    let body = if flat < SIDEWAYS {
        ring(at, 4.0 + 5.0 * share, arrow.faint, away)
    } else {
        shaft(at, [nx / flat, -nz / flat], SHORTEST + (LONGEST - SHORTEST) * share, (arrow.faint, away))
    };
    let label = if flat < SIDEWAYS {
        [at[0] - 9.0 - 5.0 * share, at[1] + 4.0]
    } else {
        let far = SHORTEST + (LONGEST - SHORTEST) * share + 9.0;
        [at[0] + nx / flat * far, at[1] - nz / flat * far + 4.0]
    };
    html! {
        g class=(if away { "blue" } else { "orange" }) {
            (title)
            (body)
            (words(label, "small bold middle", &arrow.number.to_string()))
        }
    }
}

/// An arrow outside the body, along a unit vector away from it.
fn shaft(at: Place, out: Place, length: f64, (faint, away): (bool, bool)) -> Markup {
    let far = [at[0] + out[0] * length, at[1] + out[1] * length];
    let (tip, back) = if away { (far, -1.0) } else { (at, 1.0) };
    let head = length.min(8.0);
    let foot = [tip[0] + out[0] * head * back, tip[1] + out[1] * head * back];
    let half = head * 0.45;
    let corners =
        [tip, [foot[0] - out[1] * half, foot[1] + out[0] * half], [foot[0] + out[1] * half, foot[1] - out[0] * half]];
    let start = if away { at } else { far };
    html! {
        (line(start, foot, if faint { "thin dashed" } else { "stroke" }))
        (shape(&corners, if faint { "hollow" } else { "solid" }))
        (circle(at, 1.8, "solid"))
    }
}

fn ring(at: Place, radius: f64, faint: bool, away: bool) -> Markup {
    let k = radius * std::f64::consts::FRAC_1_SQRT_2;
    html! {
        (circle(at, radius, if faint { "thin dashed" } else { "stroke" }))
        @if away { (circle(at, 2.0, "solid")) } @else {
            (line([at[0] - k, at[1] - k], [at[0] + k, at[1] + k], "thin"))
            (line([at[0] - k, at[1] + k], [at[0] + k, at[1] - k], "thin"))
        }
    }
}

/// Every level.
fn levels(sheet: &Sheet<'_>) -> Markup {
    let row = |i: usize| {
        let l = &sheet.r.levels[i];
        let scatter = super::figure::plain(l.between.map(|b| b.sd), 4);
        html! {
            td.name { (safe(&l.tap)) }
            td.name { (sheet.fitted(&l.configuration)) }
            td { (l.target_kmh) " km/h" }
            td { (l.passes) }
            td { (sheet.level(i)) }
            td { (sheet.level_cp(i)) }
            td { (scatter) }
        }
    };
    table(
        &format!("Pressures {}", sheet.at()),
        &["Tap", "Configuration", "Driven at", "Passes", "Pressure", "Cp", "Scatter of Cp from pass to pass"],
        &(0..sheet.r.levels.len()).map(row).collect::<Vec<_>>(),
    )
}
