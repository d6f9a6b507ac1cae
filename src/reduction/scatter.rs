//! What the scatter of the passes says about themselves: how independent a pass's averages are, whether it drifts inside, which one stands out.
//!
//! Residuals within and between passes → diagnoses beside the levels, and cautions in words. Nothing here leaves anything out: it prompts a look.

use super::Reduction;
use super::inference::{holm, t_two_sided_p};
use super::passes::Pass;
use crate::hold::statistics::lag_one_autocorrelation;
use std::collections::BTreeMap;

/// Independent averages in a pass below which its own standard error is only a lower bound.
const FEWEST_INDEPENDENT: f64 = 10.0;
/// Move inside a pass that is worth a word, as a share of the smallest change worth knowing.
const MOVING: f64 = 0.25;
/// Family error rate of a prompt.
const ALPHA: f64 = 0.01;

/// The residuals p − Cp q of a pass's bins, in short.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Within {
    /// Bins.
    pub bins: usize,
    /// Width of a bin, s.
    pub bin_s: f64,
    /// Lag-1 autocorrelation; none where nothing moves.
    pub r1: Option<f64>,
    /// Mean of the second half less that of the first, Pa.
    pub halves: Option<f64>,
}

impl Within {
    /// Of consecutive residuals.
    pub fn of(residuals: &[f64], bin_s: f64) -> Self {
        let half = residuals.len() / 2;
        let mean = |part: &[f64]| part.iter().sum::<f64>() / part.len() as f64;
        let halves = (half > 0).then(|| mean(&residuals[residuals.len() - half..]) - mean(&residuals[..half]));
        Self {
            bins: residuals.len(),
            bin_s,
            r1: lag_one_autocorrelation(residuals),
            halves: halves.filter(|x| x.is_finite()),
        }
    }
}

/// How independent the averages of a tap's passes are.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Independence {
    /// Independent averages in a pass.
    pub n_eff: f64,
    /// Time between independent averages, s; at least a bin.
    pub tau_s: f64,
}

/// Independent averages of a tap in one pass, from all its passes together: one pass is too short to know its own autocorrelation.
///
/// *Output* `None` without residuals. *Method* n/τ with τ = (1 + r₁)/(1 − r₁) (Bayley & Hammersley 1946), r₁ the mean over passes less its bias of
/// −(1 + 4r₁)/n (Marriott & Pope 1954), cut at 0.
pub fn independence(passes: &[&Pass], tap: &str) -> Option<Independence> {
    let seen: Vec<(f64, f64, f64)> = passes
        .iter()
        .filter_map(|p| p.taps.get(tap)?.within)
        .filter_map(|w| Some((w.bins as f64, w.bin_s, w.r1?)))
        .collect();
    let count = seen.len() as f64;
    let (n, bin_s, r1) = seen.iter().fold((0.0, 0.0, 0.0), |a, b| (a.0 + b.0, a.1 + b.1, a.2 + b.2));
    if seen.is_empty() || n < 3.0 * count {
        return None;
    }
    let (n, bin_s, r1) = (n / count, bin_s / count, r1 / count);
    let r1 = if n > 8.0 { (r1 * n + 1.0) / (n - 4.0) } else { r1 }.clamp(0.0, 1.0);
    let tau = if r1 < 1.0 { ((1.0 + r1) / (1.0 - r1)).min(n) } else { n };
    Some(Independence { n_eff: n / tau, tau_s: tau * bin_s })
}

/// A pass of a tap that stands out from the others, with what difference it makes.
#[derive(Clone, Debug, PartialEq)]
pub struct Outlier {
    /// Tap.
    pub tap: String,
    /// Session from 0, and segments of the pass.
    pub pass: (usize, Vec<u32>),
    /// p of "it belongs to the others", over the passes of the tap.
    pub p: f64,
    /// Configuration, and its difference from the baseline with and without that pass, Cp.
    pub differences: Vec<(String, f64, f64)>,
}

/// What the scatter gives reason to say.
pub fn cautions(r: &Reduction, outliers: &[Outlier]) -> Vec<String> {
    let mut words = Vec::new();
    let p: Vec<f64> = outliers.iter().map(|o| o.p).collect();
    for (o, p) in outliers.iter().zip(holm(&p)) {
        if p <= ALPHA {
            words.push(outlier(o, r));
        }
    }
    words.extend(refits(r));
    words.extend(short(r));
    words.extend(moving(r));
    words
}

