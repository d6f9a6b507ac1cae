//! Units and stream time: the one place where a conversion factor stands.
//!
//! Inside the program pressures are in pascal, speeds in km/h (the trade's and the files' unit), tracks in
//! degrees, temperatures in °C, humidity in percent, ride heights in millimetres. A [`Unit`] says how a
//! field's figure becomes one of these. Factors: NIST SP 811 (2008) appendix B.8 and the exact definitions
//! behind it (1 lb = 0.45359237 kg, 1 in = 0.0254 m, g₀ = 9.80665 m/s²).

pub mod eight;

use eight::Eight;
use serde::{Deserialize, Deserializer, Serialize, Serializer};
use std::fmt;

/// Standard acceleration of free fall, m/s² (exact by definition).
pub const STANDARD_GRAVITY: f64 = 9.80665;
/// km/h in one knot (exact: 1852 m an hour).
pub const KMH_PER_KNOT: f64 = 1.852;
/// m/s to km/h.
pub const KMH_PER_M_S: f64 = 3.6;

/// A moment of a stream: integer microseconds from the start of its record, so that window edges never
/// depend on rounding. Written as seconds with six decimals.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct StreamTime(i64);

impl StreamTime {
    /// Stream time 0.
    pub const ZERO: Self = Self(0);
    /// Later than every real moment.
    pub const NEVER: Self = Self(i64::MAX);

    /// From integer microseconds.
    pub const fn from_micros(us: i64) -> Self {
        Self(us)
    }
    /// Integer microseconds.
    pub const fn micros(self) -> i64 {
        self.0
    }
    /// Seconds, for arithmetic that needs no exact edges.
    pub fn seconds(self) -> f64 {
        self.0 as f64 / 1e6
    }
    /// This moment moved by `us` microseconds, stopping at the ends of the range.
    pub const fn plus(self, us: i64) -> Self {
        Self(self.0.saturating_add(us))
    }
    /// Microseconds from `earlier` to this moment.
    pub const fn since(self, earlier: Self) -> i64 {
        self.0.saturating_sub(earlier.0)
    }

    /// Reads `digits.dddddd` (exactly six decimals, no sign), as a record line begins. `None` if it is anything else.
    pub fn parse(text: &[u8]) -> Option<Self> {
        let dot = text.len().checked_sub(7)?;
        if dot == 0 || dot > 11 || text[dot] != b'.' {
            return None;
        }
        let number =
            |part: &[u8]| part.iter().try_fold(0i64, |n, c| c.is_ascii_digit().then(|| n * 10 + i64::from(c - b'0')));
        Some(Self(number(&text[..dot])? * 1_000_000 + number(&text[dot + 1..])?))
    }

    /// The stream time that `line` begins with, up to its first blank, and where that blank is.
    ///
    /// ```
    /// use steadytap::units::StreamTime;
    /// assert_eq!(StreamTime::leading(b"12.345678 gauge 1"), Some((StreamTime::from_micros(12_345_678), 9)));
    /// ```
    #[inline(always)]
    pub fn leading(line: &[u8]) -> Option<(Self, usize)> {
        let (seconds, end) = Self::short(line).unwrap_or((Self::ZERO, 0));
        if line.get(end) == Some(&b' ') {
            return Some((seconds, end));
        }
        Self::any(line)
    }

    #[cold]
    fn any(line: &[u8]) -> Option<(Self, usize)> {
        let blank = line.iter().take(20).position(|c| *c == b' ')?;
        Some((Self::parse(&line[..blank])?, blank))
    }

    /// The same of up to seven digits before the point, whatever stands behind the six decimals.
    #[inline(always)]
    fn short(line: &[u8]) -> Option<(Self, usize)> {
        let seconds = Eight::new(line);
        let point = seconds.others().first();
        let decimals = Eight::new(line.get(point + 1..)?);
        let fits = point > 0 && seconds.byte(point) == b'.' && decimals.others().first() == 6;
        let us = || i64::from(seconds.number(point)) * 1_000_000 + i64::from(decimals.number(6));
        fits.then(|| (Self(us()), point + 7))
    }
}

impl fmt::Display for StreamTime {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let sign = if self.0 < 0 { "-" } else { "" };
        let us = self.0.unsigned_abs();
        write!(f, "{sign}{}.{:06}", us / 1_000_000, us % 1_000_000)
    }
}

impl Serialize for StreamTime {
    /// A JSON number with six decimals.
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serde_json::value::RawValue::from_string(self.to_string())
            .map_err(serde::ser::Error::custom)?
            .serialize(serializer)
    }
}

impl<'de> Deserialize<'de> for StreamTime {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let seconds = f64::deserialize(deserializer)?;
        if seconds.abs() < 9e9 {
            Ok(Self((seconds * 1e6).round() as i64))
        } else {
            Err(serde::de::Error::custom("a stream time is a number of seconds below 9e9"))
        }
    }
}

/// Seconds of a configuration file as whole microseconds.
pub fn micros(seconds: f64) -> i64 {
    (seconds * 1e6).round() as i64
}

