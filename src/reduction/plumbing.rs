//! Faults of hoses and sensors that the data themselves betray, each by tap, with the reason and what to look at.
//!
//! A pass is judged against the other passes of its tap and against its neighbours at the same moment: a change of the body moves a level
//! for as long as the part is fitted, a fault does not keep to that. Nothing is left out for it.

use super::Reduction;
use super::compare::Comparison;
use super::inference::t_two_sided_p;
use super::model;
use super::passes::Pass;
use crate::session::{Direction, Entry, Segment, Session};
use nalgebra::{DMatrix, DVector, Matrix3, Vector3};
use std::collections::{BTreeMap, BTreeSet};
use std::fmt;

/// A Cp that no steady flow gives: stagnation is 1, and a twentieth is left for the probe.
const BEYOND_STAGNATION: f64 = 1.05;
/// Cp below which a tap says too little to be judged.
const LEAST_LEVEL: f64 = 0.08;
/// Bins of a pass from which its gusts can be judged.
const FEWEST_BINS: usize = 8;
/// Standard errors that make sure.
const SURE: f64 = 4.0;
/// Share of a tap's level that gusts show in a hose in order, at least; and in a blocked one, at most.
const HEARD: f64 = 0.6;
const DEAF: f64 = 0.4;
/// Lag behind the neighbours that is worth a word, s: gusts themselves need a tenth of that from the mast to the base.
const LATE_S: f64 = 0.3;
/// What a leaking hose passes on, at most, to be told from a change of the flow.
const LEAKING: f64 = 0.75;
/// Nearness of exchanged levels, as a share of their difference.
const EXCHANGED: f64 = 0.15;
/// Chance of a jump where none is, over all passes and taps.
const P_STEP: f64 = 1e-4;

/// What is wrong at a tap.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Kind {
    /// Two taps have each other's values.
    Swapped,
    /// Pressure above stagnation, or a sign turned round.
    Reversed,
    /// Nothing of the gusts arrives.
    Blocked,
    /// A part of the pressure arrives.
    Leak,
    /// The same figure over and over.
    Stuck,
    /// It follows the dynamic pressure late.
    Late,
}

/// One fault.
#[derive(Clone, Debug, PartialEq)]
pub struct Fault {
    /// What.
    pub kind: Kind,
    /// Tap, or both of them.
    pub tap: String,
    /// Channels to look at.
    pub channel: String,
    /// Since which segment, and what of its number was seen.
    pub reason: String,
}

impl fmt::Display for Fault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let look = match self.kind {
            Kind::Swapped => "are their hoses swapped?",
            Kind::Reversed => "look at the hose: are the sensor's two ports exchanged?",
            Kind::Blocked => "blow the hose through: water, a kink, tape over the tap?",
            Kind::Leak => "look for a leak or a loose hose",
            Kind::Stuck => "look at the sensor and its wiring",
            Kind::Late => "look for a long or narrow hose, or set its lag in the rig",
        };
        write!(f, "{} ({}): {}; {look}", self.tap, self.channel, self.reason)
    }
}

/// Faults that the passes show, in the order of the car's taps.
pub fn faults(r: &Reduction, sessions: &[Session]) -> Vec<Fault> {
    let mut all = stuck(sessions);
    all.extend(beyond_stagnation(r));
    let follows = following(r, sessions);
    let deaf = deaf(r, &follows);
    all.extend(late(r, &follows));
    let deaf: Vec<Fault> = deaf.into_iter().filter(|f| !all.iter().any(|s| s.tap == f.tap)).collect();
    let not_deaf = |tap: &str| !deaf.iter().any(|f| f.tap == tap);
    all.extend(stepped(r).into_iter().filter(|f| not_deaf(&f.tap)));
    all.extend(deaf);
    all
}

/// Channels that gave one figure all through a segment.
fn stuck(sessions: &[Session]) -> Vec<Fault> {
    let mut seen: BTreeMap<(String, String), Vec<u32>> = BTreeMap::new();
    for segment in sessions.iter().flat_map(segments) {
        for (channel, tap) in &segment.taps {
            if segment.channels.get(channel).is_some_and(|s| s.n > 2 && s.min == s.max) {
                seen.entry((tap.clone(), channel.clone())).or_default().push(segment.id);
            }
        }
    }
    let fault = |((tap, channel), ids): ((String, String), Vec<u32>)| {
        let reason = format!("one figure all through segment {}", list(&ids));
        Fault { kind: Kind::Stuck, tap, channel, reason }
    };
    seen.into_iter().map(fault).collect()
}

