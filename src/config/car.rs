//! The car file: geometry, taps, cores, contour, probe and ride height.
//!
//! Root table and the rig's channels → [`Draft`]: the car if it is sound, and in any case its tap names.

use super::cursor::{FINITE, Need, POSITIVE, Table, Value};
use super::names::{Known, choice, line, tap_name};
use super::problem::shown;
use super::rig::ChannelFacts;
use super::{AxleHeight, Car, Core, Probe, ProbeFactor, ProbeModel, RideHeight, Tap};
use crate::units::Quantity;

const FACTOR: Need = Need { ok: |x| (0.5..=2.0).contains(&x), says: "from 0.5 to 2, or \"pairs\"" };
/// A normal whose length is further than this from 1 was probably not meant as one.
const LENGTH_TOLERANCE: f64 = 0.01;

/// A car as far as it could be read.
pub(super) struct Draft {
    /// The car, if nothing is missing.
    pub(super) car: Option<Car>,
    /// Its taps.
    pub(super) taps: Known<()>,
}

/// Reads the whole car.
pub(super) fn read(root: &mut Table, channels: &Known<ChannelFacts>) -> Draft {
    let name = root.required("name").and_then(|v| line(&v));
    let reference_area_m2 = root.number("reference_area_m2", &POSITIVE);
    let wheelbase_m = root.number("wheelbase_m", &POSITIVE);
    let mut known = Known::new("tap", true);
    let taps: Vec<_> = root.tables("tap").into_iter().map(|t| tap(t, &mut known)).collect();
    if taps.is_empty() {
        root.log.error(root.at, "this car has no tap", "add a [[tap]]");
    }
    let mut core_names = Known::new("core", true);
    let cores: Vec<_> = root.tables("core").into_iter().map(|t| core(t, &known, &mut core_names)).collect();
    let contour = root.section("contour").and_then(|t| t.map_or(Some(Vec::new()), |t| contour(t, &known)));
    let probe = root.section("probe").and_then(|t| t.map_or(Some(UNTOUCHED), probe));
    let ride_height =
        root.section("ride_height").and_then(|t| t.map_or(Some(None), |t| ride_height(t, channels).map(Some)));
    let car = || {
        Some(Car {
            name: name?,
            reference_area_m2: reference_area_m2?,
            wheelbase_m: wheelbase_m?,
            taps: taps.into_iter().collect::<Option<_>>()?,
            cores: cores.into_iter().collect::<Option<_>>()?,
            contour: contour?,
            probe: probe?,
            ride_height: ride_height?,
        })
    };
    Draft { car: car(), taps: known }
}

fn tap(mut table: Table, known: &mut Known<()>) -> Option<Tap> {
    let written_name = table.required("name");
    let name = written_name.and_then(|v| tap_name(&v));
    let at = table.required("at").and_then(|v| v.numbers(&FINITE));
    let normal = table.required("normal").and_then(|v| normal(&v));
    let area_m2 = table.optional_number("area_m2", &POSITIVE);
    let group = table.optional("group").map_or(Some(None), |v| line(&v).map(Some));
    table.finish();
    known.add(written_name.as_ref().zip(name.as_deref()), ());
    Some(Tap { name: name?, at: at?, normal: normal?, area_m2: area_m2?, group: group? })
}

fn normal(value: &Value) -> Option<[f64; 3]> {
    let [x, y, z] = value.numbers(&FINITE)?;
    let length = x.hypot(y).hypot(z);
    if length == 0.0 || !length.is_finite() {
        value.refuse("`normal` has no direction", "give a vector out of the body: [1.0, 0.0, 0.0] looks aft");
        return None;
    }
    if (length - 1.0).abs() > LENGTH_TOLERANCE {
        let hint = "its direction is used, its length set to 1: check that no number is mistyped";
        value.log.warn(value.at(), format!("`normal` has length {length:.3}"), hint);
    }
    Some([x, y, z].map(|part| part / length))
}

