//! The rig file: ports and channels.
//!
//! Root table → [`Draft`]: the rig if it is sound, and in any case the channel names for the other files.

use super::cursor::{FINITE, NOT_ZERO, Need, Table, Value};
use super::names::{Known, choice, line, list, nearest, unit_names, unit_of, word};
use super::problem::shown;
use super::{Channel, Convert, LineFormat, NMEA_FIELDS, Port, Rig, UsbId};
use crate::pneumatics::{Gas, Tube, settle_of_lag_s};
use crate::units::Quantity;
use std::collections::BTreeMap;

const LAG: Need = Need { ok: |x| (0.0..5.0).contains(&x), says: "0 or more and under 5 s" };
const DAMPING: Need = Need { ok: |x| (0.0..=60.0).contains(&x), says: "from 0 to 60 s" };
const LENGTH: Need = Need { ok: |x| x > 0.0 && x <= 50.0, says: "above 0 and up to 50 m" };
const BORE: Need = Need { ok: |x| x > 0.0 && x <= 20.0, says: "above 0 and up to 20 mm" };
const VOLUME: Need = Need { ok: |x| x > 0.0 && x <= 1000.0, says: "above 0 and up to 1000 cm³" };
const STALE: Need = Need { ok: |x| x > 0.0 && x <= 3600.0, says: "above 0 and up to 3600 s" };

const FORMATS: [(&str, LineFormat); 4] = [
    ("columns", LineFormat::Columns),
    ("pairs", LineFormat::Pairs),
    ("json", LineFormat::Json),
    ("nmea", LineFormat::Nmea),
];

const IDENTITY: Convert = Convert::Linear { gain: 1.0, offset: 0.0 };

/// A rig as far as it could be read.
pub(super) struct Draft {
    /// The rig, if nothing is missing.
    pub(super) rig: Option<Rig>,
    /// Its channels.
    pub(super) channels: Known<ChannelFacts>,
}

/// What other files need to know of a channel; `None` what could not be read.
pub(super) struct ChannelFacts {
    pub(super) quantity: Option<Quantity>,
    pub(super) lag_s: Option<f64>,
    /// Time that it needs to follow a step within 1 %, s.
    pub(super) settles_s: Option<f64>,
}

/// What the channels need to know of a port.
struct Fields {
    format: Option<LineFormat>,
    columns: Option<Vec<String>>,
}

/// Reads the whole rig.
pub(super) fn read(root: &mut Table) -> Draft {
    let mut ports_known = Known::new("port", true);
    let mut claims = Claims::default();
    let ports: Vec<_> = root.tables("port").into_iter().map(|t| port(t, &mut ports_known, &mut claims)).collect();
    let mut channels_known = Known::new("channel", true);
    let channels: Vec<_> =
        root.tables("channel").into_iter().map(|t| channel(t, &ports_known, &mut channels_known)).collect();
    for (count, noun) in [(ports.len(), "port"), (channels.len(), "channel")] {
        if count == 0 {
            root.log.error(root.at, format!("this rig has no {noun}"), format!("add a [[{noun}]]"));
        }
    }
    let ports = ports.into_iter().collect::<Option<Vec<_>>>();
    let channels = channels.into_iter().collect::<Option<Vec<_>>>();
    let rig = ports.zip(channels).map(|(ports, channels)| Rig { ports, channels });
    Draft { rig, channels: channels_known }
}

