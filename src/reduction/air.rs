//! The air: moist density by CIPM-2007, the standard atmosphere, viscosity.

use crate::config::Air;

/// Zero of the Celsius scale, K.
pub const CELSIUS_ZERO_K: f64 = 273.15;
/// Density of the standard atmosphere at sea level, kg/m³ (ISO 2533).
pub const ISA_DENSITY: f64 = 1.225;
/// Ratio of specific heats of air.
pub const GAMMA: f64 = 1.4;
/// Specific gas constant of dry air in the standard atmosphere, J/(kg K) (ISO 2533).
pub const ISA_GAS_CONSTANT: f64 = 287.05287;

/// Density of moist air.
///
/// *Input* temperature °C, absolute station pressure hPa, relative humidity % (at most 100). *Output* kg/m³. *Method* CIPM-2007 with a CO₂
/// fraction of 0.0004 (Picard, Davis, Gläser, Fujii, Metrologia 45, 2008, 149–155). *Accuracy* within 4·10⁻⁵ of CoolProp's humid air
/// from 0 to 40 °C; the formula's own range is 600–1100 hPa, 15–27 °C.
///
/// ```
/// use steadytap::{config::Air, reduction::air::density};
/// let air = Air { temperature_c: 20.0, pressure_hpa: 1013.25, humidity_pct: 50.0 };
/// assert!((density(&air) - 1.19931).abs() < 1e-5);
/// ```
pub fn density(air: &Air) -> f64 {
    const MOLAR_DRY: f64 = 28.96546e-3;
    const MOLAR_WATER: f64 = 18.01528e-3;
    const GAS_CONSTANT: f64 = 8.314472;
    let (p, t) = (air.pressure_hpa * 100.0, air.temperature_c + CELSIUS_ZERO_K);
    let xv = vapour_fraction(air);
    let z = compressibility(air, xv);
    p * MOLAR_DRY / (z * GAS_CONSTANT * t) * (1.0 - xv * (1.0 - MOLAR_WATER / MOLAR_DRY))
}

/// Saturation pressure of water vapour over water, Pa, at `kelvin`. *Method* CIPM-2007, equation A1.1.
pub fn saturation_pressure(kelvin: f64) -> f64 {
    (1.2378847e-5 * kelvin * kelvin - 1.9121316e-2 * kelvin + 33.93711047 - 6.3431645e3 / kelvin).exp()
}

/// Enhancement factor of that pressure in air. *Input* Pa, °C. *Method* CIPM-2007, equation A1.2.
pub fn enhancement(pressure_pa: f64, celsius: f64) -> f64 {
    1.00062 + 3.14e-8 * pressure_pa + 5.6e-7 * celsius * celsius
}

/// Mole fraction of water vapour.
pub fn vapour_fraction(air: &Air) -> f64 {
    let p = air.pressure_hpa * 100.0;
    let saturated = enhancement(p, air.temperature_c) * saturation_pressure(air.temperature_c + CELSIUS_ZERO_K);
    air.humidity_pct / 100.0 * saturated / p
}

/// Compressibility factor Z of moist air with vapour fraction `xv`. *Method* CIPM-2007, equation A1.4.
pub fn compressibility(air: &Air, xv: f64) -> f64 {
    let (t, kelvin) = (air.temperature_c, air.temperature_c + CELSIUS_ZERO_K);
    let over = air.pressure_hpa * 100.0 / kelvin;
    let first = 1.58123e-6 - 2.9331e-8 * t + 1.1043e-10 * t * t;
    let second = (5.707e-6 - 2.051e-8 * t) * xv;
    let third = (1.9898e-4 - 2.376e-6 * t) * xv * xv;
    1.0 - over * (first + second + third) + over * over * (1.83e-11 - 0.765e-8 * xv * xv)
}

/// The standard atmosphere at a height.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Standard {
    /// Temperature, K.
    pub kelvin: f64,
    /// Pressure, Pa.
    pressure_pa: f64,
    /// Density, kg/m³.
    pub density: f64,
}

impl Standard {
    /// Pressure, Pa.
    pub fn pressure_pa(&self) -> f64 {
        self.pressure_pa
    }
}

/// The standard atmosphere at a geopotential height of up to 11 km, m. *Method* ISO 2533:1975.
pub fn standard(geopotential_m: f64) -> Standard {
    let kelvin = 288.15 - 0.0065 * geopotential_m;
    let pressure_pa = 101_325.0 * (kelvin / 288.15).powf(9.80665 / (0.0065 * ISA_GAS_CONSTANT));
    Standard { kelvin, pressure_pa, density: pressure_pa / (ISA_GAS_CONSTANT * kelvin) }
}

/// Dynamic viscosity of air, Pa s, at `kelvin`. *Method* Sutherland's law as in ISO 2533. *Accuracy* 0.5 % of CoolProp at 5–35 °C.
pub fn viscosity(kelvin: f64) -> f64 {
    1.458e-6 * kelvin.powf(1.5) / (kelvin + 110.4)
}

/// Speed of sound, m/s, in dry air at `kelvin`.
pub fn speed_of_sound(kelvin: f64) -> f64 {
    (GAMMA * ISA_GAS_CONSTANT * kelvin).sqrt()
}
