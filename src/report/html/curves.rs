//! Curves: a swept part's Cp over its setting, and Cp along the contour.

use super::figure::plain;
use super::sheet::{Sheet, figure, short};
use super::svg::{Axis, MARKS, Place, WIDE, curve, line, mark, picture, shape};
use crate::config::Tap;
use crate::reduction::sweep::{Interval, SweepRow};
use crate::reduction::words_of_interval;
use crate::text::safe;
use maud::{Markup, html};

const TOP: f64 = 22.0;
const BOTTOM: f64 = 190.0;
const FIELD: Place = [52.0, WIDE - 12.0];
/// Characters of a parameter's name in the picture.
const NAME: usize = 32;
/// Points of a drawn curve.
const STEPS: usize = 48;

pub(super) fn sweeps(sheet: &Sheet<'_>) -> Markup {
    let rows = &sheet.r.sweeps;
    let Some(first) = rows.first() else { return html! {} };
    html! {
        section aria-labelledby="sweep" {
            h2 #sweep { "Sweep of " (parameter(first)) }
            p.soft { "Dots: the level of each setting. Line: the quadratic through the passes, shaded its 95 % band by their scatter. Each picture says where the change from "
                      (sheet.fitted(&sheet.r.baseline)) " becomes worth knowing (" (sheet.sought()) ")." }
            div.figures { @for row in rows { (swept(row)) } }
        }
    }
}

fn parameter(row: &SweepRow) -> String {
    let (name, unit) = &row.parameter;
    let name = if name.is_empty() { "the setting" } else { name.as_str() };
    if unit.is_empty() { safe(name) } else { safe(&format!("{name}, {unit}")) }
}

fn swept(row: &SweepRow) -> Markup {
    let ends = || row.levels.first().zip(row.levels.last()).map(|(a, b)| [a.0, b.0]);
    let Some([low, high]) = ends() else { return html! {} };
    let settings: Vec<f64> = (0..=STEPS).map(|i| low + (high - low) * i as f64 / STEPS as f64).collect();
    let quadratic = row.quadratic.as_ref();
    let line_of: Vec<[f64; 2]> = quadratic.map_or(Vec::new(), |q| settings.iter().map(|x| [*x, q.at(*x)]).collect());
    let band: Option<Vec<[f64; 3]>> =
        quadratic.and_then(|q| settings.iter().map(|x| q.u95(*x).map(|u| [*x, q.at(*x) - u, q.at(*x) + u])).collect());
    let levels = row.levels.iter().map(|l| l.1);
    let of_band = band.iter().flatten().flat_map(|b| [b[1], b[2]]);
    let y = Axis::over(levels.chain(line_of.iter().map(|p| p[1])).chain(of_band), [BOTTOM, TOP]);
    let x = Axis::over(settings.iter().copied(), FIELD);
    let (Some(x), Some(y)) = (x, y) else { return html! {} };
    let at = |p: &[f64; 2]| [x.at(p[0]), y.at(p[1])];
    let ring: Vec<Place> = band
        .iter()
        .flat_map(|band| band.iter().map(|b| at(&[b[0], b[1]])).chain(band.iter().rev().map(|b| at(&[b[0], b[2]]))))
        .collect();
    let body = html! {
        @if !ring.is_empty() { (shape(&ring, "band")) }
        (y.beside(FIELD, "Cp"))
        (x.below([TOP, BOTTOM], &short(&parameter(row), NAME)))
        g.blue { @if !line_of.is_empty() { (curve(&line_of.iter().map(at).collect::<Vec<_>>(), "stroke")) } }
        (marked(row, &x))
        g.orange { @for (setting, cp) in &row.levels { (mark(0, at(&[*setting, *cp]), "solid")) } }
    };
    let title = format!("{}, driven at {} km/h", safe(&row.tap), row.target_kmh);
    let caption = html! { strong { (title) } ": " (said(row)) };
    figure(&picture(BOTTOM + 34.0, &format!("Cp over {}: {title}", parameter(row)), &body), &caption)
}

/// Where the extreme and the crossing lie: a bar for the interval along the foot of the field.
fn marked(row: &SweepRow, x: &Axis) -> Markup {
    let crossing = row.crossing.map(|c| (c.at, c.interval.map(|(ends, _)| ends)));
    let extreme = row.extreme.map(|(at, set)| match set {
        Interval::Within(a, b) => (at, Some([a, b])),
        Interval::Outside(..) | Interval::All | Interval::Nowhere => (at, None),
    });
    let bar = |found: Option<(f64, Option<[f64; 2]>)>, y: f64, number: usize| {
        html! {
            @if let Some((at, ends)) = found {
                g.plain {
                    @if let Some([a, b]) = ends { (line([x.at(a), y], [x.at(b), y], "whisker")) }
                    (mark(number, [x.at(at), y], "hollow"))
                }
            }
        }
    };
    html! { (bar(extreme, BOTTOM - 8.0, 3)) (bar(crossing, BOTTOM - 22.0, 1)) }
}

