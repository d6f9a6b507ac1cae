//! A part with a setting: the curve over its parameter, where it is best, where it crosses a level.
//!
//! A quadratic through the passes where its lack of fit is not significant, else the shape-preserving cubic through the levels, which
//! interpolates noise and is good for drawing only. An interval that does not close within the tested range stays open, and says so.

use super::compare::Model;
use super::inference::{ALPHA, t_quantile};
use super::model::{self, Fit};
use nalgebra::{DMatrix, DVector};
use statrs::distribution::{ContinuousCDF, FisherSnedecor};

/// Points on which an inversion interval is searched before it is refined.
const GRID: usize = 400;

/// A set of settings that the data do not exclude.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Interval {
    /// Between the two.
    Within(f64, f64),
    /// Everything below the first and above the second: the slope is not significant, the sweep does not determine it.
    Outside(f64, f64),
    /// Every setting: no information.
    All,
    /// None in the range.
    Nowhere,
}

/// Confidence set of a ratio of two normal estimates.
///
/// *Input* numerator and denominator a, b; variances and covariance; t quantile. *Output* the set, and Fieller's g = t² var(b)/b² (at 1 or above no
/// finite interval exists). *Method* Fieller, J. R. Statist. Soc. B 16, 1954, 175.
pub fn fieller(a: f64, b: f64, (vaa, vbb, vab): (f64, f64, f64), t: f64) -> (Interval, f64) {
    let t2 = t * t;
    let g = t2 * vbb / (b * b);
    // All x with (a − x b)² ≤ t² (vaa − 2 x vab + x² vbb): a quadratic in x.
    let (p, q, r) = (b * b - t2 * vbb, a * b - t2 * vab, a * a - t2 * vaa);
    let root = q * q - p * r;
    let set = match (p > 0.0, root >= 0.0) {
        (true, true) => Interval::Within((q - root.sqrt()) / p, (q + root.sqrt()) / p),
        (false, true) => Interval::Outside((q + root.sqrt()) / p, (q - root.sqrt()) / p),
        (_, false) => Interval::All,
    };
    (set, g)
}

/// A quadratic b₀ + b₁x + b₂x² with the covariance of its coefficients.
#[derive(Clone, Debug)]
pub struct Quadratic {
    /// b₀, b₁, b₂.
    pub b: [f64; 3],
    /// Covariance.
    pub covariance: DMatrix<f64>,
    /// Degrees of freedom.
    pub dof: usize,
}

impl Quadratic {
    /// From a fit whose first three columns are 1, x, x².
    pub fn of(fit: &Fit) -> Option<Self> {
        let covariance = fit.unscaled.view((0, 0), (3, 3)).clone_owned() * fit.variance?;
        Some(Self { b: [fit.estimates[0], fit.estimates[1], fit.estimates[2]], covariance, dof: fit.dof })
    }

    /// Of three linear combinations of a fit's estimates, one a row.
    fn of_combinations(fit: &Fit, rows: &DMatrix<f64>) -> Option<Self> {
        let b = rows * &fit.estimates;
        let covariance = rows * &fit.unscaled * rows.transpose() * fit.variance?;
        Some(Self { b: [b[0], b[1], b[2]], covariance, dof: fit.dof })
    }

    /// Value at a setting.
    pub fn at(&self, x: f64) -> f64 {
        self.b[0] + x * (self.b[1] + x * self.b[2])
    }

    /// Slope at a setting.
    pub fn slope(&self, x: f64) -> f64 {
        self.b[1] + 2.0 * self.b[2] * x
    }

    /// Standard error of the value at a setting.
    pub fn se(&self, x: f64) -> f64 {
        let c = DVector::from_vec(vec![1.0, x, x * x]);
        (c.transpose() * &self.covariance * &c)[(0, 0)].max(0.0).sqrt()
    }

    /// Half-width of the 95 % band at a setting, by the scatter of the passes; none where it is not finite.
    pub fn u95(&self, x: f64) -> Option<f64> {
        Some(self.t() * self.se(x)).filter(|u| u.is_finite())
    }

    fn t(&self) -> f64 {
        t_quantile(1.0 - ALPHA / 2.0, self.dof as f64).unwrap_or(f64::INFINITY)
    }

