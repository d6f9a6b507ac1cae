//! What the outing says, for whoever owns the car: each verdict with its interval, what to drive next, and what none of it is.

use super::figure::{Figure, Look};
use super::sheet::{Group, Sheet};
use crate::reduction::compare::{Comparison, Verdict};
use crate::text::safe;
use maud::{Markup, html};

const CAUTION: &str = "These figures are test results, not approval of a part: structural strength, road legality and handling are for licensed \
                       people and local rules.";

pub(super) fn section(sheet: &Sheet<'_>) -> Markup {
    let r = sheet.r;
    html! {
        section aria-labelledby="verdict" {
            h2 #verdict { "What the outing says" }
            @for group in sheet.groups() { (of_group(sheet, &group)) }
            @if r.comparisons.is_empty() { (cannot_tell(sheet)) } @else {
                p.soft {
                    "Figures are pressure differences " (sheet.at()) ", ± the half-width of their 95 % interval. “Changed” is said at 5 % over all taps and \
                     configurations of a speed together, “no change” where the whole interval lies within " (sheet.sought()) "."
                }
            }
            (next(sheet))
            p.caution { (CAUTION) }
        }
    }
}

fn of_group(sheet: &Sheet<'_>, group: &Group<'_>) -> Markup {
    let all = &sheet.r.comparisons;
    let count = |v: Verdict| group.of.iter().filter(|i| all[**i].verdict == v).count();
    let (changed, same, open) = (count(Verdict::Changed), count(Verdict::NoChange), count(Verdict::Undecided));
    let n = group.of.len();
    let parts = [
        (changed, format!("changed at {changed} of {n} taps")),
        (same, format!("no change beyond {} at {same}", sheet.sought())),
        (open, format!("undecided at {open}")),
    ];
    let words: Vec<String> = parts.into_iter().filter(|(count, _)| *count > 0).map(|(_, words)| words).collect();
    html! {
        h3 { (sheet.fitted(group.configuration)) " against " (sheet.fitted(&sheet.r.baseline)) ", driven at " (group.target_kmh) " km/h" }
        p { "The pressure: " (words.join("; ")) "." }
        ul.verdicts { @for i in &group.of { (item(sheet, *i)) } }
        (rear_face(sheet, group))
    }
}

fn item(sheet: &Sheet<'_>, i: usize) -> Markup {
    let c = &sheet.r.comparisons[i];
    let (words, _) = super::super::text::verdict(c, sheet.r, sheet.unit);
    html! {
        li class=(c.verdict.word()) {
            b { (sign(c)) " " (safe(&c.tap)) ": " (words) }
            (sheet.change(i)) @if let Some(way) = way(c) { ", " (way) }
            @if let (Verdict::Undecided, Some(least)) = (c.verdict, c.detectable) {
                br;
                span.soft { "These passes would have found a change of " (sheet.pa(least * sheet.r.at_q_pa)) " " (sheet.unit.name) "." }
            }
        }
    }
}

/// A sign for each verdict, beside its word.
pub(super) const fn sign(c: &Comparison) -> &'static str {
    match c.verdict {
        Verdict::Changed => "◆",
        Verdict::NoChange => "●",
        Verdict::Undecided => "○",
    }
}

/// Which way a change went.
fn way(c: &Comparison) -> Option<&'static str> {
    (c.verdict == Verdict::Changed).then_some(if c.delta.value > 0.0 {
        "the pressure is higher"
    } else {
        "the pressure is lower"
    })
}

/// What the change means for drag, where the rear face has taps with an area.
fn rear_face(sheet: &Sheet<'_>, group: &Group<'_>) -> Markup {
    let of_group = |(_, b): &(usize, &crate::reduction::force::BaseRow)| {
        b.difference && b.configuration == group.configuration && b.target_kmh == group.target_kmh
    };
    let Some((i, b)) = sheet.r.base_drag.iter().enumerate().find(of_group) else { return html! {} };
    let lacks = sheet.lacks_difference(group.configuration, group.target_kmh);
    let cd = Figure::new(&b.cd, Look::of("", 4), format!("/base_drag/{i}/cd_base_contribution"), lacks);
    let power = Figure::new(&b.power_w, Look::of("W", 0), format!("/base_drag/{i}/power_w"), lacks);
    html! {
        p {
            "For the rear face alone that is a change of the drag coefficient of " (cd) " and of the power it takes of " (power) " " (sheet.at())
            "; negative is a saving (" (super::tables::base_area(sheet)) ")."
        }
    }
}

fn cannot_tell(sheet: &Sheet<'_>) -> Markup {
    let why = sheet.r.flags.iter().find(|f| {
        ["no pass to reduce", "passes without q", "passes with q below", "nothing to compare"]
            .iter()
            .any(|head| f.starts_with(head))
    });
    html! {
        p { strong { "It cannot be decided" } ": " (safe(why.map_or("there is nothing to compare", String::as_str))) "." }
    }
}

fn next(sheet: &Sheet<'_>) -> Markup {
    let r = sheet.r;
    let undecided = r.comparisons.iter().any(|c| c.verdict == Verdict::Undecided);
    let words = match &r.next {
        Some(next) => super::super::text::next_pass(next, r, sheet.unit),
        None if r.comparisons.is_empty() || undecided => format!(
            "Next: drive the baseline {} out and back, then each other configuration, and the baseline again at the end.",
            r.baseline
        ),
        None => "Next: nothing more is needed for this question; every difference is decided.".to_string(),
    };
    html! { p.next { (safe(&words)) } }
}
