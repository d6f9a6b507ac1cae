//! Does a Cp hold over speed? It should: where it does not, a zero is off, a hose leaks, or the flow itself changes.
//!
//! For every tap and configuration the levels at the lowest and the highest target are compared, at 5 % over all of them (Holm).

use super::compare::Level;
use super::inference::{ALPHA, effective_dof, holm, t_quantile, t_two_sided_p};
use super::probe::dynamic_pressure;

/// A Cp that changes with speed.
#[derive(Clone, Debug, PartialEq)]
pub struct Change {
    /// Tap.
    pub tap: String,
    /// Configuration.
    pub configuration: String,
    /// Lowest and highest target, km/h.
    pub targets_kmh: [f64; 2],
    /// Cp at the highest less Cp at the lowest.
    pub delta_cp: f64,
    /// Half-width of its 95 % interval.
    pub u95: f64,
    /// The zero error that would make it, Pa, in air of this density.
    pub zero_error_pa: f64,
}

/// Every Cp that changes with speed.
///
/// *Input* levels of all targets, air density kg/m³. *Output* those whose change is significant at 5 % over the family. *Method* difference of two
/// independent levels with Welch–Satterthwaite degrees of freedom, Holm; a zero error e makes e/q, so e = ΔCp/(1/q₂ − 1/q₁).
pub fn changes(levels: &[Level], density: f64) -> Vec<Change> {
    let mut tested: Vec<(Change, f64)> = Vec::new();
    for low in levels {
        let same = levels.iter().filter(|l| l.tap == low.tap && l.configuration == low.configuration);
        let Some(high) = same.clone().max_by(|a, b| a.target_kmh.total_cmp(&b.target_kmh)) else { continue };
        let lowest = same.clone().all(|l| l.target_kmh >= low.target_kmh);
        if lowest && high.target_kmh > low.target_kmh {
            tested.extend(change(low, high, density));
        }
    }
    let adjusted = holm(&tested.iter().map(|(_, p)| *p).collect::<Vec<_>>());
    tested.into_iter().zip(adjusted).filter(|(_, p)| *p <= ALPHA).map(|((change, _), _)| change).collect()
}

fn change(low: &Level, high: &Level, density: f64) -> Option<(Change, f64)> {
    // The probe's factor is common to both.
    let parts = [low.apart?, high.apart?].map(|(u, dof)| (u * u, dof));
    let dof = effective_dof(&parts)?;
    let u = (parts[0].0 + parts[1].0).sqrt();
    let delta_cp = high.cp.value - low.cp.value;
    let [q_low, q_high] = [low, high].map(|l| dynamic_pressure(density, l.target_kmh));
    let change = Change {
        tap: low.tap.clone(),
        configuration: low.configuration.clone(),
        targets_kmh: [low.target_kmh, high.target_kmh],
        delta_cp,
        u95: t_quantile(1.0 - ALPHA / 2.0, dof)? * u,
        zero_error_pa: delta_cp / (1.0 / q_high - 1.0 / q_low),
    };
    Some((change, t_two_sided_p(delta_cp / u, dof)?))
}

/// A change in words.
pub fn words(change: &Change) -> String {
    let Change { tap, configuration, targets_kmh: [low, high], delta_cp, u95, zero_error_pa } = change;
    format!(
        "Cp of {tap} with {configuration} is not the same at {low} and {high} km/h ({delta_cp:+.4} ± {u95:.4}): a zero off by \
         {zero_error_pa:+.1} Pa, a leak, or a flow that changes with speed; zero again and press the hose"
    )
}
