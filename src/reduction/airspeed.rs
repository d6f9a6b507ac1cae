//! One q for every pass: the probe's factor of the day, or, without a probe, the wind that opposite passes tell.
//!
//! There is one factor for all configurations: a factor for each would put its own error into every difference, where a common one only
//! scales it.

use super::compare::FactorError;
use super::inference::{ALPHA, t_quantile};
use super::passes::Pass;
use super::probe;
use super::wind::{self, Leg, WindError, WindFit};
use crate::config::{Probe, ProbeFactor};
use crate::session::Direction;
use crate::units::KMH_PER_M_S;

/// Two passes further apart in time than this make no pair: the wind will have changed, s.
const PAIR_WITHIN_S: f64 = 1200.0;
/// Factors outside are no probe's.
const PLAUSIBLE: std::ops::Range<f64> = 0.5..2.0;

/// Wind along the road by one out-and-back pair.
#[derive(Clone, Debug, PartialEq)]
pub struct WindPair {
    /// Target, km/h.
    pub target_kmh: f64,
    /// Middle of the pair, s.
    pub t_s: f64,
    /// True over indicated airspeed.
    pub k: f64,
    /// Head wind on the way out, km/h.
    pub head_wind_out_kmh: f64,
}

/// Where a probe factor comes from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Source {
    /// The car file.
    Stated,
    /// Out-and-back pairs of the day.
    Pairs(usize),
    /// All headings of the day.
    Headings(usize),
}

impl Source {
    /// In words.
    pub fn words(self) -> String {
        match self {
            Self::Stated => "stated in the car file".to_string(),
            Self::Pairs(1) => {
                "from one out-and-back pair: its own error is not known and in no interval; drive another pair"
                    .to_string()
            }
            Self::Pairs(n) => {
                format!("from {n} out-and-back pairs; a cross wind makes it low, by 1 % at 4 m/s and 100 km/h")
            }
            Self::Headings(n) => format!("from {n} passes of many headings"),
        }
    }
}

/// The probe factor of the day.
#[derive(Clone, Debug, PartialEq)]
pub struct Factor {
    /// True over indicated airspeed.
    pub k: f64,
    /// Standard uncertainty and its degrees of freedom; none where it is stated.
    pub u: Option<(f64, f64)>,
    /// Half-width of its 95 % interval.
    pub u95: Option<f64>,
    /// Where it comes from.
    pub source: Source,
    /// The wind vector, where many headings tell it.
    pub wind: Option<WindFit>,
}

impl Factor {
    fn new(k: f64, u: Option<(f64, f64)>, source: Source, wind: Option<WindFit>) -> Self {
        let u95 = u.and_then(|(u, dof)| Some(t_quantile(1.0 - ALPHA / 2.0, dof)? * u));
        Self { k, u, u95, source, wind }
    }

    /// What it does to whatever is divided by q.
    pub fn error(&self, probe: &Probe) -> Option<FactorError> {
        self.u.map(|(u, dof)| FactorError { model: probe.model, relative: u / self.k, dof })
    }
}

/// Indicated airspeed of a pass, km/h; none without a probe.
fn indicated_kmh(p: &Pass) -> Option<f64> {
    p.q.as_ref().filter(|q| q.measured.is_some() && q.pa > 0.0).map(|q| probe::airspeed(p.density, p.pressure_pa, q.pa))
}

/// Consecutive passes of one target in opposite directions, out first; a pass is in one pair at most, so that pairs are independent.
fn opposite(passes: &[Pass]) -> Vec<(usize, usize)> {
    let mut found: Vec<(usize, usize)> = Vec::new();
    for (i, a) in passes.iter().enumerate() {
        if found.iter().any(|(out, back)| *out == i || *back == i) {
            continue;
        }
        let same = |p: &Pass| p.session == a.session && p.target_kmh == a.target_kmh;
        let Some(j) = (i + 1..passes.len()).find(|j| same(&passes[*j])) else { continue };
        let b = &passes[j];
        let near = b.t_s - a.t_s <= PAIR_WITHIN_S && b.configuration == a.configuration;
        match (a.direction, b.direction) {
            (Direction::Out, Direction::Back) if near => found.push((i, j)),
            (Direction::Back, Direction::Out) if near => found.push((j, i)),
            _ => {}
        }
    }
    found
}

/// Factor and wind of every out-and-back pair with a probe.
pub fn pairs(passes: &[Pass]) -> Vec<WindPair> {
    let each = opposite(passes).into_iter().filter_map(|(out, back)| {
        let (out, back) = (&passes[out], &passes[back]);
        let pair = probe::pair([out.speed_kmh?, back.speed_kmh?], [indicated_kmh(out)?, indicated_kmh(back)?])?;
        Some(WindPair {
            target_kmh: out.target_kmh,
            t_s: f64::midpoint(out.t_s, back.t_s),
            k: pair.k,
            head_wind_out_kmh: pair.head_wind,
        })
    });
    each.collect()
}

