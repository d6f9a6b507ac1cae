//! How it was worked out: methods with their sources, zeros, air, probe, what was left out, cautions.

use super::figure::plain;
use super::sheet::{Sheet, table};
use crate::config::ProbeModel;
use crate::text::safe;
use maud::{Markup, html};

/// What is always done: step, method, source.
const ALWAYS: [[&str; 3]; 11] = [
    ["Pass", "consecutive dwells of one stretch are one pass, and the pass is the observation, unweighted", "—"],
    [
        "Pressure coefficient",
        "mean pressure over mean dynamic pressure q of the pass (ratio estimator)",
        "Cochran, Sampling Techniques, chapter 6",
    ],
    ["Density of the air", "CIPM-2007 for moist air", "Picard, Davis, Gläser, Fujii, Metrologia 45, 2008, 149–155"],
    ["Standard air", "1.225 kg/m³ at sea level", "ISO 2533:1975"],
    [
        "Levels and differences",
        "one linear model a tap and speed: configuration, heading, session and straight drift; ordinary least squares",
        "Draper & Smith, Applied Regression Analysis",
    ],
    [
        "Intervals",
        "Student's t; the zeros' and the probe factor's own errors added, effective degrees of freedom by Welch–Satterthwaite",
        "JCGM 100:2008, equation G.2b",
    ],
    [
        "“Changed”",
        "t test of the difference, adjusted over all taps and configurations of a speed",
        "Holm, Scand. J. Statist. 6, 1979, 65",
    ],
    ["Passes still needed", "power of the t test, noncentral t", "Cohen, Statistical Power Analysis, 1988"],
    [
        "What to drive next",
        "the pass that narrows the widest undecided interval most, by the design with one row more",
        "Draper & Smith",
    ],
    [
        "Scatter from pass to pass",
        "Paule and Mandel's estimator; a diagnosis, no weight",
        "Paule & Mandel, J. Res. NBS 87, 1982, 377",
    ],
    [
        "Standing-out passes",
        "externally studentised residual with Bonferroni's bound; told, never left out",
        "Grubbs, Technometrics 11, 1969, 1",
    ],
];

pub(super) fn section(sheet: &Sheet<'_>) -> Markup {
    html! {
        section aria-labelledby="method" {
            h2 #method { "How it was worked out" }
            (cautions(sheet))
            (left_out(sheet))
            (surroundings(sheet))
            (methods(sheet))
        }
    }
}

fn cautions(sheet: &Sheet<'_>) -> Markup {
    let flags = &sheet.r.flags;
    let damage: Vec<String> =
        sheet.input.sessions.iter().flat_map(|s| s.damage.iter().map(|d| safe(&format!("{}: {d}", s.file)))).collect();
    html! {
        h3 { "Cautions" }
        @if flags.is_empty() && damage.is_empty() { p { "None." } } @else {
            ul {
                @for d in &damage { li { (d) } }
                @for flag in flags { li { (safe(flag)) } }
            }
        }
    }
}

fn left_out(sheet: &Sheet<'_>) -> Markup {
    let all = &sheet.r.left_out;
    let mut whys: Vec<(usize, &str)> = all.iter().map(|l| (l.session, l.why.as_str())).collect();
    whys.sort_unstable();
    whys.dedup();
    let rows: Vec<Markup> = whys
        .into_iter()
        .map(|(session, why)| {
            let of = all.iter().filter(|l| l.session == session && l.why == why);
            let ids: Vec<String> = of.map(|l| l.segment.to_string()).collect();
            html! { td { (session + 1) } td.words { (ids.join(", ")) } td.words { (reason(why)) } }
        })
        .collect();
    html! {
        h3 { "Left out" }
        @if rows.is_empty() { p { "No segment was left out." } } @else {
            (table("Segments that were left out", &["Session", "Segments", "Why"], &rows))
        }
    }
}

/// A flag in words.
fn reason(why: &str) -> String {
    let words = match why {
        "void" => "void: withdrawn by whoever drove".to_string(),
        "by-hand" => "by-hand: a span between two key presses, whatever the speed did".to_string(),
        "marked" => "marked: a mark was set while it was averaged".to_string(),
        other => match other.split_once(':') {
            Some((flag, channel)) => format!("{flag}: channel {channel} only"),
            None => other.to_string(),
        },
    };
    safe(&words)
}

