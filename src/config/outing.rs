//! The outing file: the test itself, and what it asks of the rig and the car.
//!
//! Root table, the rig's channels and the car's taps → [`Outing`], if it is sound.

use super::cursor::{FINITE, Need, POSITIVE, Table, Value};
use super::names::{Known, line, unit_of, word};
use super::problem::{printable, shown};
use super::rig::ChannelFacts;
use super::{Air, Configuration, Outing, Parameter, Show, Watch};
use crate::units::{PRESSURES, Quantity, SPEEDS, Unit};
use std::collections::BTreeMap;

const TARGET: Need = Need { ok: |x| (5.0..=400.0).contains(&x), says: "from 5 to 400 km/h" };
const SETTLE: Need = Need { ok: |x| (0.0..=3600.0).contains(&x), says: "from 0 to 3600 s" };
const DWELL: Need = Need { ok: |x| x > 0.0 && x <= 3600.0, says: "above 0 and up to 3600 s" };
const TRACK: Need = Need { ok: |x| (0.0..=360.0).contains(&x), says: "from 0 to 360 degrees" };
const TEMPERATURE: Need = Need { ok: |x| (-60.0..=70.0).contains(&x), says: "from -60 to 70 °C" };
const PRESSURE: Need =
    Need { ok: |x| (300.0..=1200.0).contains(&x), says: "from 300 to 1200 hPa, as the station has it, not sea level" };
const HUMIDITY: Need = Need { ok: |x| (0.0..=100.0).contains(&x), says: "from 0 to 100 %" };

/// Warns where averaging would begin before a channel has followed into the window.
fn settles(settle: Option<(Value, f64)>, channels: &Known<ChannelFacts>) {
    let Some((value, settle_s)) = settle else { return };
    let asks = |facts: &ChannelFacts| facts.settles_s.filter(|asks| *asks > settle_s);
    if let Some((name, facts)) = channels.first(|facts| asks(facts).is_some()) {
        let what =
            format!("`settle_s` is {settle_s}, but channel `{name}` asks for {:.2} s", asks(facts).unwrap_or(0.0));
        value.log.warn(
            value.at(),
            what,
            "let it settle longer, or use a shorter or wider tube: it must follow within 1 %",
        );
    }
}

/// What the other two files know.
pub(super) struct Fitted<'k> {
    /// Channels of the rig.
    pub(super) channels: &'k Known<ChannelFacts>,
    /// Taps of the car.
    pub(super) taps: &'k Known<()>,
}

/// A path that an outing names, and where its value begins.
pub(super) fn path(root: &mut Table, key: &'static str) -> Option<(String, usize)> {
    let value = root.required(key)?;
    let text = value.text()?;
    if text.is_empty() || !text.chars().all(printable) {
        value.refuse(
            format!("`{key}` is \"{}\"", shown(text)),
            "give a path relative to this file, without control or invisible characters",
        );
        return None;
    }
    Some((text.to_string(), value.at()))
}

/// Reads the whole outing.
pub(super) fn read(root: &mut Table, fitted: &Fitted) -> Option<Outing> {
    let title = root.required("title").and_then(|v| line(&v));
    let paths = (path(root, "rig"), path(root, "car"));
    let targets_kmh = root.required("targets_kmh").and_then(|v| targets(&v));
    let tolerance_kmh = root.number("tolerance_kmh", &POSITIVE);
    let settle = root.required("settle_s");
    let settle_s = settle.and_then(|v| v.number(&SETTLE));
    settles(settle.zip(settle_s), fitted.channels);
    let watch = watch(root, fitted.channels, settle.zip(settle_s));
    let dwell_s = root.number("dwell_s", &DWELL);
    let slope = root.optional_number("slope", &POSITIVE);
    let out_track_deg = out_track(root, fitted.channels);
    let passes = root.optional("passes").map_or(Some(4), |v| v.whole(1..1001));
    let resolve_pa = root.number("resolve_pa", &POSITIVE);
    let show = show(root);
    let air_written = root.section("air");
    let air_stated = matches!(air_written, Some(Some(_)));
    let air = air_written.and_then(|t| t.map_or(Some(Air::STANDARD), air));
    let configurations = configurations(root);
    let taps = taps(root, fitted);
    let (Some(_), Some(_)) = paths else { return None };
    Some(Outing {
        title: title?,
        watch: watch?,
        targets_kmh: targets_kmh?,
        tolerance_kmh: tolerance_kmh?,
        settle_s: settle_s?,
        dwell_s: dwell_s?,
        slope: slope?,
        out_track_deg: out_track_deg?,
        passes: passes?,
        resolve_pa: resolve_pa?,
        show: show?,
        air: air?,
        air_stated,
        configurations: configurations?,
        taps: taps?,
    })
}

