//! What pressures mean: panel forces, axle shares, base drag.
//!
//! x is rearward, y right, z up; normals point out of the body: dF = −p n dA. Drag is force along +x, lift along +z (negative is
//! downforce). Everything is linear in a pass's Cps, so a force is a weighted Cp and gets its interval from the same model; taps scatter
//! together, and that is in it. Beside it stand the two bounds: taps independent, taps fully common.

use super::compare::{Estimate, Model, Observation, Outcome, Question, ZeroEffect};
use super::passes::{self, Pass};
use super::zeros::Zeros;
use super::{Level, Reduction};
use crate::config::{Car, Tap};

/// Components of a force.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Component {
    /// Along +x.
    Drag,
    /// Along +y.
    Side,
    /// Along +z.
    Lift,
}

impl Component {
    /// All three.
    pub const ALL: [Self; 3] = [Self::Drag, Self::Side, Self::Lift];
    /// Its word in files.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Drag => "drag",
            Self::Side => "side",
            Self::Lift => "lift",
        }
    }
    const fn axis(self) -> usize {
        match self {
            Self::Drag => 0,
            Self::Side => 1,
            Self::Lift => 2,
        }
    }
}

/// Force of a patch, N.
///
/// *Input* pressure against ambient Pa, area m², outward unit normal. *Output* N along x, y, z. *Method* dF = −p n dA.
///
/// ```
/// // Suction under a floor (normal down) pulls down.
/// assert_eq!(steadytap::reduction::force::patch(-310.0, 0.5, [0.0, 0.0, -1.0])[2], -155.0);
/// ```
pub fn patch(pa: f64, area_m2: f64, normal: [f64; 3]) -> [f64; 3] {
    normal.map(|n| -pa * n * area_m2)
}

/// Moment of a force about a point, N m: r × F.
pub fn moment(at: [f64; 3], about: [f64; 3], f: [f64; 3]) -> [f64; 3] {
    let r = [at[0] - about[0], at[1] - about[1], at[2] - about[2]];
    [r[1] * f[2] - r[2] * f[1], r[2] * f[0] - r[0] * f[2], r[0] * f[1] - r[1] * f[0]]
}

/// Vertical loads on front and rear axle, N (up positive), of a force at a place.
///
/// *Input* force N, place m (x from the front axle, z from the road), wheelbase m. *Method* lever rule about the contact patches: the rear gets
/// (Fz x − Fx z)/L, the front the rest; drag at a height loads the rear and unloads the front.
pub fn axles(f: [f64; 3], at: [f64; 3], wheelbase_m: f64) -> [f64; 2] {
    let rear = (f[2] * at[0] - f[0] * at[2]) / wheelbase_m;
    [f[2] - rear, rear]
}

/// A force of one group of taps (none: all of them), for a configuration or its difference from the baseline.
#[derive(Clone, Debug)]
pub struct ForceRow {
    /// Group; none: all taps with an area.
    pub group: Option<String>,
    /// Configuration.
    pub configuration: String,
    /// Target, km/h.
    pub target_kmh: f64,
    /// A difference from the baseline.
    pub difference: bool,
    /// Drag, side or lift.
    pub component: Component,
    /// N at the stated speed in standard air.
    pub newton: Estimate,
    /// 95 % half-widths with taps independent, and fully common, N.
    pub bounds: Option<[f64; 2]>,
}

/// Axle loads of the taps' forces, for a configuration or its difference.
#[derive(Clone, Debug)]
pub struct AxleRow {
    /// Configuration.
    pub configuration: String,
    /// Target, km/h.
    pub target_kmh: f64,
    /// A difference from the baseline.
    pub difference: bool,
    /// Front and rear, N up, by the taps.
    pub taps: [Estimate; 2],
    /// Front and rear, N up, by ride height and wheel rate, where there is a channel.
    pub ride_height: [Option<Estimate>; 2],
}

/// Base contribution to drag.
#[derive(Clone, Debug)]
pub struct BaseRow {
    /// Configuration.
    pub configuration: String,
    /// Target, km/h.
    pub target_kmh: f64,
    /// A difference from the baseline.
    pub difference: bool,
    /// Area-weighted mean Cp of the group base.
    pub mean_cp: Estimate,
    /// Contribution to C_D: −Σ Cp nₓ A / A_ref … positive is drag.
    pub cd: Estimate,
    /// Power at the stated speed in standard air, W.
    pub power_w: Estimate,
}

/// An estimate times a constant.
pub fn scaled(e: Estimate, by: f64) -> Estimate {
    Estimate { value: e.value * by, u: e.u.map(|u| u * by.abs()), dof: e.dof, u95: e.u95.map(|u| u * by.abs()) }
}

