//! A number as the page shows it and as the JSON has it: value, half-width or the reason why there is none, unit.

use super::super::text::fixed;
use crate::reduction::compare::Estimate;
use maud::{Markup, Render, html};

/// How a quantity is written.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Look {
    /// Its unit; empty for a coefficient.
    pub(super) unit: &'static str,
    /// What one of that unit is, in the JSON's.
    pub(super) scale: f64,
    /// Decimals.
    pub(super) decimals: usize,
    /// A plus is written.
    pub(super) signed: bool,
}

impl Look {
    /// In the JSON's own unit, with a sign.
    pub(super) const fn of(unit: &'static str, decimals: usize) -> Self {
        Self { unit, scale: 1.0, decimals, signed: true }
    }

    /// Without a plus.
    pub(super) const fn unsigned(self) -> Self {
        Self { signed: false, ..self }
    }
}

/// A number of the reduction.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Figure<'a> {
    /// Value.
    pub(super) value: f64,
    /// Half-width.
    pub(super) u95: Option<f64>,
    /// How it is written.
    pub(super) look: Look,
    /// Where it stands in the JSON (a JSON pointer, RFC 6901).
    pub(super) place: String,
    /// Why it has no half-width, if so.
    pub(super) lacks: &'a str,
}

impl<'a> Figure<'a> {
    /// An estimate at a place of the JSON.
    pub(super) fn new(e: &Estimate, look: Look, place: String, lacks: &'a str) -> Self {
        let u95 = e.u95.filter(|u| u.is_finite());
        Self { value: e.value, u95, look, place, lacks }
    }

    /// In words, for a text alternative.
    pub(super) fn words(&self) -> String {
        if !self.value.is_finite() {
            return format!("— (not a number; {})", self.lacks);
        }
        let Look { unit, scale, decimals, signed } = self.look;
        let value = fixed(self.value / scale, decimals, signed).replace('-', "−");
        let text = match self.u95 {
            Some(u) => format!("{value} ± {} {unit}", fixed(u / scale, decimals, false)),
            None => format!("{value} {unit}"),
        };
        let text = text.trim_end();
        if self.u95.is_some() { text.to_string() } else { format!("{text} (no interval: {})", self.lacks) }
    }
}

impl Render for Figure<'_> {
    fn render(&self) -> Markup {
        let exact = |x: f64| format!("{x:?}");
        let value = if self.value.is_finite() { exact(self.value) } else { String::new() };
        html! { data value=(value) data-u95=[self.u95.map(exact)] data-json=(self.place) { (self.words()) } }
    }
}

/// A number without an interval of its own, such as a mean speed; a dash where it is not known.
pub(super) fn plain(x: Option<f64>, decimals: usize) -> String {
    x.filter(|x| x.is_finite()).map_or("—".to_string(), |x| fixed(x, decimals, false).replace('-', "−"))
}
