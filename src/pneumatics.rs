//! The pneumatic response of a tube with a sensor's volume at its end: lag, bandwidth, settling.
//!
//! One tube, one volume, laminar, small amplitude, rigid wall, radius far below the wavelength (Bergh & Tijdeman, NLR-TR F.238, 1965). Means need no
//! correction: the response at 0 Hz is 1. Tubes delay and smooth gusts, and unequal tubes turn gusts into false pressures.

use nalgebra::Complex;
use serde::{Deserialize, Serialize};
use std::f64::consts::PI;

/// Highest frequency that is looked at, Hz.
const HIGHEST_HZ: f64 = 400.0;
/// Steps of that search.
const STEPS: usize = 40_000;
/// ln 100: time constants until a first-order step is within 1 %.
const TO_ONE_PERCENT: f64 = 4.605170185988092;
/// Terms of the continued fraction of Bessel functions at most.
const TERMS: usize = 500;

/// A tube and the volume at its end.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Tube {
    /// Length, m.
    pub length_m: f64,
    /// Bore, mm.
    pub bore_mm: f64,
    /// Volume of sensor and fittings, cm³.
    pub volume_cm3: f64,
}

/// The gas in it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Gas {
    /// Mean pressure, Pa.
    pub pressure_pa: f64,
    /// Density, kg/m³.
    pub density: f64,
    /// Dynamic viscosity, Pa s.
    pub viscosity: f64,
    /// Speed of sound, m/s.
    pub sound_m_s: f64,
    /// Ratio of specific heats.
    pub gamma: f64,
    /// Prandtl number.
    pub prandtl: f64,
    /// Polytropic exponent of the volume: 1.4 isentropic, 1 isothermal.
    pub polytropic: f64,
}

impl Gas {
    /// Air of the standard atmosphere at sea level (ISO 2533).
    pub const STANDARD: Self = Self {
        pressure_pa: 101_325.0,
        density: 1.225,
        viscosity: 1.7894e-5,
        sound_m_s: 340.294,
        gamma: 1.4,
        prandtl: 0.71,
        polytropic: 1.4,
    };

    /// Dry air. *Input* °C, hPa. *Method* ideal gas, Sutherland's viscosity as in ISO 2533.
    pub fn air(celsius: f64, hpa: f64) -> Self {
        let kelvin = celsius + 273.15;
        let pressure_pa = hpa * 100.0;
        Self {
            pressure_pa,
            density: pressure_pa / (287.05287 * kelvin),
            viscosity: 1.458e-6 * kelvin.powf(1.5) / (kelvin + 110.4),
            sound_m_s: (1.4 * 287.05287 * kelvin).sqrt(),
            ..Self::STANDARD
        }
    }
}

/// J₂(z)/J₀(z) for complex z, by the continued fraction of J₍ₙ₊₁₎/Jₙ (Lentz's method). *Accuracy* 1e-12 up to |z| = 150,
/// which the widest bore of a rig file does not reach below 400 Hz.
fn bessel_ratio(z: Complex<f64>) -> Complex<f64> {
    ratio_of_neighbours(0, z) * ratio_of_neighbours(1, z)
}

/// J₍ₙ₊₁₎(z)/Jₙ(z).
fn ratio_of_neighbours(order: i32, z: Complex<f64>) -> Complex<f64> {
    let tiny = Complex::new(1e-300, 0.0);
    let b = |k: i32| Complex::new(2.0 * f64::from(order + k), 0.0) / z;
    // 1/(b₁ − 1/(b₂ − 1/(b₃ − …)))
    let (mut f, mut c, mut d) = (b(1), b(1), Complex::new(0.0, 0.0));
    for k in 2..TERMS as i32 {
        d = b(k) - d;
        d = 1.0 / if d.norm() == 0.0 { tiny } else { d };
        c = b(k) - 1.0 / c;
        if c.norm() == 0.0 {
            c = tiny;
        }
        let step = c * d;
        f *= step;
        if (step - 1.0).norm() < 1e-15 {
            break;
        }
    }
    1.0 / f
}

impl Tube {
    fn bore_m(&self) -> f64 {
        self.bore_mm / 1000.0
    }
    fn volume_m3(&self) -> f64 {
        self.volume_cm3 * 1e-6
    }
    /// Volume of the tube itself, m³.
    fn tube_m3(&self) -> f64 {
        PI / 4.0 * self.bore_m().powi(2) * self.length_m
    }

    /// Pressure at the sensor over pressure at the tap.
    ///
    /// *Input* frequency above 0 Hz. *Output* complex; a negative phase lags. *Method* Bergh & Tijdeman 1965, one tube and one volume, no diaphragm.
    /// *Accuracy* 1e-6 of a Zwikker–Kosten line with 30-digit Bessel functions; the report's own figures within 3.5 % of the peak.
    pub fn response(&self, hz: f64, gas: &Gas) -> Complex<f64> {
        let omega = 2.0 * PI * hz;
        let radius = self.bore_m() / 2.0;
        let shear = radius * (gas.density * omega / gas.viscosity).sqrt();
        let alpha = Complex::from_polar(shear, 0.75 * PI);
        let n = 1.0 / (1.0 + (gas.gamma - 1.0) / gas.gamma * bessel_ratio(alpha * gas.prandtl.sqrt()));
        let phi = omega / gas.sound_m_s * (1.0 / bessel_ratio(alpha)).sqrt() * (gas.gamma / n).sqrt();
        let x = phi * self.length_m;
        1.0 / (x.cosh() + self.volume_m3() / self.tube_m3() / gas.polytropic * n * x * x.sinh())
    }

