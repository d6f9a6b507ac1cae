//! Beside the road: what the passes so far say, tap by tap, and what to drive next.
//!
//! The decision on the chosen configuration stands large; below it the table of taps and configurations; below that what the person
//! turns to: warnings, segments, or the picture, which has a place of its own where the screen is wide.

use super::canvas::Canvas;
use super::digits::{self, Size};
use super::figures::{Figures, clock};
use super::findings::{Findings, SegmentLine};
use super::picture::{self, Arrow};
use super::text::folded;
use super::theme::Role;
use super::{Face, View, keys};
use crate::reduction::compare::{Comparison, Verdict};
use crate::reduction::{Reduction, passes};
use crate::report;
use crate::units::Quantity;
use ratatui::layout::Rect;

/// Where the eye is in this place.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct LaybyFace {
    /// Which of the compared configurations.
    pub configuration: usize,
    /// Which of the driven targets.
    pub target: usize,
    /// What is below the table.
    pub pane: Pane,
    /// The picture shows levels instead of the difference.
    pub levels: bool,
    /// The marked segment, counted from the newest.
    pub segment: usize,
    /// First warning that is shown.
    pub warning: usize,
}

/// What is below the table.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Pane {
    /// Warnings of the reduction, with what to do.
    #[default]
    Warnings,
    /// The segments.
    Segments,
    /// The side view.
    Picture,
}

impl Pane {
    /// The next one.
    pub const fn next(self) -> Self {
        match self {
            Self::Warnings => Self::Segments,
            Self::Segments => Self::Picture,
            Self::Picture => Self::Warnings,
        }
    }
    const fn word(self) -> &'static str {
        match self {
            Self::Warnings => "warnings",
            Self::Segments => "segments",
            Self::Picture => "picture",
        }
    }
}

/// Width from which the picture has a place of its own.
const WIDE: u16 = 112;
/// Columns of the picture there.
const PICTURE: u16 = 46;
/// Columns of a tap's name and of one verdict.
const NAME: u16 = 14;
const CELL: u16 = 29;

/// Draws the place.
pub(super) fn draw(view: &View, face: &Face, canvas: &mut Canvas) {
    let area = canvas.area();
    draw_title(view, canvas);
    keys::draw_line(canvas, face, area.bottom() - 1);
    let room = Rect::new(area.x, area.y + 1, area.width, area.height - 2);
    let Some(findings) = &view.findings else {
        return draw_nothing(canvas, room, "NO PASS", "nothing kept yet: drive a pass, and what it says stands here");
    };
    let reduction = match &findings.reduction {
        Ok(reduction) => reduction,
        Err(why) => return draw_nothing(canvas, room, "NO PASS", why),
    };
    let wide = area.width >= WIDE && area.height >= 30;
    let left = Rect { width: if wide { area.width - PICTURE } else { area.width }, ..room };
    let used = draw_decision(view, (findings, reduction), face, (canvas, room));
    let table = Rect { y: left.y + used, height: left.height.saturating_sub(used), ..left };
    // Where there is little room the picture takes the table's.
    let drawn = wide || face.layby.pane != Pane::Picture;
    let rows = if drawn { draw_table(view, (findings, reduction), face, (canvas, table)) } else { 0 };
    let below = Rect { y: table.y + rows, height: table.height.saturating_sub(rows), ..table };
    if wide {
        let side = Rect {
            x: left.right(),
            width: PICTURE,
            y: left.y + used,
            height: left.height.saturating_sub(used).min(18),
        };
        draw_picture((findings, reduction), face, (canvas, side));
    }
    draw_pane(view, (findings, reduction), face, (canvas, below));
}

fn draw_title(view: &View, canvas: &mut Canvas) {
    canvas.heading(&format!("LAYBY  {}", view.title), &view.journal.file);
    let area = canvas.area();
    if let Some(trouble) = &view.journal.trouble {
        canvas.text((area.x + 2, area.y), area.width - 3, &format!(" DISK: {trouble} "), Role::Trouble);
    }
}

fn draw_nothing(canvas: &mut Canvas, room: Rect, word: &str, why: &str) {
    digits::draw(canvas, Rect::new(room.x + 2, room.y, room.width - 3, 4), word, (Size::Large, false), Role::Off);
    canvas.text((room.x + 2, room.y + 5), room.width - 3, why, Role::Base);
}

/// The compared configuration and the target that are looked at.
fn chosen<'a>(findings: &'a Findings, r: &Reduction, face: &Face) -> (Option<&'a str>, Option<f64>) {
    let compared = findings.compared();
    let letter = compared.get(face.layby.configuration % compared.len().max(1)).copied();
    let targets = targets(r);
    (letter, targets.get(face.layby.target % targets.len().max(1)).copied())
}