fn segments(session: &Session) -> impl Iterator<Item = &Segment> {
    session.entries.iter().filter_map(|e| if let Entry::Segment(s) = e { Some(s.as_ref()) } else { None })
}

fn list(ids: &[u32]) -> String {
    let all: Vec<String> = ids.iter().take(6).map(u32::to_string).collect();
    format!("{}{}", all.join(", "), if ids.len() > 6 { " …" } else { "" })
}

fn median(mut values: Vec<f64>) -> Option<f64> {
    values.sort_by(f64::total_cmp);
    values.get(values.len() / 2).copied()
}

/// A pass that has a tap: its index, itself, the tap's Cp.
type Seen<'a> = (usize, &'a Pass, f64);

/// Taps in their order, each with its passes.
fn by_tap(r: &Reduction) -> Vec<(&str, Vec<Seen<'_>>)> {
    let mut taps: Vec<&str> = r.levels.iter().map(|l| l.tap.as_str()).collect();
    let mut known = BTreeSet::new();
    taps.retain(|tap| known.insert(*tap));
    let of = |tap: &str| {
        let cp = |(i, p): (usize, &'_ Pass)| p.taps.get(tap).and_then(|t| t.cp).map(|cp| (i, cp));
        r.passes.iter().enumerate().filter_map(|(i, p)| cp((i, p)).map(|(i, cp)| (i, p, cp))).collect()
    };
    taps.into_iter().map(|tap| (tap, of(tap))).collect()
}

fn channel_of(passes: &[Seen<'_>], tap: &str) -> String {
    passes.last().map_or(String::new(), |(_, p, _)| p.taps[tap].channel.clone())
}

/// Stagnation is the most that a steady flow gives.
fn beyond_stagnation(r: &Reduction) -> Vec<Fault> {
    let mut found = Vec::new();
    let taps = by_tap(r);
    for (tap, passes) in &taps {
        let cp = median(passes.iter().map(|p| p.2).collect()).unwrap_or(0.0);
        if cp > BEYOND_STAGNATION {
            let reason = format!("Cp {cp:.2} is more than stagnation gives, which is 1");
            found.push(Fault {
                kind: Kind::Reversed,
                tap: (*tap).to_string(),
                channel: channel_of(passes, tap),
                reason,
            });
        }
    }
    // Most taps at once: it is what they are divided by.
    if found.len() * 2 > taps.len() && found.len() > 1 {
        let q = r.passes.iter().find_map(|p| p.q.as_ref()?.measured.as_ref());
        let reason = "most taps are beyond stagnation, so q reads low".to_string();
        let channel = q.map_or("q".to_string(), |(channel, _)| channel.clone());
        return vec![Fault { kind: Kind::Leak, tap: "dynamic pressure".to_string(), channel, reason }];
    }
    found
}

/// How a tap follows the gusts of q within one pass.
#[derive(Clone, Copy, Debug)]
struct Follow {
    pass: usize,
    /// Pressure per dynamic pressure of slow gusts, and its standard error.
    gain: f64,
    gain_se: f64,
    /// Lag behind q, s, and its standard error.
    lag_s: f64,
    lag_se: f64,
}

/// By tap and pass: p in a bin on q of the bin before, the same and the next one.
fn following<'a>(r: &'a Reduction, sessions: &[Session]) -> BTreeMap<&'a str, Vec<Follow>> {
    let mut all: BTreeMap<&str, Vec<Follow>> = BTreeMap::new();
    let by_id: Vec<BTreeMap<u32, &Segment>> =
        sessions.iter().map(|s| segments(s).map(|g| (g.id, g)).collect()).collect();
    for (i, pass) in r.passes.iter().enumerate() {
        let Some((q, _)) = pass.q.as_ref().and_then(|q| q.measured.as_ref()) else { continue };
        let group: Vec<&Segment> = pass.segments.iter().filter_map(|id| by_id[pass.session].get(id).copied()).collect();
        for (tap, mean) in &pass.taps {
            if let Some(follow) = follow(i, &group, &mean.channel, q) {
                all.entry(tap).or_default().push(follow);
            }
        }
    }
    all
}

