//! The reduction as text of at most 100 columns: the verdicts first, in words; every number with its unit and half-width.

use crate::config::Show;
use crate::reduction::compare::{Comparison, Estimate, Level, Verdict};
use crate::reduction::plan::{NextPass, Why};
use crate::reduction::sweep::Crossing;
use crate::reduction::{Reduction, words_of_interval};
use crate::units::{KMH_PER_M_S, STANDARD_GRAVITY, Unit};

/// Widest line.
pub const WIDTH: usize = 100;
/// Longest name in a table, characters.
const NAME: usize = 20;
/// Longest letter of a configuration in a table, characters.
const LETTER: usize = 4;

/// The whole reduction, in the unit that the outing shows pressures in.
pub fn text(r: &Reduction, show: &Show) -> String {
    let mut out = String::new();
    let unit = show.pressure_unit();
    let baseline = r.configurations.iter().find(|c| c.letter == r.baseline).map_or("", |c| c.name.as_str());
    let head = format!("{} · {} · baseline {} {}", r.title, r.car, r.baseline, baseline);
    folded(&mut out, &head, "", "  ");
    verdicts(&mut out, r, unit);
    levels(&mut out, r, unit);
    meanings(&mut out, r);
    surroundings(&mut out, r);
    left_out(&mut out, r);
    if !r.flags.is_empty() {
        line(&mut out, "\nCautions");
        r.flags.iter().for_each(|flag| wrapped(&mut out, flag));
    }
    out
}

fn safe(text: &str) -> String {
    text.chars().filter(|c| !c.is_control()).collect()
}

fn line(out: &mut String, text: &str) {
    out.push_str(text.trim_end());
    out.push('\n');
}

/// A name in a column.
fn name(text: &str) -> String {
    let text = safe(text);
    let short: String =
        if text.chars().count() > NAME { text.chars().take(NAME - 1).chain(['…']).collect() } else { text };
    format!("{short:<NAME$}")
}

fn verdicts(out: &mut String, r: &Reduction, unit: Unit) {
    let shown = |pa: f64| pressure(pa, unit);
    let mut at = None;
    for c in &r.comparisons {
        if at != Some((c.target_kmh, c.configuration.as_str())) {
            at = Some((c.target_kmh, c.configuration.as_str()));
            let fitted = r.configurations.iter().find(|k| k.letter == c.configuration).map_or("", |k| k.name.as_str());
            let passes = format!("{} + {} passes", c.passes[0], c.passes[1]);
            let head = format!(
                "{} {fitted} against {}, driven at {} km/h, {passes}",
                c.configuration, r.baseline, c.target_kmh
            );
            out.push('\n');
            folded(out, &head, "", "  ");
        }
        let (words, numbers) = verdict(c, r, unit);
        row(out, &format!("  {} {words:<34}", name(&c.tap)), &numbers);
        if let (Verdict::Undecided, Some(least)) = (c.verdict, c.detectable) {
            line(
                out,
                &format!("      these passes would have found a change of {} {}", shown(least * r.at_q_pa), unit.name),
            );
        }
    }
    if r.comparisons.is_empty() {
        let words = match r.passes.is_empty() {
            true => "No verdict: no pass was kept, or all are void or left out.",
            false => "No verdict: the baseline and another configuration are not both driven yet.",
        };
        out.push('\n');
        wrapped(out, words);
    } else {
        let words = format!(
            "Differences are pressures at {} km/h in standard air, ± their 95 % half-width; changed is said at 5 % over all taps \
             and configurations of a target together, no change by each interval alone; a change below {} {} at {} km/h is not worth knowing.",
            r.at_kmh,
            shown(r.resolve.0),
            unit.name,
            r.comparisons.first().map_or(r.at_kmh, |_| first_target(r)),
        );
        out.push('\n');
        wrapped(out, &words);
    }
    if let Some(next) = &r.next {
        out.push('\n');
        wrapped(out, &next_pass(next, r, unit));
    }
}

/// What to drive next, and what for.
pub fn next_pass(next: &NextPass, r: &Reduction, unit: Unit) -> String {
    let drive = format!("Next: drive {} {} at {} km/h", next.configuration, next.direction.word(), next.target_kmh);
    let shown = |cp: f64| pressure(cp * r.at_q_pa, unit);
    match &next.why {
        Why::NotDriven => format!("{drive}: it has no pass at this speed yet."),
        Why::Narrows { tap, configuration, from_to: Some((from, to)) } => format!(
            "{drive}: {tap}, {configuration} against {}, comes from ± {} to about ± {} {}.",
            r.baseline,
            shown(*from),
            shown(*to),
            unit.name
        ),
        Why::Narrows { tap, configuration, from_to: None } => {
            format!("{drive}: {tap}, {configuration} against {}, has no interval yet.", r.baseline)
        }
    }
}

