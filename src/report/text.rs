//! The reduction as text of at most 100 columns: the verdicts first, in words; every number with its unit and half-width.

use crate::config::Show;
use crate::reduction::compare::{Comparison, Estimate, Level, Verdict};
use crate::reduction::{Reduction, words_of_interval};
use crate::units::{PRESSURES, STANDARD_GRAVITY, Unit};
use std::fmt::Write;

/// Widest line.
pub const WIDTH: usize = 100;
/// Longest name in a table, characters.
const NAME: usize = 20;

/// The whole reduction, in the unit that the outing shows pressures in.
pub fn text(r: &Reduction, show: &Show) -> String {
    let mut out = String::new();
    let unit = Unit::find(PRESSURES, &show.pressure).unwrap_or(PRESSURES[0]);
    let baseline = r.configurations.iter().find(|c| c.letter == r.baseline).map_or("", |c| c.name.as_str());
    line(
        &mut out,
        &format!("{} · {} · baseline {} {}", safe(&r.title), safe(&r.car), safe(&r.baseline), safe(baseline)),
    );
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
            line(
                out,
                &format!(
                    "\n{} {} against {}, driven at {} km/h, {passes}",
                    safe(&c.configuration),
                    safe(fitted),
                    safe(&r.baseline),
                    c.target_kmh
                ),
            );
        }
        line(out, &format!("  {} {}", name(&c.tap), verdict(c, r, unit)));
    }
    if !r.comparisons.is_empty() {
        let words = format!(
            "Differences are pressures at {} km/h in standard air, ± their 95 % half-width; verdicts at 5 % over all taps and \
             configurations of a target together; a change below {} {} at {} km/h is not worth knowing.",
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
        wrapped(out, &next.words(r.at_q_pa));
    }
}

/// The first target: the speed at which `resolve_pa` is meant.
fn first_target(r: &Reduction) -> f64 {
    // resolve = (Pa, Cp) at one speed in ISA air; that speed follows from their ratio.
    crate::reduction::probe::speed_of(crate::reduction::air::ISA_DENSITY, r.resolve.0 / r.resolve.1).round()
}

fn verdict(c: &Comparison, r: &Reduction, unit: Unit) -> String {
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
    format!("{words:<34} {:>17}   Cp {:>16}", with_half_width(&c.delta, r.at_q_pa, unit), cp(&c.delta, true))
}

fn pressure(pa: f64, unit: Unit) -> String {
    format!("{:.*}", decimals(unit), unit.from_inside(pa))
}

/// Decimals that show about a tenth of a pascal.
fn decimals(unit: Unit) -> usize {
    (1.0 + unit.scale.log10()).round().clamp(0.0, 5.0) as usize
}

fn with_half_width(e: &Estimate, q: f64, unit: Unit) -> String {
    let value = format!("{:+.*}", decimals(unit), unit.from_inside(e.value * q));
    match e.u95 {
        Some(u) => format!("{value} ± {} {}", pressure(u * q, unit), unit.name),
        None => format!("{value} ± ? {}", unit.name),
    }
}

fn cp(e: &Estimate, signed: bool) -> String {
    let value = if signed { format!("{:+.4}", e.value) } else { format!("{:.4}", e.value) };
    match e.u95 {
        Some(u) => format!("{value} ± {u:.4}"),
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
        line(out, &level(l, r, unit));
    }
}

fn level(l: &Level, r: &Reduction, unit: Unit) -> String {
    let passes = format!("{} pass{}", l.passes, if l.passes == 1 { "" } else { "es" });
    let letter = safe(&l.configuration);
    format!(
        "  {} {letter:<4} {passes:>10} {:>22}   Cp {:>17}",
        name(&l.tap),
        with_half_width(&l.cp, r.at_q_pa, unit),
        cp(&l.cp, false)
    )
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
        wrapped(out, &format!("{} {} km/h: Cp {}; {curve}", safe(&s.tap), s.target_kmh, settings.join(", ")));
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

/// A value with its half-width and unit.
fn physical(e: &Estimate, decimals: usize, unit: &str) -> String {
    let half = e.u95.map_or("?".to_string(), |u| format!("{u:.decimals$}"));
    format!("{:+.decimals$} ± {half} {unit}", e.value).trim_end().to_string()
}

fn surroundings(out: &mut String, r: &Reduction) {
    line(out, "\nAir, wind, zeros");
    if let Some(a) = &r.air {
        let source = super::json::source(a.source);
        line(
            out,
            &format!(
                "  air {:.1} °C, {:.1} hPa, {:.0} % humidity ({source}): {:.4} kg/m³",
                a.air.temperature_c, a.air.pressure_hpa, a.air.humidity_pct, a.density
            ),
        );
    }
    if !r.wind.is_empty() {
        let n = r.wind.len();
        let wind = r.wind.iter().map(|w| w.head_wind_out_kmh).sum::<f64>() / n as f64;
        line(out, &format!("  head wind on the way out {wind:+.1} km/h, mean of {n} out-and-back pairs"));
    }
    if let Some(wind) = &r.probe_factor.wind {
        let (speed, from) = (wind.speed_m_s() * crate::units::KMH_PER_M_S, wind.from_deg());
        line(out, &format!("  wind {speed:.1} km/h from {from:.0}°, by all headings"));
    }
    let half = r.probe_factor.u95.map_or("?".to_string(), |u| format!("{u:.4}"));
    if r.passes.iter().any(|p| p.q.as_ref().is_some_and(|q| q.measured.is_some())) {
        wrapped(out, &format!("probe factor {:.4} ± {half}, {}", r.probe_factor.k, r.probe_factor.source.words()));
    }
    let mut channels: Vec<&str> = r.drift.iter().map(|d| d.channel.as_str()).collect();
    channels.dedup();
    for channel in channels {
        let of = || r.drift.iter().filter(|d| d.channel == channel);
        let largest = of().map(|d| d.change_pa).fold(0.0f64, |a, b| if b.abs() > a.abs() { b } else { a });
        let u = of().map(|d| d.u_pa).fold(0.0, f64::max);
        line(
            out,
            &format!("  zero of {} moved by at most {largest:+.2} ± {:.2} Pa between zeros", safe(channel), 2.0 * u),
        );
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
    let mut current = String::from(" ");
    for word in safe(text).split_whitespace() {
        if current.chars().count() + 1 + word.chars().count() > WIDTH {
            line(out, &current);
            current = String::from("   ");
        }
        let _ = write!(current, " {word}");
    }
    line(out, &current);
}
