//! The rig file: ports and channels.

use super::problem::{Kind, Source};
use super::reader::{Item, Problems, Table, nearest, shown, unique};
use super::{Channel, Convert, LineFormat, NMEA_FIELDS, Port, Rig, UsbId};
use crate::pneumatics::{Gas, Tube};
use crate::units::{Quantity, Unit};

/// Longest lag of a channel, s.
const LONGEST_LAG_S: f64 = 5.0;

/// Reads a rig; every problem goes to `problems`.
pub fn read(problems: &Problems<'_>) -> Option<Rig> {
    problems.read(Kind::Rig, |top| {
        let port_tables = top.tables("port");
        let ports: Vec<Option<(Item<String>, Port)>> = port_tables.iter().map(port).collect();
        let channel_tables = top.tables("channel");
        let known: Vec<&Port> = ports.iter().flatten().map(|(_, p)| p).collect();
        let broken = ports.iter().any(Option::is_none);
        let channels: Vec<Option<(Item<String>, Channel)>> =
            channel_tables.iter().map(|t| channel(t, &known, broken)).collect();
        for (list, what) in [(port_tables.is_empty(), "port"), (channel_tables.is_empty(), "channel")] {
            if list {
                problems.error(&(0..0), format!("the rig has no [[{what}]]"), format!("add one [[{what}]] or more"));
            }
        }
        unique(problems, "the port", ports.iter().flatten().map(|(name, _)| name));
        unique(problems, "the channel", channels.iter().flatten().map(|(name, _)| name));
        claimed_twice(problems, &port_tables, &ports);
        let ports = ports.into_iter().map(|p| Some(p?.1)).collect::<Option<_>>()?;
        let channels = channels.into_iter().map(|c| Some(c?.1)).collect::<Option<_>>()?;
        Some(Rig { ports, channels })
    })
}

/// The name of a rig source, for `check`.
pub fn check(source: &Source) -> Vec<super::Problem> {
    let problems = Problems::of(source);
    read(&problems);
    problems.into_list()
}

fn port(t: &Table<'_, '_>) -> Option<(Item<String>, Port)> {
    let name = t.need_name("name");
    let device = t.text("device");
    let usb_item = t.text("usb");
    let usb = usb_item.as_ref().and_then(|item| usb_id(t, item));
    let baud = t.need_positive("baud", 20e6, "bits/s");
    let format = t.need_text("format").and_then(|item| format(t, &item));
    let columns = t.texts("columns");
    let dtr = t.boolean("dtr").unwrap_or(true);
    if device.is_none() && usb_item.is_none() {
        t.problems.error(
            &t.span,
            "the port has neither `device` nor `usb`",
            "add `device = \"/dev/ttyACM0\"` or `usb = \"vid:pid\"`; `steadytap listen` shows what is there",
        );
    }
    let columns = columns_of(t, format, columns);
    let port = Port {
        name: name.as_ref()?.value.clone(),
        device: device.map(|d| d.value),
        usb,
        baud: baud.map(|b| b as u32)?,
        format: format?,
        columns: columns?,
        dtr,
    };
    (port.device.is_some() || port.usb.is_some()).then_some((name?, port))
}

fn format(t: &Table<'_, '_>, item: &Item<String>) -> Option<LineFormat> {
    let format = match item.value.as_str() {
        "columns" => LineFormat::Columns,
        "pairs" => LineFormat::Pairs,
        "json" => LineFormat::Json,
        "nmea" => LineFormat::Nmea,
        other => {
            let hint = nearest(other, ["columns", "pairs", "json", "nmea"]);
            t.problems.error(&item.span, format!("unknown line format `{}`", shown(other)), hint);
            return None;
        }
    };
    Some(format)
}

fn columns_of(
    t: &Table<'_, '_>,
    format: Option<LineFormat>,
    columns: Option<Vec<Item<String>>>,
) -> Option<Vec<String>> {
    match (format, columns) {
        (Some(LineFormat::Columns), None) => {
            let hint = "add `columns = [\"ms\", \"p1\", …]`, one name a number of the line";
            t.problems.error(&t.span, "format columns needs `columns`", hint);
            None
        }
        (Some(LineFormat::Columns), Some(list)) if list.is_empty() || list.len() > 256 => {
            t.problems.error(&t.span, "`columns` needs 1 to 256 names", "");
            None
        }
        (Some(LineFormat::Columns), Some(list)) => {
            unique(t.problems, "the column", &list);
            Some(list.into_iter().map(|c| c.value).collect())
        }
        (Some(_), Some(_)) => {
            t.problems.error(&t.span, "only format columns has `columns`", "take `columns` out");
            None
        }
        (_, None) | (None, _) => Some(Vec::new()),
    }
}