/// The first target: the speed at which `resolve_pa` is meant.
pub(super) fn first_target(r: &Reduction) -> f64 {
    // resolve = (Pa, Cp) at one speed in ISA air; that speed follows from their ratio.
    crate::reduction::probe::speed_of(crate::reduction::air::ISA_DENSITY, r.resolve.0 / r.resolve.1).round()
}

pub(super) fn verdict(c: &Comparison, r: &Reduction, unit: Unit) -> (String, String) {
    let x = pressure(r.resolve.1 * r.at_q_pa, unit);
    let words = match c.verdict {
        Verdict::Changed if c.delta.value.abs() < r.resolve.1 => format!("changed, by less than {x} {}", unit.name),
        Verdict::Changed => "changed".to_string(),
        Verdict::NoChange => format!("no change beyond ±{x} {}", unit.name),
        Verdict::Undecided => match c.passes_needed {
            Some(1) => "undecided, about 1 more pass".to_string(),
            Some(n) => format!("undecided, about {n} more passes"),
            None => "undecided".to_string(),
        },
    };
    (words, format!("{:>17}   Cp {:>16}", with_half_width(&c.delta, r.at_q_pa, unit), cp(&c.delta, true)))
}

/// A row in two parts; the second goes below where both are too long for one line.
fn row(out: &mut String, left: &str, right: &str) {
    if left.chars().count() + 1 + right.chars().count() <= WIDTH {
        line(out, &format!("{left} {right}"));
    } else {
        line(out, left);
        line(out, &format!("  {:NAME$} {right}", ""));
    }
}

fn pressure(pa: f64, unit: Unit) -> String {
    fixed(unit.from_inside(pa), decimals(unit), false)
}

/// Fixed decimals, unless the figure is so large that it must be nonsense: then its order of magnitude, in as little room.
pub(super) fn fixed(x: f64, decimals: usize, signed: bool) -> String {
    if !x.is_finite() {
        return "?".to_string();
    }
    match (x.abs() < 1e5, signed) {
        (true, true) => format!("{x:+.decimals$}"),
        (true, false) => format!("{x:.decimals$}"),
        (false, true) => format!("{x:+.0e}"),
        (false, false) => format!("{x:.0e}"),
    }
}

/// Decimals that show about a tenth of a pascal.
pub(super) fn decimals(unit: Unit) -> usize {
    (1.0 + unit.scale.log10()).round().clamp(0.0, 5.0) as usize
}

fn with_half_width(e: &Estimate, q: f64, unit: Unit) -> String {
    let value = fixed(unit.from_inside(e.value * q), decimals(unit), true);
    match e.u95 {
        Some(u) => format!("{value} ± {} {}", pressure(u * q, unit), unit.name),
        None => format!("{value} ± ? {}", unit.name),
    }
}

fn cp(e: &Estimate, signed: bool) -> String {
    let value = fixed(e.value, 4, signed);
    match e.u95 {
        Some(u) => format!("{value} ± {}", fixed(u, 4, false)),
        None => format!("{value} ± ?"),
    }
}

fn levels(out: &mut String, r: &Reduction, unit: Unit) {
    let mut at = None;
    for l in &r.levels {
        if at != Some(l.target_kmh) {
            at = Some(l.target_kmh);
            line(
                out,
                &format!(
                    "\nPressures at {} km/h in standard air, from passes driven at {} km/h",
                    r.at_kmh, l.target_kmh
                ),
            );
        }
        let (head, numbers) = level(l, r, unit);
        row(out, &head, &numbers);
    }
    if r.levels.iter().any(|l| l.between.is_some()) {
        wrapped(out, "s: scatter of Cp from pass to pass beyond what the gusts within the passes explain.");
    }
}

fn level(l: &Level, r: &Reduction, unit: Unit) -> (String, String) {
    let passes = format!("{} pass{}", l.passes, if l.passes == 1 { "" } else { "es" });
    let letter: String = safe(&l.configuration).chars().take(LETTER).collect();
    let scatter = l.between.map_or(String::new(), |b| format!("  s {}", fixed(b.sd, 4, false)));
    let numbers = format!("{:>22}   Cp {:>17}{scatter}", with_half_width(&l.cp, r.at_q_pa, unit), cp(&l.cp, false));
    (format!("  {} {letter:<4} {passes:>10}", name(&l.tap)), numbers)
}