fn targets(value: &Value) -> Option<Vec<f64>> {
    let items = value.items()?;
    if items.is_empty() {
        value.refuse("`targets_kmh` is empty", "give at least one speed in km/h");
        return None;
    }
    let mut targets: Vec<f64> = Vec::new();
    for (item, kmh) in items.iter().filter_map(|item| Some((item, item.number(&TARGET)?))) {
        if targets.contains(&kmh) {
            item.refuse(format!("target {kmh} stands twice"), "name each once");
        }
        targets.push(kmh);
    }
    Some(targets)
}

fn watch(root: &mut Table, channels: &Known<ChannelFacts>, settle: Option<(Value, f64)>) -> Option<Watch> {
    let written = root.optional("watch");
    let text = written.map_or(Some("speed"), |v| v.text())?;
    let at = written.map_or(root.at, |v| v.at());
    let (name, quantity, lag_s) = match text {
        "speed" => first_of(Quantity::Speed, root, channels, at),
        "q" => first_of(Quantity::DynamicPressure, root, channels, at),
        name => {
            let value = written?;
            let facts = channels.find(name, &value, at)?;
            Some((name.to_string(), facts.quantity?, facts.lag_s))
        }
    }?;
    if let (Some((value, settle_s)), Some(lag_s)) = (settle, lag_s)
        && settle_s < lag_s
    {
        let what = format!("`settle_s` is {settle_s}, shorter than the lag of the watched channel `{name}`: {lag_s} s");
        value.refuse(what, format!("let it settle for {lag_s} s or more"));
    }
    match quantity {
        Quantity::Speed => Some(Watch::Channel(name)),
        Quantity::DynamicPressure => Some(Watch::Airspeed(name)),
        other => {
            let hint = "watch \"speed\", \"q\", or a channel of quantity speed or dynamic-pressure";
            root.log.error(at, format!("`watch` names `{name}`, of quantity {}", other.word()), hint);
            None
        }
    }
}

type Watched = (String, Quantity, Option<f64>);

fn first_of(wanted: Quantity, root: &Table, channels: &Known<ChannelFacts>, at: usize) -> Option<Watched> {
    let found = channels.first(|c| c.quantity == Some(wanted));
    if found.is_none() && channels.whole && channels.first(|c| c.quantity.is_none()).is_none() {
        let what = format!("nothing to watch: the rig has no channel of quantity {}", wanted.word());
        root.log.error(at, what, "add one to the rig, or watch another: \"speed\", \"q\" or a channel's name");
    }
    found.map(|(name, facts)| (name.to_string(), wanted, facts.lag_s))
}

fn out_track(root: &mut Table, channels: &Known<ChannelFacts>) -> Option<Option<f64>> {
    let Some(value) = root.optional("out_track_deg") else { return Some(None) };
    let readable = channels.whole && channels.first(|c| c.quantity.is_none()).is_none();
    if readable && channels.first(|c| c.quantity == Some(Quantity::Track)).is_none() {
        let hint = "add a channel of quantity track, or tell the direction by key";
        value.log.warn(value.at(), "`out_track_deg` is of no use: the rig has no channel of quantity track", hint);
    }
    value.number(&TRACK).map(Some)
}

