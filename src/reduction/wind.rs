//! Wind and the probe's factor from many headings; wind alone where only ground speed is known.
//!
//! A straight road cannot tell a cross wind from the probe's factor; headings that span the plane can. Without a probe, opposite passes of all
//! taps together tell the wind along the road, if it and every Cp hold over the pair.

use nalgebra::{DMatrix, DVector, Matrix3, Vector3};

/// Above this condition number of the Jacobian the headings do not span the plane: tracks along a road must spread by some 6° (one standard
/// deviation) about it for less.
const WORST_CONDITION: f64 = 10.0;
/// Steps at most, and the step below which it has converged, m/s.
const STEPS: usize = 100;
const CONVERGED: f64 = 1e-12;

/// One pass over the ground and through the air, m/s and degrees.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Leg {
    /// Ground speed, m/s.
    pub ground_m_s: f64,
    /// Course, degrees true.
    pub track_deg: f64,
    /// Indicated airspeed, m/s.
    pub air_m_s: f64,
}

/// Probe factor and wind vector.
#[derive(Clone, Debug, PartialEq)]
pub struct WindFit {
    /// True over indicated airspeed.
    pub k: f64,
    /// Velocity of the air towards north and east, m/s.
    pub towards: [f64; 2],
    /// Covariance of k, north, east; none without degrees of freedom.
    pub covariance: Option<Matrix3<f64>>,
    /// Residual sum of squares, m²/s².
    pub rss: f64,
    /// Legs less three.
    pub dof: usize,
}

impl WindFit {
    /// Bearing that the wind comes from, degrees.
    pub fn from_deg(&self) -> f64 {
        (-self.towards[1]).atan2(-self.towards[0]).to_degrees().rem_euclid(360.0)
    }
    /// Wind speed, m/s.
    pub fn speed_m_s(&self) -> f64 {
        self.towards[0].hypot(self.towards[1])
    }
}

/// Why no wind vector can be told.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum WindError {
    /// Three unknowns.
    #[error("{have} legs, three or more are needed")]
    TooFewLegs {
        /// How many there are.
        have: usize,
    },
    /// Headings that do not span the plane.
    #[error("the headings do not span the plane: drive across the road's direction too, or use out-and-back pairs")]
    IllConditioned,
    /// The steps ran away.
    #[error("the fit does not settle: wind or speeds are not steady")]
    NoConvergence,
}

/// Probe factor and wind by least squares: Σ (Va − |Vg − W|/k)² is least.
///
/// *Input* three legs or more whose tracks span the plane, a steady wind. *Output* k, W with covariance s²(JᵀJ)⁻¹. *Method* Gauss–Newton from k = 1,
/// W = 0 (multi-leg GPS calibration of flight test; from memory). *Errors* [`WindError`]. *Accuracy* 1e-7 on exact data.
pub fn fit(legs: &[Leg]) -> Result<WindFit, WindError> {
    if legs.len() < 3 {
        return Err(WindError::TooFewLegs { have: legs.len() });
    }
    let mut x = Vector3::new(1.0, 0.0, 0.0);
    for _ in 0..STEPS {
        let (jacobian, residuals) = linearise(legs, &x);
        if condition(&jacobian) > WORST_CONDITION {
            return Err(WindError::IllConditioned);
        }
        let step = jacobian.clone().svd(true, true).solve(&residuals, 1e-14).map_err(|_| WindError::IllConditioned)?;
        x += Vector3::new(step[0], step[1], step[2]);
        if !x.iter().all(|v| v.is_finite()) || x[0] <= 0.1 || x[0] > 10.0 {
            return Err(WindError::NoConvergence);
        }
        if step.norm() < CONVERGED {
            return Ok(conclude(legs, x));
        }
    }
    Err(WindError::NoConvergence)
}

fn conclude(legs: &[Leg], x: Vector3<f64>) -> WindFit {
    let (jacobian, residuals) = linearise(legs, &x);
    let (rss, dof) = (residuals.norm_squared(), legs.len() - 3);
    let inverse = (jacobian.transpose() * &jacobian).try_inverse();
    let covariance = inverse.filter(|_| dof > 0).map(|i| Matrix3::from_fn(|r, c| i[(r, c)] * rss / dof as f64));
    WindFit { k: x[0], towards: [x[1], x[2]], covariance, rss, dof }
}

