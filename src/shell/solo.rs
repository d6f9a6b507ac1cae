//! The driver alone: what the instrument does by itself, and what it says into the ear.
//!
//! Parked at first, then every held dwell is kept; a stop long enough is a zero; the next pass is said when it changes; beside the window the
//! guidance tone glides. The only keys are a remote's: back voids the last segment, on confirms the part that was fitted.

use super::speaker::Speaker;
use crate::pipeline::Pipeline;
use crate::pipeline::plan::{self, Planned};
use crate::session::Direction;
use crate::sound::{Cue, guidance};
use crate::stream::command::Command;
use crate::units::StreamTime;

/// Above this the car does not stand, km/h.
const PARKED_KMH: f64 = 6.0;
/// A stop of this length, and a second longer than a dwell, makes a zero, s: shorter ones are traffic.
const STOP_S: f64 = 12.0;

/// What was done and said so far.
#[derive(Debug, Default)]
pub struct Solo {
    /// The car was seen parked, and the outing has begun.
    begun: bool,
    /// This stop has its zero.
    zeroed: bool,
    /// What was said to come next.
    told: Option<Option<(String, Direction, bool)>>,
    /// The tone is wanted.
    pub silent: bool,
}

/// What solo wants done, in order.
#[derive(Debug, Default)]
pub struct Wanted {
    /// For the engine, and for the record.
    pub commands: Vec<Command>,
    /// For the ear.
    pub cues: Vec<Cue>,
}

impl Solo {
    /// Not begun yet: the car must be seen parked first.
    pub fn waits(&self) -> bool {
        !self.begun
    }

    /// Looks at the instrument; what it wants done.
    pub fn look(&mut self, pipeline: &Pipeline, now: StreamTime) -> Wanted {
        let mut wanted = Wanted::default();
        let Some(kmh) = pipeline.speed_kmh(now) else { return wanted };
        if !self.begun {
            if kmh > PARKED_KMH {
                return wanted;
            }
            self.begun = true;
            wanted.commands.push(Command::TakeEvery);
        }
        self.zero(pipeline, now, &mut wanted);
        self.next(pipeline, now, &mut wanted);
        wanted
    }

    /// A long stop is a zero, once.
    fn zero(&mut self, pipeline: &Pipeline, now: StreamTime, wanted: &mut Wanted) {
        let Some(stood_s) = pipeline.logbook().stood_s(now) else {
            self.zeroed = false;
            return;
        };
        if !self.zeroed && stood_s >= STOP_S.max(pipeline.setup().outing.dwell_s + 1.0) {
            self.zeroed = true;
            wanted.commands.push(Command::Zero);
        }
    }

    /// The next pass, when it is another and the window is not being driven; once more at a stop, if a part is to be changed there.
    fn next(&mut self, pipeline: &Pipeline, now: StreamTime, wanted: &mut Wanted) {
        if pipeline.hold().state().stretch().is_some() {
            return;
        }
        let (outing, logbook) = (&pipeline.setup().outing, pipeline.logbook());
        let planned = plan::next(logbook.segments(), outing, logbook.configuration());
        let stands = logbook.stood_s(now).is_some();
        let key =
            |p: &Planned| (p.configuration.clone(), p.direction, stands && p.configuration != logbook.configuration());
        let next = planned.as_ref().map(key);
        if self.told.as_ref() == Some(&next) {
            return;
        }
        wanted.cues.push(match &planned {
            Some(p) => Cue::Next {
                configuration_index: outing
                    .configurations
                    .iter()
                    .position(|c| c.letter == p.configuration)
                    .unwrap_or(0),
                direction: p.direction,
            },
            None => Cue::AllDone,
        });
        self.told = Some(next);
    }

    /// Renews the guidance tone: where the speed is beside the target's window.
    pub fn guide(&self, pipeline: &Pipeline, now: StreamTime, speaker: &Speaker) {
        let rule = pipeline.hold().rule();
        let speed = pipeline.speed_kmh(now).filter(|v| self.begun && !self.silent && *v > PARKED_KMH);
        let place = speed.and_then(|v| guidance::place(v, rule.nearest_kmh(v)?, rule.tolerance_kmh));
        speaker.guide(place);
    }
}
