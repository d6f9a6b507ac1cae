//! Segments → passes: consecutive dwells of one stretch are one pass, and the pass is the observation.
//!
//! Void segments are gone; marked ones, spans by hand and channels that stood still are left out, and that is told.

use super::air;
use super::probe::dynamic_pressure;
use super::scatter::Within;
use super::zeros::{Correction, Zeros};
use crate::config::{Air, Channel};
use crate::hold::statistics::standard_error;
use crate::session::{Direction, Entry, Segment, Session};
use crate::units::{KMH_PER_M_S, Quantity, StreamTime};
use std::borrow::Cow;
use std::collections::BTreeMap;

/// Below this q no coefficient is formed: it would be noise over noise, Pa.
pub const LEAST_Q_PA: f64 = 5.0;

/// One pass.
#[derive(Clone, Debug)]
pub struct Pass {
    /// Which session, from 0.
    pub session: usize,
    /// Its segments.
    pub segments: Vec<u32>,
    /// What was fitted.
    pub configuration: String,
    /// Which way.
    pub direction: Direction,
    /// Target speed, km/h.
    pub target_kmh: f64,
    /// Middle of it, s of stream time.
    pub t_s: f64,
    /// Mean dynamic pressure and where it comes from.
    pub q: Option<DynamicPressure>,
    /// Mean ground speed, km/h.
    pub speed_kmh: Option<f64>,
    /// Mean course, degrees.
    pub track_deg: Option<f64>,
    /// Air density, kg/m³.
    pub density: f64,
    /// Air temperature, °C, and absolute pressure, Pa.
    pub temperature_c: f64,
    /// Second of the two.
    pub pressure_pa: f64,
    /// Ride heights against the zero, mm, by channel.
    pub heights: BTreeMap<String, Rise>,
    /// By tap.
    pub taps: BTreeMap<String, TapMean>,
}

/// Mean dynamic pressure of a pass.
#[derive(Clone, Debug)]
pub struct DynamicPressure {
    /// Its value, zero corrected, Pa.
    pub pa: f64,
    /// Its channel and zero; none when it comes from ground speed and density.
    pub measured: Option<(String, Option<Correction>)>,
}

impl DynamicPressure {
    /// Its channel's zero.
    pub fn zero(&self) -> Option<(&str, &Correction)> {
        self.measured.as_ref().and_then(|(channel, zero)| Some((channel.as_str(), zero.as_ref()?)))
    }
}

/// Mean ride height over a pass.
#[derive(Clone, Debug)]
pub struct Rise {
    /// Above its zero, mm.
    pub mm: f64,
    /// That zero.
    pub zero: Correction,
}

/// One tap over a pass.
#[derive(Clone, Debug)]
pub struct TapMean {
    /// The channel it sat on.
    pub channel: String,
    /// Mean pressure, zero corrected, Pa.
    pub pa: f64,
    /// Its zero correction.
    pub zero: Option<Correction>,
    /// Cp by the pass's q, before any probe factor.
    pub cp: Option<f64>,
    /// Standard error of that within the pass; a floor of the scatter between passes.
    pub cp_se: Option<f64>,
    /// How its bins move about that.
    pub within: Option<Within>,
}

/// A segment, or a channel of one, that was left out.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct LeftOut {
    /// Which session, from 0.
    pub session: usize,
    /// Its number.
    pub segment: u32,
    /// Why.
    pub why: String,
}

/// Targets that were driven, rising.
pub fn targets(passes: &[Pass]) -> Vec<f64> {
    let mut targets: Vec<f64> = passes.iter().map(|p| p.target_kmh).collect();
    targets.sort_by(f64::total_cmp);
    targets.dedup();
    targets
}

