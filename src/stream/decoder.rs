//! Lines of one port → its fields, by the port's line format.
//!
//! A decoder is made from the rig and knows which fields channels use. A line parses whole or is rejected; fields
//! that no channel uses must be well formed in `columns` (they decide the count) and may be any text elsewhere.

use super::nmea::{self, Sentence};
use super::number;
use crate::config::{LineFormat, NMEA_FIELDS, Port, Rig};
use crate::units::KMH_PER_M_S;
use std::fmt;

/// Below this speed (km/h) a GPS course is noise and is dropped (common practice, no source).
pub const SLOWEST_TRACK_KMH: f64 = KMH_PER_M_S;

/// Why a line was rejected.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Reject {
    /// Nothing in it.
    Empty,
    /// Another number of fields than the rig says.
    FieldCount {
        /// Fields in the line; counting stops one past the wanted number.
        have: usize,
        /// Fields in the rig.
        need: usize,
    },
    /// A field is no finite decimal number; fields count from 1.
    NotANumber {
        /// Which field.
        field: usize,
    },
    /// Not `name=number` or `name:number`.
    NotAPair {
        /// Which part.
        field: usize,
    },
    /// Not one flat JSON object.
    NotFlatJson,
    /// No `$` in front or no `*` in its place.
    NotNmea,
    /// No checksum, or no two hexadecimal digits.
    NoChecksum,
    /// The checksum is not that of the characters.
    WrongChecksum,
    /// The line was longer than 64 KiB and was cut.
    TooLong,
}

impl fmt::Display for Reject {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Empty => write!(f, "empty line"),
            Self::FieldCount { have, need } if have > need => write!(f, "more than {need} fields"),
            Self::FieldCount { have, need } => write!(f, "{have} fields where the rig has {need}"),
            Self::NotANumber { field } => write!(f, "field {field} is no finite number"),
            Self::NotAPair { field } => write!(f, "part {field} is no name=number"),
            Self::NotFlatJson => write!(f, "not one flat JSON object"),
            Self::NotNmea => write!(f, "not an NMEA sentence"),
            Self::NoChecksum => write!(f, "no NMEA checksum"),
            Self::WrongChecksum => write!(f, "wrong NMEA checksum"),
            Self::TooLong => write!(f, "longer than 64 KiB"),
        }
    }
}

/// Decodes the lines of one port.
#[derive(Debug)]
pub struct Decoder {
    format: LineFormat,
    /// Names of the slots, in order.
    fields: Vec<String>,
    /// Values of the last good line by slot; none where the line had no such field.
    values: Vec<Option<f64>>,
    gps: Gps,
}

/// What an NMEA port said beside its fields.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Gps {
    /// An RMC was seen: VTG repeats it and is passed over from then on.
    seen_rmc: bool,
    /// The last RMC was without a fix; before any RMC: the last GGA.
    pub no_fix: bool,
    /// UTC of the last fix, ms since 1970.
    pub utc_ms: Option<i64>,
}

impl Decoder {
    /// The decoder of `port`, with a slot for each field that it can give.
    pub fn new(rig: &Rig, port: &Port) -> Self {
        let fields: Vec<String> = match port.format {
            LineFormat::Columns => port.columns.clone(),
            LineFormat::Nmea => NMEA_FIELDS.map(|(name, _)| name.to_string()).to_vec(),
            LineFormat::Pairs | LineFormat::Json => {
                let mut used: Vec<_> =
                    rig.channels.iter().filter(|c| c.port == port.name).map(|c| c.field.clone()).collect();
                used.sort();
                used.dedup();
                used
            }
        };
        Self { format: port.format, values: vec![None; fields.len()], fields, gps: Gps::default() }
    }

    /// The slot of a field.
    pub fn slot(&self, field: &str) -> Option<usize> {
        self.fields.iter().position(|f| f == field)
    }

    /// What the port's GPS said beside its fields.
    pub fn gps(&self) -> Gps {
        self.gps
    }

    /// Reads one line; its values by slot, none where the line had no such field.
    ///
    /// # Errors
    /// [`Reject`] says why the line does not parse; nothing of it may be used.
    pub fn decode(&mut self, line: &[u8]) -> Result<&[Option<f64>], Reject> {
        match self.format {
            LineFormat::Columns if plain(line, &mut self.values) => {}
            LineFormat::Columns => columns(line, &mut self.values)?,
            LineFormat::Pairs => self.pairs(line)?,
            LineFormat::Json => self.json(line)?,
            LineFormat::Nmea => self.nmea(line)?,
        }
        Ok(&self.values)
    }

    fn pairs(&mut self, line: &[u8]) -> Result<(), Reject> {
        self.values.fill(None);
        let mut parts = 0;
        let separator = |c: &u8| matches!(c, b',' | b';' | b'\t' | b' ');
        for part in line.split(separator).filter(|p| !p.is_empty()) {
            parts += 1;
            let wrong = Reject::NotAPair { field: parts };
            let mark = part.iter().position(|c| matches!(c, b'=' | b':')).filter(|at| *at > 0).ok_or(wrong)?;
            let (name, value) = (&part[..mark], &part[mark + 1..]);
            if let Some(slot) = self.fields.iter().position(|f| f.as_bytes() == name) {
                self.values[slot] = Some(number::whole(value).ok_or(Reject::NotANumber { field: parts })?);
            }
        }
        if parts == 0 { Err(Reject::Empty) } else { Ok(()) }
    }