/// `vid:pid[:serial]`, the first two hexadecimal.
fn usb_id(t: &Table<'_, '_>, item: &Item<String>) -> Option<UsbId> {
    let mut parts = item.value.splitn(3, ':');
    let mut hex = || parts.next().filter(|p| p.len() <= 4).and_then(|p| u16::from_str_radix(p, 16).ok());
    let id = hex().zip(hex());
    let serial = parts.next().map(str::to_string);
    if id.is_none() {
        let what = format!("`{}` is no usb identity", shown(&item.value));
        t.problems.error(&item.span, what, "write vid:pid in hexadecimal, such as 2341:0043, perhaps with :serial");
    }
    id.map(|(vid, pid)| UsbId { vid, pid, serial })
}

/// Two ports cannot read one device.
fn claimed_twice(problems: &Problems<'_>, tables: &[Table<'_, '_>], ports: &[Option<(Item<String>, Port)>]) {
    for (i, later) in ports.iter().enumerate() {
        let Some((_, later)) = later else { continue };
        let same = |p: &Port| match (&p.usb, &later.usb) {
            (Some(a), Some(b)) => a == b,
            (None, None) => p.device == later.device,
            _ => false,
        };
        let earlier = ports[..i].iter().position(|p| p.as_ref().is_some_and(|(_, p)| same(p)));
        if let Some(first) = earlier {
            let place = problems.line(&tables[first].span);
            let what = "two ports claim one device".to_string();
            problems.error(&tables[i].span, what, format!("the first one is at {place}; give each its own"));
        }
    }
}

fn channel(t: &Table<'_, '_>, ports: &[&Port], broken: bool) -> Option<(Item<String>, Channel)> {
    let name = t.need_name("name");
    let from = t.need_text("from").and_then(|item| from(t, &item, ports, broken));
    let quantity = t.need_text("quantity").and_then(|item| quantity(t, &item));
    let unit = unit(t, quantity);
    let convert = t.table("convert").map_or(Some(Convert::Linear { gain: 1.0, offset: 0.0 }), |c| convert(&c));
    let range = t.array::<2>("range").map(|item| {
        if item.value[0] >= item.value[1] {
            let [low, high] = item.value;
            t.problems.error(
                &item.span,
                format!("impossible range: {low} is not below {high}"),
                "write [lowest, highest]",
            );
        }
        item.value
    });
    let lag = t.number_in("lag_s", (0.0, LONGEST_LAG_S), "s");
    let tube = t.table("tube").map(|tube_table| tube(&tube_table));
    if let (Some(_), Some(_)) = (&tube, lag) {
        t.problems.error(&t.span, "both `tube` and `lag_s`", "keep one: the tube's delay is the lag");
    }
    let tube = tube.flatten();
    let lag_s = tube.map_or(lag.unwrap_or(0.0), |tube| tube.time_constant_s(&Gas::STANDARD).min(LONGEST_LAG_S));
    let damping_s = t.number_in("damping_s", (0.0, 60.0), "s").unwrap_or(0.8);
    let stale_s = t.positive("stale_s", 3600.0, "s").unwrap_or(quantity.map_or(5.0, default_stale_s));
    let (port, field) = from?;
    let channel = Channel {
        name: name.as_ref()?.value.clone(),
        port,
        field,
        quantity: quantity?,
        unit: unit?,
        convert: convert?,
        range,
        lag_s,
        tube,
        damping_s,
        stale_s,
    };
    Some((name?, channel))
}

/// `tube = { length_m = 1.5, bore_mm = 2.0, volume_cm3 = 0.5 }`.
fn tube(t: &Table<'_, '_>) -> Option<Tube> {
    let length_m = t.need_positive("length_m", 50.0, "m");
    let bore_mm = t.need_positive("bore_mm", 20.0, "mm");
    let volume_cm3 = t.need_positive("volume_cm3", 1000.0, "cm³");
    Some(Tube { length_m: length_m?, bore_mm: bore_mm?, volume_cm3: volume_cm3? })
}

/// How long a quantity may be silent where the rig does not say: a 1 Hz GPS must work, air changes slowly.
fn default_stale_s(quantity: Quantity) -> f64 {
    match quantity {
        Quantity::Pressure | Quantity::DynamicPressure | Quantity::RideHeight => 0.5,
        Quantity::Speed | Quantity::Track => 2.5,
        Quantity::Temperature | Quantity::Barometer | Quantity::Humidity => 60.0,
        Quantity::Other => 5.0,
    }
}

