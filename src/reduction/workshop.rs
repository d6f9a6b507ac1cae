//! What the workshop measures before anything rolls: a sensor's calibration, a hose's leak, a hose's response to a step.
//!
//! Averages or traces of one channel → a curve with its prediction interval, a decay with its rate, a lag. Plain numbers in and out.

use super::inference::{ALPHA, t_quantile, t_two_sided_p};
use super::model::{self, Fit};
use crate::config::Convert;
use nalgebra::{DMatrix, DVector};

/// Points of a table that stands for a curve in a rig file.
const TABLE_POINTS: usize = 17;
/// Points from which a curve may be told from a line: two degrees of freedom are left.
const POINTS_TO_BEND: usize = 5;
/// Share by which a leak may falsify a steady pressure (common practice, no source).
pub const LEAK_ALLOWED: f64 = 0.005;

/// Density of water, kg/m³, at `celsius`, 0–40 °C. *Method* Tanaka, Girard, Davis, Peuto, Bignell, Metrologia 38, 2001, 301. *Accuracy* 4e-6 of
/// IAPWS-95.
pub fn water_density(celsius: f64) -> f64 {
    const A: [f64; 5] = [-3.983035, 301.797, 522_528.9, 69.34881, 999.974950];
    A[4] * (1.0 - (celsius + A[0]).powi(2) * (celsius + A[1]) / (A[2] * (celsius + A[3])))
}

/// Pressure of a water column, Pa.
///
/// *Input* height mm, temperature of the water °C, density of the air kg/m³, gravity m/s². *Method* (ρ_water − ρ_air) g h. *Accuracy* of standard
/// gravity: 0.3 % at any road; a reading of ± 0.5 mm is 2.8 Pa (rectangular), more than most sensors' own error.
pub fn water_column(height_mm: f64, celsius: f64, air_density: f64, gravity: f64) -> f64 {
    (water_density(celsius) - air_density) * gravity * height_mm / 1000.0
}

/// A point of a calibration: the raw figure's average at a reference value.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Point {
    /// Mean of the raw figure.
    pub raw: f64,
    /// What the reference showed, in the channel's unit.
    pub reference: f64,
}

/// A fitted calibration: value = c₀ + c₁ raw (+ c₂ raw²).
#[derive(Clone, Debug)]
pub struct Calibration {
    /// Coefficients from the constant up: two for a line, three for a curve.
    pub coefficients: Vec<f64>,
    /// Residual standard deviation, in the channel's unit; none without degrees of freedom.
    pub residual_sd: Option<f64>,
    /// Largest residual, in the channel's unit.
    pub largest_residual: f64,
    /// p of "a straight line is enough"; none where it cannot be tested.
    pub straight_p: Option<f64>,
    /// Lowest and highest raw figure.
    pub range: [f64; 2],
    centre: f64,
    fit: Fit,
}

/// Fits a calibration; a curve instead of a line only where it is significant at 5 % and leaves two degrees of freedom.
///
/// *Input* two points or more with different raw figures. *Output* `None` where they tell no line. *Method* least squares of the reference on the raw
/// figure, t test of the square (Draper & Smith); the raw figure is centred.
pub fn calibrate(points: &[Point]) -> Option<Calibration> {
    let straight = fitted(points, 1)?;
    if points.len() < POINTS_TO_BEND {
        return Some(straight);
    }
    let Some(curve) = fitted(points, 2) else { return Some(straight) };
    let square = DVector::from_vec(vec![0.0, 0.0, 1.0]);
    let p = curve.fit.variance_of(&square).and_then(|v| {
        let size = curve.fit.value(&square);
        if v > 0.0 {
            t_two_sided_p(size / v.sqrt(), curve.fit.dof as f64)
        } else {
            Some(if size == 0.0 { 1.0 } else { 0.0 })
        }
    });
    let bends = p.is_some_and(|p| p <= ALPHA);
    Some(Calibration { straight_p: p, ..if bends { curve } else { straight } })
}