/// Everything that forces are made from.
#[derive(Clone, Copy)]
pub struct Ground<'a> {
    /// The car.
    pub car: &'a Car,
    /// Passes of all targets.
    pub passes: &'a [Pass],
    /// Zeros by session.
    pub zeros: &'a [Zeros<'a>],
    /// Configurations and baseline.
    pub question: Question<'a>,
}

impl<'a> Ground<'a> {
    /// Targets that were driven, rising.
    pub fn targets(&self) -> Vec<f64> {
        passes::targets(self.passes)
    }

    /// The model of Σ weight · Cp over the passes of a target that have all of these taps.
    pub fn weighted(&self, target_kmh: f64, weights: &[(&str, f64)]) -> Option<Model<'a>> {
        let of_target = self.passes.iter().filter(|p| p.target_kmh == target_kmh);
        Model::new(of_target.filter_map(|p| Observation::weighted(p, weights, self.question)).collect(), self.question)
    }

    /// The model of any value of a pass that goes with a power of the probe's factor.
    pub fn plain(
        &self,
        target_kmh: f64,
        power: f64,
        value: impl Fn(&'a Pass) -> Option<(f64, Vec<ZeroEffect<'a>>)>,
    ) -> Option<Model<'a>> {
        let of_target = self.passes.iter().filter(|p| p.target_kmh == target_kmh);
        let observed = of_target.filter_map(|p| {
            let (y, effects) = value(p)?;
            Observation::plain(p, y, effects, power)
        });
        Model::new(observed.collect(), self.question)
    }

    /// Levels (false) and differences (true) of a model.
    pub fn outcomes(&self, model: &Model<'a>) -> Vec<(bool, Outcome<'a>)> {
        let levels = model.levels(self.zeros).into_iter().map(|o| (false, o));
        levels.chain(model.differences(self.zeros).into_iter().map(|o| (true, o))).collect()
    }

    /// Taps that some pass has a Cp of.
    pub fn measured(&self, tap: &Tap) -> bool {
        self.passes.iter().any(|p| p.taps.get(&tap.name).is_some_and(|t| t.cp.is_some()))
    }
}

/// Forces of every group and of all taps.
pub fn forces(ground: Ground<'_>, levels: &[Level], at_q_pa: f64) -> Vec<ForceRow> {
    let with_area: Vec<&Tap> = ground.car.taps.iter().filter(|t| t.area_m2.is_some() && ground.measured(t)).collect();
    let mut groups: Vec<Option<&str>> = with_area.iter().map(|t| t.group.as_deref()).filter(Option::is_some).collect();
    groups.sort_unstable();
    groups.dedup();
    groups.push(None);
    let mut rows = Vec::new();
    for target in ground.targets() {
        for group in &groups {
            let taps: Vec<&&Tap> =
                with_area.iter().filter(|t| group.is_none() || t.group.as_deref() == *group).collect();
            for component in Component::ALL {
                let weight = |t: &&&Tap| -t.normal[component.axis()] * t.area_m2.unwrap_or(0.0);
                let weights: Vec<(&str, f64)> = taps.iter().map(|t| (t.name.as_str(), weight(t))).collect();
                if weights.iter().all(|(_, w)| w.abs() < 1e-9) {
                    continue;
                }
                let Some(model) = ground.weighted(target, &weights) else { continue };
                for (difference, o) in ground.outcomes(&model) {
                    let bounds =
                        if difference { None } else { bounds(levels, &weights, (o.configuration, target), at_q_pa) };
                    rows.push(ForceRow {
                        group: group.map(str::to_string),
                        configuration: o.configuration.to_string(),
                        target_kmh: target,
                        difference,
                        component,
                        newton: scaled(o.estimate, at_q_pa),
                        bounds,
                    });
                }
            }
        }
    }
    rows
}

/// √Σ(A u)² and |Σ A u| of single taps' half-widths, N.
fn bounds(levels: &[Level], weights: &[(&str, f64)], (configuration, target): (&str, f64), q: f64) -> Option<[f64; 2]> {
    let u = |tap: &str| {
        let level = levels.iter().find(|l| l.tap == tap && l.configuration == configuration && l.target_kmh == target);
        level.and_then(|l| l.cp.u95)
    };
    let parts: Vec<f64> = weights.iter().map(|(tap, w)| u(tap).map(|u| w * u * q)).collect::<Option<_>>()?;
    Some(independent_and_common(&parts))
}

/// √Σ aᵢ² for independent errors, |Σ aᵢ| for one common error; both are to be shown.
pub fn independent_and_common(parts: &[f64]) -> [f64; 2] {
    [parts.iter().map(|a| a * a).sum::<f64>().sqrt(), parts.iter().sum::<f64>().abs()]
}