/// The factor that the car file asks for, and what must be said about it.
pub fn factor(probe: &Probe, pairs: &[WindPair], passes: &[Pass]) -> (Factor, Vec<String>) {
    if let ProbeFactor::Stated(k) = probe.factor {
        return (Factor::new(k, None, Source::Stated, None), Vec::new());
    }
    let mut words = Vec::new();
    let legs: Vec<Leg> = passes.iter().filter_map(leg).collect();
    match wind::fit(&legs) {
        Ok(fit) if PLAUSIBLE.contains(&fit.k) => {
            let u = fit.covariance.map(|c| (c[(0, 0)].sqrt(), fit.dof as f64));
            return (Factor::new(fit.k, u, Source::Headings(legs.len()), Some(fit)), words);
        }
        // A straight road: pairs are the way, and no cause for words.
        Ok(_) | Err(WindError::IllConditioned | WindError::TooFewLegs { .. }) => {}
        Err(WindError::NoConvergence) => words.push(format!("probe factor: {}", WindError::NoConvergence)),
    }
    let ks: Vec<f64> = pairs.iter().map(|w| w.k).filter(|k| PLAUSIBLE.contains(k)).collect();
    if ks.is_empty() {
        if passes.iter().any(|p| indicated_kmh(p).is_some()) {
            words.push("probe factor: no out-and-back pair, 1 is used; drive one".to_string());
        }
        return (Factor::new(1.0, None, Source::Stated, None), words);
    }
    let n = ks.len() as f64;
    let k = ks.iter().sum::<f64>() / n;
    let scatter = (ks.iter().map(|x| (x - k).powi(2)).sum::<f64>() / (n - 1.0)).sqrt();
    let u = (ks.len() > 1).then(|| (scatter / n.sqrt(), n - 1.0));
    (Factor::new(k, u, Source::Pairs(ks.len()), None), words)
}

fn leg(p: &Pass) -> Option<Leg> {
    Some(Leg {
        ground_m_s: p.speed_kmh? / KMH_PER_M_S,
        track_deg: p.track_deg?,
        air_m_s: indicated_kmh(p)? / KMH_PER_M_S,
    })
}

/// Brings q and every Cp to the free stream's.
pub fn correct(passes: &mut [Pass], probe: &Probe, factor: &Factor) {
    for pass in passes.iter_mut().filter(|p| indicated_kmh(p).is_some()) {
        for tap in pass.taps.values_mut() {
            tap.cp = tap.cp.map(|cp| probe::corrected_cp(cp, factor.k, probe.model));
        }
        if let Some(q) = &mut pass.q {
            q.pa *= factor.k * factor.k;
        }
    }
}

/// Where only ground speed is known, gives opposite passes the q of the wind that all their taps tell together; words about it.
pub fn wind_without_a_probe(passes: &mut [Pass]) -> Vec<String> {
    let ground_only = |p: &Pass| p.q.as_ref().is_some_and(|q| q.measured.is_none());
    if !passes.iter().any(ground_only) {
        return Vec::new();
    }
    let mut told = vec![false; passes.len()];
    for (out, back) in opposite(passes) {
        if !(ground_only(&passes[out]) && ground_only(&passes[back])) {
            continue;
        }
        let Some(q) = q_of_pair(&passes[out], &passes[back]) else { continue };
        for (index, q_pa) in [(out, q[0]), (back, q[1])] {
            told[index] = true;
            let pass = &mut passes[index];
            pass.taps.values_mut().for_each(|t| t.cp = Some(t.pa / q_pa).filter(|cp| cp.is_finite()));
            if let Some(q) = &mut pass.q {
                q.pa = q_pa;
            }
        }
    }
    let n = told.iter().filter(|t| **t).count();
    let rest = passes.iter().filter(|p| ground_only(p)).count() - n;
    vec![format!(
        "no probe: a fallback. {n} passes have the q of one wind that all taps of an out-and-back pair tell; {rest} have that of the ground \
         speed, with the wind in every Cp; fit a Pitot-static probe"
    )]
}

/// q of both passes, Pa, with one wind for all taps.
fn q_of_pair(out: &Pass, back: &Pass) -> Option<[f64; 2]> {
    let both: Vec<[f64; 2]> = out.taps.iter().filter_map(|(name, t)| Some([t.pa, back.taps.get(name)?.pa])).collect();
    let v = [out.speed_kmh? / KMH_PER_M_S, back.speed_kmh? / KMH_PER_M_S];
    let density = f64::midpoint(out.density, back.density);
    let pair = wind::ground_speed_pair(v, density, &both)?;
    let w = pair.head_wind_m_s;
    // A wind of half the speed is no wind but taps that changed between the passes.
    if w.abs() > 0.5 * v[0].min(v[1]) {
        return None;
    }
    Some([0.5 * density * (v[0] + w).powi(2), 0.5 * density * (v[1] - w).powi(2)])
}
