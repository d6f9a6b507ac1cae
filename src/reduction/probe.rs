//! The Pitot-static probe: dynamic pressure and speed, what its factor means, wind from out-and-back pairs.

use super::air::GAMMA;
use crate::config::ProbeModel;
use crate::units::KMH_PER_M_S;

/// Dynamic pressure q = ρ V²/2, Pa.
///
/// *Input* density kg/m³, speed km/h. *Method* Bernoulli.
///
/// ```
/// let q = steadytap::reduction::probe::dynamic_pressure(1.225, 100.0); // ISO 2533 sea level
/// assert!((q - 472.608).abs() < 1e-3);
/// ```
pub fn dynamic_pressure(density: f64, kmh: f64) -> f64 {
    0.5 * density * (kmh / KMH_PER_M_S).powi(2)
}

/// Speed that makes a dynamic pressure, km/h; 0 for a negative one. The inverse of [`dynamic_pressure`].
pub fn speed_of(density: f64, q_pa: f64) -> f64 {
    (2.0 * q_pa.max(0.0) / density).sqrt() * KMH_PER_M_S
}

/// Total over static pressure at Mach number `mach`, isentropic (NACA Report 1135, equation 44).
pub fn total_over_static(mach: f64) -> f64 {
    (1.0 + (GAMMA - 1.0) / 2.0 * mach * mach).powf(GAMMA / (GAMMA - 1.0))
}

/// Mach number of an impact pressure p_t − p over static pressure. *Method* inverse of [`total_over_static`].
pub fn mach_of(impact_over_static: f64) -> f64 {
    (2.0 / (GAMMA - 1.0) * ((impact_over_static.max(0.0) + 1.0).powf((GAMMA - 1.0) / GAMMA) - 1.0)).sqrt()
}

/// Airspeed of an impact pressure, km/h; 0 for a negative one.
///
/// *Input* density kg/m³, static pressure Pa, impact pressure p_t − p Pa. *Method* [`mach_of`] times the speed of sound √(γ p/ρ). *Accuracy* against
/// NACA Report 1135; the incompressible [`speed_of`] is high by M²/8: 0.08 % at 100 km/h, 0.33 % at 200.
///
/// ```
/// let kmh = steadytap::reduction::probe::airspeed(1.225, 101_325.0, 473.396); // q = 472.608 Pa at 100 km/h, times 1 + M²/4
/// assert!((kmh - 100.0).abs() < 1e-3);
/// ```
pub fn airspeed(density: f64, pressure_pa: f64, impact_pa: f64) -> f64 {
    mach_of(impact_pa / pressure_pa) * (GAMMA * pressure_pa / density).sqrt() * KMH_PER_M_S
}

/// A measured pressure coefficient corrected for the probe.
///
/// *Input* Cp by the indicated q; k, true over indicated airspeed. *Output* Cp by the free stream's q. *Method* static model:
/// 1 − Cp = (1 − Cp_m)/k², the car's field raises the probe's static and its total does not change; gain model: Cp = Cp_m/k².
///
/// ```
/// use steadytap::{config::ProbeModel, reduction::probe::corrected_cp};
/// assert_eq!(corrected_cp(-0.8, 1.0, ProbeModel::Static), -0.8);
/// ```
pub fn corrected_cp(measured: f64, k: f64, model: ProbeModel) -> f64 {
    match model {
        ProbeModel::Static => 1.0 - (1.0 - measured) / (k * k),
        ProbeModel::Gain => measured / (k * k),
    }
}

/// Probe factor and head wind of an out-and-back pair.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Pair {
    /// True over indicated airspeed.
    pub k: f64,
    /// Head wind on the first run, in the unit of the speeds.
    pub head_wind: f64,
}

/// Probe factor and wind of two opposite runs without cross wind.
///
/// *Input* ground and indicated air speed of both runs, one unit. *Output* `None` unless both airspeeds are positive. *Method* pair algebra of
/// on-board anemometer calibration in coast-down testing (SAE J2263, ISO 10521-1; from memory): k = ΣVg/ΣVa, w = (Vg₂Va₁ − Vg₁Va₂)/ΣVa.
/// *Accuracy* a cross wind c makes k low by c²/(2V²): 1 % at 4 m/s and 100 km/h.
///
/// ```
/// let pair = steadytap::reduction::probe::pair([100.0, 100.0], [110.0, 90.0]).unwrap();
/// assert_eq!((pair.k, pair.head_wind), (1.0, 10.0));
/// ```
pub fn pair(ground: [f64; 2], air: [f64; 2]) -> Option<Pair> {
    let sum = air[0] + air[1];
    (air[0] > 0.0 && air[1] > 0.0)
        .then(|| Pair { k: (ground[0] + ground[1]) / sum, head_wind: (ground[1] * air[0] - ground[0] * air[1]) / sum })
}
