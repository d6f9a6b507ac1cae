//! `listen`: what is plugged in and talking, at which rate, in which line format, and a rig stanza to paste.

use super::{Trouble, serial};
use crate::config::{LineFormat, Port, Rig};
use crate::stream::splitter::{Piece, Splitter};
use crate::stream::{Decoder, nmea};
use serialport::{SerialPortInfo, SerialPortType};
use std::fmt::Write as _;
use std::io::Read;
use std::time::{Duration, Instant};

/// Speeds tried, the likeliest first.
const SPEEDS: [u32; 8] = [115_200, 9600, 57_600, 38_400, 230_400, 460_800, 921_600, 4800];
/// How long one speed is listened to.
const LISTEN: Duration = Duration::from_millis(2500);
/// Lines that are enough to tell a format.
const ENOUGH: usize = 200;

/// What a port says.
#[derive(Clone, Debug, PartialEq)]
pub struct Heard {
    /// Its format, if it is one that a rig can name.
    pub format: Option<LineFormat>,
    /// Number of columns, or the names in the lines.
    pub fields: Vec<String>,
    /// Share of lines that parse, 0–1.
    pub share: f64,
    /// Lines a second.
    pub rate: f64,
    /// The last line, escaped.
    pub sample: String,
}

/// Words about every port, or about one.
///
/// # Errors
/// [`Trouble`] when the one asked for cannot be opened.
pub fn listen(device: Option<&str>) -> Result<String, Trouble> {
    let listed = serial::listed();
    let mut out = String::new();
    if let Some(device) = device {
        let usb = listed.iter().find(|p| p.port_name == device);
        describe(&mut out, device, usb, hear(device)?);
        return Ok(out);
    }
    if listed.is_empty() {
        return Err(Trouble::new("no serial port is plugged in")
            .hint("plug one in, or name a device: `steadytap listen /dev/ttyACM0`"));
    }
    for port in &listed {
        match hear(&port.port_name) {
            Ok(heard) => describe(&mut out, &port.port_name, Some(port), heard),
            Err(trouble) => {
                let _ = writeln!(out, "# {}: {}", port.port_name, trouble.what);
            }
        }
    }
    Ok(out)
}

/// Listens at each speed until lines parse.
fn hear(device: &str) -> Result<Option<(u32, Heard)>, Trouble> {
    let mut best: Option<(u32, Heard)> = None;
    for baud in SPEEDS {
        let (lines, seconds) = lines_at(device, baud)?;
        let Some(heard) = recognise(&lines, seconds) else { continue };
        if best.as_ref().is_none_or(|(_, b)| heard.share > b.share) {
            best = Some((baud, heard));
        }
        if best.as_ref().is_some_and(|(_, b)| b.share > 0.8) {
            break;
        }
    }
    Ok(best)
}

fn lines_at(device: &str, baud: u32) -> Result<(Vec<Vec<u8>>, f64), Trouble> {
    let port = Port {
        name: "gauge".to_string(),
        device: Some(device.to_string()),
        usb: None,
        baud,
        format: LineFormat::Columns,
        columns: Vec::new(),
        dtr: true,
    };
    let opened = serial::open(0, &port).map_err(|trouble| trouble.at(device));
    let mut open = opened?.into_port();
    let (mut splitter, mut lines, mut buffer) = (Splitter::default(), Vec::new(), vec![0; 4096]);
    splitter.skip_to_line_end();
    let start = Instant::now();
    while start.elapsed() < LISTEN && lines.len() < ENOUGH {
        if let Ok(n) = open.read(&mut buffer) {
            splitter.push(&buffer[..n], |piece| {
                let (Piece::Line(line) | Piece::Cut(line)) = piece;
                lines.push(line.to_vec());
            });
        }
    }
    Ok((lines, start.elapsed().as_secs_f64()))
}

/// The format in which most lines parse; none without a line.
pub fn recognise(lines: &[Vec<u8>], seconds: f64) -> Option<Heard> {
    let last = lines.last()?;
    let (format, fields, good) = [LineFormat::Nmea, LineFormat::Json, LineFormat::Pairs, LineFormat::Columns]
        .into_iter()
        .map(|format| {
            let fields = fields_of(format, lines);
            let good = count(format, &fields, lines);
            (format, fields, good)
        })
        .max_by_key(|(format, _, good)| (*good, *format != LineFormat::Columns))?;
    let mut sample = Vec::new();
    crate::stream::record::escape_into(&mut sample, &last[..last.len().min(120)]);
    Some(Heard {
        format: (good * 2 > lines.len()).then_some(format),
        fields,
        share: good as f64 / lines.len() as f64,
        rate: lines.len() as f64 / seconds,
        sample: String::from_utf8_lossy(&sample).into_owned(),
    })
}

