//! Forces, axle loads, base drag, cores, section: every figure with its interval, its unit and the area that it assumes.

use super::figure::{Figure, Look};
use super::sheet::{Sheet, table};
use crate::reduction::compare::Estimate;
use crate::reduction::force::{ForceRow, scaled};
use crate::text::safe;
use crate::units::STANDARD_GRAVITY;
use maud::{Markup, html};

const NEWTON: Look = Look::of("N", 1);

pub(super) fn section(sheet: &Sheet<'_>) -> Markup {
    let r = sheet.r;
    let nothing = r.forces.is_empty() && r.cores.is_empty() && r.contour.is_empty();
    html! {
        section aria-labelledby="meaning" {
            h2 #meaning { "What the pressures mean" }
            @if nothing {
                p { "Nothing to work out: forces need taps with " code { "area_m2" } " in the car file, a flow needs a core, a section needs a contour, and all need passes." }
            }
            (forces(sheet))
            (balance(sheet))
            (base(sheet))
            (cores(sheet))
            (contour(sheet))
        }
    }
}

/// Configuration, speed and whether it is a difference: the head of every row.
fn head(sheet: &Sheet<'_>, configuration: &str, target_kmh: f64, difference: bool) -> Markup {
    html! {
        td.name {
            (sheet.fitted(configuration))
            @if difference { " against " (safe(&sheet.r.baseline)) }
        }
        td { (target_kmh) " km/h" }
    }
}