fn show(root: &mut Table) -> Option<Show> {
    let Some(mut table) = root.section("show")? else {
        return Some(Show { speed: "km/h".into(), pressure: "Pa".into() });
    };
    let mut unit = |key, units: &'static [Unit], absent: &'static str| {
        table.optional(key).map_or(Some(absent), |v| unit_of(&v, units)).map(String::from)
    };
    let speed = unit("speed", SPEEDS, "km/h");
    let pressure = unit("pressure", PRESSURES, "Pa");
    table.finish();
    Some(Show { speed: speed?, pressure: pressure? })
}

fn air(mut table: Table) -> Option<Air> {
    let temperature_c = table.number("temperature_c", &TEMPERATURE);
    let pressure_hpa = table.number("pressure_hpa", &PRESSURE);
    let humidity_pct = table.number("humidity_pct", &HUMIDITY);
    table.finish();
    Some(Air { temperature_c: temperature_c?, pressure_hpa: pressure_hpa?, humidity_pct: humidity_pct? })
}

fn configurations(root: &mut Table) -> Option<Vec<Configuration>> {
    let mut letters = Known::new("configuration", true);
    let mut baseline: Option<usize> = None;
    let mut all = Vec::new();
    for table in root.tables("configuration") {
        let at = table.at;
        let read = configuration(table, &mut letters);
        let is_baseline = read.as_ref().is_some_and(|c| c.baseline);
        if let (true, Some(first)) = (is_baseline, baseline) {
            let what = format!("a second baseline: the first is at {}", root.log.spot(first));
            root.log.error(at, what, "exactly one configuration is what the others are compared with");
        } else if is_baseline {
            baseline = Some(at);
        }
        all.push(read);
    }
    let all = all.into_iter().collect::<Option<Vec<_>>>();
    if baseline.is_none() && all.is_some() {
        let hint = "add `baseline = true` to the [[configuration]] that the others are compared with";
        root.log.error(root.at, "no configuration is the baseline", hint);
    }
    all
}

fn configuration(mut table: Table, letters: &mut Known<()>) -> Option<Configuration> {
    let written = table.required("letter");
    let letter = written.and_then(|v| word(&v, "-_."));
    let name = table.optional("name").map_or(Some(String::new()), |v| line(&v));
    let baseline = table.optional("baseline").map_or(Some(false), |v| v.flag());
    let parameter = table.optional("parameter").map_or(Some(None), |v| parameter(&v).map(Some));
    table.finish();
    letters.add(written.as_ref().zip(letter.as_deref()), ());
    Some(Configuration { letter: letter?, name: name?, baseline: baseline?, parameter: parameter? })
}

fn parameter(value: &Value) -> Option<Parameter> {
    let mut table = value.table()?;
    let name = table.optional("name").map_or(Some(String::new()), |v| line(&v));
    let unit = table.required("unit").and_then(|v| line(&v));
    let value = table.number("value", &FINITE);
    table.finish();
    Some(Parameter { name: name?, unit: unit?, value: value? })
}

fn taps(root: &mut Table, fitted: &Fitted) -> Option<BTreeMap<String, String>> {
    let table = root.section("taps")?;
    let entries = table.map(|t| t.entries()).unwrap_or_default();
    if entries.is_empty() {
        let hint = "add [taps] with lines such as p1 = \"base-high\"";
        root.log.warn(root.at, "no channel sits on a tap: there will be nothing to compare", hint);
    }
    let mut taken = Known::once("channel on tap");
    let pairs: Vec<_> = entries
        .iter()
        .map(|(at, value)| {
            let channel = pressure_channel(value, *at, fitted.channels);
            let tap = value.text().inspect(|tap| taken.add(Some((value, tap)), ()));
            let known = tap.filter(|tap| fitted.taps.find(tap, value, value.at()).is_some());
            channel.zip(known.map(String::from))
        })
        .collect();
    pairs.into_iter().collect()
}

fn pressure_channel(value: &Value, at: usize, channels: &Known<ChannelFacts>) -> Option<String> {
    let facts = channels.find(value.key, value, at)?;
    match facts.quantity {
        Some(Quantity::Pressure) => Some(value.key.to_string()),
        Some(other) => {
            let what = format!("channel `{}` is of quantity {}", shown(value.key), other.word());
            value.log.error(at, what, "only a channel of quantity pressure sits on a tap");
            None
        }
        None => None,
    }
}
