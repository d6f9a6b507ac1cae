//! Rig, car and outing: what people write, checked whole, as plain data that later layers may trust.
//!
//! Text of three TOML files → [`Setup`], or every problem at once with file, line, column and remedy. The types
//! here are the *checked* ones; they are also what a session's first line carries, so that a session
//! reduces by itself years later. Reading never guesses: an unknown key is an error that names the nearest known one.

mod car;
mod cursor;
mod files;
mod names;
mod outing;
mod problem;
mod rig;

pub use files::{Checked, Head, Kind, LARGEST, check_car, check_outing, check_rig, kind, outing_head, setup};
pub use problem::{Place, Problem, Severity, Source};

use crate::pneumatics::Tube;
use crate::units::{PRESSURES, Quantity, Unit, micros};
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// Everything an outing rests on, resolved.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Setup {
    /// What is plugged in.
    pub rig: Rig,
    /// What it is fitted to.
    pub car: Car,
    /// The test.
    pub outing: Outing,
}

/// Ports, and the channels that their fields become.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Rig {
    /// Serial ports, in file order; names are unique.
    pub ports: Vec<Port>,
    /// Channels, in file order; names are unique, each `from` names a port here.
    pub channels: Vec<Channel>,
}

/// One serial port.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Port {
    /// Name in records and on the screen: letters, digits, `-` and `_`.
    pub name: String,
    /// Device path, if the port is found by path.
    pub device: Option<String>,
    /// USB identity, if the port is found by that (preferred over `device`).
    pub usb: Option<UsbId>,
    /// Bits per second.
    pub baud: u32,
    /// How its lines read.
    pub format: LineFormat,
    /// Field names in order; empty unless `format` is columns.
    pub columns: Vec<String>,
    /// Whether the DTR line is raised on opening (some boards send only then, some reset on it).
    pub dtr: bool,
}

/// `vid:pid[:serial]` of a USB serial adapter.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct UsbId {
    /// Vendor.
    pub vid: u16,
    /// Product.
    pub pid: u16,
    /// Serial number, when two adapters are alike.
    pub serial: Option<String>,
}

/// The fields of an NMEA port that a channel may name, and the unit that its reader gives them in.
pub const NMEA_FIELDS: [(&str, &str); 6] =
    [("speed", "km/h"), ("track", "deg"), ("lat", "deg"), ("lon", "deg"), ("altitude", "m"), ("fix", "")];

/// How the lines of a port read.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum LineFormat {
    /// Numbers separated by comma, semicolon, tab or blanks.
    Columns,
    /// `name=number` or `name:number`.
    Pairs,
    /// One flat JSON object.
    Json,
    /// NMEA 0183 RMC, VTG and GGA.
    Nmea,
}

/// One measured quantity.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Channel {
    /// Its name, unique in the rig.
    pub name: String,
    /// Name of the port that it comes from.
    pub port: String,
    /// Field of that port's lines.
    pub field: String,
    /// What it measures.
    pub quantity: Quantity,
    /// Unit of the converted figure, as the file names it; one of `quantity.units()`, or any word for other.
    pub unit: String,
    /// From the raw number to a figure in `unit`.
    pub convert: Convert,
    /// Lowest and highest trusted figure, in `unit`; at an end or beyond, the channel is saturated.
    pub range: Option<[f64; 2]>,
    /// Pneumatic and sensor lag, s; taken off a sample's time. Where a tube is given, its delay.
    pub lag_s: f64,
    /// The tube between tap and sensor, if the rig gives it instead of a lag.
    pub tube: Option<Tube>,
    /// Time constant of the displayed value, s; never touches an average.
    pub damping_s: f64,
    /// Longest silence before the channel counts as stale, s.
    pub stale_s: f64,
}

impl Channel {
    /// Factor and shift from a figure in `unit` to the unit used inside.
    pub fn to_inside(&self) -> Unit {
        Unit::find(self.quantity.units(), &self.unit).unwrap_or(Unit { name: "", scale: 1.0, shift: 0.0 })
    }
    /// Lag in whole microseconds.
    pub fn lag_us(&self) -> i64 {
        micros(self.lag_s)
    }
    /// Staleness limit in whole microseconds.
    pub fn stale_us(&self) -> i64 {
        micros(self.stale_s)
    }
}

/// From a raw number to a figure in the channel's unit.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase", deny_unknown_fields)]
pub enum Convert {
    /// `gain * raw + offset`.
    Linear {
        /// Figure per raw unit.
        gain: f64,
        /// Figure at raw zero.
        offset: f64,
    },
    /// Straight lines between `[raw, figure]` points, raw strictly rising, two or more; outside the points it is saturated.
    Points(Vec<[f64; 2]>),
    /// `(raw / supply - zero) / span * full`: a sensor whose output is a share of its supply voltage.
    Ratiometric {
        /// Supply, in raw units.
        supply: f64,
        /// Output at zero, share of supply.
        zero: f64,
        /// Change of that share over `full`.
        span: f64,
        /// Figure at one span from zero.
        full: f64,
    },
}

