//! Sessions → coefficients, differences, verdicts: what the outing says, and how sure one may be.
//!
//! Segments → passes (`passes`), with zeros interpolated (`zeros`) → Cp by the measured q (`probe`, `air`) → one linear model a tap and
//! target (`model`, `compare`) → verdicts at 5 % over the family (`inference`). Plain data out; `report` gives it a shape.

pub mod air;
pub mod airspeed;
pub mod compare;
pub mod constancy;
pub mod contour;
pub mod cores;
pub mod force;
pub mod inference;
pub mod model;
pub mod passes;
pub mod plan;
pub mod plumbing;
pub mod probe;
pub mod scatter;
pub mod sweep;
pub mod wind;
pub mod workshop;
pub mod zeros;

use crate::config::{Air, Configuration};
use crate::session::{AirSource, Entry, Session};
use airspeed::{Factor, WindPair};
use compare::{Comparison, Level, Question, Weakness};
use contour::ContourRow;
use cores::CoreRow;
use force::{AxleRow, BaseRow, ForceRow, Ground};
use passes::{LeftOut, Pass};
use plan::NextPass;
use scatter::Outlier;
use std::collections::BTreeSet;
use sweep::{Interval, SweepRow, Swept};
use zeros::Zeros;

/// What a reduction is asked for.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Options {
    /// Speed at which pressures are stated, km/h; none: the first target.
    pub at_kmh: Option<f64>,
    /// Letter of another baseline than the outing's.
    pub baseline: Option<String>,
}

/// Why nothing can be reduced.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum ReductionError {
    /// No session was given.
    #[error("no session to reduce")]
    NoSession,
    /// Sessions of different cars.
    #[error("the sessions are of different cars (`{0}` and `{1}`): reduce them apart")]
    DifferentCars(String, String),
    /// Sessions with different baselines.
    #[error("the sessions have different baselines (`{0}` and `{1}`): name one with --baseline")]
    DifferentBaselines(String, String),
    /// A letter that no session has.
    #[error("there is no configuration `{letter}` to be the baseline: the outing has {known}")]
    NoSuchBaseline {
        /// What was asked for.
        letter: String,
        /// What there is.
        known: String,
    },
}

/// Everything that sessions say.
#[derive(Clone, Debug)]
pub struct Reduction {
    /// Title of the first outing.
    pub title: String,
    /// Name of the car.
    pub car: String,
    /// Letter of the baseline.
    pub baseline: String,
    /// Configurations in the order of the outing.
    pub configurations: Vec<Configuration>,
    /// Speed at which pressures are stated, km/h.
    pub at_kmh: f64,
    /// q of that speed in ISA sea-level air, Pa.
    pub at_q_pa: f64,
    /// Smallest pressure change worth knowing at the first target, Pa, and as a Cp difference.
    pub resolve: (f64, f64),
    /// Passes wanted of each configuration, direction and target.
    pub wanted: u32,
    /// Mean air of all passes; none without a pass.
    pub air: Option<MeanAir>,
    /// True over indicated airspeed that was applied.
    pub probe_factor: Factor,
    /// Passes in time order.
    pub passes: Vec<Pass>,
    /// Level of every tap, configuration and target.
    pub levels: Vec<Level>,
    /// Differences from the baseline.
    pub comparisons: Vec<Comparison>,
    /// Wind of every out-and-back pair.
    pub wind: Vec<WindPair>,
    /// Drift of every pressure channel between consecutive zeros.
    pub drift: Vec<Drift>,
    /// Forces by group and altogether.
    pub forces: Vec<ForceRow>,
    /// Axle loads.
    pub balance: Vec<AxleRow>,
    /// Base contribution to drag.
    pub base_drag: Vec<BaseRow>,
    /// Flow of heat-exchanger cores.
    pub cores: Vec<CoreRow>,
    /// Curves over a configuration's parameter.
    pub sweeps: Vec<SweepRow>,
    /// Section coefficients of the contour.
    pub contour: Vec<ContourRow>,
    /// What was left out.
    pub left_out: Vec<LeftOut>,
    /// What to drive next; none when all is decided.
    pub next: Option<NextPass>,
    /// Cautions, in words.
    pub flags: Vec<String>,
}

/// Mean air of the passes.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct MeanAir {
    /// Temperature, pressure, humidity.
    pub air: Air,
    /// Density, kg/m³.
    pub density: f64,
    /// Weakest source of any segment.
    pub source: AirSource,
}

