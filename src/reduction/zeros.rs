//! Zeros of a session, interpolated in time channel by channel.
//!
//! A zero's own error is common to every pass that rests on it, and does not average out; so each correction says
//! which zeros it is made of, and with what weight.

use crate::session::{Session, Zero};
use crate::units::StreamTime;

/// A zero correction: its value, and the zeros it is made of.
#[derive(Clone, Debug, PartialEq)]
pub struct Correction {
    /// What is taken off, Pa.
    pub pa: f64,
    /// (index of the zero in the session, weight), weights add to 1.
    pub parts: Vec<(usize, f64)>,
}

/// The zeros of one session in time order.
#[derive(Clone, Debug)]
pub struct Zeros<'a> {
    list: Vec<&'a Zero>,
}

impl<'a> Zeros<'a> {
    /// Those of a session.
    pub fn of(session: &'a Session) -> Self {
        Self { list: session.zeros().collect() }
    }

    /// All of them.
    pub fn list(&self) -> &[&'a Zero] {
        &self.list
    }

    fn mean(&self, index: usize, channel: &str) -> Option<f64> {
        self.list[index].channels.get(channel).map(|s| s.mean)
    }

    /// Standard error of a channel's zero, Pa; 0 where it cannot be told.
    pub fn standard_error(&self, index: usize, channel: &str) -> f64 {
        let statistics = self.list[index].channels.get(channel);
        statistics.and_then(|s| s.se.or(s.sd.map(|sd| sd / (s.n as f64).sqrt()))).unwrap_or(0.0)
    }

    /// The correction of a channel at a moment: linear between the zeros before and after, constant beyond the ends.
    ///
    /// *Output* `None` when no zero has the channel. *Method* linear interpolation; JCGM 100:2008 equation 10 for its error.
    pub fn at(&self, channel: &str, t: StreamTime) -> Option<Correction> {
        let with = || (0..self.list.len()).filter(|i| self.mean(*i, channel).is_some());
        let middle = |i: usize| f64::midpoint(self.list[i].t0.seconds(), self.list[i].t1.seconds());
        let t = t.seconds();
        let before = with().rfind(|i| middle(*i) <= t);
        let after = with().find(|i| middle(*i) > t);
        let parts = match (before, after) {
            (Some(a), Some(b)) => {
                let f = (t - middle(a)) / (middle(b) - middle(a));
                vec![(a, 1.0 - f), (b, f)]
            }
            (Some(one), None) | (None, Some(one)) => vec![(one, 1.0)],
            (None, None) => return None,
        };
        let pa = parts.iter().map(|(i, w)| w * self.mean(*i, channel).unwrap_or(0.0)).sum();
        Some(Correction { pa, parts })
    }
}