fn fitted(points: &[Point], degree: usize) -> Option<Calibration> {
    let centre = points.iter().map(|p| p.raw).sum::<f64>() / points.len() as f64;
    let design = DMatrix::from_fn(points.len(), degree + 1, |i, j| (points[i].raw - centre).powi(j as i32));
    let fit = model::fit(&design, &DVector::from_iterator(points.len(), points.iter().map(|p| p.reference)))?;
    let b = &fit.estimates;
    let curved = if degree == 2 { b[2] } else { 0.0 };
    let mut coefficients = vec![b[0] - b[1] * centre + curved * centre * centre, b[1] - 2.0 * curved * centre];
    if degree == 2 {
        coefficients.push(curved);
    }
    let ends = points.iter().fold([f64::INFINITY, f64::NEG_INFINITY], |e, p| [e[0].min(p.raw), e[1].max(p.raw)]);
    Some(Calibration {
        coefficients,
        residual_sd: fit.variance.map(f64::sqrt),
        largest_residual: fit.residuals.amax(),
        straight_p: None,
        range: ends,
        centre,
        fit,
    })
}

impl Calibration {
    /// Value at a raw figure, in the channel's unit.
    pub fn at(&self, raw: f64) -> f64 {
        self.coefficients.iter().rev().fold(0.0, |sum, c| sum * raw + c)
    }

    /// Half-width of the 95 % prediction interval of one reading at a raw figure; none without degrees of freedom.
    ///
    /// *Method* t √(s² + c'Var(b)c) (Draper & Smith, Applied Regression Analysis).
    pub fn prediction_u95(&self, raw: f64) -> Option<f64> {
        let x = raw - self.centre;
        let c = DVector::from_fn(self.coefficients.len(), |j, _| x.powi(j as i32));
        let variance = self.fit.variance? + self.fit.variance_of(&c)?;
        Some(t_quantile(1.0 - ALPHA / 2.0, self.fit.dof as f64)? * variance.sqrt())
    }

    /// What a rig file says of it: gain and offset of a line, a table for a curve.
    pub fn convert(&self) -> Convert {
        if let [offset, gain] = self.coefficients[..] {
            return Convert::Linear { gain, offset };
        }
        let step = (self.range[1] - self.range[0]) / (TABLE_POINTS - 1) as f64;
        let raw = (0..TABLE_POINTS).map(|i| self.range[0] + step * i as f64);
        Convert::Points(raw.map(|raw| [raw, self.at(raw)]).collect())
    }
}

/// A pressure that falls towards zero in a closed hose.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Decay {
    /// Share that is lost in a second.
    pub rate_per_s: f64,
    /// Half-width of its 95 % interval.
    pub rate_u95: f64,
    /// Pressure at its beginning, Pa.
    pub from_pa: f64,
}

/// Fits p₀ exp(−λ t) to a held pressure.
///
/// *Input* (s, Pa) of one sign. *Output* `None` below four points, or where the pressure is nothing. *Method* Gauss–Newton from the line through ln |p|;
/// s²(JᵀJ)⁻¹ for the error of λ.
pub fn decay(trace: &[(f64, f64)]) -> Option<Decay> {
    let sign = trace.first()?.1.signum();
    if trace.len() < 4 || trace.iter().any(|(t, p)| !t.is_finite() || p * sign <= 0.0) {
        return None;
    }
    let t0 = trace[0].0;
    let n = trace.len();
    let logs = DVector::from_iterator(n, trace.iter().map(|(_, p)| (p * sign).ln()));
    let line = model::fit(&DMatrix::from_fn(n, 2, |i, j| if j == 0 { 1.0 } else { trace[i].0 - t0 }), &logs)?;
    let (mut p0, mut rate) = (line.estimates[0].exp(), -line.estimates[1]);
    let mut last = None;
    for _ in 0..20 {
        let e = |i: usize| (-rate * (trace[i].0 - t0)).exp();
        let jacobian = DMatrix::from_fn(n, 2, |i, j| if j == 0 { e(i) } else { -p0 * (trace[i].0 - t0) * e(i) });
        let residuals = DVector::from_fn(n, |i, _| trace[i].1 * sign - p0 * e(i));
        let step = model::fit(&jacobian, &residuals)?;
        (p0, rate) = (p0 + step.estimates[0], rate + step.estimates[1]);
        last = Some(step);
    }
    let variance = last?.variance_of(&DVector::from_vec(vec![0.0, 1.0]))?;
    let rate_u95 = t_quantile(1.0 - ALPHA / 2.0, n as f64 - 2.0)? * variance.sqrt();
    [p0, rate, rate_u95].iter().all(|x| x.is_finite()).then_some(Decay {
        rate_per_s: rate,
        rate_u95,
        from_pa: sign * p0,
    })
}