/// Targets that were driven: the one that pressures are stated at first, then the others, rising.
fn targets(r: &Reduction) -> Vec<f64> {
    let mut targets = passes::targets(&r.passes);
    targets.sort_by_key(|t| *t != r.at_kmh);
    targets
}

fn of<'a>(r: &'a Reduction, letter: &'a str, target: f64) -> impl Iterator<Item = &'a Comparison> {
    r.comparisons.iter().filter(move |c| c.configuration == letter && c.target_kmh == target)
}

/// The decision in one large word, in a sentence, and the next pass worth driving; returns the rows used.
fn draw_decision(
    view: &View,
    (findings, r): (&Findings, &Reduction),
    face: &Face,
    (canvas, room): (&mut Canvas, Rect),
) -> u16 {
    let (letter, target) = chosen(findings, r, face);
    let comparisons: Vec<&Comparison> = letter.zip(target).map(|(l, t)| of(r, l, t).collect()).unwrap_or_default();
    let (word, role) = decision(&comparisons);
    digits::draw(canvas, Rect::new(room.x + 2, room.y, room.width - 26, 4), word, (Size::Large, false), role);
    let right = room.right() - 1;
    let named = letter.and_then(|l| r.configurations.iter().find(|c| c.letter == l));
    let head = named.map_or(String::new(), |c| format!("{} {}", c.letter, c.name));
    canvas.text_right((right, room.y), 24, &head, Role::Strong);
    canvas.text_right((right, room.y + 1), 24, &format!("against {}", r.baseline), Role::Base);
    let at = target.map_or(String::new(), |t| format!("at {} {}", speed(view, t), speed_unit(view)));
    canvas.text_right((right, room.y + 2), 24, &at, Role::Base);
    canvas.text_right((right, room.y + 3), 24, &format!("{} kept", view.kept), Role::Quiet);
    let mut y = room.y + 4;
    for line in folded(&sentence(view, &comparisons, r), usize::from(room.width) - 4).into_iter().take(3) {
        canvas.text((room.x + 2, y), room.width - 3, &line, Role::Base);
        y += 1;
    }
    let plan = view.plan.clone().unwrap_or_else(|| "every difference is decided".to_string());
    canvas.text((room.x + 2, y), room.width - 3, &format!("plan: {plan}"), Role::Strong);
    y += 1;
    let worth = r
        .next
        .as_ref()
        .map(|next| report::next_pass(next, r, view.show.pressure_unit()).replacen("Next:", "worth most:", 1));
    for line in worth.iter().flat_map(|words| folded(words, usize::from(room.width) - 4)).take(2) {
        canvas.text((room.x + 2, y), room.width - 3, &line, Role::Quiet);
        y += 1;
    }
    y - room.y
}

fn speed(view: &View, kmh: f64) -> String {
    Figures::of(Quantity::Speed, &view.show).short(kmh)
}
fn speed_unit(view: &View) -> &'static str {
    Figures::of(Quantity::Speed, &view.show).unit()
}

/// One word for a configuration: changed when any tap is, decided as unchanged when every tap is.
fn decision(comparisons: &[&Comparison]) -> (&'static str, Role) {
    let has = |verdict| comparisons.iter().any(|c| c.verdict == verdict);
    if comparisons.is_empty() {
        ("NO PASS", Role::Off)
    } else if has(Verdict::Changed) {
        ("CHANGED", Role::Held)
    } else if has(Verdict::Undecided) {
        ("UNDECIDED", Role::Off)
    } else {
        ("NO CHANGE", Role::Steady)
    }
}

/// The verdicts of a configuration in one sentence.
fn sentence(view: &View, comparisons: &[&Comparison], r: &Reduction) -> String {
    let figures = Figures::of(Quantity::Pressure, &view.show);
    let x = format!("{} {}", figures.short(r.resolve.1 * r.at_q_pa), figures.unit());
    let small = |c: &Comparison| c.delta.value.abs() < r.resolve.1;
    let named = |is: &dyn Fn(&Comparison) -> bool| -> Vec<&str> {
        comparisons.iter().filter(|c| is(c)).map(|c| c.tap.as_str()).collect()
    };
    let parts = [
        (named(&|c| c.verdict == Verdict::Changed && !small(c)), "changed".to_string()),
        (named(&|c| c.verdict == Verdict::Changed && small(c)), format!("changed by less than {x}")),
        (named(&|c| c.verdict == Verdict::NoChange), format!("no change beyond ±{x}")),
        (named(&|c| c.verdict == Verdict::Undecided), "undecided".to_string()),
    ];
    let said: Vec<String> = parts
        .into_iter()
        .filter(|(taps, _)| !taps.is_empty())
        .map(|(taps, words)| format!("{} {words}", taps.join(", ")))
        .collect();
    if said.is_empty() { "no difference can be told yet".to_string() } else { said.join("; ") }
}