    /// The lowest setting of a range at which the curve has a value, if it has it there.
    pub fn crossing(&self, level: f64, range: [f64; 2]) -> Option<f64> {
        let [c, b, a] = [self.b[0] - level, self.b[1], self.b[2]];
        let root = b * b - 4.0 * a * c;
        if root < 0.0 {
            return None;
        }
        // The pair of roots without cancellation.
        let q = -0.5 * (b + b.signum() * root.sqrt());
        let within = |x: &f64| x.is_finite() && (range[0]..=range[1]).contains(x);
        [q / a, c / q].into_iter().filter(within).min_by(f64::total_cmp)
    }

    /// Standard error of a crossing by the delta method.
    pub fn crossing_se(&self, x: f64) -> f64 {
        self.se(x) / self.slope(x).abs()
    }

    /// All settings of a range whose 95 % band contains a level, about the crossing; the flags say whether it is open at an end of the range.
    pub fn crossing_interval(&self, level: f64, range: [f64; 2]) -> Option<([f64; 2], [bool; 2])> {
        let t = self.t();
        let inside = |x: f64| (self.at(x) - level).abs() <= t * self.se(x);
        let x = |i: usize| range[0] + (range[1] - range[0]) * i as f64 / GRID as f64;
        let first = (0..=GRID).find(|i| inside(x(*i)))?;
        let last = (first..=GRID).take_while(|i| inside(x(*i))).last()?;
        let edge = |mut out: f64, mut within: f64| {
            for _ in 0..60 {
                let middle = f64::midpoint(out, within);
                if inside(middle) { within = middle } else { out = middle }
            }
            within
        };
        let low = if first == 0 { range[0] } else { edge(x(first - 1), x(first)) };
        let high = if last == GRID { range[1] } else { edge(x(last + 1), x(last)) };
        Some(([low, high], [first == 0, last == GRID]))
    }

    /// The setting of the curve's extreme, its Fieller set and g; none for a straight line.
    pub fn vertex(&self) -> Option<(f64, Interval, f64)> {
        let [_, b1, b2] = self.b;
        if b2 == 0.0 {
            return None;
        }
        let v = |i: usize, j: usize| self.covariance[(i, j)];
        // x = −b₁/(2 b₂).
        let (set, g) = fieller(-b1, 2.0 * b2, (v(1, 1), 4.0 * v(2, 2), -2.0 * v(1, 2)), self.t());
        Some((-b1 / (2.0 * b2), set, g))
    }

    /// Standard error of the extreme by the delta method.
    pub fn vertex_se(&self) -> f64 {
        let [_, b1, b2] = self.b;
        let gradient = [-1.0 / (2.0 * b2), b1 / (2.0 * b2 * b2)];
        let v = |i: usize, j: usize| self.covariance[(i, j)];
        (gradient[0] * gradient[0] * v(1, 1)
            + 2.0 * gradient[0] * gradient[1] * v(1, 2)
            + gradient[1] * gradient[1] * v(2, 2))
        .max(0.0)
        .sqrt()
    }
}

/// Lack of fit of a curve against the free levels of its settings.
///
/// *Input* residual sums of squares and degrees of freedom of the curve and of the levels. *Output* F and its p; `None` where either has no degrees of
/// freedom to test with. *Method* F test with replicates (NIST/SEMATECH e-Handbook 4.4.4.6).
pub fn lack_of_fit((rss, dof): (f64, usize), (rss_levels, dof_levels): (f64, usize)) -> Option<(f64, f64)> {
    let between = dof.checked_sub(dof_levels).filter(|d| *d > 0)?;
    if dof_levels == 0 || rss_levels <= 0.0 {
        return None;
    }
    let f = ((rss - rss_levels).max(0.0) / between as f64) / (rss_levels / dof_levels as f64);
    let p = FisherSnedecor::new(between as f64, dof_levels as f64).ok()?.sf(f);
    Some((f, p))
}

/// Shape-preserving cubic through points.
///
/// *Method* weighted harmonic mean of neighbouring slopes, 0 where their sign changes; three-point ends with two limiters (Fritsch & Carlson, SIAM J.
/// Numer. Anal. 17, 1980, 238; Fritsch & Butland 1984).
#[derive(Clone, Debug, PartialEq)]
pub struct Pchip {
    x: Vec<f64>,
    y: Vec<f64>,
    /// Slopes at the points.
    pub slopes: Vec<f64>,
}

