//! Heat-exchanger cores: the pressure drop between two taps, inverted by the bench curve, is a face velocity.
//!
//! dp = a v + b v² without intercept (Darcy–Forchheimer form), fitted to the bench points with equal relative errors. Each pass is inverted
//! by itself and divided by the airspeed: a ratio of pressure drops is right only for a pure square law.

use super::air;
use super::compare::{Estimate, ZeroEffect};
use super::force::Ground;
use super::model;
use super::passes::{LEAST_Q_PA, Pass};
use crate::config::Core;
use nalgebra::{DMatrix, DVector};

/// Air that a bench curve is taken to have been measured in: 20 °C, 1.204 kg/m³ (common practice, no source).
const BENCH_KELVIN: f64 = 293.15;
const BENCH_DENSITY: f64 = 1.204;

/// A fitted bench curve dp = a v + b v².
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Curve {
    /// Pa s/m.
    pub a: f64,
    /// Pa s²/m².
    pub b: f64,
}

/// Fits a bench curve.
///
/// *Input* [face velocity m/s, pressure drop Pa], two or more; `relative`: equal relative errors (weights 1/dp²), else equal absolute ones.
/// *Output* `None` when the points do not tell two coefficients. *Method* least squares without intercept.
pub fn fit(points: &[[f64; 2]], relative: bool) -> Option<Curve> {
    let scale = |p: &[f64; 2]| if relative { 1.0 / p[1] } else { 1.0 };
    let design = DMatrix::from_fn(points.len(), 2, |i, j| points[i][0].powi(j as i32 + 1) * scale(&points[i]));
    let y = DVector::from_iterator(points.len(), points.iter().map(|p| p[1] * scale(p)));
    let fit = model::fit(&design, &y)?;
    Some(Curve { a: fit.estimates[0], b: fit.estimates[1] })
}

impl Curve {
    /// Face velocity of a pressure drop, m/s; `None` for a negative drop or a curve that falls. *Method* the root without cancellation.
    ///
    /// ```
    /// let curve = steadytap::reduction::cores::Curve { a: 12.0, b: 2.0 };
    /// assert_eq!(curve.velocity(32.0), Some(2.0));
    /// ```
    pub fn velocity(&self, dp_pa: f64) -> Option<f64> {
        let root = self.a * self.a + 4.0 * self.b * dp_pa;
        let below = self.a + root.max(0.0).sqrt();
        (dp_pa >= 0.0 && root >= 0.0 && below > 0.0).then(|| 2.0 * dp_pa / below)
    }

    /// The curve in other air: a goes with viscosity, b with density.
    #[must_use]
    pub fn in_air(&self, viscosity_ratio: f64, density_ratio: f64) -> Self {
        Self { a: self.a * viscosity_ratio, b: self.b * density_ratio }
    }
}

/// Flow of a core.
#[derive(Clone, Debug)]
pub struct CoreRow {
    /// Core.
    pub core: String,
    /// Configuration.
    pub configuration: String,
    /// Target, km/h.
    pub target_kmh: f64,
    /// A difference from the baseline.
    pub difference: bool,
    /// Face velocity over airspeed.
    pub ratio: Estimate,
    /// Face velocity at the stated speed, m/s.
    pub velocity_m_s: Estimate,
}

/// Flow of every core, and what must be said about it.
pub fn cores(ground: Ground<'_>, at_kmh: f64) -> (Vec<CoreRow>, Vec<String>) {
    let (mut rows, mut words) = (Vec::new(), Vec::new());
    for core in &ground.car.cores {
        let Some(curve) = fit(&core.bench, true) else {
            words.push(format!("core {}: its bench curve tells no two coefficients", core.name));
            continue;
        };
        let (low, high) = (core.bench[0][0], core.bench[core.bench.len() - 1][0]);
        let outside = ground
            .passes
            .iter()
            .filter_map(|p| velocity(p, core, curve))
            .filter(|(v, _)| *v < low || *v > high)
            .count();
        if outside > 0 {
            words.push(format!(
                "core {}: {outside} passes lie outside the bench's {low} to {high} m/s, the curve is extrapolated",
                core.name
            ));
        }
        for target in ground.targets() {
            let Some(model) = ground.plain(target, -1.0, |p| ratio(p, core, curve)) else { continue };
            rows.extend(ground.outcomes(&model).into_iter().map(|(difference, o)| CoreRow {
                core: core.name.clone(),
                configuration: o.configuration.to_string(),
                target_kmh: target,
                difference,
                ratio: o.estimate,
                velocity_m_s: super::force::scaled(o.estimate, at_kmh / crate::units::KMH_PER_M_S),
            }));
        }
        if !rows.iter().any(|r| r.core == core.name) {
            words.push(format!(
                "core {}: no pass has both {} and {} with a positive drop",
                core.name, core.front, core.rear
            ));
        }
    }
    (rows, words)
}

/// Face velocity of a pass, m/s, and the curve in the pass's air that gave it.
fn velocity(p: &Pass, core: &Core, curve: Curve) -> Option<(f64, Curve)> {
    let dp = p.taps.get(&core.front)?.pa - p.taps.get(&core.rear)?.pa;
    let curve = in_air_of(p, curve);
    Some((curve.velocity(dp)?, curve))
}

fn in_air_of(p: &Pass, curve: Curve) -> Curve {
    let viscosity = air::viscosity(p.temperature_c + air::CELSIUS_ZERO_K) / air::viscosity(BENCH_KELVIN);
    curve.in_air(viscosity, p.density / BENCH_DENSITY)
}

/// Face velocity over airspeed, and how the zeros of front, rear and q enter it.
fn ratio<'a>(p: &'a Pass, core: &Core, curve: Curve) -> Option<(f64, Vec<ZeroEffect<'a>>)> {
    let q = p.q.as_ref().filter(|q| q.pa >= LEAST_Q_PA)?;
    let airspeed_m_s = super::probe::airspeed(p.density, p.pressure_pa, q.pa) / crate::units::KMH_PER_M_S;
    let (velocity, curve) = velocity(p, core, curve)?;
    // dv/dp of dp = a v + b v².
    let per_pa = 1.0 / (curve.a + 2.0 * curve.b * velocity) / airspeed_m_s;
    let ratio = velocity / airspeed_m_s;
    let of_tap = |tap: &String, effect: f64| {
        let mean = p.taps.get(tap)?;
        mean.zero.as_ref().map(|zero| (mean.channel.as_str(), zero, effect))
    };
    let mut effects: Vec<ZeroEffect<'a>> =
        [of_tap(&core.front, -per_pa), of_tap(&core.rear, per_pa)].into_iter().flatten().collect();
    effects.extend(q.zero().map(|(channel, zero)| (channel, zero, ratio / (2.0 * q.pa))));
    Some((ratio, effects))
}
