//! Figures as the person likes them: unit, decimals and width fixed by what is measured, so that nothing jumps.

use crate::config::Show;
use crate::units::{Quantity, SPEEDS, StreamTime, Unit};

/// How figures of one quantity are written.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Figures {
    unit: Unit,
    whole: usize,
    decimals: usize,
}

impl Figures {
    /// For a quantity, in the units that are to be shown.
    pub(super) fn of(quantity: Quantity, show: &Show) -> Self {
        let same = |name| Unit { name, scale: 1.0, shift: 0.0 };
        let (unit, whole, decimals) = match quantity {
            Quantity::Pressure | Quantity::DynamicPressure => {
                let unit = show.pressure_unit();
                let decimals = pressure_decimals(unit);
                (unit, 5 - decimals.min(3), decimals)
            }
            Quantity::Speed => (Unit::find(SPEEDS, &show.speed).unwrap_or(SPEEDS[0]), 3, 1),
            Quantity::Barometer => (Unit { name: "hPa", scale: 100.0, shift: 0.0 }, 4, 1),
            Quantity::Track => (same("°"), 3, 0),
            Quantity::Temperature => (same("°C"), 3, 1),
            Quantity::Humidity => (same("%"), 3, 0),
            Quantity::RideHeight => (same("mm"), 4, 1),
            Quantity::Other => (same(""), 3, 2),
        };
        Self { unit, whole, decimals }
    }

    /// The unit's name, for the eye.
    pub(super) fn unit(&self) -> &'static str {
        self.unit.name
    }

    /// The unit's name; of what has none of its own, the one that the rig names.
    pub(super) fn unit_or<'a>(&self, own: &'a str) -> &'a str {
        if self.unit.name.is_empty() { own } else { self.unit.name }
    }

    /// A value with its sign in the first place and its point always in the same.
    pub(super) fn signed(&self, value: Option<f64>) -> String {
        let shown = value.map(|v| self.unit.from_inside(v));
        fixed(shown, (self.whole, self.decimals), true)
    }

    /// A difference or spread of values: no sign, no shift of the scale.
    pub(super) fn spread(&self, value: Option<f64>) -> String {
        fixed(value.map(|v| v / self.unit.scale), (self.whole - 1, self.decimals), false)
    }

    /// A value without padding or place for a sign.
    pub(super) fn short(&self, value: f64) -> String {
        self.signed(Some(value)).replace(' ', "")
    }

    /// The smallest step that is shown, in the unit used inside.
    pub(super) fn step(&self) -> f64 {
        self.unit.scale * 0.1_f64.powi(i32::try_from(self.decimals).unwrap_or(0))
    }
}

/// Decimals that show a tenth of a pascal, or a little less.
fn pressure_decimals(unit: Unit) -> usize {
    match unit.scale {
        s if s < 5.0 => 1,
        s if s < 50.0 => 2,
        s if s < 500.0 => 3,
        _ => 4,
    }
}

/// Fixed width: an optional sign place, `whole` places, point, `decimals`; a figure too long gives up decimals, then says so.
fn fixed(value: Option<f64>, (whole, decimals): (usize, usize), sign: bool) -> String {
    let width = whole + if decimals > 0 { 1 + decimals } else { 0 };
    let lead = |minus: bool| {
        if !sign {
            ""
        } else if minus {
            "-"
        } else {
            " "
        }
    };
    let Some(value) = value.filter(|v| v.is_finite()) else { return format!("{}{:>width$}", lead(false), "—") };
    for places in (0..=decimals).rev() {
        let digits = format!("{:.places$}", value.abs());
        if digits.len() <= width {
            let minus = value < 0.0 && digits.bytes().any(|b| b.is_ascii_digit() && b != b'0');
            return format!("{}{digits:>width$}", lead(minus));
        }
    }
    format!("{}{:>width$}", lead(value < 0.0), "over")
}

/// A stream time as `h:mm:ss`.
pub(super) fn clock(at: StreamTime) -> String {
    let seconds = at.micros().max(0) / 1_000_000;
    format!("{}:{:02}:{:02}", seconds / 3600, seconds / 60 % 60, seconds % 60)
}

/// Seconds with one decimal, at most 999.9; what is not finite is a dash.
pub(super) fn seconds(s: f64) -> String {
    fixed(Some(s.clamp(0.0, 999.9)), (3, 1), false)
}
