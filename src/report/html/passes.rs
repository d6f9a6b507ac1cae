//! Every pass in time order: when, what, which way, how fast; the wind of the pairs, the drift of the zeros, what was wrong.

use super::figure::plain;
use super::sheet::{Sheet, figure, short, table};
use super::svg::{Axis, MARKS, Place, WIDE, area, circle, curve, line, mark, picture, shape, words};
use crate::reduction::passes::Pass;
use crate::session::Direction;
use crate::text::safe;
use crate::units::KMH_PER_M_S;
use maud::{Markup, html};

const LANE: f64 = 20.0;
const TOP: f64 = 22.0;
/// Height of the panels for wind and drift.
const PANEL: f64 = 90.0;
/// Field of the pictures.
const FIELD: Place = [58.0, WIDE - 12.0];

pub(super) fn section(sheet: &Sheet<'_>) -> Markup {
    let r = sheet.r;
    if r.passes.is_empty() {
        return html! {};
    }
    let sessions = r.passes.iter().map(|p| p.session).max().map_or(0, |n| n + 1);
    html! {
        section aria-labelledby="passes" {
            h2 #passes { "Every pass in time order" }
            div.figures {
                @for session in 0..sessions { (lanes(sheet, session, sessions > 1)) }
                // Wind and drift do not say which session they are of.
                @if sessions == 1 { (wind(sheet)) (drift(sheet)) }
            }
            (table_of_passes(sheet, sessions > 1))
            (each_tap(sheet))
            (folded("The wind, pair by pair", &table_of_wind(sheet)))
            (folded("The zeros, channel by channel", &table_of_drift(sheet)))
        }
    }
}

/// A long table that opens when asked for.
fn folded(summary: &str, table: &Markup) -> Markup {
    html! { @if !table.0.is_empty() { details { summary { (summary) } (table) } } }
}

fn minutes(t_s: f64) -> f64 {
    t_s / 60.0
}

/// One lane a configuration and target; the mark points where the car went.
fn lanes(sheet: &Sheet<'_>, session: usize, several: bool) -> Markup {
    let of: Vec<&Pass> = sheet.r.passes.iter().filter(|p| p.session == session).collect();
    let mut lanes: Vec<(usize, &str, f64)> = Vec::new();
    for p in &of {
        let lane = (sheet.number_of(&p.configuration), p.configuration.as_str(), p.target_kmh);
        if !lanes.contains(&lane) {
            lanes.push(lane);
        }
    }
    lanes.sort_by(|a, b| a.0.cmp(&b.0).then(a.2.total_cmp(&b.2)).then(a.1.cmp(b.1)));
    let Some(axis) = Axis::over(of.iter().map(|p| minutes(p.t_s)), FIELD) else { return html! {} };
    let bottom = TOP + LANE * lanes.len() as f64;
    let y_of = |p: &Pass| {
        let lane = lanes.iter().position(|l| l.1 == p.configuration && l.2 == p.target_kmh).unwrap_or(0);
        TOP + LANE * (lane as f64 + 0.5)
    };
    let which = if several { format!(" of session {}", session + 1) } else { String::new() };
    let body = html! {
        (axis.below([TOP, bottom], "time, min"))
        (words([2.0, 12.0], "small faint", "configuration and target, km/h"))
        @for (i, (_, letter, target)) in lanes.iter().enumerate() {
            (words([FIELD[0] - 4.0, TOP + LANE * (i as f64 + 0.5) + 4.0], "end", &format!("{} {target}", short(letter, 3))))
        }
        @for p in &of {
            g class=(colour(sheet, &p.configuration)) {
                title { (words_of(sheet, p)) }
                (pointer([axis.at(minutes(p.t_s)), y_of(p)], p.direction))
            }
        }
    };
    let caption =
        html! { strong { "Passes" (which) } ". ▶ out, ◀ back, ● neither; one lane a configuration and target speed." };
    figure(&picture(bottom + 34.0, &format!("{} passes{which} in time order", of.len()), &body), &caption)
}

