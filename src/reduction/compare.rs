//! Configurations against the baseline: one linear model a tap and target over all passes, contrasts, verdicts.
//!
//! Cp of pass i = level of its configuration + heading/2·(±1) + session + drift·(t − t̄) + scatter, by ordinary least squares. Heading
//! enters where a configuration was driven both ways; drift where the baseline was driven in separate blocks; session where there are
//! several. The error of the zeros is common to passes and is added outside the scatter.

use super::inference::{self, ALPHA, Between, POWER, effective_dof, holm, passes_for, t_quantile, t_two_sided_p};
use super::model::{self, Fit};
use super::passes::Pass;
use super::scatter::Outlier;
use super::zeros::Zeros;
use crate::session::Direction;
use nalgebra::{DMatrix, DVector};
use std::collections::{BTreeMap, BTreeSet};

/// Degrees of freedom that a term must leave.
const DOF_TO_LEAVE: usize = 2;
/// Degrees of freedom that a squared drift must leave to be told from scatter.
const DOF_TO_BEND: usize = 8;
/// Family error rate at which a drift is said to bend.
const P_BENT: f64 = 0.01;

/// A value with its 95 % half-width; none when nothing says how sure it is.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Estimate {
    /// The value.
    pub value: f64,
    /// Standard uncertainty.
    pub u: Option<f64>,
    /// Degrees of freedom of that.
    pub dof: Option<f64>,
    /// Half-width of the 95 % interval.
    pub u95: Option<f64>,
}

/// The verdict on one tap, target and configuration.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Verdict {
    /// The adjusted test of "no difference" rejects.
    Changed,
    /// The interval of the difference lies within ± the smallest change worth knowing.
    NoChange,
    /// Neither.
    Undecided,
}

impl Verdict {
    /// Its word in the JSON.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Changed => "changed",
            Self::NoChange => "no-change",
            Self::Undecided => "undecided",
        }
    }
}

/// Level of one configuration at one tap and target.
#[derive(Clone, Debug)]
pub struct Level {
    /// Tap.
    pub tap: String,
    /// Configuration.
    pub configuration: String,
    /// Target, km/h.
    pub target_kmh: f64,
    /// Passes.
    pub passes: usize,
    /// Cp by the indicated q.
    pub cp: Estimate,
    /// How its passes scatter beyond their own standard errors, drift and heading taken off; a diagnosis.
    pub between: Option<Between>,
}

/// Difference of one configuration from the baseline.
#[derive(Clone, Debug)]
pub struct Comparison {
    /// Tap.
    pub tap: String,
    /// Target, km/h.
    pub target_kmh: f64,
    /// Configuration.
    pub configuration: String,
    /// Passes of the baseline and of the configuration.
    pub passes: [usize; 2],
    /// Difference of Cp.
    pub delta: Estimate,
    /// p of "no difference", and adjusted over the family.
    pub p: Option<f64>,
    /// Holm over all taps and configurations of the target.
    pub p_adjusted: Option<f64>,
    /// Scatter between passes (residual standard deviation of Cp).
    pub scatter: Option<f64>,
    /// Smallest difference that would be found with [`POWER`].
    pub detectable: Option<f64>,
    /// The verdict.
    pub verdict: Verdict,
    /// About so many more passes of the configuration, and as many of the baseline, for undecided.
    pub passes_needed: Option<u32>,
}

/// Weakness of a design, for one target.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Weakness {
    /// One pass of a configuration: its scatter is borrowed from the others.
    OnePass(String),
    /// A configuration driven one way only while others were driven both ways.
    OneWay(String),
    /// The baseline was driven in one block: drift cannot be told from a change.
    BaselineOnce,
    /// The drift bends: what a straight one leaves over shows as a change.
    Bent,
    /// These taps drift by more than the change sought, and only a straight drift is taken off.
    Drifting(String),
    /// The passes of a tap agree to the last digit, as no measurement does.
    Still(String),
    /// No degrees of freedom: no intervals.
    NoScatter,
}

/// Levels, comparisons, weaknesses of one target.
#[derive(Clone, Debug, Default)]
pub struct Compared {
    /// Levels of every tap and configuration.
    pub levels: Vec<Level>,
    /// Differences from the baseline.
    pub comparisons: Vec<Comparison>,
    /// p of "the drift is straight" by tap, where it could be tested.
    straightness: Vec<f64>,
    /// Taps whose verdicts lean on the drift's being straight.
    drifting: Vec<String>,
    /// Pass of each tap that is farthest from the others.
    pub outliers: Vec<Outlier>,
    /// What is weak about the design.
    pub weaknesses: BTreeSet<Weakness>,
}

