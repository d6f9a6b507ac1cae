//! What the page rests on: input files with their checksums, and the resolved rig, car and outing.

use super::Input;
use super::sheet::{Sheet, table};
use crate::config::Setup;
use crate::text::safe;
use maud::{Markup, html};

pub(super) fn section(sheet: &Sheet<'_>) -> Markup {
    let input = sheet.input;
    let mut seen: Vec<(usize, &Setup)> = Vec::new();
    for (i, s) in input.sessions.iter().enumerate() {
        if !seen.iter().any(|(_, setup)| *setup == &s.header.setup) {
            seen.push((i, &s.header.setup));
        }
    }
    let rows: Vec<Markup> = input.sessions.iter().enumerate().map(row).collect();
    html! {
        section aria-labelledby="inputs" {
            h2 #inputs { "What it rests on" }
            p { "Reduced by steadytap " (safe(&input.version)) ". The same files and version give this page again, byte for byte." }
            (table("Session files", &["Session", "File", "CRC-32C", "Written by", "Begun"], &rows))
            @for (i, setup) in seen { (whole(i, setup)) }
        }
    }
}

fn row((i, s): (usize, &Input)) -> Markup {
    html! {
        td { (i + 1) }
        td.name { (safe(&s.file)) }
        td { code { (format!("{:08x}", s.sum)) } }
        td { "steadytap " (safe(&s.header.version)) }
        td { (s.header.started.as_deref().map_or("not recorded".to_string(), safe)) }
    }
}

fn whole(session: usize, setup: &Setup) -> Markup {
    let json = serde_json::to_string_pretty(setup).expect("a set-up has string keys and finite numbers only");
    html! {
        details.paper {
            summary { "Rig, car and outing as session " (session + 1) " has them" }
            (outing(setup))
            (car(setup))
            (rig(setup))
        }
        details {
            summary { "The same as JSON" }
            pre { @for line in json.lines() { (safe(line)) "\n" } }
        }
    }
}

fn pairs(caption: &str, of: &[(&str, String)]) -> Markup {
    let rows: Vec<Markup> = of.iter().map(|(key, value)| html! { td { (key) } td.words { (safe(value)) } }).collect();
    table(caption, &["Key", "Value"], &rows)
}

fn outing(setup: &Setup) -> Markup {
    let o = &setup.outing;
    let optional = |x: Option<f64>| x.map_or("—".to_string(), |x| x.to_string());
    let targets: Vec<String> = o.targets_kmh.iter().map(f64::to_string).collect();
    let configuration = |c: &crate::config::Configuration| {
        let parameter =
            c.parameter.as_ref().map_or("—".to_string(), |p| format!("{} {} {}", p.name, p.value, p.unit));
        html! {
            td { (safe(&c.letter)) }
            td.name { (safe(&c.name)) }
            td { (if c.baseline { "baseline" } else { "—" }) }
            td.name { (safe(parameter.trim())) }
        }
    };
    html! {
        (pairs("Outing", &[
            ("title", o.title.clone()),
            ("watched channel", o.watch.channel().to_string()),
            ("targets, km/h", targets.join(", ")),
            ("tolerance, km/h", o.tolerance_kmh.to_string()),
            ("settle, s", o.settle_s.to_string()),
            ("dwell, s", o.dwell_s.to_string()),
            ("slope, km/h per s", optional(o.slope)),
            ("out track, °", optional(o.out_track_deg)),
            ("passes wanted", o.passes.to_string()),
            ("smallest change worth knowing, Pa", o.resolve_pa.to_string()),
            ("air where no channel measures it", format!("{} °C, {} hPa, {} % ({})", o.air.temperature_c, o.air.pressure_hpa, o.air.humidity_pct,
                if o.air_stated { "stated" } else { "assumed" })),
        ]))
        (table("Configurations", &["Letter", "Name", "Role", "Setting"], &o.configurations.iter().map(configuration).collect::<Vec<_>>()))
        (table("Taps", &["Channel", "Tap"], &o.taps.iter().map(|(c, t)| html! { td { (safe(c)) } td.name { (safe(t)) } }).collect::<Vec<_>>()))
    }
}

fn car(setup: &Setup) -> Markup {
    let c = &setup.car;
    let vector = |v: [f64; 3]| v.map(|x| x.to_string()).join(", ");
    let tap = |t: &crate::config::Tap| {
        html! {
            td.name { (safe(&t.name)) }
            td { (vector(t.at)) }
            td { (vector(t.normal)) }
            td { (t.area_m2.map_or("—".to_string(), |a| a.to_string())) }
            td { (t.group.as_deref().map_or("—".to_string(), safe)) }
        }
    };
    let mut of = vec![
        ("name", c.name.clone()),
        ("reference area, m²", c.reference_area_m2.to_string()),
        ("wheelbase, m", c.wheelbase_m.to_string()),
        ("contour", if c.contour.is_empty() { "—".to_string() } else { c.contour.join(", ") }),
        ("probe", format!("{:?}, {:?}", c.probe.model, c.probe.factor)),
    ];
    of.extend(c.cores.iter().map(|k| ("core", format!("{}: {} to {}, bench {:?}", k.name, k.front, k.rear, k.bench))));
    html! {
        (pairs("Car", &of))
        (table("Taps of the car", &["Tap", "At x, y, z, m", "Normal", "Area, m²", "Group"], &c.taps.iter().map(tap).collect::<Vec<_>>()))
    }
}

fn rig(setup: &Setup) -> Markup {
    let channel = |c: &crate::config::Channel| {
        html! {
            td { (safe(&c.name)) }
            td { (safe(&format!("{}.{}", c.port, c.field))) }
            td { (c.quantity.word()) }
            td { (safe(&c.unit)) }
            td { (c.range.map_or("—".to_string(), |[a, b]| format!("{a} to {b}"))) }
            td { (c.lag_s) }
        }
    };
    table(
        "Channels of the rig",
        &["Channel", "From", "Quantity", "Unit", "Range", "Lag, s"],
        &setup.rig.channels.iter().map(channel).collect::<Vec<_>>(),
    )
}