/// Axle loads by the taps, and by ride height beside them.
pub fn balance(ground: Ground<'_>, at_q_pa: f64) -> Vec<AxleRow> {
    let car = ground.car;
    let taps: Vec<&Tap> = car.taps.iter().filter(|t| t.area_m2.is_some() && ground.measured(t)).collect();
    let share = |axle: usize| -> Vec<(&str, f64)> {
        let of = |t: &&Tap| axles(patch(1.0, t.area_m2.unwrap_or(0.0), t.normal), t.at, car.wheelbase_m)[axle];
        taps.iter().map(|t| (t.name.as_str(), of(t))).collect()
    };
    let mut rows = Vec::new();
    for target in ground.targets() {
        let models = [share(0), share(1)].map(|weights| ground.weighted(target, &weights));
        let [Some(front), Some(rear)] = models else { continue };
        let heights = ride_height_models(ground, target, at_q_pa);
        let (front, rear) = (ground.outcomes(&front), ground.outcomes(&rear));
        for ((difference, f), (_, r)) in front.into_iter().zip(rear) {
            let height = |axle: usize| {
                let outcomes: &Vec<(bool, Outcome<'_>)> = heights[axle].as_ref()?;
                let same = outcomes.iter().find(|(d, o)| *d == difference && o.configuration == f.configuration);
                same.map(|(_, o)| o.estimate)
            };
            rows.push(AxleRow {
                configuration: f.configuration.to_string(),
                target_kmh: target,
                difference,
                taps: [scaled(f.estimate, at_q_pa), scaled(r.estimate, at_q_pa)],
                ride_height: [height(0), height(1)],
            });
        }
    }
    rows
}

type Outcomes<'a> = Option<Vec<(bool, Outcome<'a>)>>;

/// Load by ride height: wheel rate × rise since the zero, scaled from the pass's q to the stated one.
fn ride_height_models<'a>(ground: Ground<'a>, target: f64, at_q_pa: f64) -> [Outcomes<'a>; 2] {
    let axles = ground.car.ride_height.as_ref().map(|r| [r.front.as_ref(), r.rear.as_ref()]).unwrap_or([None, None]);
    axles.map(|axle| {
        let axle = axle?;
        let load = |p: &'a Pass| {
            let q = p.q.as_ref().filter(|q| q.pa >= super::passes::LEAST_Q_PA)?;
            let (channel, rise) = p.heights.get_key_value(&axle.channel)?;
            let per_mm = axle.wheel_rate_n_per_mm * at_q_pa / q.pa;
            let load = rise.mm * per_mm;
            let mut effects = vec![(channel.as_str(), &rise.zero, -per_mm)];
            effects.extend(q.zero().map(|(channel, zero)| (channel, zero, load / q.pa)));
            Some((load, effects))
        };
        ground.plain(target, -2.0, load).map(|model| ground.outcomes(&model))
    })
}

/// Base pressure as a contribution to the drag coefficient, and the power that it costs.
pub fn base_drag(ground: Ground<'_>, at_q_pa: f64, at_kmh: f64) -> Vec<BaseRow> {
    let car = ground.car;
    let taps: Vec<&Tap> = car
        .taps
        .iter()
        .filter(|t| t.group.as_deref() == Some("base") && t.area_m2.is_some() && ground.measured(t))
        .collect();
    let area: f64 = taps.iter().filter_map(|t| t.area_m2).sum();
    if area <= 0.0 {
        return Vec::new();
    }
    let mean: Vec<(&str, f64)> = taps.iter().map(|t| (t.name.as_str(), t.area_m2.unwrap_or(0.0) / area)).collect();
    let drag = |t: &&Tap| -t.normal[0] * t.area_m2.unwrap_or(0.0) / car.reference_area_m2;
    let cd: Vec<(&str, f64)> = taps.iter().map(|t| (t.name.as_str(), drag(t))).collect();
    let watts = at_q_pa * car.reference_area_m2 * at_kmh / crate::units::KMH_PER_M_S;
    let mut rows = Vec::new();
    for target in ground.targets() {
        let (Some(mean), Some(cd)) = (ground.weighted(target, &mean), ground.weighted(target, &cd)) else { continue };
        for ((difference, m), (_, c)) in ground.outcomes(&mean).into_iter().zip(ground.outcomes(&cd)) {
            rows.push(BaseRow {
                configuration: m.configuration.to_string(),
                target_kmh: target,
                difference,
                mean_cp: m.estimate,
                cd: c.estimate,
                power_w: scaled(c.estimate, watts),
            });
        }
    }
    rows
}

/// Words for taps that cannot be part of a force.
pub fn without_area(car: &Car, r: &Reduction) -> Option<String> {
    let names: Vec<&str> = car
        .taps
        .iter()
        .filter(|t| t.area_m2.is_none() && r.levels.iter().any(|l| l.tap == t.name))
        .map(|t| t.name.as_str())
        .collect();
    (!names.is_empty())
        .then(|| format!("no area_m2 for {}: left out of forces; add it to the car file", names.join(", ")))
}