/// What the sweep says, in words.
fn said(row: &SweepRow) -> Markup {
    let unit = safe(&row.parameter.1);
    let levels: Vec<String> = row.levels.iter().map(|(x, cp)| format!("{x}: {}", plain(Some(*cp), 4))).collect();
    let fit = match row.lack_of_fit_p {
        Some(p) => format!("lack of fit p = {p:.3}"),
        None => "its fit cannot be tested".to_string(),
    };
    html! {
        "Cp at " (levels.join(", ")) " (" (unit) "; their intervals are in the table of pressures). "
        @match (&row.quadratic, row.extreme) {
            (None, _) => { "A quadratic does not fit or cannot be told (" (fit) "); the curve is not drawn. " }
            (Some(_), None) => { "The quadratic (" (fit) ") has no extreme within the tested range. " }
            (Some(_), Some((at, set))) => { "△ extreme at " (format!("{at:.1}")) " " (unit) ", 95 %: " (words_of_interval(set, &unit)) " (" (fit) "). " }
        }
        @match &row.crossing {
            Some(c) => { "◇ " (super::super::text::reaches(c, &unit)) "." }
            None => { "The change does not become worth knowing within the tested range." }
        }
    }
}

pub(super) fn contour(sheet: &Sheet<'_>) -> Markup {
    let (Some(car), Some(target)) = (sheet.car(), sheet.main_target()) else { return html! {} };
    if car.contour.is_empty() {
        return html! {};
    }
    let taps: Vec<&Tap> = car.contour.iter().filter_map(|name| car.taps.iter().find(|t| &t.name == name)).collect();
    let series: Vec<(usize, String, Vec<[f64; 3]>)> = sheet
        .r
        .configurations
        .iter()
        .enumerate()
        .map(|(i, c)| (i, sheet.fitted(&c.letter), along(sheet, &taps, &c.letter, target)))
        .filter(|(.., points)| !points.is_empty())
        .collect();
    let all = || series.iter().flat_map(|(.., points)| points);
    // Suction upward, as the trade draws it.
    let y = Axis::over(all().flat_map(|p| [p[1] - p[2], p[1] + p[2]]), [TOP, BOTTOM]);
    let x = Axis::over(taps.iter().map(|t| t.at[0]), FIELD);
    let (Some(x), Some(y)) = (x, y) else {
        return html! { section { h2 { "Contour" } p { "No tap of the contour has a level: nothing to draw." } } };
    };
    let body = html! {
        (y.beside(FIELD, "Cp, suction upward"))
        (x.below([TOP, BOTTOM], "metres behind the front axle"))
        @if y.shows(0.0) { (line([FIELD[0], y.at(0.0)], [FIELD[1], y.at(0.0)], "axis")) }
        @for (number, name, points) in &series {
            g class=(if number % 2 == 0 { "blue" } else { "orange" }) {
                title { (name) }
                (ring(points, &x, &y, *number))
                @for [px, cp, u] in points {
                    @if *u > 0.0 { (line([x.at(*px), y.at(cp - u)], [x.at(*px), y.at(cp + u)], "thin")) }
                    (mark(*number, [x.at(*px), y.at(*cp)], "solid"))
                }
            }
        }
    };
    let key: Vec<String> = series.iter().map(|(i, name, _)| format!("{} {name}", MARKS[i % MARKS.len()])).collect();
    let caption = html! {
        strong { "Cp round the contour" } ", driven at " (target) " km/h: " (key.join(", ")) ". Bars: 95 % intervals; a mark without one has none. The line joins the taps in the \
        order of the car file: the pressure between them is not known."
    };
    html! {
        section aria-labelledby="contour" {
            h2 #contour { "Contour" }
            div.figures { (figure(&picture(BOTTOM + 34.0, "Cp round the contour over the length of the car", &body), &caption)) }
        }
    }
}

/// x, Cp and half-width (0: none) of the contour's taps that have a level.
fn along(sheet: &Sheet<'_>, taps: &[&Tap], letter: &str, target: f64) -> Vec<[f64; 3]> {
    let level = |tap: &&&Tap| {
        let mut all = sheet.r.levels.iter();
        all.find(|l| l.tap == tap.name && l.configuration == letter && l.target_kmh == target)
    };
    let point = |tap: &&Tap| {
        let l = level(&tap)?;
        l.cp.value.is_finite().then(|| [tap.at[0], l.cp.value, l.cp.u95.unwrap_or(0.0)])
    };
    taps.iter().filter_map(point).collect()
}

/// The closed line; broken for every second configuration.
fn ring(points: &[[f64; 3]], x: &Axis, y: &Axis, number: usize) -> Markup {
    let mut places: Vec<Place> = points.iter().map(|p| [x.at(p[0]), y.at(p[1])]).collect();
    places.extend(places.first().copied());
    curve(&places, if number == 0 { "thin" } else { "thin dashed" })
}