/// *Method* least squares by centred normal equations, an own mean for every segment, so that a jump between dwells is no gust.
fn follow(pass: usize, group: &[&Segment], p: &str, q: &str) -> Option<Follow> {
    // Sums of products of the deviations of q before, q, q after, p.
    let (mut sums, mut n, mut means) = ([[0.0; 4]; 4], 0usize, 0usize);
    for segment in group {
        let (p, q) = (&segment.channels.get(p)?.bins, &segment.channels.get(q)?.bins);
        let rows: Vec<[f64; 4]> = (1..p.len().min(q.len()).saturating_sub(1))
            .filter_map(|i| Some([q[i - 1]?, q[i]?, q[i + 1]?, p[i]?]))
            .collect();
        let mean: [f64; 4] = std::array::from_fn(|k| rows.iter().map(|row| row[k]).sum::<f64>() / rows.len() as f64);
        for row in &rows {
            for i in 0..4 {
                for j in 0..=i {
                    sums[i][j] += (row[i] - mean[i]) * (row[j] - mean[j]);
                }
            }
        }
        n += rows.len();
        means += 1;
    }
    if n < FEWEST_BINS + means {
        return None;
    }
    let xx = Matrix3::from_fn(|i, j| sums[i.max(j)][i.min(j)]);
    let (xy, yy) = (Vector3::from_fn(|i, _| sums[3][i]), sums[3][3]);
    let inverse = xx.try_inverse()?;
    let slopes = inverse * xy;
    let variance = (yy - slopes.dot(&xy)).max(0.0) / (n - means - 3) as f64;
    let se = |c: &Vector3<f64>| (variance * c.dot(&(inverse * c)).max(0.0)).sqrt();
    let (sum, apart) = (Vector3::new(1.0, 1.0, 1.0), Vector3::new(1.0, 0.0, -1.0));
    let (gain, bin_s) = (sum.dot(&slopes), group.first()?.bin_s);
    let lag_s = apart.dot(&slopes) / gain * bin_s;
    let made = Follow { pass, gain, gain_se: se(&sum), lag_s, lag_se: se(&apart) / gain.abs() * bin_s };
    [made.gain, made.gain_se, made.lag_s, made.lag_se].iter().all(|x| x.is_finite()).then_some(made)
}

/// Taps that do not hear the gusts that their neighbours hear.
fn deaf(r: &Reduction, follows: &BTreeMap<&str, Vec<Follow>>) -> Vec<Fault> {
    let taps = by_tap(r);
    let level: BTreeMap<&str, f64> =
        taps.iter().filter_map(|(tap, p)| Some((*tap, median(p.iter().map(|p| p.2).collect())?))).collect();
    // Share of a tap's level that the gusts show in a pass: 1 for a hose in order, whichever way round it is.
    let share = |tap: &str, f: &Follow| ((f.gain / level[tap]).abs(), f.gain_se / level[tap].abs());
    let mut found = Vec::new();
    for (tap, passes) in &taps {
        let Some(own) = follows.get(tap).filter(|_| level[tap].abs() >= LEAST_LEVEL) else { continue };
        let mut deaf = Vec::new();
        for f in own {
            let (here, se) = share(tap, f);
            let neighbours = follows.iter().filter(|(other, _)| *other != tap && level[**other].abs() >= LEAST_LEVEL);
            let there: Vec<f64> = neighbours
                .filter_map(|(other, all)| Some(share(other, all.iter().find(|o| o.pass == f.pass)?).0))
                .collect();
            let heard = median(there).is_some_and(|m| m > HEARD);
            if heard && here + SURE * se < DEAF {
                deaf.extend(&r.passes[f.pass].segments);
            }
        }
        if deaf.len() > 1 {
            let reason = format!("gusts that its neighbours show do not arrive (segment {})", list(&deaf));
            found.push(Fault {
                kind: Kind::Blocked,
                tap: (*tap).to_string(),
                channel: channel_of(passes, tap),
                reason,
            });
        }
    }
    found
}

