//! The outing file, and the three files together.

use super::problem::{Kind, Problem, Severity, Source};
use super::reader::{Item, Problems, Table, nearest, shown, unique};
use super::{Air, Car, Channel, Configuration, Outing, Parameter, Rig, Setup, Show, Watch, car, rig};
use crate::pneumatics::{Gas, settle_of_lag_s};
use crate::units::{PRESSURES, Quantity, SPEEDS, Unit};
use std::collections::BTreeMap;
use std::ops::Range;

/// The files that an outing names, relative to itself.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Head {
    /// The rig file.
    pub rig: String,
    /// The car file.
    pub car: String,
}

/// Reads which rig and car an outing names.
///
/// # Errors
/// The outing's problems, if it names none.
pub fn outing_head(source: &Source) -> Result<Head, Vec<Problem>> {
    let problems = Problems::of(source);
    let head = problems.read(Kind::Outing, |top| {
        let (rig, car) = (top.need_text("rig"), top.need_text("car"));
        top.all_known();
        Some(Head { rig: rig?.value, car: car?.value })
    });
    head.ok_or_else(|| problems.into_list())
}

/// What a file says it is.
///
/// # Errors
/// The problems that keep it from saying.
pub fn kind(source: &Source) -> Result<Kind, Vec<Problem>> {
    for kind in [Kind::Rig, Kind::Car, Kind::Outing] {
        let problems = Problems::of(source);
        problems.read(kind, |top| {
            top.all_known();
            Some(())
        });
        if problems.into_list().is_empty() {
            return Ok(kind);
        }
    }
    let problems = Problems::of(source);
    let parsed = problems.read(Kind::Outing, |top| {
        top.all_known();
        Some(())
    });
    let mut list = problems.into_list();
    if parsed.is_some() {
        for problem in &mut list {
            problem.hint =
                Some("the first key says what a file is: steadytap = \"rig 1\", \"car 1\" or \"outing 1\"".to_string());
        }
    }
    Err(list)
}

/// Reads all three files; the warnings come with the setup.
///
/// # Errors
/// Every problem of the three files, in their order.
pub fn setup(outing: &Source, rig: &Source, car: &Source) -> Result<(Setup, Vec<Problem>), Vec<Problem>> {
    let (rig_problems, car_problems, problems) = (Problems::of(rig), Problems::of(car), Problems::of(outing));
    let (rig, car) = (rig::read(&rig_problems), car::read(&car_problems));
    let outing = problems.read(Kind::Outing, |top| {
        for key in ["rig", "car"] {
            top.need_text(key);
        }
        read(top, rig.as_ref(), car.as_ref())
    });
    if let (Some(rig), Some(car)) = (&rig, &car) {
        ride_heights(&car_problems, rig, car);
    }
    let mut list = rig_problems.into_list();
    list.extend(car_problems.into_list());
    list.extend(problems.into_list());
    let broken = list.iter().any(|p| p.severity == Severity::Error);
    match (rig, car, outing) {
        (Some(rig), Some(car), Some(outing)) if !broken => Ok((Setup { rig, car, outing }, list)),
        _ => Err(list),
    }
}

fn ride_heights(problems: &Problems<'_>, rig: &Rig, car: &Car) {
    let axles = car.ride_height.iter().flat_map(|r| [&r.front, &r.rear]).flatten();
    for axle in axles {
        let good = rig.channels.iter().any(|c| c.name == axle.channel && c.quantity == Quantity::RideHeight);
        if !good {
            let hint = "add the channel to the rig with quantity = \"ride-height\", or take it out of the car";
            problems.error(&(0..0), format!("the rig has no ride-height channel `{}`", shown(&axle.channel)), hint);
        }
    }
}

fn read(top: &Table<'_, '_>, rig: Option<&Rig>, car: Option<&Car>) -> Option<Outing> {
    let title = top.need_text("title");
    let watch_word = top.text("watch");
    let watch = rig.and_then(|rig| watch(top, watch_word, rig));
    let targets = targets(top);
    let tolerance_kmh = top.need_positive("tolerance_kmh", 100.0, "km/h");
    let settle_s = need_in(top, "settle_s", (0.0, 600.0), "s");
    if let (Some(settle_s), Some(rig)) = (settle_s, rig) {
        settles(top, settle_s, rig);
    }
    let dwell_s = top.need_positive("dwell_s", 3600.0, "s");
    let slope = top.positive("slope", 1000.0, "km/h per s");
    let out_track_deg = top.number_in("out_track_deg", (0.0, 360.0), "degrees");
    let passes = top.positive("passes", 1000.0, "passes").map_or(4, |p| p.round() as u32).max(1);
    let resolve_pa = top.need_positive("resolve_pa", 1e5, "Pa");
    let show = top.table("show").map_or_else(|| Some(standard_show()), |t| show(&t));
    let air_table = top.table("air");
    let air = air_table.as_ref().map_or(Some(Air::STANDARD), air);
    let configurations = configurations(top);
    let taps = taps(top, rig, car);
    Some(Outing {
        title: title?.value,
        watch: watch?,
        targets_kmh: targets?,
        tolerance_kmh: tolerance_kmh?,
        settle_s: settle_s?,
        dwell_s: dwell_s?,
        slope,
        out_track_deg,
        passes,
        resolve_pa: resolve_pa?,
        show: show?,
        air: air?,
        air_stated: air_table.is_some(),
        configurations: configurations?,
        taps: taps?,
    })
}

