//! NMEA 0183 sentences RMC, VTG and GGA of any talker → what they measured.
//!
//! Field layout after NMEA 0183 / IEC 61162-1. The checksum is required. An empty field is absent, never 0. Sentences
//! of other kinds with a right checksum are passed over, they are no error.

use super::decoder::Reject;
use super::number;
use crate::units::KMH_PER_KNOT;

/// A sentence of interest.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Sentence {
    /// Recommended minimum data.
    Rmc(Rmc),
    /// Course and speed over the ground.
    Vtg(Vtg),
    /// Fix data.
    Gga(Gga),
    /// A right checksum around something else.
    Other,
}

/// What an RMC sentence says.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Rmc {
    /// Status A, and a mode that is a measurement (A, D, R, F, P, or none in old receivers).
    pub measured: bool,
    /// Status A.
    pub valid: bool,
    /// Time of day, s.
    pub time_s: Option<f64>,
    /// Day, month, full year (two digits, pivot 80).
    pub date: Option<(u32, u32, i32)>,
    /// Latitude, degrees, north positive.
    pub lat: Option<f64>,
    /// Longitude, degrees, east positive.
    pub lon: Option<f64>,
    /// Speed over ground, km/h.
    pub speed_kmh: Option<f64>,
    /// Course over ground, degrees true.
    pub track_deg: Option<f64>,
}

/// What a VTG sentence says.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Vtg {
    /// A mode that is a measurement, or none.
    pub measured: bool,
    /// Course over ground, degrees true.
    pub track_deg: Option<f64>,
    /// Speed over ground, km/h: from the km/h field, whose last digit is the finer one, else from knots.
    pub speed_kmh: Option<f64>,
}

/// What a GGA sentence says.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Gga {
    /// Time of day, s.
    pub time_s: Option<f64>,
    /// Latitude, degrees.
    pub lat: Option<f64>,
    /// Longitude, degrees.
    pub lon: Option<f64>,
    /// Fix quality; 0 is no fix.
    pub quality: Option<f64>,
    /// Altitude of the antenna above mean sea level, m.
    pub altitude_m: Option<f64>,
}

/// XOR of the characters between `$` and `*`.
///
/// ```
/// let body = b"GPVTG,054.7,T,034.4,M,005.5,N,010.2,K"; // published example, sum 48
/// assert_eq!(steadytap::stream::nmea::checksum(body), 0x48);
/// ```
pub fn checksum(body: &[u8]) -> u8 {
    body.iter().fold(0, |sum, c| sum ^ c)
}

/// Reads one sentence, without its line end.
///
/// # Errors
/// [`Reject`] when the frame, the checksum or a field that is read does not parse.
pub fn parse(line: &[u8]) -> Result<Sentence, Reject> {
    let line = line.strip_suffix(b"\r").unwrap_or(line);
    let body = line.strip_prefix(b"$").ok_or(Reject::NotNmea)?;
    let star = body.len().checked_sub(3).ok_or(Reject::NotNmea)?;
    if body[star] != b'*' {
        return Err(if body.contains(&b'*') { Reject::NotNmea } else { Reject::NoChecksum });
    }
    let sum = match body[star + 1..] {
        [high, low] => hex_digit(high).zip(hex_digit(low)).map(|(high, low)| high * 16 + low),
        _ => None,
    };
    let sum = sum.ok_or(Reject::NoChecksum)?;
    let body = &body[..star];
    if checksum(body) != sum {
        return Err(Reject::WrongChecksum);
    }
    let mut fields = Fields { rest: Some(body), at: 0 };
    let kind = fields.next();
    match kind.get(2..) {
        Some(b"RMC") => rmc(fields).map(Sentence::Rmc),
        Some(b"VTG") => vtg(fields).map(Sentence::Vtg),
        Some(b"GGA") => gga(fields).map(Sentence::Gga),
        _ => Ok(Sentence::Other),
    }
}

/// The comma-separated fields of a body; beyond the last one every field is empty.
struct Fields<'a> {
    rest: Option<&'a [u8]>,
    at: usize,
}