/// Column count of the commonest kind as `c1`, `c2` …; names of pairs and JSON keys.
fn fields_of(format: LineFormat, lines: &[Vec<u8>]) -> Vec<String> {
    let text = |line: &Vec<u8>| String::from_utf8_lossy(line).into_owned();
    match format {
        LineFormat::Nmea => Vec::new(),
        LineFormat::Columns => {
            let split = |line: &String| line.split([',', ';', '\t', ' ']).filter(|f| !f.is_empty()).count();
            let mut counts: Vec<usize> = lines.iter().map(text).map(|l| split(&l)).collect();
            counts.sort_unstable();
            let n = counts.get(counts.len() / 2).copied().unwrap_or(0).min(64);
            (1..=n).map(|i| format!("c{i}")).collect()
        }
        LineFormat::Json => {
            let keys = |line: &Vec<u8>| {
                let object: Option<serde_json::Map<String, serde_json::Value>> = serde_json::from_slice(line).ok();
                object.map(|o| o.into_iter().filter(|(_, v)| v.is_number()).map(|(k, _)| k).collect::<Vec<_>>())
            };
            lines.iter().rev().find_map(keys).unwrap_or_default()
        }
        LineFormat::Pairs => {
            let names = |line: &Vec<u8>| {
                let line = text(line);
                let parts = line.split([',', ';', '\t', ' ']).filter_map(|p| p.split_once(['=', ':']));
                let names: Vec<String> = parts.map(|(name, _)| name.to_string()).collect();
                (!names.is_empty()).then_some(names)
            };
            lines.iter().rev().find_map(names).unwrap_or_default()
        }
    }
}

/// How many lines parse in a format.
fn count(format: LineFormat, fields: &[String], lines: &[Vec<u8>]) -> usize {
    if format == LineFormat::Nmea {
        return lines.iter().filter(|l| nmea::parse(l).is_ok()).count();
    }
    if fields.is_empty() {
        return 0;
    }
    let port = Port {
        name: "p".to_string(),
        device: None,
        usb: None,
        baud: 115_200,
        format,
        columns: if format == LineFormat::Columns { fields.to_vec() } else { Vec::new() },
        dtr: true,
    };
    let rig = Rig { ports: vec![port.clone()], channels: Vec::new() };
    let mut decoder = Decoder::new(&rig, &port);
    lines.iter().filter(|l| decoder.decode(l).is_ok()).count()
}

fn describe(out: &mut String, device: &str, listed: Option<&SerialPortInfo>, heard: Option<(u32, Heard)>) {
    let usb = listed.and_then(|p| if let SerialPortType::UsbPort(usb) = &p.port_type { Some(usb) } else { None });
    let _ = writeln!(out, "# {device}");
    if let Some(usb) = usb {
        let words = [&usb.manufacturer, &usb.product].into_iter().flatten().cloned().collect::<Vec<_>>().join(" ");
        let _ = writeln!(out, "# usb {:04x}:{:04x} {}", usb.vid, usb.pid, crate::screen::text::safe(&words));
    }
    let Some((baud, heard)) = heard else {
        let _ = writeln!(out, "# silent at every speed tried: is it powered, and does it send by itself?\n");
        return;
    };
    let _ = writeln!(
        out,
        "# {:.1} lines/s at {baud} baud, {:.0} % parse; the last: {}",
        heard.rate,
        heard.share * 100.0,
        heard.sample
    );
    let Some(format) = heard.format else {
        let _ = writeln!(out, "# no known line format: columns, pairs, json and nmea were tried; check baud\n");
        return;
    };
    stanza(out, (device, baud), usb.map(|u| (u.vid, u.pid, u.serial_number.clone())), (format, &heard.fields));
}

type Usb = (u16, u16, Option<String>);

fn stanza(out: &mut String, (device, baud): (&str, u32), usb: Option<Usb>, (format, fields): (LineFormat, &[String])) {
    let name = if format == LineFormat::Nmea { "gps" } else { "gauge" };
    let quote = |s: &str| format!("{s:?}");
    let _ = writeln!(out, "[[port]]\nname = \"{name}\"");
    match usb {
        Some((vid, pid, serial)) => {
            let serial = serial.map(|s| format!(":{s}")).unwrap_or_default();
            let _ = writeln!(
                out,
                "usb = {}          # found again under a changed device name",
                quote(&format!("{vid:04x}:{pid:04x}{serial}"))
            );
        }
        None => {
            let _ = writeln!(out, "device = {}", quote(device));
        }
    }
    let word = match format {
        LineFormat::Columns => "columns",
        LineFormat::Pairs => "pairs",
        LineFormat::Json => "json",
        LineFormat::Nmea => "nmea",
    };
    let _ = writeln!(out, "baud = {baud}\nformat = \"{word}\"");
    if format == LineFormat::Columns {
        let names: Vec<String> = fields.iter().map(|f| quote(f)).collect();
        let _ = writeln!(out, "columns = [{}]          # give them your names", names.join(", "));
    } else if !fields.is_empty() {
        let _ = writeln!(
            out,
            "# fields seen: {}",
            fields.iter().map(|f| crate::screen::text::safe(f)).collect::<Vec<_>>().join(", ")
        );
    }
    if format == LineFormat::Nmea {
        let _ =
            writeln!(out, "[[channel]]\nname = \"speed\"\nfrom = \"gps.speed\"\nquantity = \"speed\"\nunit = \"km/h\"");
        let _ =
            writeln!(out, "[[channel]]\nname = \"track\"\nfrom = \"gps.track\"\nquantity = \"track\"\nunit = \"deg\"");
    }
    out.push('\n');
}