/// Warns where averaging would begin before a channel has followed into the window.
fn settles(top: &Table<'_, '_>, settle_s: f64, rig: &Rig) {
    for channel in &rig.channels {
        let asks = channel.tube.map_or(settle_of_lag_s(channel.lag_s), |tube| tube.settle_s(&Gas::STANDARD));
        if asks > settle_s {
            let what = format!("`settle_s` is {settle_s}, channel `{}` asks for {asks:.2} s to be within 1 %", channel.name);
            top.problems.warn(&top.span_of("settle_s"), what, "settle longer, or use a shorter or wider tube");
        }
    }
}

fn need_in(t: &Table<'_, '_>, key: &'static str, range: (f64, f64), unit: &str) -> Option<f64> {
    if !t.has(key) {
        t.need_number(key);
    }
    t.number_in(key, range, unit)
}

fn targets(top: &Table<'_, '_>) -> Option<Vec<f64>> {
    if !top.has("targets_kmh") {
        top.problems.error(&top.span, "the outing has no `targets_kmh`", "add `targets_kmh = [100.0]`");
    }
    let item = top.numbers("targets_kmh")?;
    let good = !item.value.is_empty() && item.value.iter().all(|v| (5.0..=400.0).contains(v));
    let mut sorted = item.value.clone();
    sorted.sort_by(f64::total_cmp);
    if !good || sorted.windows(2).any(|w| w[0] == w[1]) {
        top.problems.error(&item.span, "`targets_kmh` needs one speed or more, each once, 5 to 400 km/h", "");
        return None;
    }
    Some(item.value)
}

/// `speed`, `q`, or a channel's name.
fn watch(top: &Table<'_, '_>, word: Option<Item<String>>, rig: &Rig) -> Option<Watch> {
    let span = word.as_ref().map_or(top.span.clone(), |w| w.span.clone());
    let word = word.map_or("speed".to_string(), |w| w.value);
    let of = |quantity| rig.channels.iter().find(|c: &&Channel| c.quantity == quantity).map(|c| c.name.clone());
    let error = |what: String, hint: &str| {
        top.problems.error(&span, what, hint);
        None
    };
    match (word.as_str(), rig.channels.iter().find(|c| c.name == word)) {
        ("speed", None) | ("speed", Some(Channel { quantity: Quantity::Speed, .. })) => match of(Quantity::Speed) {
            Some(name) => {
                Some(Watch::Channel(if rig.channels.iter().any(|c| c.name == "speed") { word } else { name }))
            }
            None => error(
                "the rig has no channel of quantity speed to watch".to_string(),
                "add one to the rig, or watch = \"q\"",
            ),
        },
        (_, Some(Channel { quantity: Quantity::DynamicPressure, name, .. })) => Some(Watch::Airspeed(name.clone())),
        ("q", None) => match of(Quantity::DynamicPressure) {
            Some(name) => Some(Watch::Airspeed(name)),
            None => error(
                "the rig has no channel of quantity dynamic-pressure to watch".to_string(),
                "add one to the rig, or watch = \"speed\"",
            ),
        },
        (_, Some(Channel { quantity: Quantity::Speed, name, .. })) => Some(Watch::Channel(name.clone())),
        (name, Some(_)) => {
            error(format!("channel `{name}` is neither a speed nor a dynamic pressure"), "watch a speed or q")
        }
        (name, None) => {
            let hint = nearest(name, rig.channels.iter().map(|c| c.name.as_str()));
            error(format!("the rig has no channel `{}` to watch", shown(name)), &hint)
        }
    }
}

fn standard_show() -> Show {
    Show { speed: "km/h".to_string(), pressure: "Pa".to_string() }
}

fn show(t: &Table<'_, '_>) -> Option<Show> {
    let pick = |key: &'static str, units: &[Unit], standard: &str| {
        let Some(item) = t.text(key) else { return Some(standard.to_string()) };
        if Unit::find(units, &item.value).is_none() {
            let names: Vec<&str> = units.iter().map(|u| u.name).filter(|n| *n != "inH2O").collect();
            let what = format!("`{}` cannot be shown as {key}", shown(&item.value));
            t.problems.error(&item.span, what, format!("one of: {}", names.join(", ")));
            return None;
        }
        Some(item.value)
    };
    let (speed, pressure) = (pick("speed", SPEEDS, "km/h"), pick("pressure", PRESSURES, "Pa"));
    Some(Show { speed: speed?, pressure: pressure? })
}