fn core(mut table: Table, taps: &Known<()>, known: &mut Known<()>) -> Option<Core> {
    let written_name = table.required("name");
    let name = written_name.and_then(|v| tap_name(&v));
    let front = table.required("front");
    let rear = table.required("rear");
    let bench = table.required("bench").and_then(|v| bench(&v));
    table.finish();
    known.add(written_name.as_ref().zip(name.as_deref()), ());
    let front_name = front.and_then(|v| tap_of(&v, taps));
    let rear_name = rear.and_then(|v| tap_of(&v, taps));
    if let Some(value) = rear.filter(|_| front_name.is_some() && front_name == rear_name) {
        value.refuse("`front` and `rear` are the same tap", "a core needs a tap on each side");
    }
    Some(Core { name: name?, front: front_name?, rear: rear_name?, bench: bench? })
}

fn bench(value: &Value) -> Option<Vec<[f64; 2]>> {
    let points = value.rising_pairs(&POSITIVE)?;
    if let Some(w) = points.windows(2).find(|w| w[1][1] <= w[0][1]) {
        let what = format!("`bench`: the drop does not rise from {} to {} Pa", w[0][1], w[1][1]);
        value.refuse(what, "a faster flow loses more pressure: give [face velocity m/s, pressure drop Pa]");
        return None;
    }
    Some(points)
}

fn tap_of(value: &Value, taps: &Known<()>) -> Option<String> {
    let name = value.text()?;
    taps.find(name, value, value.at()).map(|()| name.to_string())
}

fn contour(mut table: Table, taps: &Known<()>) -> Option<Vec<String>> {
    let written = table.required("taps");
    table.finish();
    let value = written?;
    let items = value.items()?;
    let mut seen = Known::once("tap in `contour`");
    let names: Vec<_> = items.iter().map(|v| tap_of(v, taps).inspect(|name| seen.add(Some((v, name)), ()))).collect();
    if items.len() < 3 {
        value.refuse("`taps` of [contour] names fewer than three", "a closed section needs three or more, in order");
    }
    names.into_iter().collect()
}

const UNTOUCHED: Probe = Probe { model: ProbeModel::Static, factor: ProbeFactor::Stated(1.0) };

fn probe(mut table: Table) -> Option<Probe> {
    let models = [("static", ProbeModel::Static), ("gain", ProbeModel::Gain)];
    let model = table.optional("model").map_or(Some(UNTOUCHED.model), |v| choice(&v, &models));
    let factor = table.optional("factor").map_or(Some(UNTOUCHED.factor), |v| factor(&v));
    table.finish();
    Some(Probe { model: model?, factor: factor? })
}

fn factor(value: &Value) -> Option<ProbeFactor> {
    match value.as_text() {
        Some("pairs") => Some(ProbeFactor::Pairs),
        Some(text) => {
            value.refuse(format!("`factor` is \"{}\"", shown(text)), "give a number from 0.5 to 2, or \"pairs\"");
            None
        }
        None => value.number(&FACTOR).map(ProbeFactor::Stated),
    }
}

fn ride_height(mut table: Table, channels: &Known<ChannelFacts>) -> Option<RideHeight> {
    let front = table.optional("front");
    let rear = table.optional("rear");
    if front.or(rear).is_none() {
        table.log.error(table.at, "[ride_height] has neither `front` nor `rear`", "add one or both, or take it out");
    }
    table.finish();
    let axle = |value: Option<Value>| value.map_or(Some(None), |v| axle(&v, channels).map(Some));
    let (front, rear) = (axle(front), axle(rear));
    Some(RideHeight { front: front?, rear: rear? })
}

fn axle(value: &Value, channels: &Known<ChannelFacts>) -> Option<AxleHeight> {
    let mut table = value.table()?;
    let channel = table.required("channel");
    let wheel_rate_n_per_mm = table.number("wheel_rate_n_per_mm", &POSITIVE);
    table.finish();
    let channel = channel?;
    let name = channel.text()?;
    let facts = channels.find(name, &channel, channel.at());
    if let Some(quantity) = facts.and_then(|f| f.quantity).filter(|q| *q != Quantity::RideHeight) {
        let what = format!("channel `{}` is of quantity {}", shown(name), quantity.word());
        channel.refuse(what, "name a channel of quantity ride-height");
        return None;
    }
    facts?;
    Some(AxleHeight { channel: name.to_string(), wheel_rate_n_per_mm: wheel_rate_n_per_mm? })
}