impl<'a> Fields<'a> {
    fn next(&mut self) -> &'a [u8] {
        self.at += 1;
        let Some(rest) = self.rest else { return b"" };
        match memchr::memchr(b',', rest) {
            Some(comma) => {
                self.rest = Some(&rest[comma + 1..]);
                &rest[..comma]
            }
            None => {
                self.rest = None;
                rest
            }
        }
    }

    fn number(&mut self) -> Result<Option<f64>, Reject> {
        let text = self.next();
        if text.is_empty() {
            return Ok(None);
        }
        number::whole(text).map(Some).ok_or(Reject::NotANumber { field: self.at })
    }

    /// `ddmm.mmmm` and its hemisphere: the minutes are the two digits before the point and the rest.
    fn angle(&mut self, negative: u8) -> Result<Option<f64>, Reject> {
        let value = self.number()?;
        let hemisphere = self.next();
        Ok(value.map(|v| {
            let degrees = (v / 100.0).floor();
            let angle = degrees + (v - degrees * 100.0) / 60.0;
            if hemisphere.first() == Some(&negative) { -angle } else { angle }
        }))
    }

    /// `hhmmss[.ss]`.
    fn time_of_day(&mut self) -> Result<Option<f64>, Reject> {
        let text = self.next();
        if text.is_empty() {
            return Ok(None);
        }
        let wrong = Reject::NotANumber { field: self.at };
        // Six digits first: signs and exponents have no place here.
        let (clock, fraction) = text.split_at_checked(6).ok_or(wrong)?;
        let n = digits(clock).ok_or(wrong)?;
        let (hours, minutes, seconds) = (n / 10_000, n / 100 % 100, n % 100);
        // Second 60 is a leap second.
        if hours > 23 || minutes > 59 || seconds > 60 {
            return Err(wrong);
        }
        let part = match fraction {
            [] => 0.0,
            [b'.', decimals @ ..] if decimals.iter().all(u8::is_ascii_digit) => {
                if decimals.is_empty() {
                    0.0
                } else {
                    number::whole(fraction).ok_or(wrong)?
                }
            }
            _ => return Err(wrong),
        };
        Ok(Some(f64::from(hours * 3600 + minutes * 60 + seconds) + part))
    }

    fn date(&mut self) -> Result<Option<(u32, u32, i32)>, Reject> {
        let text = self.next();
        if text.is_empty() {
            return Ok(None);
        }
        let wrong = Reject::NotANumber { field: self.at };
        let n = digits(text).filter(|_| text.len() == 6).ok_or(wrong)?;
        let year = (n % 100) as i32;
        Ok(Some((n / 10_000, n / 100 % 100, if year >= 80 { 1900 + year } else { 2000 + year })))
    }
}

/// Up to nine digits and nothing else.
fn digits(text: &[u8]) -> Option<u32> {
    let fits = (1..=9).contains(&text.len());
    let push = |n: u32, c: &u8| c.is_ascii_digit().then(|| n * 10 + u32::from(c - b'0'));
    if fits { text.iter().try_fold(0, push) } else { None }
}

fn hex_digit(c: u8) -> Option<u8> {
    char::from(c).to_digit(16).and_then(|d| u8::try_from(d).ok())
}

/// Estimated, manual, simulated and invalid data are no measurement.
fn measured(mode: &[u8]) -> bool {
    matches!(mode, b"" | b"A" | b"D" | b"R" | b"F" | b"P")
}

fn rmc(mut f: Fields<'_>) -> Result<Rmc, Reject> {
    let time_s = f.time_of_day()?;
    let valid = f.next() == b"A";
    let lat = f.angle(b'S')?;
    let lon = f.angle(b'W')?;
    let speed_kmh = f.number()?.map(|knots| knots * KMH_PER_KNOT);
    let track_deg = f.number()?;
    let date = f.date()?;
    f.next(); // magnetic variation
    f.next(); // and its side
    let measured = valid && measured(f.next());
    Ok(Rmc { measured, valid, time_s, date, lat, lon, speed_kmh, track_deg })
}

fn vtg(mut f: Fields<'_>) -> Result<Vtg, Reject> {
    let track_deg = f.number()?;
    f.next(); // T
    f.next(); // magnetic course
    f.next(); // M
    let knots = f.number()?;
    f.next(); // N
    let kmh = f.number()?;
    f.next(); // K
    let measured = measured(f.next());
    Ok(Vtg { measured, track_deg, speed_kmh: kmh.or(knots.map(|k| k * KMH_PER_KNOT)) })
}

fn gga(mut f: Fields<'_>) -> Result<Gga, Reject> {
    let time_s = f.time_of_day()?;
    let lat = f.angle(b'S')?;
    let lon = f.angle(b'W')?;
    let quality = f.number()?;
    f.next(); // satellites
    f.next(); // dilution
    let altitude_m = f.number()?;
    Ok(Gga { time_s, lat, lon, quality, altitude_m })
}