fn outlier(o: &Outlier, r: &Reduction) -> String {
    let ids: Vec<String> = o.pass.1.iter().map(u32::to_string).collect();
    let session =
        if r.passes.iter().any(|p| p.session > 0) { format!(" of session {}", o.pass.0 + 1) } else { String::new() };
    let mut words = format!("{}: the pass of segment {}{session} stands out", o.tap, ids.join(", "));
    for (letter, with, without) in &o.differences {
        words.push_str(&format!(
            "; {letter} − {} is {:+.1} Pa with it, {:+.1} Pa without",
            r.baseline,
            with * r.at_q_pa,
            without * r.at_q_pa
        ));
    }
    words.push_str("; look at it, and void it only for a reason seen on the road");
    words
}

/// Passes without touching the part replicate the road, not the part; two letters for one set-up are told.
fn refits(r: &Reduction) -> Vec<String> {
    let mut words = Vec::new();
    for c in r.configurations.iter().filter(|c| c.letter != r.baseline) {
        let passes = r.passes.iter().filter(|p| p.configuration == c.letter).count();
        let fitted = |i: usize, p: &Pass| {
            let before = i.checked_sub(1).map(|i| &r.passes[i]);
            p.configuration == c.letter && before.is_none_or(|b| b.configuration != c.letter || b.session != p.session)
        };
        let fits = r.passes.iter().enumerate().filter(|(i, p)| fitted(*i, p)).count();
        if fits == 1 && passes > 1 {
            words.push(format!(
                "{} was fitted once: its {passes} passes replicate the road, not the part; refit it to know how well it repeats",
                c.letter
            ));
        }
    }
    for (i, a) in r.configurations.iter().enumerate() {
        for b in r.configurations[i + 1..].iter().filter(|b| !a.name.is_empty() && b.name == a.name) {
            words.push(format!(
                "{} and {} have one name, `{}`: one set-up under two letters is compared as two; give its passes one letter",
                a.letter, b.letter, a.name
            ));
        }
    }
    words
}

fn of_taps(r: &Reduction) -> BTreeMap<&str, Vec<&Pass>> {
    let mut all: BTreeMap<&str, Vec<&Pass>> = BTreeMap::new();
    for pass in &r.passes {
        pass.taps.keys().for_each(|tap| all.entry(tap).or_default().push(pass));
    }
    all
}

fn short(r: &Reduction) -> Option<String> {
    let mut worst: Option<Independence> = None;
    let mut taps = Vec::new();
    for (tap, passes) in of_taps(r) {
        if let Some(i) = independence(&passes, tap).filter(|i| i.n_eff < FEWEST_INDEPENDENT) {
            taps.push(tap);
            worst = worst.filter(|w| w.n_eff <= i.n_eff).or(Some(i));
        }
    }
    let worst = worst?;
    Some(format!(
        "a pass holds only about {:.0} independent averages of {} (one each {:.1} s): its own standard error is a lower bound; dwell longer",
        worst.n_eff,
        taps.join(", "),
        worst.tau_s
    ))
}

/// Taps whose passes all move one way inside: t test of the halves' differences.
fn moving(r: &Reduction) -> Vec<String> {
    let mut tests = Vec::new();
    for (tap, passes) in of_taps(r) {
        let d: Vec<f64> = passes.iter().filter_map(|p| p.taps.get(tap)?.within?.halves).collect();
        let n = d.len() as f64;
        let mean = d.iter().sum::<f64>() / n;
        let variance = d.iter().map(|x| (x - mean).powi(2)).sum::<f64>() / (n - 1.0);
        let p = (n > 2.0 && variance > 0.0).then(|| t_two_sided_p(mean / (variance / n).sqrt(), n - 1.0)).flatten();
        tests.extend(p.map(|p| (tap, mean, p)));
    }
    let adjusted = holm(&tests.iter().map(|t| t.2).collect::<Vec<_>>());
    tests
        .iter()
        .zip(adjusted)
        .filter(|((_, mean, _), p)| *p <= ALPHA && mean.abs() >= MOVING * r.resolve.0)
        .map(|((tap, mean, _), _)| {
            format!("{tap} moves by {mean:+.1} Pa from the first half of a pass to the second: settle longer, look for a slow hose")
        })
        .collect()
}