fn port(mut table: Table, known: &mut Known<Fields>, claims: &mut Claims) -> Option<Port> {
    let written_name = table.required("name");
    let name = written_name.and_then(|v| word(&v, "-_"));
    let device = table.optional("device");
    let usb = table.optional("usb");
    let baud = table.required("baud").and_then(|v| v.whole(1..12_000_001));
    let format = table.required("format").and_then(|v| choice(&v, &FORMATS));
    let columns = columns(&mut table, format);
    let dtr = table.optional("dtr").map_or(Some(true), |v| v.flag());
    if device.is_none() && usb.is_none() {
        let hint = "add device = \"/dev/ttyACM0\" or usb = \"vid:pid\"; `steadytap listen` shows what is plugged in";
        table.log.error(table.at, "[[port]] has neither `device` nor `usb`", hint);
    }
    let device = device.map_or(Some(None), |v| line(&v).inspect(|path| claims.device(&v, path)).map(Some));
    let usb = usb.map_or(Some(None), |v| usb_id(&v).inspect(|id| claims.usb(&v, id)).map(Some));
    table.finish();
    let named = written_name.as_ref().zip(name.as_deref());
    known.add(named, Fields { format, columns: columns.clone() });
    Some(Port { name: name?, device: device?, usb: usb?, baud: baud?, format: format?, columns: columns?, dtr: dtr? })
}

fn columns(table: &mut Table, format: Option<LineFormat>) -> Option<Vec<String>> {
    let written = table.optional("columns");
    match (format, written) {
        (Some(LineFormat::Columns), None) => {
            let hint = "add columns = [\"ms\", \"p1\", …]: the numbers of a line, in order";
            table.log.error(table.at, "[[port]] of format \"columns\" has no `columns`", hint);
            None
        }
        (Some(LineFormat::Pairs | LineFormat::Json | LineFormat::Nmea), Some(value)) => {
            value.refuse("`columns` is only for format \"columns\"", "take it out: these lines name their own fields");
            None
        }
        (_, None) => Some(Vec::new()),
        (_, Some(value)) => column_names(&value),
    }
}

fn column_names(value: &Value) -> Option<Vec<String>> {
    let items = value.items()?;
    if items.is_empty() {
        value.refuse("`columns` is empty", "name the numbers of a line, in order");
        return None;
    }
    let mut known = Known::once("column");
    let names: Vec<_> = items.iter().map(|v| line(v).inspect(|name| known.add(Some((v, name)), ()))).collect();
    names.into_iter().collect()
}

/// Devices and adapters that a port has claimed, with the offset where.
#[derive(Default)]
struct Claims {
    devices: BTreeMap<String, usize>,
    adapters: BTreeMap<(u16, u16, Option<String>), usize>,
}

impl Claims {
    fn device(&mut self, value: &Value, path: &str) {
        let first = *self.devices.entry(path.to_string()).or_insert(value.at());
        if first != value.at() {
            claimed(value, first, "give each port its own device");
        }
    }

    /// One without a serial number may be any of its kind.
    fn usb(&mut self, value: &Value, id: &UsbId) {
        let any = (id.vid, id.pid, None);
        let own = (id.vid, id.pid, id.serial.clone());
        let alike = |(key, _): &(&(u16, u16, Option<String>), _)| (key.0, key.1) == (id.vid, id.pid);
        let first = match id.serial {
            Some(_) => self.adapters.get(&any).or_else(|| self.adapters.get(&own)),
            None => self.adapters.range(&any..).next().filter(alike).map(|(_, at)| at),
        };
        if let Some(first) = first {
            claimed(value, *first, "tell alike adapters apart by serial number: usb = \"vid:pid:serial\"");
        }
        self.adapters.entry(own).or_insert(value.at());
    }
}

fn claimed(value: &Value, first: usize, hint: &str) {
    let text = shown(value.as_text().unwrap_or_default());
    value.refuse(format!("`{text}` is claimed by two ports: the first at {}", value.log.spot(first)), hint);
}

fn usb_id(value: &Value) -> Option<UsbId> {
    let text = value.text()?;
    let hex = |part: &str| {
        let digits = part.chars().all(|c| c.is_ascii_hexdigit()) && (1..=4).contains(&part.len());
        digits.then(|| u16::from_str_radix(part, 16).ok()).flatten()
    };
    let mut parts = text.splitn(3, ':');
    let vid = parts.next().and_then(hex);
    let pid = parts.next().and_then(hex);
    let serial = parts.next().map(String::from);
    let sound = serial.as_ref().is_none_or(|s| !s.is_empty() && s.chars().all(super::problem::printable));
    match (vid, pid) {
        (Some(vid), Some(pid)) if sound => Some(UsbId { vid, pid, serial }),
        _ => {
            let hint = "write \"vid:pid\" or \"vid:pid:serial\", vid and pid in hexadecimal: for example \"1209:0001\"";
            value.refuse(format!("`usb` is \"{}\"", shown(text)), hint);
            None
        }
    }
}

