//! What to drive next: the pass that narrows the widest undecided difference most.
//!
//! One more row in the design of the linear model, for every configuration and direction in question; the interval that it would leave,
//! with the scatter as it is, says which is best.

use super::Reduction;
use super::compare::{Comparison, Question, Verdict, interval_over_scatter};
use super::passes::Pass;
use crate::session::Direction;

/// Time to the next pass if there is none to learn from, s.
const BETWEEN_PASSES_S: f64 = 180.0;
/// Widths that differ by less are alike: the pass that evens the numbers is taken.
const ALIKE: f64 = 1e-6;

/// The next pass to drive.
#[derive(Clone, Debug, PartialEq)]
pub struct NextPass {
    /// Letter of what is to be fitted.
    pub configuration: String,
    /// Which way.
    pub direction: Direction,
    /// How fast, km/h.
    pub target_kmh: f64,
    /// What for.
    pub why: Why,
}

/// What a next pass is for.
#[derive(Clone, Debug, PartialEq)]
pub enum Why {
    /// The configuration has no pass at this speed yet.
    NotDriven,
    /// It makes an interval possible at this tap, or narrows the widest undecided one.
    Narrows {
        /// Tap.
        tap: String,
        /// Letter that is compared with the baseline there.
        configuration: String,
        /// Half-width now and then, Cp; none where there is no interval yet.
        from_to: Option<(f64, f64)>,
    },
}

/// The next pass; none when every difference is decided, or nothing was driven.
///
/// *Method* design algebra (Draper & Smith, Applied Regression Analysis): half-width ∝ t(ν) √(c'(X'X)⁻¹c), with one row more.
pub fn next_pass(r: &Reduction) -> Option<NextPass> {
    not_driven(r).or_else(|| {
        let undecided = r.comparisons.iter().filter(|c| c.verdict == Verdict::Undecided);
        // No interval at all is the widest.
        let widest = undecided.max_by(|a, b| width(a).total_cmp(&width(b)))?;
        narrowing(r, widest)
    })
}

fn width(c: &Comparison) -> f64 {
    c.delta.u95.unwrap_or(f64::INFINITY)
}

fn not_driven(r: &Reduction) -> Option<NextPass> {
    let letters = || std::iter::once(&r.baseline).chain(r.configurations.iter().map(|c| &c.letter));
    // A pass with another letter at every target shows how fast and which way.
    r.passes.iter().find_map(|pass| {
        let driven =
            |letter: &String| r.passes.iter().any(|p| p.target_kmh == pass.target_kmh && p.configuration == *letter);
        let configuration = letters().find(|letter| !driven(letter))?.clone();
        let (direction, target_kmh) = (pass.direction, pass.target_kmh);
        Some(NextPass { configuration, direction, target_kmh, why: Why::NotDriven })
    })
}

fn narrowing(r: &Reduction, widest: &Comparison) -> Option<NextPass> {
    let with_tap =
        |p: &&Pass| p.target_kmh == widest.target_kmh && p.taps.get(&widest.tap).is_some_and(|t| t.cp.is_some());
    let passes: Vec<&Pass> = r.passes.iter().filter(with_tap).collect();
    let letters: Vec<String> = r.configurations.iter().map(|c| c.letter.clone()).collect();
    let question = Question { configurations: &letters, baseline: &r.baseline, resolve_cp: r.resolve.1, factor: None };
    let ask = |passes: &[&Pass]| interval_over_scatter(passes, question, &widest.configuration);
    let driven = |letter: &str, way: Direction| {
        passes.iter().filter(|p| p.configuration == letter && p.direction == way).count()
    };
    let mut best: Option<(f64, usize, &str, Direction)> = None;
    for letter in [widest.configuration.as_str(), r.baseline.as_str()] {
        for way in [Direction::Out, Direction::Back, Direction::Other] {
            let last = *passes.last()?;
            if !passes.iter().any(|p| p.direction == way) {
                continue;
            }
            let more = Pass {
                configuration: letter.to_string(),
                direction: way,
                t_s: last.t_s + spacing(&passes),
                ..last.clone()
            };
            let all: Vec<&Pass> = passes.iter().copied().chain([&more]).collect();
            let new = (ask(&all).unwrap_or(f64::INFINITY), driven(letter, way), letter, way);
            let better = best.is_none_or(|old| match new.0 < old.0 * (1.0 - ALIKE) {
                true => true,
                false => new.0 <= old.0 * (1.0 + ALIKE) && new.1 < old.1,
            });
            if better {
                best = Some(new);
            }
        }
    }
    let (then, _, configuration, direction) = best?;
    let from_to = widest.delta.u95.zip(ask(&passes)).map(|(u95, now)| (u95, u95 * then / now));
    Some(NextPass {
        configuration: configuration.to_string(),
        direction,
        target_kmh: widest.target_kmh,
        why: Why::Narrows {
            tap: widest.tap.clone(),
            configuration: widest.configuration.clone(),
            from_to: from_to.filter(|(from, to)| from.is_finite() && to.is_finite()),
        },
    })
}

/// Median time from pass to pass within a session, s.
fn spacing(passes: &[&Pass]) -> f64 {
    let mut apart: Vec<f64> =
        passes.windows(2).filter(|w| w[0].session == w[1].session).map(|w| w[1].t_s - w[0].t_s).collect();
    apart.sort_by(f64::total_cmp);
    apart.get(apart.len() / 2).copied().filter(|t| *t > 0.0).unwrap_or(BETWEEN_PASSES_S)
}