fn air(t: &Table<'_, '_>) -> Option<Air> {
    let temperature_c = need_in(t, "temperature_c", (-60.0, 70.0), "°C");
    let pressure_hpa = need_in(t, "pressure_hpa", (300.0, 1200.0), "hPa");
    let humidity_pct = if t.has("humidity_pct") {
        t.number_in("humidity_pct", (0.0, 100.0), "%")
    } else {
        Some(Air::STANDARD.humidity_pct)
    };
    t.know("humidity_pct");
    Some(Air { temperature_c: temperature_c?, pressure_hpa: pressure_hpa?, humidity_pct: humidity_pct? })
}

fn configurations(top: &Table<'_, '_>) -> Option<Vec<Configuration>> {
    let tables = top.tables("configuration");
    let list: Vec<Option<(Item<String>, Configuration)>> = tables.iter().map(configuration).collect();
    unique(top.problems, "the configuration", list.iter().flatten().map(|(letter, _)| letter));
    let baselines: Vec<Range<usize>> = tables
        .iter()
        .zip(&list)
        .filter(|(_, c)| c.as_ref().is_some_and(|(_, c)| c.baseline))
        .map(|(t, _)| t.span.clone())
        .collect();
    match (tables.first(), baselines.as_slice()) {
        (None, _) => {
            let hint = "add [[configuration]] with letter, name and baseline = true, and one for each change";
            top.problems.error(&top.span, "the outing has no [[configuration]]", hint);
        }
        (Some(first), []) if list.iter().all(Option::is_some) => {
            top.problems.error(&first.span, "no configuration is the baseline", "add `baseline = true` to one");
        }
        (_, [first, second, ..]) => {
            let place = top.problems.line(first);
            top.problems.error(second, "a second baseline", format!("the first one is at {place}; only one can be"));
        }
        _ => {}
    }
    list.into_iter().map(|c| Some(c?.1)).collect()
}

fn configuration(t: &Table<'_, '_>) -> Option<(Item<String>, Configuration)> {
    let letter = t.need_name("letter");
    let name = t.text("name").map_or(String::new(), |n| n.value);
    let baseline = t.boolean("baseline").unwrap_or(false);
    let parameter = match t.table("parameter") {
        None => Some(None),
        Some(p) => {
            let (name, unit, value) = (p.need_text("name"), p.text("unit"), p.need_number("value"));
            name.zip(value).map(|(name, value)| {
                Some(Parameter { name: name.value, unit: unit.map_or(String::new(), |u| u.value), value: value.value })
            })
        }
    };
    let configuration = Configuration { letter: letter.as_ref()?.value.clone(), name, baseline, parameter: parameter? };
    Some((letter?, configuration))
}

/// Channel → tap; both known, no tap twice.
fn taps(top: &Table<'_, '_>, rig: Option<&Rig>, car: Option<&Car>) -> Option<BTreeMap<String, String>> {
    let Some(table) = top.table("taps") else {
        top.problems.error(&top.span, "the outing has no [taps]", "add [taps] with lines such as p1 = \"base-high\"");
        return None;
    };
    let entries = table.entries();
    unique(top.problems, "the tap", entries.iter().map(|(_, tap)| tap));
    let mut taps = BTreeMap::new();
    for (channel, tap) in entries {
        if let Some(rig) = rig {
            known_channel(top, rig, &channel);
        }
        if let Some(car) = car.filter(|car| !car.taps.iter().any(|t| t.name == tap.value)) {
            let hint = nearest(&tap.value, car.taps.iter().map(|t| t.name.as_str()));
            top.problems.error(&tap.span, format!("the car has no tap `{}`", shown(&tap.value)), hint);
        }
        taps.insert(channel.value, tap.value);
    }
    Some(taps)
}

/// Only a pressure channel of the rig can sit on a tap.
fn known_channel(top: &Table<'_, '_>, rig: &Rig, channel: &Item<String>) {
    match rig.channels.iter().find(|c| c.name == channel.value) {
        None => {
            let pressures = rig.channels.iter().filter(|c| c.quantity == Quantity::Pressure);
            let hint = nearest(&channel.value, pressures.map(|c| c.name.as_str()));
            top.problems.error(&channel.span, format!("the rig has no channel `{}`", shown(&channel.value)), hint);
        }
        Some(c) if c.quantity != Quantity::Pressure => {
            let what = format!("channel `{}` measures {}, it cannot sit on a tap", c.name, c.quantity.word());
            top.problems.error(&channel.span, what, "only pressure channels do");
        }
        Some(_) => {}
    }
}