/// What a channel measures.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Quantity {
    /// Pressure of a tap against the probe's static.
    Pressure,
    /// Total minus static pressure of the probe.
    DynamicPressure,
    /// Ground speed.
    Speed,
    /// Course over ground.
    Track,
    /// Air temperature.
    Temperature,
    /// Ambient absolute pressure.
    Barometer,
    /// Relative humidity.
    Humidity,
    /// Suspension position.
    RideHeight,
    /// Anything else; averaged, never interpreted.
    Other,
}

impl Quantity {
    /// All of them, in the order of the manual.
    pub const ALL: [Self; 9] = [
        Self::Pressure,
        Self::DynamicPressure,
        Self::Speed,
        Self::Track,
        Self::Temperature,
        Self::Barometer,
        Self::Humidity,
        Self::RideHeight,
        Self::Other,
    ];

    /// The word in a rig file.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Pressure => "pressure",
            Self::DynamicPressure => "dynamic-pressure",
            Self::Speed => "speed",
            Self::Track => "track",
            Self::Temperature => "temperature",
            Self::Barometer => "barometer",
            Self::Humidity => "humidity",
            Self::RideHeight => "ride-height",
            Self::Other => "other",
        }
    }

    /// The unit that values of this quantity have inside the program and in every file it writes.
    pub const fn inside(self) -> &'static str {
        match self {
            Self::Pressure | Self::DynamicPressure | Self::Barometer => "Pa",
            Self::Speed => "km/h",
            Self::Track => "deg",
            Self::Temperature => "degC",
            Self::Humidity => "%",
            Self::RideHeight => "mm",
            Self::Other => "",
        }
    }

    /// The units that a field of this quantity may be in; empty means any word.
    pub fn units(self) -> &'static [Unit] {
        match self {
            Self::Pressure | Self::DynamicPressure | Self::Barometer => PRESSURES,
            Self::Speed => SPEEDS,
            Self::Track => ANGLES,
            Self::Temperature => TEMPERATURES,
            Self::Humidity => HUMIDITIES,
            Self::RideHeight => LENGTHS,
            Self::Other => &[],
        }
    }
}

/// A unit of measurement: `inside = figure * scale + shift`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Unit {
    /// Its name in the files.
    pub name: &'static str,
    /// Factor to the unit used inside.
    pub scale: f64,
    /// What is added after scaling (temperatures only).
    pub shift: f64,
}

const fn unit(name: &'static str, scale: f64) -> Unit {
    Unit { name, scale, shift: 0.0 }
}

const POUND_FORCE_N: f64 = 0.45359237 * STANDARD_GRAVITY;

/// Pressures, to Pa.
pub const PRESSURES: &[Unit] = &[
    unit("Pa", 1.0),
    unit("hPa", 100.0),
    unit("kPa", 1000.0),
    unit("mbar", 100.0),
    unit("bar", 1e5),
    unit("mmH2O", STANDARD_GRAVITY),
    unit("cmH2O", 10.0 * STANDARD_GRAVITY),
    unit("inH2O", 25.4 * STANDARD_GRAVITY),
    unit("inH2O-4C", 249.081_935_510_52),
    unit("inH2O-60F", 248.840_070_178_91),
    unit("mmHg", 133.322_387_415),
    unit("inHg", 25.4 * 133.322_387_415),
    unit("torr", 101_325.0 / 760.0),
    unit("psi", POUND_FORCE_N / (0.0254 * 0.0254)),
    unit("psf", POUND_FORCE_N / (0.3048 * 0.3048)),
];
/// Speeds, to km/h.
pub const SPEEDS: &[Unit] =
    &[unit("km/h", 1.0), unit("m/s", KMH_PER_M_S), unit("mph", 1.609344), unit("kn", KMH_PER_KNOT)];
/// Angles, to degrees.
pub const ANGLES: &[Unit] = &[unit("deg", 1.0), unit("rad", 180.0 / std::f64::consts::PI)];
/// Temperatures, to °C.
pub const TEMPERATURES: &[Unit] = &[
    unit("degC", 1.0),
    Unit { name: "K", scale: 1.0, shift: -273.15 },
    Unit { name: "degF", scale: 5.0 / 9.0, shift: -160.0 / 9.0 },
];
/// Relative humidity, to percent.
pub const HUMIDITIES: &[Unit] = &[unit("%", 1.0), unit("1", 100.0)];
/// Lengths, to mm.
pub const LENGTHS: &[Unit] = &[unit("mm", 1.0), unit("cm", 10.0), unit("m", 1000.0), unit("in", 25.4)];

impl Unit {
    /// The unit of that name among `units`.
    pub fn find(units: &[Unit], name: &str) -> Option<Unit> {
        units.iter().copied().find(|u| u.name == name)
    }
    /// A figure in this unit, in the unit used inside.
    #[inline]
    pub fn to_inside(self, figure: f64) -> f64 {
        figure * self.scale + self.shift
    }
    /// The reverse of [`Unit::to_inside`].
    pub fn from_inside(self, value: f64) -> f64 {
        (value - self.shift) / self.scale
    }
}