/// The verdicts of every compared configuration, a sentence each.
pub(super) fn verdicts(view: &View, findings: &Findings) -> Vec<String> {
    let Ok(r) = &findings.reduction else { return Vec::new() };
    let Some(target) = targets(r).first().copied() else { return Vec::new() };
    let said = |letter: &&str| format!("{letter}: {}", sentence(view, &of(r, letter, target).collect::<Vec<_>>(), r));
    findings.compared().iter().map(said).collect()
}

/// Taps down, configurations across; returns the rows used.
fn draw_table(
    view: &View,
    (findings, r): (&Findings, &Reduction),
    face: &Face,
    (canvas, area): (&mut Canvas, Rect),
) -> u16 {
    let (letter, target) = chosen(findings, r, face);
    let (Some(letter), Some(target)) = (letter, target) else { return 0 };
    let compared = findings.compared();
    let fit = usize::from(((area.width - NAME - 2) / CELL).max(1));
    let at = compared.iter().position(|l| *l == letter).unwrap_or(0);
    let first = (at + 1).saturating_sub(fit);
    let shown = &compared[first..compared.len().min(first + fit)];
    let figures = Figures::of(Quantity::Pressure, &view.show);
    let unit = format!("tap, {}", figures.unit());
    canvas.text((area.x + 2, area.y), NAME, &unit, Role::Quiet);
    for (i, l) in shown.iter().enumerate() {
        let x = area.x + 2 + NAME + CELL * u16::try_from(i).unwrap_or(0);
        let passes = of(r, l, target).next().map_or([0, 0], |c| c.passes);
        let role = if *l == letter { Role::Held } else { Role::Quiet };
        let mark = if *l == letter { canvas.sign('►', '>') } else { ' ' };
        canvas.text((x, area.y), CELL - 1, &format!("{mark}{l}: {} + {} passes", passes[0], passes[1]), role);
    }
    let mut taps: Vec<&str> = Vec::new();
    r.levels.iter().filter(|l| l.target_kmh == target).for_each(|l| {
        if !taps.contains(&l.tap.as_str()) {
            taps.push(&l.tap);
        }
    });
    let room = usize::from(area.height.saturating_sub(4).max(2)) - 1;
    let lines = if taps.len() > room { room.saturating_sub(1) } else { taps.len() };
    for (y, tap) in (area.y + 1..).zip(taps.iter().take(lines)) {
        canvas.text((area.x + 2, y), NAME - 1, tap, Role::Base);
        for (i, l) in shown.iter().enumerate() {
            let x = area.x + 2 + NAME + CELL * u16::try_from(i).unwrap_or(0);
            if let Some(c) = of(r, l, target).find(|c| c.tap == *tap) {
                draw_verdict(c, (r, &figures), canvas, (x, y));
            }
        }
    }
    let more = taps.len() - lines;
    if more > 0 {
        let y = area.y + 1 + u16::try_from(lines).unwrap_or(0);
        canvas.text(
            (area.x + 2, y),
            area.width - 3,
            &format!("+{more} more taps: a higher window shows them"),
            Role::Strong,
        );
    }
    u16::try_from(lines + usize::from(more > 0)).unwrap_or(0) + 1
}

fn draw_verdict(c: &Comparison, (r, figures): (&Reduction, &Figures), canvas: &mut Canvas, (x, y): (u16, u16)) {
    let (sign, word, role) = match c.verdict {
        Verdict::Changed => (canvas.sign('■', '#'), "changed".to_string(), Role::Held),
        Verdict::NoChange => ('=', "no change".to_string(), Role::Steady),
        Verdict::Undecided => {
            ('?', c.passes_needed.map_or("undecided".to_string(), |n| format!("{n} more")), Role::Off)
        }
    };
    let half = c.delta.u95.map_or("?".to_string(), |u| figures.spread(Some(u * r.at_q_pa)).trim_start().to_string());
    let value = figures.signed(Some(c.delta.value * r.at_q_pa));
    canvas.put((x, y), sign, role);
    canvas.text((x + 1, y), CELL - 2, &format!(" {value} ±{half:>6} {word}"), role);
}

