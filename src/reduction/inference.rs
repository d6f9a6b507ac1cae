//! Student's t, power, Holm, scatter between passes, passes that stand out: how sure one may be.

use statrs::distribution::{ContinuousCDF, Normal, StudentsT};
use statrs::function::gamma::ln_gamma;

/// Family error rate, and 1 − confidence of every interval.
pub const ALPHA: f64 = 0.05;
/// Probability with which a change of the size in question is to be found.
pub const POWER: f64 = 0.8;
/// Passes per configuration beyond which no number of passes is a plan.
pub const MOST_PASSES: u32 = 1000;

/// Quantile of Student's t.
///
/// *Input* probability in 0–1, degrees of freedom above 0 (fractions allowed, infinity is the normal). *Output* `None` outside that. *Method*
/// statrs. *Accuracy* 1e-8 of SciPy.
///
/// ```
/// let t = steadytap::reduction::inference::t_quantile(0.975, 4.0).unwrap(); // JCGM 100:2008 table G.2: 2.78
/// assert!((t - 2.776445105).abs() < 1e-8);
/// ```
pub fn t_quantile(probability: f64, dof: f64) -> Option<f64> {
    if !(probability > 0.0 && probability < 1.0 && dof > 0.0) {
        return None;
    }
    if dof > 1e6 {
        return Some(Normal::standard().inverse_cdf(probability));
    }
    Some(StudentsT::new(0.0, 1.0, dof).ok()?.inverse_cdf(probability))
}

/// Two-sided p of a t statistic; 1 for t = 0.
pub fn t_two_sided_p(t: f64, dof: f64) -> Option<f64> {
    if dof.is_nan() || dof <= 0.0 || t.is_nan() {
        return None;
    }
    let t = t.abs();
    let tail = if dof > 1e6 { Normal::standard().sf(t) } else { StudentsT::new(0.0, 1.0, dof).ok()?.sf(t) };
    Some((2.0 * tail).min(1.0))
}

/// Holm's adjusted p values.
///
/// *Input* p values of one family. *Output* adjusted ones in the same order. *Method* Holm, Scand. J. Statist. 6, 1979, 65; valid for dependent tests.
///
/// ```
/// let adjusted = steadytap::reduction::inference::holm(&[0.01, 0.04, 0.03]);
/// assert!(adjusted.iter().zip([0.03, 0.06, 0.06]).all(|(a, b)| (a - b).abs() < 1e-15));
/// ```
pub fn holm(p: &[f64]) -> Vec<f64> {
    let mut order: Vec<usize> = (0..p.len()).collect();
    order.sort_by(|a, b| p[*a].total_cmp(&p[*b]));
    let mut adjusted = vec![1.0; p.len()];
    let mut least: f64 = 0.0;
    for (rank, i) in order.iter().enumerate() {
        least = least.max((p[*i] * (p.len() - rank) as f64).min(1.0));
        adjusted[*i] = least;
    }
    adjusted
}

/// Power of a two-sided t test.
///
/// *Input* noncentrality, degrees of freedom, two-sided error rate. *Output* probability of rejecting. *Method* the noncentral t distribution
/// as the average of a shifted normal over the chi distribution of the standard deviation, by Simpson's rule. *Accuracy* 1e-8 of SciPy.
pub fn power(noncentrality: f64, dof: f64, alpha: f64) -> Option<f64> {
    let t = t_quantile(1.0 - alpha / 2.0, dof)?;
    let normal = Normal::standard();
    // u is the estimated over the true standard deviation; its density is that of chi/sqrt(dof).
    let log_scale = dof / 2.0 * dof.ln() - (dof / 2.0 - 1.0) * std::f64::consts::LN_2 - ln_gamma(dof / 2.0);
    let integrand = |u: f64| {
        let density = if u > 0.0 { (log_scale + (dof - 1.0) * u.ln() - dof * u * u / 2.0).exp() } else { 0.0 };
        density * (normal.sf(t * u - noncentrality) + normal.cdf(-t * u - noncentrality))
    };
    const STEPS: usize = 500;
    let (low, high) = ((1.0 - 12.0 / (2.0 * dof).sqrt()).max(0.0), 1.0 + 12.0 / (2.0 * dof).sqrt());
    let h = (high - low) / STEPS as f64;
    let inner: f64 = (1..STEPS).map(|i| if i % 2 == 1 { 4.0 } else { 2.0 } * integrand(low + h * i as f64)).sum();
    Some(((integrand(low) + inner + integrand(high)) * h / 3.0).clamp(0.0, 1.0))
}