/// Drift of a channel between two zeros.
#[derive(Clone, Debug, PartialEq)]
pub struct Drift {
    /// Channel.
    pub channel: String,
    /// Times of the two zeros, s.
    pub from_s: f64,
    /// Second one.
    pub to_s: f64,
    /// Change, Pa.
    pub change_pa: f64,
    /// Standard uncertainty of that, Pa.
    pub u_pa: f64,
    /// It exceeds the change sought.
    pub exceeds: bool,
}

/// Reduces sessions of one car and baseline together.
///
/// # Errors
/// [`ReductionError`] when they do not belong together. Poor data is no error: what cannot be told is absent, with the reason in `flags`.
pub fn reduce(sessions: &[Session], options: &Options) -> Result<Reduction, ReductionError> {
    let first = sessions.first().ok_or(ReductionError::NoSession)?;
    let setup = &first.header.setup;
    let configurations = configurations(sessions);
    let baseline = baseline(sessions, &configurations, options)?;
    let zeros: Vec<Zeros<'_>> = sessions.iter().map(Zeros::of).collect();
    let (mut passes, mut left_out) = (Vec::new(), Vec::new());
    for (index, session) in sessions.iter().enumerate() {
        let (mut some, mut out) = passes::passes(index, session);
        passes.append(&mut some);
        left_out.append(&mut out);
    }
    let at_kmh = options.at_kmh.unwrap_or(setup.outing.targets_kmh[0]);
    let resolve_pa = setup.outing.resolve_pa;
    let resolve_cp = resolve_pa / probe::dynamic_pressure(air::ISA_DENSITY, setup.outing.targets_kmh[0]);
    let wind = airspeed::pairs(&passes);
    let mut flags = airspeed::wind_without_a_probe(&mut passes);
    let (probe_factor, words) = airspeed::factor(&setup.car.probe, &wind, &passes);
    flags.extend(words);
    airspeed::correct(&mut passes, &setup.car.probe, &probe_factor);
    let letters: Vec<String> = configurations.iter().map(|c| c.letter.clone()).collect();
    let factor = probe_factor.error(&setup.car.probe);
    let question = Question { configurations: &letters, baseline: &baseline, resolve_cp, factor };
    let Verdicts { levels, comparisons, outliers } = compared(&passes, &zeros, &taps(sessions), (question, &mut flags));
    let drift = drift(&zeros, sessions, resolve_pa);
    let at_q_pa = probe::dynamic_pressure(air::ISA_DENSITY, at_kmh);
    let ground = Ground { car: &setup.car, passes: &passes, zeros: &zeros, question };
    let (cores, words_of_cores) = cores::cores(ground, at_kmh);
    let (contour, words_of_contour) = contour::contour(ground);
    let density = passes.first().map_or(air::ISA_DENSITY, |p| p.density);
    flags.extend(constancy::changes(&levels, density).iter().map(constancy::words));
    flags.extend(words_of_cores);
    flags.extend(words_of_contour);
    let forces = force::forces(ground, &levels, at_q_pa);
    let balance = force::balance(ground, at_q_pa);
    let base_drag = force::base_drag(ground, at_q_pa, at_kmh);
    let mut reduction = Reduction {
        title: setup.outing.title.clone(),
        car: setup.car.name.clone(),
        baseline: baseline.clone(),
        configurations: configurations.clone(),
        at_kmh,
        at_q_pa,
        resolve: (resolve_pa, resolve_cp),
        wanted: setup.outing.passes,
        air: mean_air(sessions),
        probe_factor,
        passes: passes.clone(),
        levels,
        comparisons,
        wind,
        drift,
        forces,
        balance,
        base_drag,
        cores,
        sweeps: sweeps(ground, &configurations, &taps(sessions)),
        contour,
        left_out,
        next: None,
        flags,
    };
    reduction.next = plan::next_pass(&reduction);
    let cautions = cautions(&reduction, sessions, &zeros);
    reduction.flags.splice(0..0, cautions);
    let scatter = scatter::cautions(&reduction, &outliers);
    reduction.flags.extend(scatter);
    let faults = plumbing::faults(&reduction, sessions);
    // First of all: what is said of a tap with a fault is worth nothing.
    reduction.flags.splice(0..0, faults.iter().map(ToString::to_string));
    reduction.flags.extend(force::without_area(&setup.car, &reduction));
    Ok(reduction)
}

/// Configurations of all sessions, in the order in which they are first named.
fn configurations(sessions: &[Session]) -> Vec<Configuration> {
    let mut all: Vec<Configuration> = Vec::new();
    for c in sessions.iter().flat_map(|s| &s.header.setup.outing.configurations) {
        if !all.iter().any(|a| a.letter == c.letter) {
            all.push(c.clone());
        }
    }
    all
}