/// What is compared.
#[derive(Clone, Copy)]
pub struct Question<'a> {
    /// Letters in the order of the outing.
    pub configurations: &'a [String],
    /// Letter of the baseline.
    pub baseline: &'a str,
    /// Smallest Cp difference worth knowing.
    pub resolve_cp: f64,
}

/// Compares every tap of the passes of one target.
pub fn compare(passes: &[&Pass], zeros: &[Zeros<'_>], taps: &[String], question: Question<'_>) -> Compared {
    let mut all = Compared::default();
    for tap in taps {
        let seen: Vec<&Pass> =
            passes.iter().copied().filter(|p| p.taps.get(tap).is_some_and(|t| t.cp.is_some())).collect();
        if !seen.is_empty() {
            Model::new(&seen, tap, question).compare(zeros, &mut all);
        }
    }
    if holm(&all.straightness).iter().any(|p| *p <= P_BENT) {
        all.weaknesses.insert(Weakness::Bent);
    }
    if !all.drifting.is_empty() {
        all.weaknesses.insert(Weakness::Drifting(all.drifting.join(", ")));
    }
    judge(&mut all.comparisons, question.resolve_cp);
    all
}

/// Holm over the family, then the verdicts.
fn judge(comparisons: &mut [Comparison], resolve_cp: f64) {
    let tested: Vec<usize> = (0..comparisons.len()).filter(|i| comparisons[*i].p.is_some()).collect();
    let p: Vec<f64> = tested.iter().filter_map(|i| comparisons[*i].p).collect();
    for (i, adjusted) in tested.iter().zip(holm(&p)) {
        comparisons[*i].p_adjusted = Some(adjusted);
    }
    let family = tested.len().max(1);
    for c in comparisons {
        c.verdict = match (c.p_adjusted, c.delta.u95) {
            (Some(p), Some(_)) if p <= ALPHA => Verdict::Changed,
            (Some(_), Some(u95)) if c.delta.value.abs() + u95 <= resolve_cp => Verdict::NoChange,
            _ => Verdict::Undecided,
        };
        if c.verdict == Verdict::Undecided {
            c.passes_needed = more_passes(c, resolve_cp, family);
        }
    }
}

/// Passes still missing for the nearer of the two verdicts: a change of the size seen, or none beyond the one worth knowing.
fn more_passes(c: &Comparison, resolve_cp: f64, family: usize) -> Option<u32> {
    let scatter = c.scatter.filter(|s| *s > 0.0)?;
    let seen = c.delta.value.abs();
    let change = passes_for(seen / scatter, ALPHA / family as f64);
    let no_change = passes_for((resolve_cp - seen) / scatter, ALPHA);
    let needed = [change, no_change].into_iter().flatten().min()?;
    let driven = u32::try_from(c.passes[0].min(c.passes[1])).unwrap_or(u32::MAX);
    Some(needed.saturating_sub(driven).max(1))
}

/// Half-width of the 95 % interval of a configuration's difference over the scatter between passes: what the design alone decides.
///
/// *Input* passes that have the tap. *Output* `None` without the configuration, the baseline or degrees of freedom.
pub(super) fn interval_over_scatter(passes: &[&Pass], tap: &str, question: Question<'_>, letter: &str) -> Option<f64> {
    let model = Model::new(passes, tap, question);
    let fit = model::fit(&model.design, &DVector::zeros(passes.len()))?;
    let place = |letter: &str| model.present.iter().position(|c| *c == letter);
    let mut contrast = DVector::zeros(model.design.ncols());
    contrast[place(letter)?] += 1.0;
    contrast[place(question.baseline)?] -= 1.0;
    let scale = (contrast.transpose() * &fit.unscaled * &contrast)[(0, 0)];
    Some(scale.sqrt() * t_quantile(1.0 - ALPHA / 2.0, fit.dof as f64)?)
}

/// A drift in the design.
struct DriftColumn {
    /// Its column.
    place: usize,
    /// From the first pass of the session to the last, h.
    span_h: f64,
    /// Blocks in which the baseline was driven.
    blocks: usize,
    /// Square of the time.
    square: DVector<f64>,
}

/// One tap's observations and design.
struct Model<'a> {
    passes: &'a [&'a Pass],
    tap: &'a str,
    question: Question<'a>,
    /// Letters with a pass, in the order of the outing.
    present: Vec<&'a str>,
    design: DMatrix<f64>,
    weaknesses: BTreeSet<Weakness>,
    /// For each session with a drift.
    drifts: Vec<DriftColumn>,
}