/// Forces, axles, base drag, cores, contour: only what the car file makes possible.
fn meanings(out: &mut String, r: &Reduction) {
    let whole: Vec<_> = r.forces.iter().filter(|f| f.group.is_none()).collect();
    let what = |difference: bool| if difference { "against the baseline" } else { "" };
    let head = |out: &mut String, title: &str| line(out, &format!("\n{title}, at {} km/h in standard air", r.at_kmh));
    if !whole.is_empty() {
        head(out, "Forces of the taps' panels (their areas are the car file's)");
    }
    for f in whole {
        let bounds = f.bounds.map_or(String::new(), |[i, c]| format!(" (independent ± {i:.1}, common ± {c:.1})"));
        let letter = safe(&f.configuration);
        let n = physical(&f.newton, 1, "N");
        let kgf = f.newton.value / STANDARD_GRAVITY;
        line(
            out,
            &format!(
                "  {letter:<4} {:>3} km/h {:<5} {n:>20} {kgf:>7.2} kgf{bounds} {}",
                f.target_kmh,
                f.component.word(),
                what(f.difference)
            ),
        );
    }
    if !r.balance.is_empty() {
        head(out, "Axle lift by the taps (negative is downforce)");
    }
    for a in &r.balance {
        let height =
            |i: usize| a.ride_height[i].map_or(String::new(), |h| format!(", by ride height {}", physical(&h, 1, "N")));
        let (front, rear) = (physical(&a.taps[0], 1, "N"), physical(&a.taps[1], 1, "N"));
        let letter = safe(&a.configuration);
        line(
            out,
            &format!("  {letter:<4} {:>3} km/h front {front:>18}{} {}", a.target_kmh, height(0), what(a.difference)),
        );
        line(
            out,
            &format!("  {letter:<4} {:>3} km/h rear  {rear:>18}{} {}", a.target_kmh, height(1), what(a.difference)),
        );
    }
    if !r.base_drag.is_empty() {
        head(out, "Base contribution to drag (the rear face alone)");
    }
    for b in &r.base_drag {
        let letter = safe(&b.configuration);
        let (cd, power) = (physical(&b.cd, 4, ""), physical(&b.power_w, 0, "W"));
        line(out, &format!("  {letter:<4} {:>3} km/h C_D {cd:>18} {power:>18} {}", b.target_kmh, what(b.difference)));
    }
    if !r.cores.is_empty() {
        head(out, "Core flow by the bench curve");
    }
    for c in &r.cores {
        let letter = safe(&c.configuration);
        let (v, ratio) = (physical(&c.velocity_m_s, 2, "m/s"), physical(&c.ratio, 4, ""));
        line(
            out,
            &format!(
                "  {} {letter:<4} {:>3} km/h {v:>20}  v/V {ratio:>18} {}",
                name(&c.core),
                c.target_kmh,
                what(c.difference)
            ),
        );
    }
    if let Some(first) = r.sweeps.first() {
        line(out, &format!("\nSweep of {} ({})", safe(&first.parameter.0), safe(&first.parameter.1)));
    }
    for s in &r.sweeps {
        let settings: Vec<String> = s.levels.iter().map(|(x, cp)| format!("{x}: {cp:+.4}")).collect();
        let curve = match (&s.quadratic, s.extreme) {
            (None, _) => "a quadratic does not fit, see the levels".to_string(),
            (Some(_), None) => "no extreme within the tested range".to_string(),
            (Some(_), Some((x, set))) => {
                format!("extreme at {x:.1}, {}", words_of_interval(set, &safe(&s.parameter.1)))
            }
        };
        let reaches = s.crossing.map_or(String::new(), |c| format!("; {}", reaches(&c, &safe(&s.parameter.1))));
        wrapped(out, &format!("{} {} km/h: Cp {}; {curve}{reaches}", safe(&s.tap), s.target_kmh, settings.join(", ")));
    }
    if !r.contour.is_empty() {
        line(out, "\nSection of the contour, by chord; a coarse ring of taps shows a false drag");
    }
    for c in &r.contour {
        let [d, l, m] = c.coefficients.map(|e| physical(&e, 3, ""));
        line(
            out,
            &format!(
                "  {:<4} {:>3} km/h cd {d:>15} cl {l:>15} cm {m:>15} {}",
                safe(&c.configuration),
                c.target_kmh,
                what(c.difference)
            ),
        );
    }
}