fn baseline(sessions: &[Session], all: &[Configuration], options: &Options) -> Result<String, ReductionError> {
    let cars: Vec<&str> = sessions.iter().map(|s| s.header.setup.car.name.as_str()).collect();
    if let Some(other) = cars.iter().find(|c| **c != cars[0]) {
        return Err(ReductionError::DifferentCars(cars[0].to_string(), (*other).to_string()));
    }
    if let Some(letter) = &options.baseline {
        if !all.iter().any(|c| &c.letter == letter) {
            let known: Vec<&str> = all.iter().map(|c| c.letter.as_str()).collect();
            return Err(ReductionError::NoSuchBaseline { letter: letter.clone(), known: known.join(", ") });
        }
        return Ok(letter.clone());
    }
    let letters: Vec<&str> = sessions.iter().map(|s| s.header.setup.outing.baseline()).collect();
    match letters.iter().find(|l| **l != letters[0]) {
        Some(other) => Err(ReductionError::DifferentBaselines(letters[0].to_string(), (*other).to_string())),
        None => Ok(letters[0].to_string()),
    }
}

/// Taps in the order of the car file.
fn taps(sessions: &[Session]) -> Vec<String> {
    let mut all: Vec<String> = Vec::new();
    for tap in sessions.iter().flat_map(|s| &s.header.setup.car.taps) {
        if !all.contains(&tap.name) {
            all.push(tap.name.clone());
        }
    }
    all
}

fn mean_air(sessions: &[Session]) -> Option<MeanAir> {
    let segments = sessions
        .iter()
        .flat_map(|s| &s.entries)
        .filter_map(|e| if let Entry::Segment(s) = e { Some(&s.air) } else { None });
    let all: Vec<_> = segments.collect();
    let n = all.len() as f64;
    let mean = |of: fn(&Air) -> f64| all.iter().map(|a| of(&a.air)).sum::<f64>() / n;
    let source = all.iter().map(|a| a.source).min()?;
    let air = Air {
        temperature_c: mean(|a| a.temperature_c),
        pressure_hpa: mean(|a| a.pressure_hpa),
        humidity_pct: mean(|a| a.humidity_pct),
    };
    Some(MeanAir { air, density: air::density(&air), source })
}

/// What the comparisons of all targets say.
#[derive(Default)]
struct Verdicts {
    levels: Vec<Level>,
    comparisons: Vec<Comparison>,
    outliers: Vec<Outlier>,
}