/// Jacobian of the model |Vg − W|/k by k, north, east; and what is measured less the model.
fn linearise(legs: &[Leg], x: &Vector3<f64>) -> (DMatrix<f64>, DVector<f64>) {
    let mut jacobian = DMatrix::zeros(legs.len(), 3);
    let mut residuals = DVector::zeros(legs.len());
    for (i, leg) in legs.iter().enumerate() {
        let (east, north) = leg.track_deg.to_radians().sin_cos();
        let (u, v) = (leg.ground_m_s * north - x[1], leg.ground_m_s * east - x[2]);
        let h = u.hypot(v).max(1e-9);
        jacobian[(i, 0)] = -h / (x[0] * x[0]);
        jacobian[(i, 1)] = -u / (h * x[0]);
        jacobian[(i, 2)] = -v / (h * x[0]);
        residuals[i] = leg.air_m_s - h / x[0];
    }
    (jacobian, residuals)
}

/// Largest over smallest singular value, with the factor's column brought to the size of the wind's at full effect. The wind's columns keep theirs: a
/// cross wind that shows only in the jitter of the track is told by nothing.
fn condition(jacobian: &DMatrix<f64>) -> f64 {
    let mut scaled = jacobian.clone();
    let largest = scaled.column(0).amax();
    scaled.column_mut(0).scale_mut(1.0 / largest.max(1e-300));
    let values = scaled.svd(false, false).singular_values;
    values[0] / values[values.len() - 1].max(1e-300)
}

/// Wind along the road and every tap's Cp from an out-and-back pair without a probe.
#[derive(Clone, Debug, PartialEq)]
pub struct GroundSpeedPair {
    /// Head wind on the first run, m/s.
    pub head_wind_m_s: f64,
    /// Its standard error; none with a single tap.
    pub se_m_s: Option<f64>,
    /// Cp by tap.
    pub cp: Vec<f64>,
    /// Residual sum of squares, Pa².
    pub rss: f64,
}

/// One wind for all taps: Σ (p₁ − Cp ρ/2 (V₁+w)²)² + (p₂ − Cp ρ/2 (V₂−w)²)² is least.
///
/// *Input* ground speeds m/s, density kg/m³, pressures Pa of both runs by tap. *Output* `None` without a tap or where the taps do not tell a wind. *Method*
/// for a given w every Cp is linear; w by Gauss–Newton from the tap with the largest pressure. *Accuracy* 2 Pa on a −300 Pa tap is 0.07 m/s.
pub fn ground_speed_pair(v: [f64; 2], density: f64, p: &[[f64; 2]]) -> Option<GroundSpeedPair> {
    let largest = p.iter().filter(|p| p[0] * p[1] > 0.0).max_by(|a, b| (a[0] * a[1]).total_cmp(&(b[0] * b[1])))?;
    let r = (largest[0] / largest[1]).sqrt();
    let mut w = (v[1] * r - v[0]) / (1.0 + r);
    let q = |w: f64| [0.5 * density * (v[0] + w).powi(2), 0.5 * density * (v[1] - w).powi(2)];
    let cp_of = |w: f64, p: &[f64; 2]| {
        let [a, b] = q(w);
        (p[0] * a + p[1] * b) / (a * a + b * b)
    };
    let residuals = |w: f64| -> DVector<f64> {
        let [a, b] = q(w);
        let each = p.iter().flat_map(|p| {
            let cp = cp_of(w, p);
            [p[0] - cp * a, p[1] - cp * b]
        });
        DVector::from_iterator(2 * p.len(), each)
    };
    let slope = |w: f64| (residuals(w + 1e-5) - residuals(w - 1e-5)) / 2e-5;
    for _ in 0..STEPS {
        let j = slope(w);
        let step = -j.dot(&residuals(w)) / j.norm_squared();
        if !step.is_finite() {
            return None;
        }
        w += step;
        if step.abs() < 1e-12 {
            break;
        }
    }
    let rss = residuals(w).norm_squared();
    // What is left of each tap's change with w once its own Cp has taken its share.
    let [a, b] = q(w);
    let left = |p: &[f64; 2]| {
        let change = [cp_of(w, p) * density * (v[0] + w), -cp_of(w, p) * density * (v[1] - w)];
        (change[0] * b - change[1] * a).powi(2) / (a * a + b * b)
    };
    let information: f64 = p.iter().map(left).sum();
    let se_m_s = (p.len() > 1).then(|| (rss / (p.len() - 1) as f64 / information).sqrt());
    Some(GroundSpeedPair { head_wind_m_s: w, se_m_s, cp: p.iter().map(|p| cp_of(w, p)).collect(), rss })
}