impl Decay {
    /// Share by which the leak falsifies a steady pressure, at most (upper end of the 95 % interval).
    ///
    /// *Input* lag of the hose, s. *Method* a closed hose empties with R_leak C, a hose in use fills with R_tube C = the lag, so R_tube/R_leak = lag · λ, and
    /// the sensor shows the divider of the two ([`crate::pneumatics::with_leak`]).
    pub fn falsifies(&self, lag_s: f64) -> f64 {
        let share = lag_s * (self.rate_per_s + self.rate_u95).max(0.0);
        1.0 - crate::pneumatics::with_leak(1.0, share, 1.0)
    }
}

/// A step as a hose passed it on.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct StepResponse {
    /// From, and to, in the channel's unit.
    pub from_to: [f64; 2],
    /// Time from the first tenth to 63.2 % of the way, s, less what that tenth takes in a first-order lag: its time constant.
    pub lag_s: f64,
    /// Time between two samples there, s: nothing faster can be told.
    pub resolution_s: f64,
}

/// The largest step in a trace, as a first-order lag.
///
/// *Input* (s, value) in time order. *Output* `None` where no step stands out ten times above the scatter before it. *Method* levels by the first fifth
/// and the last fifth of the trace, crossings of 10 % and 63.2 % by linear interpolation; of a first-order step
/// t₆₃ − t₁₀ = τ (1 − ln(10/9)).
pub fn step_response(trace: &[(f64, f64)]) -> Option<StepResponse> {
    let fifth = trace.len() / 5;
    if fifth < 3 {
        return None;
    }
    let mean = |part: &[(f64, f64)]| part.iter().map(|p| p.1).sum::<f64>() / part.len() as f64;
    let (head, tail) = (&trace[..fifth], &trace[trace.len() - fifth..]);
    let (from, to) = (mean(head), mean(tail));
    let sd = (head.iter().map(|p| (p.1 - from).powi(2)).sum::<f64>() / (fifth - 1) as f64).sqrt();
    if (to - from).abs() <= 10.0 * sd || to == from {
        return None;
    }
    let share = |p: &(f64, f64)| (p.1 - from) / (to - from);
    let crossing = |level: f64| {
        let i = (1..trace.len()).find(|i| share(&trace[*i]) >= level && share(&trace[*i - 1]) < level)?;
        let (a, b) = (share(&trace[i - 1]), share(&trace[i]));
        Some((trace[i - 1].0 + (level - a) / (b - a) * (trace[i].0 - trace[i - 1].0), trace[i].0 - trace[i - 1].0))
    };
    let (tenth, resolution_s) = crossing(0.1)?;
    let (most, _) = crossing(1.0 - (-1.0f64).exp())?;
    let lag_s = (most - tenth) / (1.0 - (10.0f64 / 9.0).ln());
    (lag_s.is_finite() && lag_s >= 0.0).then_some(StepResponse { from_to: [from, to], lag_s, resolution_s })
}
