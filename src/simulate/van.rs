//! The truth: an invented high-roof van in invented air → what its sensors would read.
//!
//! Every number here is invented, in the size that such a van has. The probe stands in the raised static of
//! the van's own upstream field (the "static" model: q indicated = q/k², static at the probe = 1 − 1/k² of q).

use super::chance::{Chance, Lag, STEP_S, Wander};
use super::road::{Motion, sine_of_degrees};

/// True over indicated airspeed at the probe.
pub const PROBE_FACTOR: f64 = 1.03;
/// Delay of every pressure channel, hose, sensor and wire together, s.
pub const LAG_S: f64 = 0.05;
/// The wire's share of it: mean time from a sample to the end of its line, s.
const WIRE_S: f64 = 0.007;
/// Tap channels read from −500 to +500 Pa, the dynamic pressure from −100 to +1000 Pa.
pub(super) const TAP_RANGE_PA: [f64; 2] = [-500.0, 500.0];
const Q_RANGE_PA: [f64; 2] = [-100.0, 1000.0];
/// Steps of the sensors' converters in one Pa.
const COUNTS_PER_PA: f64 = 60.0;
const SENSOR_NOISE_PA: f64 = 0.4;

/// One tap: its name, Cp with the doors bare, what the flaps add, and how unquiet the flow is there.
struct Place {
    tap: &'static str,
    bare: f64,
    flaps_120: f64,
    flaps_240: f64,
    /// Slow fluctuation of Cp (standard deviation, integral time 3 s): what one dwell cannot average out.
    slow: f64,
    /// Fast one (0.1 s).
    fast: f64,
    /// Pa that a lorry's bow wave adds.
    lorry_pa: f64,
}

/// In the order of the gauge's columns p1 to p5.
const PLACES: [Place; 5] = [
    place("base-high", -0.16, [0.025, 0.026], [0.005, 0.02], 6.0),
    place("base-low", -0.19, [0.020, 0.006], [0.009, 0.02], 6.0),
    place("side-rear", -0.28, [0.0, 0.0], [0.004, 0.02], -55.0),
    place("roof-rear", -0.45, [0.0, 0.0], [0.026, 0.04], -12.0),
    place("bonnet-edge", 0.35, [0.0, 0.0], [0.003, 0.01], 25.0),
];

const fn place(tap: &'static str, bare: f64, gain: [f64; 2], unrest: [f64; 2], lorry_pa: f64) -> Place {
    Place { tap, bare, flaps_120: gain[0], flaps_240: gain[1], slow: unrest[0], fast: unrest[1], lorry_pa }
}

impl Place {
    fn cp(&self, configuration: &str) -> Option<f64> {
        Some(match configuration {
            "A" => self.bare,
            "B" => self.bare + self.flaps_120,
            "C" => self.bare + self.flaps_240,
            _ => return None,
        })
    }
}

/// Pressure coefficient of a tap against free-stream static and dynamic pressure, as the simulation poses it; `None`
/// for a tap or configuration that the van has not.
///
/// ```
/// assert_eq!(steadytap::simulate::true_cp("roof-rear", "A"), Some(-0.45));
/// assert_eq!(steadytap::simulate::true_cp("roof-rear", "Z"), None);
/// ```
pub fn true_cp(tap: &str, configuration: &str) -> Option<f64> {
    PLACES.iter().find(|place| place.tap == tap)?.cp(configuration)
}

/// What the gauge measures at one moment, in the figures that it prints: Pa, °C, hPa, %.
#[derive(Clone, Copy, Debug)]
pub(super) struct Reading {
    pub(super) taps_pa: [f64; 5],
    pub(super) q_pa: f64,
    pub(super) temperature_c: f64,
    pub(super) barometer_hpa: f64,
    pub(super) humidity_pct: f64,
}

/// One pressure sensor at the end of its hose.
#[derive(Clone, Debug)]
struct Sensor {
    hose: Lag,
    noise: Chance,
    /// Zero offset: cold, what warming adds in the end, and a slow walk about both, Pa.
    cold_pa: f64,
    warming_pa: f64,
    walk: Wander,
    range_pa: [f64; 2],
}

impl Sensor {
    fn new(seed: u64, number: u64, range_pa: [f64; 2]) -> Self {
        let mut chance = Chance::new(seed, 100 + number);
        let cold_pa = 2.5 * chance.normal();
        let size_pa = 1.0 + 0.02 * chance.below(100) as f64;
        let warming_pa = if chance.below(2) == 0 { size_pa } else { -size_pa };
        let walk = Wander::new(Chance::new(seed, 200 + number), 0.3, 400.0);
        Self { hose: Lag::new(LAG_S - WIRE_S), noise: chance, cold_pa, warming_pa, walk, range_pa }
    }

