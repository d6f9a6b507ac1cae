//! The columns of a design beside the configurations': sessions, heading, drift; each enters only where it can be told and leaves degrees of freedom.

use super::{DOF_TO_LEAVE, Observation, Weakness};
use crate::reduction::model;
use crate::reduction::passes::Pass;
use crate::session::Direction;
use nalgebra::{DMatrix, DVector};
use std::collections::BTreeSet;

/// A drift in the design.
pub(super) struct DriftColumn {
    /// Its column.
    pub(super) place: usize,
    /// From the first pass of the session to the last, h.
    pub(super) span_h: f64,
    /// Blocks in which the baseline was driven.
    pub(super) blocks: usize,
    /// Square of the time.
    pub(super) square: DVector<f64>,
}

/// Columns of a design as it grows.
pub(super) struct Columns<'o, 'a> {
    pub(super) observations: &'o [Observation<'a>],
    pub(super) design: DMatrix<f64>,
}

impl Columns<'_, '_> {
    /// Adds a nuisance column if it can be told from the others and leaves degrees of freedom; says whether it did.
    fn add(&mut self, column: &[f64]) -> bool {
        let columns = self.design.ncols();
        let mut wider = self.design.clone().insert_column(columns, 0.0);
        wider.set_column(columns, &DVector::from_column_slice(column));
        let good = self.observations.len() > columns + DOF_TO_LEAVE && model::rank(&wider) == columns + 1;
        if good {
            self.design = wider;
        }
        good
    }

    fn sessions(&self) -> BTreeSet<usize> {
        self.observations.iter().map(|o| o.pass.session).collect()
    }

    /// Each further session has an offset of its own, centred so that levels stay levels.
    pub(super) fn add_sessions(&mut self) {
        for session in self.sessions().into_iter().skip(1) {
            let n = self.observations.iter().filter(|o| o.pass.session == session).count() as f64;
            let share = n / self.observations.len() as f64;
            let of = |o: &Observation<'_>| f64::from(u8::from(o.pass.session == session)) - share;
            let column: Vec<f64> = self.observations.iter().map(of).collect();
            self.add(&column);
        }
    }

    /// Enters where some configuration was driven both ways; those not driven every way are named.
    pub(super) fn add_heading(&mut self, present: &[&str]) -> Vec<Weakness> {
        let ways = |letter: &str| -> BTreeSet<Direction> {
            self.observations.iter().filter(|o| o.pass.configuration == letter).map(|o| o.pass.direction).collect()
        };
        let all: BTreeSet<Direction> = self.observations.iter().map(|o| o.pass.direction).collect();
        let partly = present.iter().filter(|c| ways(c) != all).map(|c| Weakness::OneWay((*c).to_string())).collect();
        let half = |o: &Observation<'_>| match o.pass.direction {
            Direction::Out => 0.5,
            Direction::Back => -0.5,
            Direction::Other => 0.0,
        };
        let column: Vec<f64> = self.observations.iter().map(half).collect();
        if column.iter().any(|x| *x != column[0]) {
            self.add(&column);
        }
        partly
    }

    /// A drift for each session in which the baseline was driven both before and after something else; those told.
    pub(super) fn add_drift(&mut self, baseline: &str) -> Vec<DriftColumn> {
        let mut drifts = Vec::new();
        for session in self.sessions() {
            let within: Vec<&Pass> =
                self.observations.iter().map(|o| o.pass).filter(|p| p.session == session).collect();
            let base = |p: &&Pass| p.configuration == baseline;
            let blocks = within.iter().position(base).zip(within.iter().rposition(base));
            if blocks.is_none_or(|(first, last)| within[first..last].iter().all(base)) {
                continue;
            }
            let mean = within.iter().map(|p| p.t_s).sum::<f64>() / within.len() as f64;
            let of = |o: &Observation<'_>| if o.pass.session == session { (o.pass.t_s - mean) / 3600.0 } else { 0.0 };
            let column: Vec<f64> = self.observations.iter().map(of).collect();
            if self.add(&column) {
                let new_block = |i: &usize| base(&within[*i]) && (*i == 0 || !base(&within[*i - 1]));
                drifts.push(DriftColumn {
                    place: self.design.ncols() - 1,
                    span_h: (within[within.len() - 1].t_s - within[0].t_s) / 3600.0,
                    blocks: (0..within.len()).filter(new_block).count(),
                    square: DVector::from_iterator(column.len(), column.iter().map(|t| t * t)),
                });
            }
        }
        drifts
    }
}