impl<'a> Model<'a> {
    fn new(passes: &'a [&'a Pass], tap: &'a str, question: Question<'a>) -> Self {
        let present: Vec<&str> = question
            .configurations
            .iter()
            .map(String::as_str)
            .filter(|letter| passes.iter().any(|p| p.configuration == *letter))
            .collect();
        let levels = DMatrix::from_fn(passes.len(), present.len(), |i, j| {
            f64::from(u8::from(passes[i].configuration == present[j]))
        });
        let mut model =
            Self { passes, tap, question, present, design: levels, weaknesses: BTreeSet::new(), drifts: Vec::new() };
        model.add_sessions();
        model.add_heading();
        model.add_drift();
        model
    }

    /// Adds a nuisance column if it can be told from the others and leaves degrees of freedom; says whether it did.
    fn add(&mut self, column: &[f64]) -> bool {
        let columns = self.design.ncols();
        let mut wider = self.design.clone().insert_column(columns, 0.0);
        wider.set_column(columns, &DVector::from_column_slice(column));
        let good = self.passes.len() >= columns + 1 + DOF_TO_LEAVE && model::rank(&wider) == columns + 1;
        if good {
            self.design = wider;
        }
        good
    }

    fn sessions(&self) -> BTreeSet<usize> {
        self.passes.iter().map(|p| p.session).collect()
    }

    /// Each further session has an offset of its own, centred so that levels stay levels.
    fn add_sessions(&mut self) {
        for session in self.sessions().into_iter().skip(1) {
            let n = self.passes.iter().filter(|p| p.session == session).count() as f64;
            let share = n / self.passes.len() as f64;
            let column: Vec<f64> =
                self.passes.iter().map(|p| f64::from(u8::from(p.session == session)) - share).collect();
            self.add(&column);
        }
    }

    /// Heading enters where some configuration was driven both ways; one that was not driven every way is named.
    fn add_heading(&mut self) {
        let ways = |letter: &str| -> BTreeSet<Direction> {
            self.passes.iter().filter(|p| p.configuration == letter).map(|p| p.direction).collect()
        };
        let all: BTreeSet<Direction> = self.passes.iter().map(|p| p.direction).collect();
        let partly = self.present.iter().filter(|c| ways(c) != all);
        self.weaknesses.extend(partly.map(|c| Weakness::OneWay((*c).to_string())));
        let column: Vec<f64> = self
            .passes
            .iter()
            .map(|p| match p.direction {
                Direction::Out => 0.5,
                Direction::Back => -0.5,
                Direction::Other => 0.0,
            })
            .collect();
        let mean = column.iter().sum::<f64>() / column.len() as f64;
        if column.iter().any(|x| *x != mean) {
            self.add(&column);
        }
    }

    /// A drift for each session in which the baseline was driven both before and after something else.
    fn add_drift(&mut self) {
        let (mut told, mut drifts) = (false, Vec::new());
        for session in self.sessions() {
            let within: Vec<&Pass> = self.passes.iter().copied().filter(|p| p.session == session).collect();
            let baseline = self.question.baseline;
            let base = |p: &&Pass| p.configuration == baseline;
            let blocks = within.iter().position(&base).zip(within.iter().rposition(&base));
            let between = blocks.is_some_and(|(first, last)| !within[first..last].iter().all(&base));
            if !between {
                continue;
            }
            let mean = within.iter().map(|p| p.t_s).sum::<f64>() / within.len() as f64;
            let column: Vec<f64> =
                self.passes.iter().map(|p| if p.session == session { (p.t_s - mean) / 3600.0 } else { 0.0 }).collect();
            if self.add(&column) {
                told = true;
                let new_block = |i: &usize| base(&within[*i]) && (*i == 0 || !base(&within[*i - 1]));
                drifts.push(DriftColumn {
                    place: self.design.ncols() - 1,
                    span_h: (within[within.len() - 1].t_s - within[0].t_s) / 3600.0,
                    blocks: (0..within.len()).filter(new_block).count(),
                    square: DVector::from_iterator(column.len(), column.iter().map(|t| t * t)),
                });
            }
        }
        self.drifts = drifts;
        if !told && self.present.len() > 1 {
            self.weaknesses.insert(Weakness::BaselineOnce);
        }
    }

    /// Smallest p of "the drift is straight", over sessions.
    ///
    /// *Method* t test of the coefficient of the squared time (Frisch, Waugh and Lovell: of what the other columns leave of it); `None` where
    /// that leaves fewer than [`DOF_TO_BEND`] degrees of freedom. It names the trouble and mends nothing: adding the square wherever it
    /// tests significant made the 95 % intervals cover 91–93 % of differences.
    fn straightness(&self, fit: &Fit) -> Option<f64> {
        let dof = fit.dof.checked_sub(1).filter(|dof| *dof >= DOF_TO_BEND)?;
        let p = |square: &DVector<f64>| {
            // What the other columns leave of the square.
            let left = square - &self.design * (&fit.weights * square);
            let size = left.norm_squared();
            let bend = left.dot(&fit.residuals) / size;
            let rest = fit.residuals.norm_squared() - bend * bend * size;
            let u = (rest.max(0.0) / dof as f64 / size).sqrt();
            t_two_sided_p(bend / u, dof as f64)
        };
        self.drifts.iter().filter_map(|drift| p(&drift.square)).min_by(f64::total_cmp)
    }

    /// A drift of more than the change sought, with the baseline in two blocks: what of it is not straight goes into the differences unseen.
    fn leans_on_straightness(&self, fit: &Fit) -> bool {
        self.drifts.iter().any(|drift| {
            let mut slope = DVector::zeros(self.design.ncols());
            slope[drift.place] = 1.0;
            let value = fit.value(&slope).abs();
            let sure = fit.variance_of(&slope).is_some_and(|v| value > 2.0 * v.sqrt());
            drift.blocks <= 2 && sure && value * drift.span_h > self.question.resolve_cp
        })
    }

    fn compare(mut self, zeros: &[Zeros<'_>], all: &mut Compared) {
        let y: DVector<f64> = DVector::from_vec(self.passes.iter().filter_map(|p| p.taps[self.tap].cp).collect());
        let Some(fit) = model::fit(&self.design, &y) else { return };
        if fit.dof == 0 {
            self.weaknesses.insert(Weakness::NoScatter);
        }
        if self.leans_on_straightness(&fit) {
            all.drifting.push(self.tap.to_string());
        }
        if fit.variance == Some(0.0) {
            self.weaknesses.insert(Weakness::Still(self.tap.to_string()));
        }
        let count = |letter: &str| self.passes.iter().filter(|p| p.configuration == letter).count();
        let single: Vec<Weakness> =
            self.present.iter().filter(|c| count(c) == 1).map(|c| Weakness::OnePass((*c).to_string())).collect();
        for (j, letter) in self.present.iter().enumerate() {
            let mut contrast = DVector::zeros(self.design.ncols());
            contrast[j] = 1.0;
            all.levels.push(Level {
                tap: self.tap.to_string(),
                configuration: (*letter).to_string(),
                target_kmh: self.passes[0].target_kmh,
                passes: count(letter),
                cp: self.estimate(&fit, &contrast, zeros),
                between: self.between(&fit, letter),
            });
        }
        if let Some(base) = self.present.iter().position(|c| *c == self.question.baseline) {
            for j in (0..self.present.len()).filter(|j| *j != base) {
                let mut contrast = DVector::zeros(self.design.ncols());
                (contrast[j], contrast[base]) = (1.0, -1.0);
                let passes = [count(self.present[base]), count(self.present[j])];
                all.comparisons.push(self.comparison(&fit, &contrast, zeros, (self.present[j], passes)));
            }
        }
        all.straightness.extend(self.straightness(&fit));
        all.outliers.extend(self.outlier(&fit));
        all.weaknesses.extend(self.weaknesses);
        all.weaknesses.extend(single);
    }

    fn between(&self, fit: &Fit, letter: &str) -> Option<Between> {
        let of = || (0..self.passes.len()).filter(|i| self.passes[*i].configuration == letter);
        let errors: Option<Vec<f64>> = of().map(|i| self.passes[i].taps[self.tap].cp_se).collect();
        inference::between(&of().map(|i| fit.residuals[i]).collect::<Vec<f64>>(), &errors?)
    }

    /// The pass farthest from the others, by its studentised residual, and every difference with and without it.
    fn outlier(&self, fit: &Fit) -> Option<Outlier> {
        let sd = fit.variance.map(f64::sqrt).filter(|sd| *sd > 0.0)?;
        let leverage = |i: usize| (self.design.row(i) * fit.weights.column(i))[(0, 0)];
        let left = |i: usize| 1.0 - leverage(i);
        let studentised = |i: usize| fit.residuals[i].abs() / (sd * left(i).sqrt());
        // A pass that alone carries an estimate has no residual to judge it by.
        let judged = (0..self.passes.len()).filter(|i| left(*i) > 1e-9).map(|i| (i, studentised(i)));
        let (worst, distance) = judged.max_by(|a, b| a.1.total_cmp(&b.1))?;
        let p = inference::outlier_p(distance, fit.dof as f64, self.passes.len())?;
        // Estimates without one observation (Cook 1977, Technometrics 19, 15).
        let without = &fit.estimates - fit.weights.column(worst) * (fit.residuals[worst] / left(worst));
        let base = self.present.iter().position(|c| *c == self.question.baseline);
        let others = (0..self.present.len()).filter(|j| Some(*j) != base);
        let differences = others.filter_map(|j| {
            let base = base?;
            let difference = |estimates: &DVector<f64>| estimates[j] - estimates[base];
            Some((self.present[j].to_string(), difference(&fit.estimates), difference(&without)))
        });
        let pass = self.passes[worst];
        let pass = (pass.session, pass.segments.clone());
        Some(Outlier { tap: self.tap.to_string(), pass, p, differences: differences.collect() })
    }

    fn comparison(
        &self,
        fit: &Fit,
        contrast: &DVector<f64>,
        zeros: &[Zeros<'_>],
        (letter, passes): (&str, [usize; 2]),
    ) -> Comparison {
        let delta = self.estimate(fit, contrast, zeros);
        let known = delta.u.zip(delta.dof).filter(|(u, _)| *u > 0.0);
        let p = known.and_then(|(u, dof)| t_two_sided_p(delta.value / u, dof));
        let detectable =
            known.and_then(|(u, dof)| Some(u * (t_quantile(1.0 - ALPHA / 2.0, dof)? + t_quantile(POWER, dof)?)));
        Comparison {
            tap: self.tap.to_string(),
            target_kmh: self.passes[0].target_kmh,
            configuration: letter.to_string(),
            passes,
            delta,
            p,
            p_adjusted: None,
            scatter: fit.variance.map(f64::sqrt),
            detectable: detectable.filter(|x| x.is_finite()),
            verdict: Verdict::Undecided,
            passes_needed: None,
        }
    }

    /// A contrast with the scatter's and the zeros' uncertainty.
    fn estimate(&self, fit: &Fit, contrast: &DVector<f64>, zeros: &[Zeros<'_>]) -> Estimate {
        let value = fit.value(contrast);
        let Some(scatter) = fit.variance_of(contrast) else { return Estimate { value, u: None, dof: None, u95: None } };
        let common = self.zero_variance(&fit.weights_of(contrast), zeros);
        let dof = effective_dof(&[(scatter, fit.dof as f64), (common, f64::INFINITY)]);
        let u = (scatter + common).sqrt();
        if !u.is_finite() {
            return Estimate { value, u: None, dof: None, u95: None };
        }
        let t = dof.and_then(|dof| t_quantile(1.0 - ALPHA / 2.0, dof));
        let u95 = t.map(|t| t * u).filter(|x| x.is_finite());
        Estimate { value, u: Some(u), dof, u95 }
    }

    /// Variance that the zeros' own errors give a contrast with these weights: every zero counts once, however many passes rest on it.
    fn zero_variance(&self, weights: &DVector<f64>, zeros: &[Zeros<'_>]) -> f64 {
        let mut effects: BTreeMap<(usize, usize, &str), f64> = BTreeMap::new();
        for (pass, weight) in self.passes.iter().zip(weights.iter()) {
            let (tap, Some(q)) = (&pass.taps[self.tap], &pass.q) else { continue };
            let mut add = |channel: &'a str, parts: &[(usize, f64)], effect: f64| {
                for (zero, share) in parts {
                    *effects.entry((pass.session, *zero, channel)).or_default() += weight * share * effect;
                }
            };
            if let Some(zero) = &tap.zero {
                add(&tap.channel, &zero.parts, -1.0 / q.pa);
            }
            if let (Some((channel, Some(zero))), Some(cp)) = (&q.measured, tap.cp) {
                add(channel, &zero.parts, cp / q.pa);
            }
        }
        effects
            .iter()
            .map(|((session, zero, channel), effect)| (effect * zeros[*session].standard_error(*zero, channel)).powi(2))
            .sum()
    }
}