/// Taps that follow q later than the others do.
fn late(r: &Reduction, follows: &BTreeMap<&str, Vec<Follow>>) -> Vec<Fault> {
    // Weighted over passes.
    let lag = |all: &Vec<Follow>| -> Option<(f64, f64)> {
        let known = || all.iter().filter(|f| f.lag_se > 0.0 && f.lag_se.is_finite() && f.gain.abs() > SURE * f.gain_se);
        let weight: f64 = known().map(|f| f.lag_se.powi(-2)).sum();
        (weight > 0.0).then(|| (known().map(|f| f.lag_s / f.lag_se.powi(2)).sum::<f64>() / weight, weight.powf(-0.5)))
    };
    let lags: BTreeMap<&str, (f64, f64)> = follows.iter().filter_map(|(tap, all)| Some((*tap, lag(all)?))).collect();
    let mut found = Vec::new();
    for (tap, passes) in by_tap(r) {
        let Some((own, se)) = lags.get(tap) else { continue };
        let others = median(lags.iter().filter(|(t, _)| **t != tap).map(|(_, l)| l.0).collect()).unwrap_or(0.0);
        if own - others.max(0.0) > LATE_S && own - others.max(0.0) > SURE * se {
            let reason = format!("follows the dynamic pressure by about {own:.1} s, its neighbours by {others:.1} s");
            found.push(Fault { kind: Kind::Late, tap: tap.to_string(), channel: channel_of(&passes, tap), reason });
        }
    }
    found
}

/// A level that jumps, the same configuration before and after.
#[derive(Clone, Copy, Debug)]
struct Step<'a> {
    tap: &'a str,
    /// First pass after it.
    at: usize,
    /// Cp before and after, and the standard error of their difference.
    before: f64,
    after: f64,
    se: f64,
}

/// Faults by jumps of the level, and by what one configuration's levels look like beside the baseline's.
fn stepped(r: &Reduction) -> Vec<Fault> {
    let mut steps = steps(r);
    if steps.len() * 2 <= by_tap(r).len().max(2) {
        // Jumps at many taps at once are the probe's or the road's.
        steps.extend(beside_the_baseline(r));
    } else {
        steps = beside_the_baseline(r);
    }
    let passes = by_tap(r);
    let channel = |tap: &str| passes.iter().find(|p| p.0 == tap).map_or(String::new(), |p| channel_of(&p.1, tap));
    let mut found: Vec<Fault> = Vec::new();
    for (i, a) in steps.iter().enumerate() {
        let since = format!("since segment {}", list(&r.passes[a.at].segments[..1]));
        if let Some(b) = steps[i + 1..].iter().find(|b| exchanged(a, b)) {
            let tap = format!("{} and {}", a.tap, b.tap);
            let channel = format!("{} and {}", channel(a.tap), channel(b.tap));
            let reason =
                format!("each reads what the other read before, Cp {:.2} and {:.2}, {since}", a.after, b.after);
            found.push(Fault { kind: Kind::Swapped, tap, channel, reason });
        } else if !steps[..i].iter().any(|b| exchanged(a, b)) {
            let told = |kind, what: &str| {
                let reason = format!("Cp went from {:.2} to {:.2} {since}, {what}", a.before, a.after);
                Fault { kind, tap: a.tap.to_string(), channel: channel(a.tap), reason }
            };
            let share = a.after / a.before;
            if (share + 1.0).abs() < 0.2 && a.before.abs() >= LEAST_LEVEL {
                found.push(told(Kind::Reversed, "as much the other way"));
            } else if (-0.1..LEAKING).contains(&share) && a.before.abs() >= LEAST_LEVEL && a.se.is_finite() {
                found.push(told(Kind::Leak, "the other taps did not"));
            }
        }
    }
    found.dedup_by(|a, b| a.kind == b.kind && a.tap == b.tap);
    found
}

fn exchanged(a: &Step<'_>, b: &Step<'_>) -> bool {
    let apart = (a.before - b.before).abs();
    let near = |x: f64, y: f64| (x - y).abs() < EXCHANGED * apart;
    a.tap != b.tap
        && a.at.abs_diff(b.at) <= 1
        && apart >= LEAST_LEVEL
        && near(a.after, b.before)
        && near(b.after, a.before)
}

/// The largest sure jump of every tap, configuration, heading and drift taken off.
fn steps(r: &Reduction) -> Vec<Step<'_>> {
    let taps = by_tap(r);
    let mut groups: BTreeMap<Vec<usize>, Vec<&str>> = BTreeMap::new();
    for (tap, passes) in &taps {
        groups.entry(passes.iter().map(|p| p.0).collect()).or_default().push(tap);
    }
    let tries = (r.passes.len() * taps.len()) as f64;
    let mut found = Vec::new();
    for (indices, names) in &groups {
        let passes: Vec<&Pass> = indices.iter().map(|i| &r.passes[*i]).collect();
        let Some(without) = Without::of(&passes) else { continue };
        for tap in names {
            let y = DVector::from_iterator(passes.len(), passes.iter().filter_map(|p| p.taps[*tap].cp));
            let Some((split, step, se, p)) = without.largest_step(&y) else { continue };
            if p * tries < P_STEP {
                // What the tap read before, whatever was fitted.
                let before = y.rows(0, split).sum() / split as f64;
                found.push(Step { tap, at: indices[split], before, after: before + step, se });
            }
        }
    }
    found
}