/// The passes of a session in time order, and what was left out.
pub fn passes(index: usize, session: &Session) -> (Vec<Pass>, Vec<LeftOut>) {
    let zeros = Zeros::of(session);
    let standing: BTreeMap<u32, (Cow<'_, Segment>, bool)> =
        session.segments().into_iter().map(|(s, void)| (s.id, (s, void))).collect();
    let mut left_out = Vec::new();
    let mut groups: Vec<((u32, &Segment), Vec<&Segment>)> = Vec::new();
    let mut run = 0;
    for entry in &session.entries {
        let segment = match entry {
            Entry::End(_) => {
                run += 1;
                continue;
            }
            Entry::Segment(segment) => segment.id,
            _ => continue,
        };
        let Some((segment, void)) = standing.get(&segment) else { continue };
        let segment: &Segment = segment;
        if let Some(why) = reason_to_leave_out(segment, *void) {
            left_out.push(LeftOut { session: index, segment: segment.id, why });
            continue;
        }
        match groups.last_mut() {
            Some(((r, first), group)) if *r == run && one_pass(first, segment) => group.push(segment),
            _ => groups.push(((run, segment), vec![segment])),
        }
    }
    for segment in groups.iter().flat_map(|(_, g)| g) {
        for flag in segment.flags.iter().filter(|f| f.contains(':')) {
            left_out.push(LeftOut { session: index, segment: segment.id, why: flag.clone() });
        }
    }
    let made = groups.iter().filter_map(|(_, group)| pass(index, session, &zeros, group)).collect();
    (made, left_out)
}

fn reason_to_leave_out(segment: &Segment, void: bool) -> Option<String> {
    if void {
        return Some("void".to_string());
    }
    if segment.target_kmh.is_none() {
        return Some("by-hand".to_string());
    }
    segment.flags.iter().find(|f| !f.contains(':')).cloned()
}

fn one_pass(a: &Segment, b: &Segment) -> bool {
    a.stretch == b.stretch
        && a.configuration == b.configuration
        && a.direction == b.direction
        && a.target_kmh == b.target_kmh
        && a.taps == b.taps
}

/// Sample-weighted mean over the dwells of a pass; none where any dwell lacks the channel or flags it.
fn mean(group: &[&Segment], channel: &str) -> Option<f64> {
    let (mut sum, mut n) = (0.0, 0.0);
    for segment in group {
        if segment.flags.iter().any(|f| f.split_once(':').is_some_and(|(_, c)| c == channel)) {
            return None;
        }
        let s = segment.channels.get(channel)?;
        sum += s.mean * s.n as f64;
        n += s.n as f64;
    }
    (n > 0.0 && f64::is_finite(sum)).then(|| sum / n)
}

fn pass(index: usize, session: &Session, zeros: &Zeros<'_>, group: &[&Segment]) -> Option<Pass> {
    let (first, last) = (group.first()?, group.last()?);
    let middle = StreamTime::from_micros(i64::midpoint(first.t0.micros(), last.t1.micros()));
    let channels = &session.header.setup.rig.channels;
    let named = |quantity| channels.iter().find(|c| c.quantity == quantity).map(|c| c.name.as_str());
    let of_air = |of: fn(&Air) -> f64| group.iter().map(|s| of(&s.air.air)).sum::<f64>() / group.len() as f64;
    let density = of_air(air::density);
    let speed = named(Quantity::Speed);
    let q = named(Quantity::DynamicPressure)
        .and_then(|c| measured_q(group, zeros, c, middle))
        .or_else(|| speed.and_then(|c| ground_q(group, c, density)));
    let q_channel = q.as_ref().and_then(|q| q.measured.as_ref()).map(|(c, _)| c.clone());
    let tap = |(channel, tap): (&String, &String)| {
        let raw = mean(group, channel)?;
        let zero = zeros.at(channel, middle);
        let pa = raw - zero.as_ref().map_or(0.0, |z| z.pa);
        let cp = q.as_ref().filter(|q| q.pa >= LEAST_Q_PA).map(|q| pa / q.pa).filter(|cp| cp.is_finite());
        let residuals = cp.and_then(|cp| residuals(group, channel, q_channel.as_deref(), cp));
        let q_pa = q.as_ref().map(|q| q.pa);
        let cp_se =
            residuals.as_ref().zip(q_pa).and_then(|(r, q)| Some(standard_error(r)? / q)).filter(|x| x.is_finite());
        let within = residuals.map(|r| Within::of(&r, first.bin_s));
        Some((tap.clone(), TapMean { channel: channel.clone(), pa, zero, cp, cp_se, within }))
    };
    Some(Pass {
        session: index,
        segments: group.iter().map(|s| s.id).collect(),
        configuration: first.configuration.clone(),
        direction: first.direction,
        target_kmh: first.target_kmh?,
        t_s: middle.seconds(),
        speed_kmh: speed.and_then(|c| mean(group, c)),
        track_deg: first.track_deg,
        density,
        temperature_c: of_air(|a| a.temperature_c),
        pressure_pa: of_air(|a| a.pressure_hpa) * 100.0,
        heights: heights(group, zeros, channels, middle),
        taps: first.taps.iter().filter_map(tap).collect(),
        q,
    })
}

/// Ride heights less their zero; a channel that was never zeroed says nothing of a load.
fn heights(group: &[&Segment], zeros: &Zeros<'_>, channels: &[Channel], t: StreamTime) -> BTreeMap<String, Rise> {
    let of = |c: &Channel| {
        let zero = zeros.at(&c.name, t)?;
        Some((c.name.clone(), Rise { mm: mean(group, &c.name)? - zero.pa, zero }))
    };
    channels.iter().filter(|c| c.quantity == Quantity::RideHeight).filter_map(of).collect()
}

fn measured_q(group: &[&Segment], zeros: &Zeros<'_>, channel: &str, t: StreamTime) -> Option<DynamicPressure> {
    let raw = mean(group, channel)?;
    let zero = zeros.at(channel, t);
    let pa = raw - zero.as_ref().map_or(0.0, |z| z.pa);
    Some(DynamicPressure { pa, measured: Some((channel.to_string(), zero)) })
}

/// Mean of ρ V²/2 over the ground speed: wind is unknown, so this is a fallback.
fn ground_q(group: &[&Segment], channel: &str, density: f64) -> Option<DynamicPressure> {
    let v = mean(group, channel)?;
    let sd = group.iter().filter_map(|s| s.channels.get(channel)?.sd).fold(0.0, f64::max);
    let pa = dynamic_pressure(density, v) + 0.5 * density * (sd / KMH_PER_M_S).powi(2);
    Some(DynamicPressure { pa, measured: None })
}

/// p − Cp q in every bin of a pass, Pa: gusts cancel in it (ratio estimator, Cochran, Sampling Techniques, chapter 6).
fn residuals(group: &[&Segment], channel: &str, q: Option<&str>, cp: f64) -> Option<Vec<f64>> {
    let mut residuals = Vec::new();
    for segment in group {
        let p = &segment.channels.get(channel)?.bins;
        let q = q.map(|q| segment.channels.get(q).map(|s| &s.bins)).and_then(|x| x);
        for (i, p) in p.iter().enumerate() {
            let q = q.map_or(Some(0.0), |q| q.get(i).copied().flatten());
            if let (Some(p), Some(q)) = (p, q) {
                residuals.push(p - cp * q);
            }
        }
    }
    Some(residuals)
}