/// Geometry and references of the vehicle. x metres aft of the front axle, y to the right, z up from the road.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Car {
    /// What people call it.
    pub name: String,
    /// Reference (frontal) area, m².
    pub reference_area_m2: f64,
    /// Wheelbase, m.
    pub wheelbase_m: f64,
    /// Taps, in file order, names unique.
    pub taps: Vec<Tap>,
    /// Heat-exchanger cores.
    pub cores: Vec<Core>,
    /// Tap names in order round the closed centreline section; empty if none.
    pub contour: Vec<String>,
    /// The Pitot-static probe's correction.
    pub probe: Probe,
    /// Ride-height channels by axle.
    pub ride_height: Option<RideHeight>,
}

/// A pressure tap on the body.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Tap {
    /// Its name.
    pub name: String,
    /// Position, m.
    pub at: [f64; 3],
    /// Unit normal out of the body.
    pub normal: [f64; 3],
    /// Patch of body that the tap speaks for, m²; none if it speaks for no area.
    pub area_m2: Option<f64>,
    /// Group for sums, such as base.
    pub group: Option<String>,
}

/// A heat-exchanger core with a tap on each side.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Core {
    /// Its name.
    pub name: String,
    /// Tap upstream.
    pub front: String,
    /// Tap downstream.
    pub rear: String,
    /// Bench curve: `[face velocity m/s, pressure drop Pa]`, rising.
    pub bench: Vec<[f64; 2]>,
}

/// How the probe's indicated q becomes the free stream's.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Probe {
    /// What a factor other than 1 means.
    pub model: ProbeModel,
    /// True over indicated airspeed.
    pub factor: ProbeFactor,
}

/// What a probe factor other than 1 means.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum ProbeModel {
    /// The car's upstream field raises the static at the probe.
    Static,
    /// The dynamic-pressure channel's gain is off.
    Gain,
}

/// Where the probe factor comes from.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum ProbeFactor {
    /// Stated in the car file.
    Stated(f64),
    /// Found from the day's out-and-back pairs.
    Pairs,
}

/// Ride-height channels by axle.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct RideHeight {
    /// Front axle.
    pub front: Option<AxleHeight>,
    /// Rear axle.
    pub rear: Option<AxleHeight>,
}

/// One axle's ride height.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct AxleHeight {
    /// Channel of quantity ride-height.
    pub channel: String,
    /// Both wheels of the axle together, N/mm.
    pub wheel_rate_n_per_mm: f64,
}

/// The test.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Outing {
    /// What it is about.
    pub title: String,
    /// What the speed window watches.
    pub watch: Watch,
    /// Target speeds, km/h, at least one, as written; `resolve_pa` belongs to the first.
    pub targets_kmh: Vec<f64>,
    /// Half width of the window, km/h.
    pub tolerance_kmh: f64,
    /// Time in the window before averaging begins, s.
    pub settle_s: f64,
    /// Length of one average, s.
    pub dwell_s: f64,
    /// Largest speed slope of a dwell, km/h per s.
    pub slope: Option<f64>,
    /// Heading of the out direction, degrees; none: directions by key only.
    pub out_track_deg: Option<f64>,
    /// Passes wanted of each configuration, direction and target.
    pub passes: u32,
    /// Smallest change worth knowing, Pa, at the first target.
    pub resolve_pa: f64,
    /// Display units.
    pub show: Show,
    /// Air where no channel measures it.
    pub air: Air,
    /// Whether `[air]` was written in the file, or is the standard assumption.
    pub air_stated: bool,
    /// Configurations, letters unique; exactly one is the baseline.
    pub configurations: Vec<Configuration>,
    /// Channel name → tap name.
    pub taps: BTreeMap<String, String>,
}

impl Outing {
    /// The baseline's letter.
    pub fn baseline(&self) -> &str {
        self.configurations.iter().find(|c| c.baseline).map_or("A", |c| c.letter.as_str())
    }
}

/// What the speed window watches.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Watch {
    /// A channel's value in km/h; the name is that of a channel of quantity speed.
    Channel(String),
    /// Airspeed from the named dynamic-pressure channel and the air's density.
    Airspeed(String),
}

impl Watch {
    /// The channel behind it.
    pub fn channel(&self) -> &str {
        match self {
            Self::Channel(name) | Self::Airspeed(name) => name,
        }
    }
}

/// Units for the eye only; names out of [`crate::units::SPEEDS`] and [`crate::units::PRESSURES`].
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Show {
    /// Speed unit.
    pub speed: String,
    /// Pressure unit.
    pub pressure: String,
}

impl Show {
    /// The unit that pressures are shown in.
    pub fn pressure_unit(&self) -> Unit {
        Unit::find(PRESSURES, &self.pressure).unwrap_or(PRESSURES[0])
    }
}

/// The air of the day.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Air {
    /// Temperature, °C.
    pub temperature_c: f64,
    /// Absolute station pressure, hPa.
    pub pressure_hpa: f64,
    /// Relative humidity, %.
    pub humidity_pct: f64,
}

impl Air {
    /// Assumed where nothing is stated: ISO 2533 sea level, 50 % relative humidity.
    pub const STANDARD: Self = Self { temperature_c: 15.0, pressure_hpa: 1013.25, humidity_pct: 50.0 };
}

/// One state of the car that is compared.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Configuration {
    /// A short name, usually one capital letter.
    pub letter: String,
    /// What is fitted.
    pub name: String,
    /// Whether the others are compared with it.
    pub baseline: bool,
    /// A setting that is swept.
    pub parameter: Option<Parameter>,
}

/// The setting of a swept part.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Parameter {
    /// What is set.
    pub name: String,
    /// In which unit.
    pub unit: String,
    /// To what.
    pub value: f64,
}