/// Where a change becomes worth knowing; an interval that leaves the tested range is open.
pub(super) fn reaches(c: &Crossing, unit: &str) -> String {
    let interval =
        c.interval.map_or("no interval: the curve interpolates".to_string(), |([low, high], [below, above])| {
            let low = if below { "open below".to_string() } else { format!("{low:.1}") };
            let high = if above { "open above".to_string() } else { format!("{high:.1}") };
            format!("{low} to {high}")
        });
    format!("the change becomes worth knowing at {:.1} {unit} ({interval})", c.at)
}

/// A value with its half-width and unit.
fn physical(e: &Estimate, decimals: usize, unit: &str) -> String {
    let half = e.u95.map_or("?".to_string(), |u| fixed(u, decimals, false));
    format!("{} ± {half} {unit}", fixed(e.value, decimals, true)).trim_end().to_string()
}

fn surroundings(out: &mut String, r: &Reduction) {
    line(out, "\nAir, wind, zeros");
    if let Some(a) = &r.air {
        let source = super::json::source(a.source);
        let words = format!(
            "air {} °C, {} hPa, {} % humidity ({source}): {} kg/m³",
            fixed(a.air.temperature_c, 1, false),
            fixed(a.air.pressure_hpa, 1, false),
            fixed(a.air.humidity_pct, 0, false),
            fixed(a.density, 4, false)
        );
        wrapped(out, &words);
    }
    if !r.wind.is_empty() {
        let n = r.wind.len();
        let wind = r.wind.iter().map(|w| w.head_wind_out_kmh).sum::<f64>() / n as f64;
        wrapped(
            out,
            &format!("head wind on the way out {} km/h, mean of {n} out-and-back pairs", fixed(wind, 1, true)),
        );
    }
    if let Some(wind) = &r.probe_factor.wind {
        let (speed, from) = (wind.speed_m_s() * KMH_PER_M_S, wind.from_deg());
        wrapped(out, &format!("wind {} km/h from {from:.0}°, by all headings", fixed(speed, 1, false)));
    }
    if r.passes.iter().any(|p| p.q.as_ref().is_some_and(|q| q.measured.is_some())) {
        let half = r.probe_factor.u95.map_or("?".to_string(), |u| fixed(u, 4, false));
        let k = fixed(r.probe_factor.k, 4, false);
        wrapped(out, &format!("probe factor {k} ± {half}, {}", r.probe_factor.source.words()));
    }
    let mut channels: Vec<&str> = r.drift.iter().map(|d| d.channel.as_str()).collect();
    channels.dedup();
    for channel in channels {
        let of = || r.drift.iter().filter(|d| d.channel == channel);
        let largest = of().map(|d| d.change_pa).fold(0.0f64, |a, b| if b.abs() > a.abs() { b } else { a });
        let u = of().map(|d| d.u_pa).fold(0.0, f64::max);
        let (largest, u) = (fixed(largest, 2, true), fixed(2.0 * u, 2, false));
        wrapped(out, &format!("zero of {channel} moved by at most {largest} ± {u} Pa between zeros"));
    }
}

fn left_out(out: &mut String, r: &Reduction) {
    if r.left_out.is_empty() {
        return;
    }
    line(out, "\nLeft out");
    let mut words: Vec<&str> = r.left_out.iter().map(|l| l.why.as_str()).collect();
    words.sort_unstable();
    words.dedup();
    for why in words {
        let ids: Vec<String> = r.left_out.iter().filter(|l| l.why == why).map(|l| l.segment.to_string()).collect();
        wrapped(out, &format!("{}: segment{} {}", safe(why), if ids.len() == 1 { "" } else { "s" }, ids.join(", ")));
    }
}

/// Words in lines of at most [`WIDTH`], indented.
fn wrapped(out: &mut String, text: &str) {
    folded(out, text, "  ", "    ");
}

/// Words in lines of at most [`WIDTH`]; a word that is longer is cut.
fn folded(out: &mut String, text: &str, first: &str, next: &str) {
    let mut current = String::from(first);
    let mut empty = true;
    for word in safe(text).split_whitespace() {
        let word: String = word.chars().take(WIDTH - next.len()).collect();
        if !empty && current.chars().count() + 1 + word.chars().count() > WIDTH {
            line(out, &current);
            (current, empty) = (String::from(next), true);
        }
        if !empty {
            current.push(' ');
        }
        current.push_str(&word);
        empty = false;
    }
    line(out, &current);
}