/// `port.field`, both known.
fn from(t: &Table<'_, '_>, item: &Item<String>, ports: &[&Port], broken: bool) -> Option<(String, String)> {
    let error = |what: String, hint: String| t.problems.error(&item.span, what, hint);
    let Some((port_name, field)) = item.value.split_once('.') else {
        error(format!("`{}` is no port.field", shown(&item.value)), "write from = \"gauge.p1\"".to_string());
        return None;
    };
    let Some(port) = ports.iter().find(|p| p.name == port_name) else {
        if !broken {
            let hint = nearest(port_name, ports.iter().map(|p| p.name.as_str()));
            error(format!("the rig has no port `{}`", shown(port_name)), hint);
        }
        return None;
    };
    let (fields, what): (Vec<&str>, _) = match port.format {
        LineFormat::Columns => (port.columns.iter().map(String::as_str).collect(), "column"),
        LineFormat::Nmea => (NMEA_FIELDS.to_vec(), "field"),
        LineFormat::Pairs | LineFormat::Json => return Some((port_name.to_string(), field.to_string())),
    };
    if !fields.contains(&field) {
        error(format!("port `{port_name}` has no {what} `{}`", shown(field)), nearest(field, fields));
        return None;
    }
    Some((port_name.to_string(), field.to_string()))
}

fn quantity(t: &Table<'_, '_>, item: &Item<String>) -> Option<Quantity> {
    let found = Quantity::ALL.into_iter().find(|q| q.word() == item.value);
    if found.is_none() {
        let hint = nearest(&item.value, Quantity::ALL.map(Quantity::word));
        t.problems.error(&item.span, format!("unknown quantity `{}`", shown(&item.value)), hint);
    }
    found
}

/// The unit of a channel: one of its quantity's; only `other` may go without.
fn unit(t: &Table<'_, '_>, quantity: Option<Quantity>) -> Option<String> {
    let item = match quantity {
        Some(Quantity::Other) | None => t.text("unit"),
        Some(_) => Some(t.need_text("unit")?),
    };
    let (Some(item), Some(quantity)) = (item, quantity) else { return Some(String::new()) };
    let units = quantity.units();
    let names: Vec<&str> = units.iter().map(|u| u.name).filter(|n| *n != "inH2O").collect();
    if item.value == "inH2O" && quantity.inside() == "Pa" {
        let what = "an inch of water has three values: which one?";
        t.problems.error(
            &item.span,
            what,
            "say inH2O-4C (249.082 Pa), inH2O-60F (248.84 Pa), or convert to Pa by 249.0889 for the conventional one",
        );
        return None;
    }
    if !units.is_empty() && Unit::find(units, &item.value).is_none() {
        let what = format!("`{}` is no unit of {}", shown(&item.value), quantity.word());
        t.problems.error(&item.span, what, format!("one of: {}", names.join(", ")));
        return None;
    }
    Some(item.value)
}

fn convert(t: &Table<'_, '_>) -> Option<Convert> {
    let points = t.rising_pairs("points", 2);
    let ratiometric = t.table("ratiometric").map(|r| ratiometric(&r));
    let gain = t.number("gain");
    let offset = t.number("offset");
    let kinds = [points.is_some(), ratiometric.is_some(), gain.is_some() || offset.is_some()];
    if kinds.iter().filter(|k| **k).count() > 1 {
        t.problems.error(&t.span, "more than one conversion", "keep one of gain and offset, points, ratiometric");
        return None;
    }
    if let Some(gain) = gain.as_ref().filter(|g| g.value == 0.0) {
        t.problems.error(&gain.span, "a gain of 0 makes every reading the same", "");
        return None;
    }
    match (points, ratiometric) {
        (Some(points), _) => Some(Convert::Points(points.value)),
        (None, Some(ratiometric)) => ratiometric,
        (None, None) => {
            Some(Convert::Linear { gain: gain.map_or(1.0, |g| g.value), offset: offset.map_or(0.0, |o| o.value) })
        }
    }
}

fn ratiometric(t: &Table<'_, '_>) -> Option<Convert> {
    let supply = t.need_positive("supply", 1e9, "raw units");
    let zero = t.need_number("zero").map(|z| z.value);
    let full = t.need_number("full").map(|f| f.value);
    let span = t.need_number("span").filter(|s| {
        if s.value == 0.0 {
            t.problems.error(
                &s.span,
                "a span of 0 cannot be divided by",
                "the span is the change of output over `full`, as a share of the supply",
            );
        }
        s.value != 0.0
    });
    Some(Convert::Ratiometric { supply: supply?, zero: zero?, span: span?.value, full: full? })
}