fn channel(mut table: Table, ports: &Known<Fields>, known: &mut Known<ChannelFacts>) -> Option<Channel> {
    let written_name = table.required("name");
    let name = written_name.and_then(|v| word(&v, "-_."));
    let from = table.required("from").and_then(|v| origin(&v, ports));
    let quantity = table.required("quantity").and_then(|v| choice(&v, &Quantity::ALL.map(|q| (q.word(), q))));
    let unit = unit(&mut table, quantity, from.as_ref());
    let convert = table.optional("convert").map_or(Some(IDENTITY), |v| convert(&v));
    let range = table.optional("range").map_or(Some(None), |v| range(&v).map(Some));
    let tube = tube(&mut table);
    let lag_s = match tube {
        Some(Some(tube)) => Some(tube.time_constant_s(&Gas::STANDARD)),
        Some(None) => table.number_or("lag_s", &LAG, 0.0),
        None => None,
    };
    let damping_s = table.number_or("damping_s", &DAMPING, 0.8);
    let stale_s = table.number_or("stale_s", &STALE, quantity.map_or(5.0, stale_default_s));
    table.finish();
    known.add(written_name.as_ref().zip(name.as_deref()), facts(quantity, lag_s, tube.flatten()));
    let from = from?;
    Some(Channel {
        name: name?,
        port: from.port,
        field: from.field,
        quantity: quantity?,
        unit: unit?,
        convert: convert?,
        range: range?,
        lag_s: lag_s?,
        tube: tube?,
        damping_s: damping_s?,
        stale_s: stale_s?,
    })
}

/// What the outing needs to know of a channel.
fn facts(quantity: Option<Quantity>, lag_s: Option<f64>, tube: Option<Tube>) -> ChannelFacts {
    let settles_s = tube.map(|tube| tube.settle_s(&Gas::STANDARD)).or(lag_s.map(settle_of_lag_s));
    ChannelFacts { quantity, lag_s, settles_s }
}

/// The tube between tap and sensor, instead of a lag.
fn tube(table: &mut Table) -> Option<Option<Tube>> {
    let Some(value) = table.optional("tube") else { return Some(None) };
    if table.optional("lag_s").is_some() {
        value.refuse("both `tube` and `lag_s`", "keep one: the tube's delay is the lag");
        return None;
    }
    let mut parts = value.table()?;
    let length_m = parts.number("length_m", &LENGTH);
    let bore_mm = parts.number("bore_mm", &BORE);
    let volume_cm3 = parts.number("volume_cm3", &VOLUME);
    parts.finish();
    let tube = Tube { length_m: length_m?, bore_mm: bore_mm?, volume_cm3: volume_cm3? };
    let lag_s = tube.time_constant_s(&Gas::STANDARD);
    if !(LAG.ok)(lag_s) {
        value.refuse(
            format!("`tube` delays by {lag_s:.1} s"),
            format!("a lag is {}: use a shorter or wider tube or a smaller volume", LAG.says),
        );
        return None;
    }
    Some(Some(tube))
}

fn stale_default_s(quantity: Quantity) -> f64 {
    match quantity {
        Quantity::Pressure | Quantity::DynamicPressure | Quantity::RideHeight => 0.5,
        // A 1 Hz receiver may miss one sentence.
        Quantity::Speed | Quantity::Track => 2.5,
        Quantity::Temperature | Quantity::Barometer | Quantity::Humidity => 60.0,
        Quantity::Other => 5.0,
    }
}

/// Where a channel comes from.
struct Origin {
    port: String,
    field: String,
    nmea: bool,
}