fn lacks(sheet: &Sheet<'_>, configuration: &str, target_kmh: f64, difference: bool) -> &'static str {
    if difference { sheet.lacks_difference(configuration, target_kmh) } else { sheet.lacks(configuration, target_kmh) }
}

/// Area of the taps of a group (none: all) that some pass has a Cp of, and how many these are.
fn area(sheet: &Sheet<'_>, group: Option<&str>) -> (f64, usize) {
    let measured = |name: &str| sheet.r.passes.iter().any(|p| p.taps.get(name).is_some_and(|t| t.cp.is_some()));
    let taps = sheet.car().map_or(&[][..], |c| &c.taps);
    let of = taps.iter().filter(|t| (group.is_none() || t.group.as_deref() == group) && measured(&t.name));
    let areas: Vec<f64> = of.filter_map(|t| t.area_m2).collect();
    (areas.iter().sum(), areas.len())
}

fn words_of_area(sheet: &Sheet<'_>, group: Option<&str>) -> String {
    let (m2, taps) = area(sheet, group);
    format!("{m2:.2} m² of {taps} tap{}", if taps == 1 { "" } else { "s" })
}

/// What base drag assumes.
pub(super) fn base_area(sheet: &Sheet<'_>) -> String {
    let reference = sheet.car().map_or(0.0, |c| c.reference_area_m2);
    format!("{} assumed for the base, reference area {reference} m²", words_of_area(sheet, Some("base")))
}

fn forces(sheet: &Sheet<'_>) -> Markup {
    let row = |(i, f): (usize, &ForceRow)| {
        let lacks = lacks(sheet, &f.configuration, f.target_kmh, f.difference);
        let kgf = scaled(f.newton, 1.0 / STANDARD_GRAVITY);
        let of = |e: Estimate, look, key: &str| Figure::new(&e, look, format!("/forces/{i}/{key}"), lacks);
        html! {
            td.name { (f.group.as_deref().map_or("all taps".to_string(), safe)) }
            (head(sheet, &f.configuration, f.target_kmh, f.difference))
            td { (f.component.word()) }
            td { (of(f.newton, NEWTON, "force_n")) }
            td { (of(kgf, Look::of("kgf", 2), "force_kgf")) }
            td { @match f.bounds { Some([a, b]) => { (super::figure::plain(Some(a), 1)) " to " (super::figure::plain(Some(b), 1)) }, None => "—" } }
            td { (words_of_area(sheet, f.group.as_deref())) }
        }
    };
    let rows: Vec<Markup> = sheet.r.forces.iter().enumerate().map(row).collect();
    html! {
        @if !rows.is_empty() {
            h3 { "Forces of the taps' panels" }
            p.soft { "Only the panels that the taps speak for, not the whole car. Drag is rearward, side to the right, lift upward (negative is downforce). ± if independent to common: the \
                      half-width if the taps' errors had nothing, or everything, in common; the one beside the force is measured." }
            (table(
                &format!("Forces {}", sheet.at()),
                &["Group", "Configuration", "Driven at", "Component", "Force", "Force", "± if independent to common, N", "Area assumed"],
                &rows,
            ))
        }
    }
}

fn balance(sheet: &Sheet<'_>) -> Markup {
    let mut rows = Vec::new();
    for (i, a) in sheet.r.balance.iter().enumerate() {
        let lacks = lacks(sheet, &a.configuration, a.target_kmh, a.difference);
        for (k, axle) in ["front", "rear"].into_iter().enumerate() {
            let of =
                |e: &Estimate, key: &str| Figure::new(e, NEWTON, format!("/balance/axles/{i}/{axle}_{key}"), lacks);
            rows.push(html! {
                (head(sheet, &a.configuration, a.target_kmh, a.difference))
                td { (axle) }
                td { (of(&a.taps[k], "lift_n")) }
                td { @match &a.ride_height[k] { Some(h) => (of(h, "lift_by_ride_height_n")), None => "—" } }
                td { (words_of_area(sheet, None)) }
            });
        }
    }
    html! {
        @if !rows.is_empty() {
            h3 { "Balance" }
            p.soft { "Lift of each axle by the taps' panels (negative is downforce), and by ride height and wheel rate where there is a channel. The two differ by all that the taps do not see." }
            (table(&format!("Axle lift {}", sheet.at()), &["Configuration", "Driven at", "Axle", "By the taps", "By ride height", "Area assumed"], &rows))
        }
    }
}

fn base(sheet: &Sheet<'_>) -> Markup {
    let rows: Vec<Markup> = sheet
        .r
        .base_drag
        .iter()
        .enumerate()
        .map(|(i, b)| {
            let lacks = lacks(sheet, &b.configuration, b.target_kmh, b.difference);
            let of = |e: &Estimate, look, key: &str| Figure::new(e, look, format!("/base_drag/{i}/{key}"), lacks);
            html! {
                (head(sheet, &b.configuration, b.target_kmh, b.difference))
                td { (of(&b.mean_cp, Look::of("", 4), "mean_cp")) }
                td { (of(&b.cd, Look::of("", 4), "cd_base_contribution")) }
                td { (of(&b.power_w, Look::of("W", 0), "power_w")) }
                td { (words_of_area(sheet, Some("base"))) }
            }
        })
        .collect();
    html! {
        @if !rows.is_empty() {
            h3 { "Base drag" }
            p.soft { "The rear face alone: " (base_area(sheet)) ". Positive is drag." }
            (table(
                &format!("Base contribution to drag {}", sheet.at()),
                &["Configuration", "Driven at", "Mean Cp", "Drag coefficient", "Power", "Area assumed"],
                &rows,
            ))
        }
    }
}

fn cores(sheet: &Sheet<'_>) -> Markup {
    let rows: Vec<Markup> = sheet
        .r
        .cores
        .iter()
        .enumerate()
        .map(|(i, c)| {
            let lacks = lacks(sheet, &c.configuration, c.target_kmh, c.difference);
            let of = |e: &Estimate, look, key: &str| Figure::new(e, look, format!("/cores/{i}/{key}"), lacks);
            html! {
                td.name { (safe(&c.core)) }
                (head(sheet, &c.configuration, c.target_kmh, c.difference))
                td { (of(&c.velocity_m_s, Look::of("m/s", 2), "velocity_m_s")) }
                td { (of(&c.ratio, Look::of("", 4), "velocity_ratio")) }
            }
        })
        .collect();
    html! {
        @if !rows.is_empty() {
            h3 { "Flow through cores" }
            p.soft { "Mean face velocity by the bench curve of the car file; no area is assumed. The bench curve's own error is in no interval." }
            (table(&format!("Core flow {}", sheet.at()), &["Core", "Configuration", "Driven at", "Face velocity", "Over airspeed"], &rows))
        }
    }
}

fn contour(sheet: &Sheet<'_>) -> Markup {
    let rows: Vec<Markup> = sheet
        .r
        .contour
        .iter()
        .enumerate()
        .map(|(i, c)| {
            let lacks = lacks(sheet, &c.configuration, c.target_kmh, c.difference);
            let of = |k: usize, key: &str| {
                Figure::new(&c.coefficients[k], Look::of("", 3), format!("/contour/{i}/{key}"), lacks)
            };
            html! {
                (head(sheet, &c.configuration, c.target_kmh, c.difference))
                td { (of(0, "section_cd")) }
                td { (of(1, "section_cl")) }
                td { (of(2, "section_cm")) }
            }
        })
        .collect();
    html! {
        @if !rows.is_empty() {
            h3 { "Section of the contour" }
            p.soft { "Per metre of width, by the chord of the contour (moment about the middle of the wheelbase at the road, nose-up positive, by its square). A coarse ring of taps shows a false drag." }
            (table("Section coefficients", &["Configuration", "Driven at", "Drag cd", "Lift cl", "Moment cm"], &rows))
        }
    }
}
