//! What every part of the page draws on: the reduction, its inputs, the unit of pressures, names that are safe to show.

use super::Inputs;
use super::figure::{Figure, Look};
use crate::config::{Car, Tap};
use crate::reduction::Reduction;
use crate::reduction::force::scaled;
use crate::text::safe;
use crate::units::Unit;
use maud::{Markup, html};

/// A pressure coefficient, and a difference of two.
pub(super) const CP: Look = Look::of("", 4);

/// Reduction and inputs together.
#[derive(Clone, Copy)]
pub(super) struct Sheet<'a> {
    pub(super) r: &'a Reduction,
    pub(super) input: &'a Inputs,
    pub(super) unit: Unit,
}

/// Comparisons of one configuration at one target, by their numbers in the reduction.
pub(super) struct Group<'a> {
    pub(super) configuration: &'a str,
    pub(super) target_kmh: f64,
    pub(super) of: Vec<usize>,
}

impl<'a> Sheet<'a> {
    /// The car of the first session.
    pub(super) fn car(&self) -> Option<&'a Car> {
        self.input.sessions.first().map(|s| &s.header.setup.car)
    }

    /// Taps of all sessions, each once.
    pub(super) fn taps(&self) -> Vec<&'a Tap> {
        let mut all: Vec<&Tap> = Vec::new();
        for tap in self.input.sessions.iter().flat_map(|s| &s.header.setup.car.taps) {
            if !all.iter().any(|t| t.name == tap.name) {
                all.push(tap);
            }
        }
        all
    }

    /// Letter and name of a configuration.
    pub(super) fn fitted(&self, letter: &str) -> String {
        let name = self.r.configurations.iter().find(|c| c.letter == letter).map_or("", |c| c.name.as_str());
        safe(format!("{letter} {name}").trim_end())
    }

    /// Number of a configuration in the order of the outing, for its mark.
    pub(super) fn number_of(&self, letter: &str) -> usize {
        let all = &self.r.configurations;
        all.iter().position(|c| c.letter == letter).unwrap_or(all.len())
    }

    /// Why something of a configuration and target has no interval, if it has none.
    pub(super) fn lacks(&self, letter: &str, target_kmh: f64) -> &'static str {
        let of = self.r.passes.iter().filter(|p| p.configuration == letter && p.target_kmh == target_kmh);
        match of.count() {
            0 => "no pass",
            1 => "one pass",
            2 => "too few passes",
            _ => "the scatter cannot be told, see the cautions",
        }
    }

    /// Why a difference has no interval: the configuration with fewer passes is the reason.
    pub(super) fn lacks_difference(&self, letter: &str, target_kmh: f64) -> &'static str {
        let passes = |letter: &str| {
            self.r.passes.iter().filter(|p| p.configuration == letter && p.target_kmh == target_kmh).count()
        };
        let fewer = if passes(&self.r.baseline) < passes(letter) { &self.r.baseline } else { letter };
        self.lacks(fewer, target_kmh)
    }

    /// How pressures are written.
    pub(super) fn pressure(&self) -> Look {
        Look {
            unit: self.unit.name,
            scale: self.unit.scale,
            decimals: super::super::text::decimals(self.unit),
            signed: true,
        }
    }

    /// A pressure without an interval of its own.
    pub(super) fn pa(&self, pa: f64) -> String {
        super::figure::plain(Some(pa / self.unit.scale), self.pressure().decimals)
    }

    /// ± the smallest change worth knowing, at the stated speed.
    pub(super) fn sought(&self) -> String {
        format!("±{} {}", self.pa(self.sought_pa()), self.unit.name)
    }

    /// That change, Pa.
    pub(super) fn sought_pa(&self) -> f64 {
        self.r.resolve.1 * self.r.at_q_pa
    }

    /// Pressure of a level by its number.
    pub(super) fn level(&self, i: usize) -> Figure<'a> {
        let l = &self.r.levels[i];
        let lacks = self.lacks(&l.configuration, l.target_kmh);
        Figure::new(&scaled(l.cp, self.r.at_q_pa), self.pressure(), format!("/taps/{i}/pa_at"), lacks)
    }

    /// Its Cp.
    pub(super) fn level_cp(&self, i: usize) -> Figure<'a> {
        let l = &self.r.levels[i];
        Figure::new(&l.cp, CP.unsigned(), format!("/taps/{i}/cp"), self.lacks(&l.configuration, l.target_kmh))
    }

    /// Pressure difference of a comparison by its number.
    pub(super) fn change(&self, i: usize) -> Figure<'a> {
        let c = &self.r.comparisons[i];
        let lacks = self.lacks_difference(&c.configuration, c.target_kmh);
        Figure::new(&scaled(c.delta, self.r.at_q_pa), self.pressure(), format!("/comparisons/{i}/delta_pa_at"), lacks)
    }

    /// Its Cp difference.
    pub(super) fn change_cp(&self, i: usize) -> Figure<'a> {
        let c = &self.r.comparisons[i];
        let lacks = self.lacks_difference(&c.configuration, c.target_kmh);
        Figure::new(&c.delta, CP, format!("/comparisons/{i}/delta_cp"), lacks)
    }

    /// Comparisons, a configuration and target together.
    pub(super) fn groups(&self) -> Vec<Group<'a>> {
        let mut groups: Vec<Group<'a>> = Vec::new();
        for (i, c) in self.r.comparisons.iter().enumerate() {
            match groups.last_mut() {
                Some(g) if g.configuration == c.configuration && g.target_kmh == c.target_kmh => g.of.push(i),
                _ => {
                    groups.push(Group { configuration: &c.configuration, target_kmh: c.target_kmh, of: vec![i] });
                }
            }
        }
        groups
    }

    /// The target whose passes are nearest to the stated speed, of all that gave levels.
    pub(super) fn main_target(&self) -> Option<f64> {
        let apart = |t: f64| (t - self.r.at_kmh).abs();
        self.r.levels.iter().map(|l| l.target_kmh).min_by(|a, b| apart(*a).total_cmp(&apart(*b)))
    }

    /// "at 100 km/h in standard air".
    pub(super) fn at(&self) -> String {
        format!("at {} km/h in standard air", self.r.at_kmh)
    }
}

/// A name cut to so many characters, for a picture; its whole is in a table.
pub(super) fn short(name: &str, most: usize) -> String {
    let name = safe(name);
    if name.chars().count() > most { name.chars().take(most - 1).chain(['…']).collect() } else { name }
}

/// A table in a box of its own that scrolls sideways: the page itself never does.
pub(super) fn table(caption: &str, heads: &[&str], rows: &[Markup]) -> Markup {
    html! {
        p.caption aria-hidden="true" { (caption) }
        div.scroll tabindex="0" role="region" aria-label=(caption) {
            table aria-label=(caption) {
                thead { tr { @for head in heads { th scope="col" { (head) } } } }
                tbody { @for row in rows { tr { (row) } } }
            }
        }
    }
}

/// A picture with its words below.
pub(super) fn figure(picture: &Markup, words: &Markup) -> Markup {
    html! { figure { (picture) figcaption { (words) } } }
}