    fn read(&mut self, true_pa: f64, warmth: f64) -> f64 {
        let offset_pa = self.cold_pa + self.warming_pa * warmth + self.walk.step();
        let seen_pa = self.hose.step(true_pa) + offset_pa + SENSOR_NOISE_PA * self.noise.normal();
        ((seen_pa * COUNTS_PER_PA).round() / COUNTS_PER_PA).clamp(self.range_pa[0], self.range_pa[1])
    }
}

/// Air that moves: mean wind, gusts, and a lorry's wave when one passes.
#[derive(Clone, Debug)]
struct Wind {
    east: [Wander; 2],
    north: [Wander; 2],
}

/// Mean wind towards east and north, m/s: against the out direction and across it.
const WIND_M_S: [f64; 2] = [-1.7, 1.6];

impl Wind {
    fn new(seed: u64) -> Self {
        let pair = |purpose, sd: f64| {
            [
                Wander::new(Chance::new(seed, purpose), sd, 4.0),
                Wander::new(Chance::new(seed, purpose + 1), 0.5 * sd, 240.0),
            ]
        };
        Self { east: pair(10, 0.7), north: pair(12, 0.5) }
    }

    /// Velocity of the air, east and north, m/s.
    fn step(&mut self) -> [f64; 2] {
        let sum = |pair: &mut [Wander; 2]| pair.iter_mut().map(Wander::step).sum::<f64>();
        [WIND_M_S[0] + sum(&mut self.east), WIND_M_S[1] + sum(&mut self.north)]
    }
}

/// The van's pressures and its sensors.
#[derive(Clone, Debug)]
pub(super) struct Body {
    wind: Wind,
    unrest: [[Wander; 2]; 5],
    taps: [Sensor; 5],
    q: Sensor,
    air: Chance,
    elapsed_s: f64,
    /// 0 cold to 1 warm, of the gauge's box.
    warmth: f64,
    /// Seconds since a lorry's wave began; none when none is near.
    lorry_s: Option<f64>,
}

/// How long a lorry's wave lasts, s, and the head wind at its height, m/s.
const LORRY_S: f64 = 3.0;
const LORRY_M_S: f64 = 5.0;
/// Time in which the gauge's box warms up, s.
const WARMING_S: f64 = 900.0;

impl Body {
    pub(super) fn new(seed: u64) -> Self {
        let unrest = |i: usize| {
            let source = |k| Chance::new(seed, 20 + 2 * i as u64 + k);
            [Wander::new(source(0), PLACES[i].slow, 3.0), Wander::new(source(1), PLACES[i].fast, 0.1)]
        };
        Self {
            wind: Wind::new(seed),
            unrest: std::array::from_fn(unrest),
            taps: std::array::from_fn(|i| Sensor::new(seed, i as u64, TAP_RANGE_PA)),
            q: Sensor::new(seed, 5, Q_RANGE_PA),
            air: Chance::new(seed, 30),
            elapsed_s: 0.0,
            warmth: 0.0,
            lorry_s: None,
        }
    }

    /// A lorry comes the other way, now.
    pub(super) fn meet_lorry(&mut self) {
        self.lorry_s = Some(0.0);
    }

    /// One step of time. While the van stands, its zero valve joins both sides of every sensor.
    pub(super) fn step(&mut self, motion: &Motion) -> Reading {
        self.elapsed_s += STEP_S;
        self.warmth += (1.0 - self.warmth) * (STEP_S / WARMING_S);
        let air = self.air_of_the_day(motion);
        let wave = self.wave();
        let q_pa = self.free_stream_q_pa(motion, density_kg_m3(&air), wave);
        let open = motion.speed_m_s > 0.0;
        let indicated_pa = if open { q_pa / (PROBE_FACTOR * PROBE_FACTOR) } else { 0.0 };
        let static_rise_pa = q_pa - indicated_pa;
        let mut reading = air;
        for (i, place) in PLACES.iter().enumerate() {
            let unrest: f64 = self.unrest[i].iter_mut().map(Wander::step).sum();
            let cp = place.cp(motion.fitted).unwrap_or(place.bare) + unrest;
            let pressure_pa = if open { cp * q_pa - static_rise_pa + wave * place.lorry_pa } else { 0.0 };
            reading.taps_pa[i] = self.taps[i].read(pressure_pa, self.warmth);
        }
        reading.q_pa = self.q.read(indicated_pa, self.warmth);
        reading
    }