impl Pchip {
    /// Through points with rising x, two or more.
    pub fn new(x: &[f64], y: &[f64]) -> Option<Self> {
        if x.len() < 2 || x.len() != y.len() || x.windows(2).any(|w| w[1] <= w[0]) {
            return None;
        }
        let h: Vec<f64> = x.windows(2).map(|w| w[1] - w[0]).collect();
        let d: Vec<f64> = y.windows(2).zip(&h).map(|(w, h)| (w[1] - w[0]) / h).collect();
        let n = x.len();
        let mut slopes = vec![d[0]; n];
        for i in 1..n - 1 {
            slopes[i] = inner_slope([h[i - 1], h[i]], [d[i - 1], d[i]]);
        }
        if n > 2 {
            slopes[0] = end_slope([h[0], h[1]], [d[0], d[1]]);
            slopes[n - 1] = end_slope([h[n - 2], h[n - 3]], [d[n - 2], d[n - 3]]);
        }
        Some(Self { x: x.to_vec(), y: y.to_vec(), slopes })
    }

    /// Value within the points; `None` outside: it never extrapolates.
    pub fn at(&self, x: f64) -> Option<f64> {
        let last = self.x.len() - 1;
        if !(self.x[0]..=self.x[last]).contains(&x) {
            return None;
        }
        let i = self.x.partition_point(|p| *p <= x).clamp(1, last) - 1;
        let h = self.x[i + 1] - self.x[i];
        let s = (x - self.x[i]) / h;
        let (s2, s3) = (s * s, s * s * s);
        Some(
            self.y[i] * (2.0 * s3 - 3.0 * s2 + 1.0)
                + h * self.slopes[i] * (s3 - 2.0 * s2 + s)
                + self.y[i + 1] * (3.0 * s2 - 2.0 * s3)
                + h * self.slopes[i + 1] * (s3 - s2),
        )
    }

    /// Settings where the curve passes through a level.
    pub fn crossings(&self, level: f64) -> Vec<f64> {
        let above = |y: f64| y - level;
        let mut found = Vec::new();
        for i in 0..self.x.len() - 1 {
            let (mut a, mut b) = (self.x[i], self.x[i + 1]);
            if above(self.y[i]) * above(self.y[i + 1]) >= 0.0 {
                continue;
            }
            for _ in 0..100 {
                let middle = f64::midpoint(a, b);
                let y = self.at(middle).unwrap_or(level);
                if above(y) * above(self.at(a).unwrap_or(level)) > 0.0 { a = middle } else { b = middle }
            }
            found.push(f64::midpoint(a, b));
        }
        found
    }
}

fn inner_slope([h0, h1]: [f64; 2], [d0, d1]: [f64; 2]) -> f64 {
    if d0 * d1 <= 0.0 {
        return 0.0;
    }
    let (w0, w1) = (2.0 * h1 + h0, h1 + 2.0 * h0);
    (w0 + w1) / (w0 / d0 + w1 / d1)
}

fn end_slope([h0, h1]: [f64; 2], [d0, d1]: [f64; 2]) -> f64 {
    let slope = ((2.0 * h0 + h1) * d0 - h0 * d1) / (h0 + h1);
    if slope * d0 <= 0.0 {
        0.0
    } else if d0 * d1 < 0.0 && slope.abs() > 3.0 * d0.abs() {
        3.0 * d0
    } else {
        slope
    }
}

/// What a sweep says about one tap and target.
#[derive(Clone, Debug)]
pub struct SweepRow {
    /// Tap.
    pub tap: String,
    /// Target, km/h.
    pub target_kmh: f64,
    /// Name and unit of the parameter.
    pub parameter: (String, String),
    /// Settings that were driven, with their Cp levels.
    pub levels: Vec<(f64, f64)>,
    /// The quadratic, where it fits or could not be tested.
    pub quadratic: Option<Quadratic>,
    /// p of its lack of fit; none where three settings determine it.
    pub lack_of_fit_p: Option<f64>,
    /// Setting of the extreme within the tested range, and its set.
    pub extreme: Option<(f64, Interval)>,
    /// Where the change from the baseline becomes worth knowing.
    pub crossing: Option<Crossing>,
}

/// Where a curve crosses a level within the tested range.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Crossing {
    /// The setting.
    pub at: f64,
    /// Settings whose 95 % band contains the level, and whether they go on beyond the tested range; none for a curve that interpolates.
    pub interval: Option<([f64; 2], [bool; 2])>,
}