fn surroundings(sheet: &Sheet<'_>) -> Markup {
    let r = sheet.r;
    let factor = &r.probe_factor;
    let measured = r.passes.iter().any(|p| p.q.as_ref().is_some_and(|q| q.measured.is_some()));
    let half = factor.u95.map_or("no interval".to_string(), |u| format!("± {}", plain(Some(u), 4)));
    html! {
        h3 { "Air, zeros, probe" }
        dl {
            dt { "Air" }
            dd {
                @match &r.air {
                    Some(a) => {
                        (plain(Some(a.air.temperature_c), 1)) " °C, " (plain(Some(a.air.pressure_hpa), 1)) " hPa, " (plain(Some(a.air.humidity_pct), 0))
                        " % humidity (" (super::super::json::source(a.source)) "), density " (plain(Some(a.density), 4)) " kg/m³; mean of all segments, no interval of its own"
                    }
                    None => "not known: there is no segment"
                }
            }
            dt { "Zeros" }
            dd {
                @if r.drift.is_empty() { "fewer than two zeros: the drift between them is not known" } @else {
                    "interpolated in time between the zeros before and after; a zero's own error is common to all passes that rest on it and is in every interval (JCGM 100:2008, equation 10)"
                }
            }
            dt { "Probe" }
            dd {
                @if measured {
                    "true over indicated airspeed " (plain(Some(factor.k), 4)) " " (half) ", " (factor.source.words()) "; "
                    @match sheet.car().map(|c| c.probe.model) {
                        Some(ProbeModel::Gain) => "gain model: Cp = Cp_m/k²"
                        _ => "static model: 1 − Cp = (1 − Cp_m)/k²"
                    }
                } @else { "no measured dynamic pressure: no probe factor" }
            }
            dt { "Stated speed" }
            dd { (r.at_kmh) " km/h in standard air: q = " (plain(Some(r.at_q_pa), 1)) " Pa" }
            dt { "Change worth knowing" }
            dd { "±" (sheet.pa(r.resolve.0)) " " (sheet.unit.name) " at the first target, ±" (plain(Some(r.resolve.1), 4)) " in Cp, " (sheet.sought()) " at the stated speed" }
        }
    }
}

fn methods(sheet: &Sheet<'_>) -> Markup {
    let r = sheet.r;
    let mut rows: Vec<[&str; 3]> = ALWAYS.to_vec();
    let mut add = |when: bool, row: [&'static str; 3]| rows.extend(when.then_some(row));
    add(
        !r.wind.is_empty(),
        [
            "Wind and probe factor",
            "pair algebra of opposite runs: k = ΣVg/ΣVa",
            "on-board anemometer calibration in coast-down testing (SAE J2263, ISO 10521-1)",
        ],
    );
    add(
        r.probe_factor.wind.is_some(),
        ["Wind by headings", "Gauss–Newton for wind and factor over all headings", "JCGM 100:2008"],
    );
    add(
        !r.forces.is_empty(),
        ["Forces", "dF = −p n dA over the patches of the car file; x rearward, y right, z up", "—"],
    );
    add(!r.balance.is_empty(), ["Axle loads", "lever rule about the contact patches", "—"]);
    add(
        !r.cores.is_empty(),
        [
            "Core flow",
            "dp = a v + b v² through the bench points, inverted pass by pass in the air of the day; viscosity by Sutherland",
            "Darcy–Forchheimer form; ISO 2533",
        ],
    );
    add(
        !r.sweeps.is_empty(),
        [
            "Sweep",
            "quadratic through the passes; lack of fit by F test; the extreme's interval by Fieller; the crossing's by inverting the band",
            "Fieller, J. R. Statist. Soc. B 16, 1954, 175; NIST/SEMATECH e-Handbook 4.4.4.6",
        ],
    );
    add(!r.contour.is_empty(), ["Section", "Cp linear along each side of the polygon, trapezoids", "—"]);
    let rows: Vec<Markup> = rows
        .into_iter()
        .map(|[step, method, source]| html! { td.name { (step) } td.words { (method) } td.words { (source) } })
        .collect();
    html! { h3 { "Methods" } (table("Methods and their sources", &["Step", "Method", "Source"], &rows)) }
}
