//! Ordinary least squares: estimates, contrasts, degrees of freedom.
//!
//! The observation is the pass, unweighted: with 3 to 12 passes a configuration it is the only estimator whose intervals
//! cover as they say whatever the scatter between passes.

use nalgebra::{DMatrix, DVector};

/// Singular values below this share of the largest one make a column superfluous.
const RANK_TOLERANCE: f64 = 1e-9;
/// Residuals below this share of the observations are rounding, not scatter.
const ROUNDING: f64 = 1e-12;

/// A fitted linear model.
#[derive(Clone, Debug)]
pub struct Fit {
    /// Estimates, one a column.
    pub estimates: DVector<f64>,
    /// (X'X)⁻¹ X': the weight of each observation in each estimate.
    pub weights: DMatrix<f64>,
    /// (X'X)⁻¹.
    pub unscaled: DMatrix<f64>,
    /// Residual variance; none without degrees of freedom, 0 where only rounding is left.
    pub variance: Option<f64>,
    /// Observations less columns.
    pub dof: usize,
    /// Observation less fit.
    pub residuals: DVector<f64>,
}

/// The rank of a design.
pub fn rank(design: &DMatrix<f64>) -> usize {
    let values = design.clone().svd(false, false).singular_values;
    let largest = values.iter().copied().fold(0.0, f64::max);
    values.iter().filter(|v| **v > RANK_TOLERANCE * largest).count()
}

/// Fits y = X b + e by least squares.
///
/// *Input* X (observations × columns) of full column rank, y. *Output* `None` when X is rank deficient or has no rows. *Method* QR
/// (Draper & Smith, Applied Regression Analysis). *Accuracy* NIST StRD linear sets.
pub fn fit(design: &DMatrix<f64>, y: &DVector<f64>) -> Option<Fit> {
    let (n, k) = design.shape();
    if n < k || k == 0 || rank(design) < k {
        return None;
    }
    let qr = design.clone().qr();
    let r_inverse = qr.r().try_inverse()?;
    let weights = &r_inverse * qr.q().transpose();
    let estimates = &weights * y;
    let residuals = y - design * &estimates;
    let dof = n - k;
    let scatter = if residuals.norm() > ROUNDING * y.norm() { residuals.norm_squared() } else { 0.0 };
    let variance = (dof > 0).then(|| scatter / dof as f64);
    let unscaled = &r_inverse * r_inverse.transpose();
    Some(Fit { estimates, weights, unscaled, variance, dof, residuals })
}

impl Fit {
    /// Value of the contrast c'b.
    pub fn value(&self, contrast: &DVector<f64>) -> f64 {
        contrast.dot(&self.estimates)
    }

    /// Variance of the contrast; none without degrees of freedom.
    pub fn variance_of(&self, contrast: &DVector<f64>) -> Option<f64> {
        let scale = (contrast.transpose() * &self.unscaled * contrast)[(0, 0)];
        self.variance.map(|v| v * scale)
    }

    /// Weight of every observation in the contrast.
    pub fn weights_of(&self, contrast: &DVector<f64>) -> DVector<f64> {
        self.weights.transpose() * contrast
    }
}