fn origin(value: &Value, ports: &Known<Fields>) -> Option<Origin> {
    let text = line(value)?;
    let Some((port, field)) = text.split_once('.').filter(|(port, field)| !port.is_empty() && !field.is_empty()) else {
        value.refuse(format!("`from` is \"{}\"", shown(&text)), "write \"port.field\": for example \"gauge.p1\"");
        return None;
    };
    let fields = ports.find(port, value, value.at())?;
    let nmea = fields.format == Some(LineFormat::Nmea);
    let names: Vec<&str> = match (&fields.columns, fields.format) {
        (Some(columns), Some(LineFormat::Columns)) => columns.iter().map(String::as_str).collect(),
        (_, Some(LineFormat::Nmea)) => NMEA_FIELDS.iter().map(|(name, _)| *name).collect(),
        (_, Some(LineFormat::Pairs | LineFormat::Json)) => vec![field],
        // The columns themselves are at fault: nothing to hold the field against.
        _ => return None,
    };
    if !names.contains(&field) {
        let guess = nearest(field, names.iter().copied()).map(|k| format!("did you mean `{k}`? ")).unwrap_or_default();
        let what = format!("port `{port}` has no field `{}`", shown(field));
        value.refuse(what, format!("{guess}its fields: {}", list(names.into_iter())));
        return None;
    }
    Some(Origin { port: port.into(), field: field.into(), nmea })
}

fn unit(table: &mut Table, quantity: Option<Quantity>, from: Option<&Origin>) -> Option<String> {
    let written = table.optional("unit");
    let quantity = quantity?;
    if quantity == Quantity::Other {
        return written.map_or(Some(String::new()), |v| line(&v));
    }
    let Some(value) = written else {
        let hint = format!("add `unit = …`, one of: {}", unit_names(quantity.units()));
        table.log.error(table.at, format!("[[channel]] of quantity {} has no `unit`", quantity.word()), hint);
        return None;
    };
    let unit = unit_of(&value, quantity.units())?;
    let given = from.filter(|from| from.nmea).and_then(|from| NMEA_FIELDS.iter().find(|(name, _)| *name == from.field));
    match given {
        Some((name, given)) if *given != unit => {
            let what = format!("`unit` is \"{unit}\", but `{name}` of an nmea port comes in \"{given}\"");
            value.refuse(what, format!("the reader has converted it already: unit = \"{given}\""));
            None
        }
        _ => Some(unit.to_string()),
    }
}

fn convert(value: &Value) -> Option<Convert> {
    let mut table = value.table()?;
    let gain = table.optional("gain");
    let offset = table.optional("offset");
    let points = table.optional("points");
    let ratiometric = table.optional("ratiometric");
    table.finish();
    let linear = gain.or(offset).is_some();
    match (linear, points, ratiometric) {
        (true, None, None) => {
            let gain = gain.map_or(Some(1.0), |v| v.number(&NOT_ZERO));
            let offset = offset.map_or(Some(0.0), |v| v.number(&FINITE));
            Some(Convert::Linear { gain: gain?, offset: offset? })
        }
        (false, Some(points), None) => points.rising_pairs(&FINITE).map(Convert::Points),
        (false, None, Some(ratiometric)) => ratio(&ratiometric),
        _ => {
            let what = if linear { "`convert` mixes two ways" } else { "`convert` says no way, or two" };
            value.refuse(
                what,
                "give one: { gain, offset }, { points } or { ratiometric }; leave it out for figures as they come",
            );
            None
        }
    }
}

fn ratio(value: &Value) -> Option<Convert> {
    let mut table = value.table()?;
    let supply = table.number("supply", &NOT_ZERO);
    let zero = table.number("zero", &FINITE);
    let span = table.number("span", &NOT_ZERO);
    let full = table.number("full", &NOT_ZERO);
    table.finish();
    Some(Convert::Ratiometric { supply: supply?, zero: zero?, span: span?, full: full? })
}

fn range(value: &Value) -> Option<[f64; 2]> {
    let [lo, hi] = value.numbers(&FINITE)?;
    if lo >= hi {
        value.refuse(format!("`range` runs from {lo} to {hi}"), "give the lowest trusted figure, then the highest");
        return None;
    }
    Some([lo, hi])
}