fn compared(
    passes: &[Pass],
    zeros: &[Zeros<'_>],
    taps: &[String],
    (question, flags): (Question<'_>, &mut Vec<String>),
) -> Verdicts {
    let mut all = Verdicts::default();
    let mut weaknesses: BTreeSet<(Weakness, String)> = BTreeSet::new();
    for target in passes::targets(passes) {
        let of_target: Vec<&Pass> = passes.iter().filter(|p| p.target_kmh == target).collect();
        let mut compared = compare::compare(&of_target, zeros, taps, question);
        // By configuration, then tap: a configuration's verdicts stand together.
        let place = |letter: &str| question.configurations.iter().position(|c| c == letter);
        compared.comparisons.sort_by_key(|c| place(&c.configuration));
        all.levels.append(&mut compared.levels);
        all.comparisons.append(&mut compared.comparisons);
        all.outliers.append(&mut compared.outliers);
        weaknesses.extend(compared.weaknesses.into_iter().map(|w| (w, format!("{target} km/h"))));
    }
    flags.extend(weaknesses.iter().map(|(weakness, at)| format!("{at}: {}", words_of(weakness))));
    all
}

fn words_of(weakness: &Weakness) -> String {
    match weakness {
        Weakness::OnePass(c) => format!("one pass of {c} only, its scatter is borrowed from the others; drive more"),
        Weakness::OneWay(c) => {
            format!("{c} was driven one way only, wind and road may show as a change; drive it both ways")
        }
        Weakness::BaselineOnce => {
            "the baseline was driven in one block, drift cannot be told from a change; drive it again at the end"
                .to_string()
        }
        Weakness::Bent => {
            "the drift bends (warming up?), and what is not straight of it may show as a change; alternate faster"
                .to_string()
        }
        Weakness::Drifting(taps) => format!(
            "drift of more than the change sought at {taps}, with the baseline in two blocks: a drift that is not straight shows as \
             a change; alternate"
        ),
        Weakness::Still(tap) => {
            format!("the passes of {tap} agree to the last digit, as no measurement does; look at it")
        }
        Weakness::NoScatter => "too few passes for any interval; drive more".to_string(),
    }
}

fn drift(zeros: &[Zeros<'_>], sessions: &[Session], resolve_pa: f64) -> Vec<Drift> {
    let mut list = Vec::new();
    for (zeros, session) in zeros.iter().zip(sessions) {
        for channel in session
            .header
            .setup
            .rig
            .channels
            .iter()
            .filter(|c| c.quantity.inside() == "Pa" && c.quantity != crate::units::Quantity::Barometer)
        {
            for (i, pair) in zeros.list().windows(2).enumerate() {
                let mean = |k: usize| pair[k].channels.get(&channel.name).map(|s| s.mean);
                let (Some(a), Some(b)) = (mean(0), mean(1)) else { continue };
                let u_pa = zeros.standard_error(i, &channel.name).hypot(zeros.standard_error(i + 1, &channel.name));
                list.push(Drift {
                    channel: channel.name.clone(),
                    from_s: pair[0].t1.seconds(),
                    to_s: pair[1].t1.seconds(),
                    change_pa: b - a,
                    u_pa,
                    exceeds: (b - a).abs() > resolve_pa,
                });
            }
        }
    }
    list
}

/// A sweep of every tap and target, where three settings or more of one parameter were driven.
fn sweeps(ground: Ground<'_>, configurations: &[Configuration], taps: &[String]) -> Vec<SweepRow> {
    let mut rows = Vec::new();
    let Some(parameter) = configurations.iter().find_map(|c| c.parameter.as_ref()) else { return rows };
    let setting = |letter: &str| {
        let c = configurations.iter().find(|c| c.letter == letter)?;
        c.parameter.as_ref().filter(|p| p.name == parameter.name).map(|p| p.value)
    };
    for target in ground.targets() {
        for tap in taps {
            let Some(model) = ground.weighted(target, &[(tap, 1.0)]) else { continue };
            let Some(swept) = sweep::sweep(&model, ground.question.baseline, setting) else { continue };
            let crossing = sweep::reaches(&swept, ground.question.resolve_cp);
            let Swept { levels, quadratic, lack_of_fit_p, .. } = swept;
            let range = [levels[0].0, levels[levels.len() - 1].0];
            let extreme = quadratic.as_ref().and_then(sweep::Quadratic::vertex);
            let extreme = extreme.filter(|(x, ..)| (range[0]..=range[1]).contains(x)).map(|(x, set, _)| (x, set));
            rows.push(SweepRow {
                tap: tap.clone(),
                target_kmh: target,
                parameter: (parameter.name.clone(), parameter.unit.clone()),
                levels,
                quadratic,
                lack_of_fit_p,
                extreme,
                crossing,
            });
        }
    }
    rows
}

/// The set of an extreme in words; open where the sweep does not close it.
pub fn words_of_interval(interval: Interval, unit: &str) -> String {
    match interval {
        Interval::Within(a, b) => format!("{a:.1} to {b:.1} {unit}"),
        Interval::Outside(..) | Interval::All => "not determined by this sweep".to_string(),
        Interval::Nowhere => "nowhere in the tested range".to_string(),
    }
}

/// What must be said about the data as a whole.
fn cautions(r: &Reduction, sessions: &[Session], zeros: &[Zeros<'_>]) -> Vec<String> {
    let mut words = Vec::new();
    if r.passes.is_empty() {
        words.push("no pass to reduce: no segment was kept, or all are void or left out".to_string());
    }
    for (i, zeros) in zeros.iter().enumerate() {
        let which = if sessions.len() > 1 { format!("session {}: ", i + 1) } else { String::new() };
        match zeros.list().len() {
            0 => {
                words.push(format!("{which}never zeroed: sensor offsets are in every pressure; press z at standstill"))
            }
            1 => words.push(format!("{which}one zero only: drift is not known; zero again at the end")),
            _ => {}
        }
    }
    if r.passes.iter().any(|p| p.q.is_none()) {
        words.push("passes without q: neither dynamic pressure nor speed was measured; no Cp there".to_string());
    }
    if r.passes.iter().any(|p| p.q.as_ref().is_some_and(|q| q.pa < passes::LEAST_Q_PA)) {
        words.push(format!("passes with q below {} Pa give no Cp; check the probe's hoses", passes::LEAST_Q_PA));
    }
    if r.air.is_some_and(|a| a.source == AirSource::Assumed) {
        words.push("air assumed standard: nobody stated or measured it; say it with the key a or in [air]".to_string());
    }
    for drift in r.drift.iter().filter(|d| d.exceeds) {
        words.push(format!(
            "zero of {} drifted {:+.1} Pa between {:.0} s and {:.0} s, more than the change sought; zero more often",
            drift.channel, drift.change_pa, drift.from_s, drift.to_s
        ));
    }
    if r.comparisons.is_empty() && !r.passes.is_empty() {
        words.push(format!("nothing to compare: drive the baseline {} and another configuration", r.baseline));
    }
    words
}