fn colour(sheet: &Sheet<'_>, letter: &str) -> &'static str {
    if letter == sheet.r.baseline { "blue" } else { "orange" }
}

fn pointer([x, y]: Place, direction: Direction) -> Markup {
    let way = match direction {
        Direction::Out => 1.0,
        Direction::Back => -1.0,
        Direction::Other => return circle([x, y], 3.5, "solid"),
    };
    shape(&[[x + 5.0 * way, y], [x - 4.0 * way, y - 5.0], [x - 4.0 * way, y + 5.0]], "solid")
}

fn words_of(sheet: &Sheet<'_>, p: &Pass) -> String {
    format!(
        "{}, {}, {} km/h, at {} min",
        sheet.fitted(&p.configuration),
        p.direction.word(),
        p.target_kmh,
        plain(Some(minutes(p.t_s)), 1)
    )
}

fn wind(sheet: &Sheet<'_>) -> Markup {
    let pairs = &sheet.r.wind;
    let bottom = TOP + PANEL;
    let y = Axis::over(pairs.iter().map(|w| w.head_wind_out_kmh).chain([0.0]), [bottom, TOP]);
    let x = Axis::over(sheet.r.passes.iter().map(|p| minutes(p.t_s)), FIELD);
    let (Some(x), Some(y), false) = (x, y, pairs.is_empty()) else {
        return html! { p.soft { "No out-and-back pair with a probe: the wind is not known." } };
    };
    let body = html! {
        (y.beside(FIELD, "head wind on the way out, km/h"))
        (x.below([TOP, bottom], "time, min"))
        g.blue { @for w in pairs { (circle([x.at(minutes(w.t_s)), y.at(w.head_wind_out_kmh)], 3.5, "solid")) } }
    };
    let caption = html! { strong { "Wind" } " along the road, one dot an out-and-back pair; below 0 it came from behind on the way out." };
    figure(&picture(bottom + 34.0, "Head wind of every out-and-back pair over time", &body), &caption)
}

/// How far each channel's zero has moved since the first.
fn drift(sheet: &Sheet<'_>) -> Markup {
    let r = sheet.r;
    let mut channels: Vec<&str> = r.drift.iter().map(|d| d.channel.as_str()).collect();
    channels.dedup();
    let sought = r.resolve.0;
    let path = |channel: &str| {
        let (mut sum, mut points) = (0.0, Vec::new());
        for d in r.drift.iter().filter(|d| d.channel == channel) {
            if points.is_empty() {
                points.push([minutes(d.from_s), 0.0]);
            }
            sum += d.change_pa;
            points.push([minutes(d.to_s), sum]);
        }
        points
    };
    let paths: Vec<Vec<Place>> = channels.iter().map(|c| path(c)).collect();
    let bottom = TOP + PANEL;
    let x = Axis::over(paths.iter().flatten().map(|p| p[0]), FIELD);
    let y = Axis::over(paths.iter().flatten().map(|p| p[1]).chain([-sought, sought]), [bottom, TOP]);
    let (Some(x), Some(y)) = (x, y) else {
        return html! { p.soft { "Fewer than two zeros: their drift is not known." } };
    };
    let body = html! {
        (area([FIELD[0], y.at(-sought)], [FIELD[1], y.at(sought)], "band"))
        (y.beside(FIELD, "zero since the first, Pa"))
        (x.below([TOP, bottom], "time, min"))
        g.orange {
            @for (channel, path) in channels.iter().zip(&paths) {
                g {
                    title { (safe(channel)) }
                    (curve(&path.iter().map(|p| [x.at(p[0]), y.at(p[1])]).collect::<Vec<_>>(), "thin"))
                    @for p in path { (circle([x.at(p[0]), y.at(p[1])], 2.0, "solid")) }
                }
            }
        }
    };
    let caption = html! { strong { "Drift of the zeros" } ", one line a pressure channel; the shaded band is ± the change sought." };
    figure(&picture(bottom + 34.0, "Drift of the zeros over time", &body), &caption)
}

fn table_of_passes(sheet: &Sheet<'_>, several: bool) -> Markup {
    let row = |(i, p): (usize, &Pass)| {
        let ids: Vec<String> = p.segments.iter().map(u32::to_string).collect();
        let q = p.q.as_ref();
        let out: Vec<String> = sheet
            .r
            .left_out
            .iter()
            .filter(|l| l.session == p.session && p.segments.contains(&l.segment))
            .map(|l| safe(&l.why))
            .collect();
        html! {
            td { (i + 1) }
            @if several { td { (p.session + 1) } }
            td { (plain(Some(minutes(p.t_s)), 1)) }
            td { (ids.join(", ")) }
            td.name { (sheet.fitted(&p.configuration)) }
            td { (p.direction.word()) }
            td { (p.target_kmh) }
            td { (plain(p.speed_kmh, 1)) }
            td { (plain(q.map(|q| q.pa), 1)) @if q.is_some_and(|q| q.measured.is_none()) { " by ground speed" } }
            td { (plain(Some(p.density), 4)) }
            td.name { (if out.is_empty() { "—".to_string() } else { out.join(", ") }) }
        }
    };
    let mut heads = vec!["No."];
    heads.extend(several.then_some("Session"));
    heads.extend([
        "Time, min",
        "Segments",
        "Configuration",
        "Way",
        "Target, km/h",
        "Speed, km/h",
        "q, Pa",
        "Air, kg/m³",
        "Flags",
    ]);
    html! {
        (table("Passes", &heads, &sheet.r.passes.iter().enumerate().map(row).collect::<Vec<_>>()))
        p.soft { "A single pass has no interval of its own: the scatter from pass to pass is what the intervals are made of." }
    }
}

fn table_of_wind(sheet: &Sheet<'_>) -> Markup {
    let r = sheet.r;
    if r.wind.is_empty() {
        return html! {};
    }
    let rows: Vec<Markup> = r
        .wind
        .iter()
        .map(|w| {
            html! {
                td { (plain(Some(minutes(w.t_s)), 1)) }
                td { (w.target_kmh) }
                td { (plain(Some(w.head_wind_out_kmh), 1)) }
                td { (plain(Some(w.k), 4)) }
            }
        })
        .collect();
    html! {
        (table("Out-and-back pairs", &["Time, min", "Target, km/h", "Head wind out, km/h", "True over indicated airspeed"], &rows))
        @if let Some(w) = &r.probe_factor.wind {
            p { "Wind by all headings: " (plain(Some(w.speed_m_s() * KMH_PER_M_S), 1)) " km/h from " (plain(Some(w.from_deg()), 0)) "°." }
        }
        p.soft { "A pair has no interval of its own; the scatter of the pairs is in that of the probe factor." }
    }
}

fn table_of_drift(sheet: &Sheet<'_>) -> Markup {
    if sheet.r.drift.is_empty() {
        return html! {};
    }
    let look = super::figure::Look::of("Pa", 2);
    let rows: Vec<Markup> = sheet
        .r
        .drift
        .iter()
        .enumerate()
        .map(|(i, d)| {
            let moved = super::figure::Figure {
                value: d.change_pa,
                u95: Some(2.0 * d.u_pa).filter(|u| u.is_finite()),
                look,
                place: format!("/drift/{i}/change_pa"),
                lacks: "the zeros have no scatter to tell it from",
            };
            html! {
                td.name { (safe(&d.channel)) }
                td { (plain(Some(minutes(d.from_s)), 1)) " to " (plain(Some(minutes(d.to_s)), 1)) }
                td { (moved) }
                td { (if d.exceeds { "▲ more than the change sought" } else { "—" }) }
            }
        })
        .collect();
    table(
        "Drift of the zeros (± twice the standard uncertainty)",
        &["Channel", "Between, min", "Change", "Flag"],
        &rows,
    )
}

/// One small picture a tap: Cp pass by pass.
fn each_tap(sheet: &Sheet<'_>) -> Markup {
    let pictures: Vec<Markup> = sheet.taps().into_iter().filter_map(|t| of_tap(sheet, &t.name)).collect();
    if pictures.is_empty() {
        return html! {};
    }
    let key: Vec<String> = sheet
        .r
        .configurations
        .iter()
        .enumerate()
        .map(|(i, c)| format!("{} {}", MARKS[i % MARKS.len()], sheet.fitted(&c.letter)))
        .collect();
    html! {
        details.paper {
            summary { "Every pass, tap by tap (" (pictures.len()) " pictures)" }
            p.soft { "Cp of every pass, numbered as in the table: " (key.join(", ")) ". Hollow: driven back." }
            div.figures { @for picture in &pictures { (picture) } }
        }
    }
}

fn of_tap(sheet: &Sheet<'_>, tap: &str) -> Option<Markup> {
    let cp = |p: &Pass| p.taps.get(tap).and_then(|t| t.cp).filter(|cp| cp.is_finite());
    let all: Vec<(usize, &Pass, f64)> =
        sheet.r.passes.iter().enumerate().filter_map(|(i, p)| Some((i + 1, p, cp(p)?))).collect();
    let bottom = TOP + 1.4 * PANEL;
    let y = Axis::over(all.iter().map(|a| a.2), [bottom, TOP])?;
    let x = Axis::counting(sheet.r.passes.len(), FIELD);
    let body = html! {
        (y.beside(FIELD, "Cp"))
        (x.below([TOP, bottom], "pass"))
        @for (i, p, cp) in &all {
            g class=(colour(sheet, &p.configuration)) {
                title { (i) ": " (words_of(sheet, p)) ", Cp " (plain(Some(*cp), 4)) }
                (mark(sheet.number_of(&p.configuration), [x.at(*i as f64), y.at(*cp)], if p.direction == Direction::Back { "hollow" } else { "solid" }))
            }
        }
        @if y.shows(0.0) { (line([FIELD[0], y.at(0.0)], [FIELD[1], y.at(0.0)], "axis")) }
    };
    let name = safe(tap);
    Some(figure(&picture(bottom + 34.0, &format!("Cp of {name} pass by pass"), &body), &html! { strong { (name) } }))
}
