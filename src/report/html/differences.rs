//! Differences tap by tap against the change sought: one picture a configuration and target, all on one scale, and the table of all.

use super::sheet::{Group, Sheet, figure, short, table};
use super::svg::{Axis, WIDE, area, line, mark, picture, shape, words};
use super::verdicts::sign;
use crate::reduction::compare::{Comparison, Verdict};
use crate::text::safe;
use maud::{Markup, html};

const ROW: f64 = 36.0;
const TOP: f64 = 8.0;
/// Characters of a tap's name in the picture.
const NAME: usize = 24;

pub(super) fn section(sheet: &Sheet<'_>) -> Markup {
    let r = sheet.r;
    if r.comparisons.is_empty() {
        return html! {};
    }
    html! {
        section aria-labelledby="differences" {
            h2 #differences { "Differences from the baseline" }
            @if let Some(axis) = axis(sheet) {
                p.soft { "◆ changed, ● no change beyond " (sheet.sought()) ", ○ undecided. The bar is the 95 % interval; an arrow at its end says that it goes on. The shaded \
                          band is " (sheet.sought()) ", the change sought." }
                div.figures { @for group in sheet.groups() { (of_group(sheet, &group, &axis)) } }
            }
            (table(
                &format!("Differences from {}, {}", sheet.fitted(&r.baseline), sheet.at()),
                &["Tap", "Configuration", "Driven at", "Passes", "Difference", "Cp difference", "p, adjusted", "Verdict"],
                &(0..r.comparisons.len()).map(|i| row(sheet, i)).collect::<Vec<_>>(),
            ))
            p.soft { "Passes: of the baseline + of the configuration. p, adjusted: how likely a difference as large is where there is none, over all taps and \
                      configurations of a speed (Holm)." }
        }
    }
}

/// One scale for all: the band, all values, and as much of the half-widths as leaves these readable.
fn axis(sheet: &Sheet<'_>) -> Option<Axis> {
    let pa =
        |c: &Comparison| [c.delta.value, c.delta.u95.unwrap_or(0.0)].map(|x| x * sheet.r.at_q_pa / sheet.unit.scale);
    let sought = sheet.sought_pa() / sheet.unit.scale;
    let all = || sheet.r.comparisons.iter().map(pa).filter(|[v, u]| v.is_finite() && u.is_finite());
    let values = all().map(|[v, _]| v.abs()).fold(sought, f64::max);
    let ends = all().flat_map(|[v, u]| [v - u, v + u]).map(|end| end.clamp(-3.0 * values, 3.0 * values));
    Axis::over(ends.chain([-1.3 * sought, 1.3 * sought]), [12.0, WIDE - 12.0])
}

fn of_group(sheet: &Sheet<'_>, group: &Group<'_>, axis: &Axis) -> Markup {
    let bottom = TOP + ROW * group.of.len() as f64;
    let sought = sheet.sought_pa() / sheet.unit.scale;
    let title = format!(
        "{} against {}, driven at {} km/h",
        sheet.fitted(group.configuration),
        sheet.fitted(&sheet.r.baseline),
        group.target_kmh
    );
    let body = html! {
        (area([axis.at(-sought), TOP], [axis.at(sought), bottom], "band"))
        (axis.below([TOP, bottom], &format!("pressure difference, {}", sheet.unit.name)))
        @for side in [-sought, sought] { (line([axis.at(side), TOP], [axis.at(side), bottom], "edge")) }
        (line([axis.at(0.0), TOP], [axis.at(0.0), bottom], "axis"))
        @for (k, i) in group.of.iter().enumerate() { (bar(sheet, *i, axis, TOP + ROW * k as f64)) }
    };
    let caption = html! { strong { (title) } };
    figure(&picture(bottom + 34.0, &format!("Pressure differences with their intervals: {title}"), &body), &caption)
}

fn bar(sheet: &Sheet<'_>, i: usize, axis: &Axis, top: f64) -> Markup {
    let c = &sheet.r.comparisons[i];
    let figure = sheet.change(i);
    let shown = |pa: f64| pa / sheet.unit.scale;
    let (value, y) = (shown(figure.value), top + 25.0);
    let (colour, number, fill) = match c.verdict {
        Verdict::Changed => ("orange", 1, "solid"),
        Verdict::NoChange => ("blue", 0, "solid"),
        Verdict::Undecided => ("plain", 0, "hollow"),
    };
    html! {
        g class=(colour) {
            title { (safe(&c.tap)) ": " (c.verdict.word()) ", " (figure.words()) }
            (words([4.0, top + 14.0], "bold", &short(&c.tap, NAME)))
            (words([WIDE - 4.0, top + 14.0], "end", &short_words(&figure)))
            @if let Some(u) = figure.u95.map(shown) {
                (line([axis.at(value - u), y], [axis.at(value + u), y], "whisker"))
                (end(axis, value - u, y, -1.0))
                (end(axis, value + u, y, 1.0))
            }
            @if value.is_finite() { (mark(number, [axis.at(value), y], fill)) }
        }
    }
}

/// Value and half-width without the reason for a missing one, which is in the list above and the table below.
fn short_words(figure: &super::figure::Figure<'_>) -> String {
    let words = figure.words();
    words.split_once(" (").map_or(words.clone(), |(value, _)| format!("{value}, no interval"))
}

/// The end of an interval: a stroke, or an arrow where it leaves the picture.
fn end(axis: &Axis, value: f64, y: f64, way: f64) -> Markup {
    let x = axis.at(value);
    if axis.shows(value) {
        line([x, y - 4.0], [x, y + 4.0], "whisker")
    } else {
        shape(&[[x + 7.0 * way, y], [x, y - 4.5], [x, y + 4.5]], "solid")
    }
}

fn row(sheet: &Sheet<'_>, i: usize) -> Markup {
    let c = &sheet.r.comparisons[i];
    let p = c.p_adjusted.map_or("—".to_string(), |p| if p < 1e-4 { "< 0.0001".to_string() } else { format!("{p:.4}") });
    let (verdict, _) = super::super::text::verdict(c, sheet.r, sheet.unit);
    html! {
        td.name { (safe(&c.tap)) }
        td.name { (sheet.fitted(&c.configuration)) }
        td { (c.target_kmh) " km/h" }
        td { (c.passes[0]) " + " (c.passes[1]) }
        td { (sheet.change(i)) }
        td { (sheet.change_cp(i)) }
        td { (p) }
        td.words { (sign(c)) " " (verdict) }
    }
}