    /// 0 without a lorry; over its three seconds up to 1 and down again, smooth at both ends.
    fn wave(&mut self) -> f64 {
        let Some(since_s) = self.lorry_s else { return 0.0 };
        self.lorry_s = Some(since_s + STEP_S).filter(|s| *s < LORRY_S);
        let x = since_s / LORRY_S;
        let hump = 4.0 * x * (1.0 - x);
        hump * hump
    }

    fn free_stream_q_pa(&mut self, motion: &Motion, density_kg_m3: f64, wave: f64) -> f64 {
        let [east, north] = self.wind.step();
        let heading = [sine_of_degrees(motion.track_deg), sine_of_degrees((motion.track_deg + 90.0) % 360.0)];
        let ahead_m_s = motion.speed_m_s + wave * LORRY_M_S;
        let against = [ahead_m_s * heading[0] - east, ahead_m_s * heading[1] - north];
        0.5 * density_kg_m3 * (against[0] * against[0] + against[1] * against[1])
    }

    /// Temperature rises by a degree an hour, humidity falls, the barometer falls slowly and with height.
    fn air_of_the_day(&mut self, motion: &Motion) -> Reading {
        let hours = self.elapsed_s / 3600.0;
        let mut near = |value: f64, sd: f64| value + sd * self.air.normal();
        Reading {
            taps_pa: [0.0; 5],
            q_pa: 0.0,
            temperature_c: near(17.6 + hours, 0.03),
            barometer_hpa: near(1008.4 - 0.3 * hours - 0.12 * (altitude_m(motion.east_m) - START_ALTITUDE_M), 0.02),
            humidity_pct: near(61.0 - 3.0 * hours, 0.1),
        }
    }
}

const START_ALTITUDE_M: f64 = 112.0;

/// The road rises by two metres in a kilometre.
pub(super) fn altitude_m(east_m: f64) -> f64 {
    START_ALTITUDE_M + 0.002 * east_m
}

/// Density of moist air as a mixture of ideal gases (0.378 = 1 − 0.622, the ratio of molar masses), saturation
/// pressure by a parabola through steam-table values at 10, 20 and 30 °C (1228, 2339 and 4247 Pa; from memory):
/// no exponential, for the sake of equal bytes. Within 0.1 % of CIPM-2007 from 10 to 30 °C.
fn density_kg_m3(air: &Reading) -> f64 {
    let warm = (air.temperature_c - 20.0) / 10.0;
    let saturation_pa = 2339.0 + 1509.5 * warm + 398.5 * warm * warm;
    let vapour_pa = air.humidity_pct / 100.0 * saturation_pa;
    (100.0 * air.barometer_hpa - 0.378 * vapour_pa) / (287.05 * (air.temperature_c + 273.15))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A first-order lag after a fall from q to nothing leaves an area of q times its time.
    /// The zero's scatter, 0.02 Pa over a second, and the noise, 0.06 Pa s, leave 0.0002 s at 400 Pa.
    #[test]
    fn the_hoses_lag_by_what_the_rig_takes_off() {
        let mut body = Body::new(3);
        let moving = |speed_m_s| Motion { speed_m_s, track_deg: 90.0, east_m: 0.0, fitted: "A", incident: None };
        let rest: Vec<f64> = (0..500).map(|_| body.step(&moving(0.0)).q_pa).collect();
        let zero = rest[100..].iter().sum::<f64>() / 400.0;
        let at_the_end = (0..200).map(|_| body.step(&moving(27.8))).last();
        assert!(at_the_end.is_some_and(|r| r.q_pa > 300.0));
        let at_speed = body.q.hose.value();
        let area: f64 = (0..50).map(|_| body.step(&moving(0.0)).q_pa - zero).sum::<f64>() * STEP_S;
        assert!((area / at_speed + WIRE_S - LAG_S).abs() < 0.001, "{area} Pa s after {at_speed} Pa");
    }

    /// CIPM-2007 (Picard et al. 2008, Metrologia 45:149): 20 °C, 1013.25 hPa, 50 % gives 1.19931 kg/m³, and 27 °C,
    /// 1000 hPa, 80 % gives 1.14852 kg/m³.
    #[test]
    fn air_has_the_density_of_air() {
        for (temperature_c, barometer_hpa, humidity_pct, expected) in
            [(20.0, 1013.25, 50.0, 1.19931), (27.0, 1000.0, 80.0, 1.14852)]
        {
            let air = Reading { taps_pa: [0.0; 5], q_pa: 0.0, temperature_c, barometer_hpa, humidity_pct };
            assert!((density_kg_m3(&air) / expected - 1.0).abs() < 1e-3, "{}", density_kg_m3(&air));
        }
    }
}