/// Passes per configuration (equal numbers) with which a two-sample t test finds `effect` standard deviations with [`POWER`].
///
/// *Output* two or more; `None` when the effect is not positive or more than [`MOST_PASSES`] were needed. *Accuracy* Cohen 1988: 64, 26, 17 for
/// 0.5, 0.8, 1.0.
///
/// ```
/// assert_eq!(steadytap::reduction::inference::passes_for(1.0, 0.05), Some(17));
/// ```
pub fn passes_for(effect: f64, alpha: f64) -> Option<u32> {
    if effect.is_nan() || effect <= 0.0 {
        return None;
    }
    let enough = |n: u32| {
        let n = f64::from(n);
        power(effect * (n / 2.0).sqrt(), 2.0 * n - 2.0, alpha).is_some_and(|p| p >= POWER)
    };
    let (mut low, mut high) = (1, 2);
    while !enough(high) {
        (low, high) = (high, high * 2);
        if high > MOST_PASSES {
            return None;
        }
    }
    while high - low > 1 {
        let middle = low.midpoint(high);
        if enough(middle) { high = middle } else { low = middle }
    }
    Some(high)
}

/// Effective degrees of freedom of a sum of variances.
///
/// *Input* (u², ν) of each part; ν may be infinite. *Output* `None` when all parts are 0. *Method* Welch–Satterthwaite, JCGM 100:2008 equation G.2b.
pub fn effective_dof(parts: &[(f64, f64)]) -> Option<f64> {
    let sum: f64 = parts.iter().map(|(u2, _)| u2).sum();
    let below: f64 = parts.iter().filter(|(_, dof)| dof.is_finite()).map(|(u2, dof)| u2 * u2 / dof).sum();
    if sum <= 0.0 {
        return None;
    }
    Some(if below > 0.0 { sum * sum / below } else { f64::INFINITY })
}

/// How passes scatter beyond their own standard errors.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Between {
    /// Standard deviation between passes, in the unit of the values; 0 when their own errors explain the scatter.
    pub sd: f64,
    /// I²: share of the scatter that their own errors do not explain, 0–1.
    pub share: f64,
}

/// Scatter between passes that have standard errors of their own.
///
/// *Input* values; their standard errors, above 0. *Output* `None` below two values or with a standard error that is not positive. *Method*
/// Paule & Mandel, J. Res. NBS 87, 1982, 377: the τ² with Σ(y − m)²/(u² + τ²) = k − 1, by bisection; I² = 1 − (k − 1)/Q, Higgins & Thompson
/// 2002. *Accuracy* 1e-6 of τ². A diagnosis: passes are averaged unweighted.
///
/// ```
/// let alike = steadytap::reduction::inference::between(&[1.0, 1.1], &[1.0, 1.0]).unwrap();
/// assert_eq!((alike.sd, alike.share), (0.0, 0.0));
/// ```
pub fn between(values: &[f64], errors: &[f64]) -> Option<Between> {
    let k = values.len();
    let good = k == errors.len() && k >= 2 && errors.iter().all(|u| *u > 0.0 && u.is_finite());
    if !good || !values.iter().all(|y| y.is_finite()) {
        return None;
    }
    let excess = k as f64 - 1.0;
    let q = |tau2: f64| {
        let weights = || errors.iter().map(|u| 1.0 / (u * u + tau2));
        let mean = weights().zip(values).map(|(w, y)| w * y).sum::<f64>() / weights().sum::<f64>();
        weights().zip(values).map(|(w, y)| w * (y - mean).powi(2)).sum::<f64>()
    };
    let whole = q(0.0);
    if !whole.is_finite() {
        return None;
    }
    if whole <= excess {
        return Some(Between { sd: 0.0, share: 0.0 });
    }
    // Q(τ²) falls below (Σ(y − ȳ)²)/τ², so the root lies below that over k − 1.
    let mean = values.iter().sum::<f64>() / k as f64;
    let (mut low, mut high) = (0.0, values.iter().map(|y| (y - mean).powi(2)).sum::<f64>() / excess);
    for _ in 0..60 {
        let middle = f64::midpoint(low, high);
        if q(middle) > excess { low = middle } else { high = middle }
    }
    Some(Between { sd: high.sqrt(), share: 1.0 - excess / whole })
}

/// p of "the farthest of `n` observations belongs to the others".
///
/// *Input* its residual over √(1 − leverage) and over the residual standard deviation; degrees of freedom of that; n. *Output* Bonferroni's
/// bound, at most 1; `None` below two degrees of freedom. *Method* externally studentised residual; for a plain mean it is the two-sided test of
/// Grubbs, Technometrics 11, 1969, 1, turned from a critical value into a p.
pub fn outlier_p(studentised: f64, dof: f64, n: usize) -> Option<f64> {
    let square = studentised * studentised;
    if dof < 2.0 || !square.is_finite() {
        return None;
    }
    // r² cannot exceed its degrees of freedom; where it reaches them the others have no scatter at all.
    let rest = (dof - square).max(0.0);
    let p = if rest > 0.0 { t_two_sided_p(studentised * ((dof - 1.0) / rest).sqrt(), dof - 1.0)? } else { 0.0 };
    Some((p * n as f64).min(1.0))
}