/// Where the change from the baseline reaches a size, on the side of the largest change.
///
/// *Output* `None` where the curve does not get there within the tested range. *Method* inversion of the 95 % band of the difference from the baseline,
/// whose own uncertainty is in it; else the first crossing of the shape-preserving cubic.
pub fn reaches(swept: &Swept, size: f64) -> Option<Crossing> {
    let start = swept.baseline?;
    let far = swept.levels.iter().map(|l| l.1 - start).max_by(|a, b| a.abs().total_cmp(&b.abs()))?;
    let change = size * far.signum();
    let range = [swept.levels.first()?.0, swept.levels.last()?.0];
    match (&swept.quadratic, &swept.difference) {
        (Some(_), Some(difference)) => {
            let at = difference.crossing(change, range)?;
            Some(Crossing { at, interval: difference.crossing_interval(change, range) })
        }
        _ => {
            let (x, y): (Vec<f64>, Vec<f64>) = swept.levels.iter().copied().unzip();
            let at = *Pchip::new(&x, &y)?.crossings(start + change).first()?;
            Some(Crossing { at, interval: None })
        }
    }
}

/// A model's levels over a setting, and the curve through its passes.
#[derive(Clone, Debug)]
pub struct Swept {
    /// Settings, rising, with their levels.
    pub levels: Vec<(f64, f64)>,
    /// The quadratic, where it fits or could not be tested.
    pub quadratic: Option<Quadratic>,
    /// The quadratic less the baseline's level.
    pub difference: Option<Quadratic>,
    /// The baseline's level.
    pub baseline: Option<f64>,
    /// p of its lack of fit.
    pub lack_of_fit_p: Option<f64>,
}

/// Sweeps one model's levels over settings given by configuration; none below three settings. Configurations without a setting keep a level of their
/// own: they help to tell heading and drift, and say nothing of the curve.
pub fn sweep(model: &Model<'_>, baseline: &str, setting: impl Fn(&str) -> Option<f64>) -> Option<Swept> {
    let (fit, design, observations) = model.parts();
    let xs: Vec<Option<f64>> = observations.iter().map(|o| setting(&o.pass.configuration)).collect();
    let all = model.level_values();
    let mut levels: Vec<(f64, f64)> =
        all.iter().filter_map(|(letter, level)| Some((setting(letter)?, *level))).collect();
    levels.sort_by(|a, b| a.0.total_cmp(&b.0));
    let mut settings: Vec<f64> = levels.iter().map(|l| l.0).collect();
    settings.dedup();
    if settings.len() < 3 {
        return None;
    }
    let own = all.iter().find(|(letter, _)| *letter == baseline).map(|(_, level)| *level);
    let drawn = Swept { levels, quadratic: None, difference: None, baseline: own, lack_of_fit_p: None };
    // The columns of configurations with a setting give way to 1, x, x²; the others stay.
    let letter_of = |column: usize| all.get(column).map(|(letter, _)| *letter);
    let kept: Vec<usize> = (0..design.ncols()).filter(|j| letter_of(*j).and_then(&setting).is_none()).collect();
    let curve = DMatrix::from_fn(design.nrows(), 3 + kept.len(), |i, j| match j {
        0..=2 => xs[i].map_or(0.0, |x| x.powi(j as i32)),
        j => design[(i, kept[j - 3])],
    });
    let y = DVector::from_iterator(observations.len(), observations.iter().map(|o| o.y));
    let Some(quadratic) = model::fit(&curve, &y) else { return Some(drawn) };
    let test =
        lack_of_fit((quadratic.residuals.norm_squared(), quadratic.dof), (fit.residuals.norm_squared(), fit.dof));
    let lack_of_fit_p = test.map(|(_, p)| p);
    if lack_of_fit_p.is_some_and(|p| p <= ALPHA) {
        return Some(Swept { lack_of_fit_p, ..drawn });
    }
    // b₀ + b₁x + b₂x² less the baseline: a level of its own, or the curve at its setting.
    let mut rows = DMatrix::identity(3, 3 + kept.len());
    if let Some(x) = setting(baseline) {
        (0..3).for_each(|j| rows[(0, j)] -= x.powi(j as i32));
    } else if let Some(place) = kept.iter().position(|column| letter_of(*column) == Some(baseline)) {
        rows[(0, 3 + place)] = -1.0;
    }
    let difference = own.and_then(|_| Quadratic::of_combinations(&quadratic, &rows));
    Some(Swept { quadratic: Quadratic::of(&quadratic), difference, lack_of_fit_p, ..drawn })
}