    fn json(&mut self, line: &[u8]) -> Result<(), Reject> {
        use serde_json::Value;
        if line.is_empty() {
            return Err(Reject::Empty);
        }
        let object: serde_json::Map<String, Value> = serde_json::from_slice(line).map_err(|_| Reject::NotFlatJson)?;
        if object.values().any(|v| matches!(v, Value::Array(_) | Value::Object(_))) {
            return Err(Reject::NotFlatJson);
        }
        for (slot, field) in self.fields.iter().enumerate() {
            self.values[slot] = match object.get(field) {
                None | Some(Value::Null) => None,
                Some(value) => {
                    Some(value.as_f64().filter(|v| v.is_finite()).ok_or(Reject::NotANumber { field: slot + 1 })?)
                }
            };
        }
        Ok(())
    }

    fn nmea(&mut self, line: &[u8]) -> Result<(), Reject> {
        let [mut speed, mut track, mut lat, mut lon, mut altitude, mut fix] = [None; 6];
        match nmea::parse(line)? {
            Sentence::Rmc(rmc) => {
                self.gps.seen_rmc = true;
                self.gps.no_fix = !rmc.measured;
                if rmc.measured {
                    (speed, lat, lon) = (rmc.speed_kmh, rmc.lat, rmc.lon);
                    track = rmc.track_deg.filter(|_| speed.is_some_and(|v| v >= SLOWEST_TRACK_KMH));
                    self.gps.utc_ms = utc_ms(rmc.date, rmc.time_s).or(self.gps.utc_ms);
                }
            }
            Sentence::Vtg(vtg) if vtg.measured && !self.gps.seen_rmc => {
                speed = vtg.speed_kmh;
                track = vtg.track_deg.filter(|_| speed.is_some_and(|v| v >= SLOWEST_TRACK_KMH));
            }
            Sentence::Gga(gga) => {
                fix = gga.quality;
                // RMC judges more finely, by its mode too; where one comes, it has the word.
                if !self.gps.seen_rmc {
                    self.gps.no_fix = gga.quality.is_none_or(|q| q <= 0.0);
                }
                if gga.quality.is_some_and(|q| q > 0.0) {
                    altitude = gga.altitude_m;
                    // Where an RMC comes, it gives the position of the same epoch.
                    (lat, lon) = if self.gps.seen_rmc { (None, None) } else { (gga.lat, gga.lon) };
                }
            }
            Sentence::Vtg(_) | Sentence::Other => {}
        }
        self.values.copy_from_slice(&[speed, track, lat, lon, altitude, fix]);
        Ok(())
    }
}

fn utc_ms(date: Option<(u32, u32, i32)>, time_s: Option<f64>) -> Option<i64> {
    let (day, month, year) = date?;
    let midnight = chrono::NaiveDate::from_ymd_opt(year, month, day)?.and_hms_opt(0, 0, 0)?;
    Some(midnight.and_utc().timestamp_millis() + (time_s? * 1000.0).round() as i64)
}

/// The commonest of [`columns`]: commas alone, and nothing wrong. False says nothing but that it is another.
#[inline(always)]
fn plain(line: &[u8], values: &mut [Option<f64>]) -> bool {
    let mut rest = line;
    for (i, value) in values.iter_mut().enumerate() {
        if i > 0 {
            let Some(behind) = rest.strip_prefix(b",") else { return false };
            rest = behind;
        }
        let Some((number, behind)) = number::before_comma(rest) else { return false };
        *value = Some(number);
        rest = behind;
    }
    rest.is_empty()
}

/// Numbers separated by comma, semicolon or tab, with blanks round them allowed, or by blanks alone.
#[inline(never)]
fn columns(line: &[u8], values: &mut [Option<f64>]) -> Result<(), Reject> {
    let need = values.len();
    let mut at = blanks(line, 0);
    if at == line.len() {
        return Err(Reject::Empty);
    }
    for (i, value) in values.iter_mut().enumerate() {
        if i > 0 {
            at = separator(line, at).ok_or(if at >= line.len() {
                Reject::FieldCount { have: i, need }
            } else {
                Reject::NotANumber { field: i }
            })?;
        }
        let (number, used) = number::leading(&line[at..]).ok_or(Reject::NotANumber { field: i + 1 })?;
        *value = Some(number);
        at += used;
    }
    let end = blanks(line, at);
    if end == line.len() {
        return Ok(());
    }
    Err(match separator(line, at) {
        Some(_) => Reject::FieldCount { have: need + 1, need },
        None => Reject::NotANumber { field: need },
    })
}

#[inline]
fn blanks(line: &[u8], mut at: usize) -> usize {
    while line.get(at) == Some(&b' ') {
        at += 1;
    }
    at
}

/// Where the next field begins, behind the separator at `at`; none when there is no separator or the line ends.
#[inline]
fn separator(line: &[u8], at: usize) -> Option<usize> {
    let mark = blanks(line, at);
    match line.get(mark)? {
        b',' | b';' | b'\t' => Some(blanks(line, mark + 1)),
        _ if mark > at => Some(mark),
        _ => None,
    }
}