/// What is left of passes when the levels of configurations, heading and drift are taken off: the same for all taps of these passes.
struct Without {
    /// I − X (X'X)⁻¹ X'.
    rest: DMatrix<f64>,
    /// For every split that can be told from those: its number, and what is left of the step, over its square.
    steps: Vec<(usize, DVector<f64>, f64)>,
    /// Degrees of freedom with a step.
    dof: f64,
}

impl Without {
    fn of(passes: &[&Pass]) -> Option<Self> {
        let n = passes.len();
        let design = undisturbed(passes);
        let fit = model::fit(&design, &DVector::zeros(n)).filter(|f| f.dof >= 3)?;
        let rest = DMatrix::identity(n, n) - &design * &fit.weights;
        let step = |split: usize| {
            let left = &rest * DVector::from_fn(n, |i, _| f64::from(u8::from(i >= split)));
            let square = left.norm_squared();
            (square > 0.05).then_some((split, left, square))
        };
        let steps = (1..n).filter_map(step).collect();
        Some(Self { rest, steps, dof: (fit.dof - 1) as f64 })
    }

    /// Split, step, its standard error and p of the surest step. *Method* Frisch, Waugh and Lovell: a column's estimate from what the others leave.
    fn largest_step(&self, y: &DVector<f64>) -> Option<(usize, f64, f64, f64)> {
        let left = (&self.rest * y).norm_squared();
        let one = |(split, column, square): &(usize, DVector<f64>, f64)| {
            let step = column.dot(y) / square;
            let se = ((left - step * step * square).max(0.0) / self.dof / square).sqrt();
            Some((*split, step, se, t_two_sided_p(step / se, self.dof).filter(|_| se > 0.0)?))
        };
        self.steps.iter().filter_map(one).min_by(|a, b| a.3.total_cmp(&b.3))
    }
}

/// Levels of the configurations, both ways, a drift.
fn undisturbed(passes: &[&Pass]) -> DMatrix<f64> {
    let mut letters: Vec<(&str, u64)> = Vec::new();
    for pass in passes {
        let level = (pass.configuration.as_str(), pass.target_kmh.to_bits());
        if !letters.contains(&level) {
            letters.push(level);
        }
    }
    let (first, last) = (passes[0].t_s, passes[passes.len() - 1].t_s);
    let heading = |p: &Pass| {
        f64::from(u8::from(p.direction == Direction::Out)) - f64::from(u8::from(p.direction == Direction::Back))
    };
    let both = passes.iter().any(|p| heading(p) != heading(passes[0]));
    let columns = letters.len() + usize::from(both) + 1;
    DMatrix::from_fn(passes.len(), columns, |i, j| {
        let p = passes[i];
        if j < letters.len() {
            f64::from(u8::from((p.configuration.as_str(), p.target_kmh.to_bits()) == letters[j]))
        } else if j == columns - 1 {
            (p.t_s - first) / (last - first).max(1.0) - 0.5
        } else {
            heading(p)
        }
    })
}

/// A fault that came with a change of the part looks like the part's doing, but for two patterns: exchanged levels, a turned sign.
fn beside_the_baseline(r: &Reduction) -> Vec<Step<'_>> {
    let level = |tap: &str, letter: &str, target: f64| {
        r.levels.iter().find(|l| l.tap == tap && l.configuration == letter && l.target_kmh == target)
    };
    let step = |c: &'_ Comparison| {
        let at = r.passes.iter().position(|p| p.configuration == c.configuration && p.target_kmh == c.target_kmh)?;
        let before = level(&c.tap, &r.baseline, c.target_kmh)?.cp.value;
        let sure = c.delta.u95.is_some_and(|u| c.delta.value.abs() > 5.0 * u);
        sure.then_some((at, before, before + c.delta.value))
    };
    r.comparisons
        .iter()
        .filter_map(|c| {
            let (at, before, after) = step(c)?;
            Some(Step { tap: &c.tap, at, before, after, se: f64::INFINITY })
        })
        .collect()
}