    /// Time constant of the first-order form that the response has at low frequencies, s; its delay too.
    ///
    /// *Method* Hagen–Poiseuille resistance 128 μ L/(π d⁴) times the compliance of the volume and half the (isothermal) tube.
    ///
    /// ```
    /// use steadytap::pneumatics::{Gas, Tube};
    /// let tube = Tube { length_m: 2.0, bore_mm: 1.0, volume_cm3: 0.5 };
    /// assert!((tube.time_constant_s(&Gas::STANDARD) - 0.016442).abs() < 1e-6);
    /// ```
    pub fn time_constant_s(&self, gas: &Gas) -> f64 {
        let resistance = 128.0 * gas.viscosity * self.length_m / (PI * self.bore_m().powi(4));
        resistance * (self.volume_m3() / gas.polytropic + self.tube_m3() / 2.0) / gas.pressure_pa
    }

    /// Lowest frequency at which the amplitude is off by a share, Hz; none below 400 Hz.
    pub fn bandwidth_hz(&self, share: f64, gas: &Gas) -> Option<f64> {
        grid().find(|hz| (self.response(*hz, gas).norm() - 1.0).abs() > share)
    }

    /// Frequency and gain of the highest peak below 400 Hz; none where nothing is amplified by more than 1 ‰, or where the gain still rises there.
    pub fn resonance(&self, gas: &Gas) -> Option<(f64, f64)> {
        let peak = grid().map(|hz| (hz, self.response(hz, gas).norm())).max_by(|a, b| a.1.total_cmp(&b.1));
        peak.filter(|(hz, gain)| *gain > 1.001 && *hz < HIGHEST_HZ)
    }

    /// Time that a step needs to be within 1 %, s: of the first-order form, or of a resonance that rings on for longer.
    pub fn settle_s(&self, gas: &Gas) -> f64 {
        let first_order = TO_ONE_PERCENT * self.time_constant_s(gas);
        let ringing = self.resonance(gas).map_or(0.0, |(hz, gain)| {
            // Damping ratio of the second-order system with that peak.
            let damping = (0.5 * (1.0 - (1.0 - 1.0 / (gain * gain)).max(0.0).sqrt())).sqrt();
            TO_ONE_PERCENT / (damping * 2.0 * PI * hz)
        });
        first_order.max(ringing)
    }
}

/// Time that a first-order lag needs to be within 1 %, s.
pub fn settle_of_lag_s(lag_s: f64) -> f64 {
    TO_ONE_PERCENT * lag_s
}

/// What a sensor shows of a pressure when its hose leaks to the reference: the divider of tube and leak resistance.
pub fn with_leak(pa: f64, tube_resistance: f64, leak_resistance: f64) -> f64 {
    pa * leak_resistance / (leak_resistance + tube_resistance)
}

fn grid() -> impl Iterator<Item = f64> {
    (0..STEPS).map(|i| 0.01 + (HIGHEST_HZ - 0.01) * i as f64 / (STEPS - 1) as f64)
}

/// What `hose` prints of a tube in a gas.
pub fn describe(tube: &Tube, gas: &Gas) -> String {
    let hz = |x: Option<f64>| {
        x.map_or("above 400 Hz".to_string(), |x| if x < 1.0 { format!("{x:.2} Hz") } else { format!("{x:.1} Hz") })
    };
    // Below these the steady resistance says little: inertia and a resonance beyond what is searched decide.
    let or_below =
        |x: f64, least: f64, unit: &str, text: String| if x < least { format!("below {least} {unit}") } else { text };
    let delay_ms = tube.time_constant_s(gas) * 1000.0;
    let settle_s = tube.settle_s(gas);
    let resonance = match tube.resonance(gas) {
        Some((hz, gain)) => format!("{hz:.1} Hz, gain {gain:.2}"),
        None if tube.response(HIGHEST_HZ, gas).norm() > 1.001 => "above 400 Hz".to_string(),
        None => "none: the tube is narrow enough to damp it".to_string(),
    };
    format!(
        "tube {} m × {} mm, volume {} cm³ (the tube itself holds {:.2} cm³)\n\
         delay               {}\n\
         amplitude within 1 %  up to {}\n\
         amplitude within 10 % up to {}; report no spectra or peaks above\n\
         resonance           {resonance}\n\
         settle at least     {} after a step, to be within 1 %\n\
         Means need no correction. Use equal tubes on tap and static.\n",
        tube.length_m,
        tube.bore_mm,
        tube.volume_cm3,
        tube.tube_m3() * 1e6,
        or_below(delay_ms, 1.0, "ms", format!("{delay_ms:.1} ms")),
        hz(tube.bandwidth_hz(0.01, gas)),
        hz(tube.bandwidth_hz(0.1, gas)),
        or_below(settle_s, 0.1, "s", format!("{settle_s:.2} s")),
    )
}