fn draw_pane(view: &View, (findings, r): (&Findings, &Reduction), face: &Face, (canvas, area): (&mut Canvas, Rect)) {
    if area.height < 2 {
        return;
    }
    let sign = canvas.sign('─', '-');
    canvas.fill(Rect { height: 1, ..area }, sign, Role::Quiet);
    let count = match face.layby.pane {
        Pane::Warnings => r.flags.len(),
        Pane::Segments => findings.segments.len(),
        Pane::Picture => 0,
    };
    let count = if count > 0 { format!(" {count}") } else { String::new() };
    canvas.text((area.x + 2, area.y), area.width - 4, &format!(" {}{count} ", face.layby.pane.word()), Role::Base);
    let inside = Rect { y: area.y + 1, height: area.height - 1, ..area };
    match face.layby.pane {
        Pane::Warnings => draw_warnings(r, face, canvas, inside),
        Pane::Segments => draw_segments(view, findings, face, (canvas, inside)),
        Pane::Picture => draw_picture((findings, r), face, (canvas, inside)),
    }
}

fn draw_warnings(r: &Reduction, face: &Face, canvas: &mut Canvas, area: Rect) {
    if r.flags.is_empty() {
        canvas.text((area.x + 2, area.y), area.width - 3, "nothing to warn of", Role::Quiet);
    }
    let width = usize::from(area.width) - 5;
    let first = face.layby.warning.min(r.flags.len().saturating_sub(1));
    let lines = r.flags.iter().skip(first).flat_map(|flag| {
        folded(flag, width)
            .into_iter()
            .enumerate()
            .map(|(i, line)| if i == 0 { format!("! {line}") } else { format!("  {line}") })
    });
    for (y, line) in (area.y..area.bottom()).zip(lines) {
        canvas.text((area.x + 2, y), area.width - 3, &line, Role::Base);
    }
}

fn draw_segments(view: &View, findings: &Findings, face: &Face, (canvas, area): (&mut Canvas, Rect)) {
    let rows = usize::from(area.height);
    let marked = face.layby.segment.min(findings.segments.len().saturating_sub(1));
    let first = (marked + 1).saturating_sub(rows);
    for (y, (i, segment)) in (area.y..area.bottom()).zip(findings.segments.iter().rev().enumerate().skip(first)) {
        let sign = if i == marked { canvas.sign('►', '>') } else { ' ' };
        let role = if i == marked { Role::Held } else { Role::Base };
        canvas.put((area.x + 1, y), sign, role);
        canvas.text((area.x + 3, y), area.width - 4, &segment_words(view, segment), role);
    }
}

/// A segment in one line.
pub(super) fn segment_words(view: &View, s: &SegmentLine) -> String {
    let target = s.target_kmh.map_or("by hand".to_string(), |t| format!("{} {}", speed(view, t), speed_unit(view)));
    let state = match (s.void, s.left_out.first()) {
        (true, _) => "VOID".to_string(),
        (false, Some(why)) => format!("left out: {why}"),
        (false, None) => String::new(),
    };
    let [from, _] = s.from_to;
    format!("{:>4}  {}  {:<4} {:<5} {target:<10} {state}", s.id, clock(from), s.configuration, s.direction.word())
}

/// The side view: the difference of the chosen configuration, or the levels.
fn draw_picture((findings, r): (&Findings, &Reduction), face: &Face, (canvas, area): (&mut Canvas, Rect)) {
    let (letter, target) = chosen(findings, r, face);
    let Some(target) = target else { return };
    let sure = |value: f64, u95: Option<f64>| u95.is_some_and(|u| value.abs() > u);
    let tap = |name: &str| findings.car.taps.iter().find(|t| t.name == name);
    let level = |letter: &str| -> Vec<Arrow<'_>> {
        let of = r.levels.iter().filter(|l| l.configuration == letter && l.target_kmh == target);
        of.filter_map(|l| Some(Arrow { tap: tap(&l.tap)?, value: l.cp.value, sure: sure(l.cp.value, l.cp.u95) }))
            .collect()
    };
    let (arrows, words) = match letter.filter(|_| !face.layby.levels) {
        Some(letter) => {
            let each = of(r, letter, target);
            let arrows = each.filter_map(|c| {
                Some(Arrow { tap: tap(&c.tap)?, value: c.delta.value, sure: sure(c.delta.value, c.delta.u95) })
            });
            (arrows.collect::<Vec<_>>(), format!("change of Cp, {letter} less {}", r.baseline))
        }
        None => {
            let letter = letter.unwrap_or(&r.baseline);
            (level(letter), format!("Cp with {letter}"))
        }
    };
    let largest = arrows.iter().map(|a| a.value.abs()).fold(0.0, f64::max);
    let words = format!("{words}; longest arrow {largest:.3}; out of the body: suction");
    for (y, line) in (area.y..).zip(folded(&words, usize::from(area.width) - 3).into_iter().take(2)) {
        canvas.text((area.x + 2, y), area.width - 3, &line, Role::Quiet);
    }
    let drawing = Rect { y: area.y + 2, height: area.height.saturating_sub(2), ..area };
    picture::draw(&findings.car, &arrows, canvas, drawing);
}
