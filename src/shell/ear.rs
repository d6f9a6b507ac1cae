//! What the person hears of a run: outcomes of the engine → cues for the speaker; how they are heard → words for the screen.

use super::engine::Outcome;
use super::speaker::{Speaker, Status};
use crate::pipeline::{Pipeline, What};
use crate::screen::Weight;
use crate::sound::{self, Cue};

/// The speaker, and what was last said of window, disk and sound.
pub struct Ear {
    speaker: Speaker,
    /// The window that the speed is in, by its index.
    inside: Option<usize>,
    disk: Option<String>,
    told: Status,
}

impl Ear {
    /// Nothing was said yet.
    pub fn new(speaker: Speaker) -> Self {
        Self { speaker, inside: None, disk: None, told: Status::Starting }
    }

    /// Says what came of an input; called after its entries are on the disk.
    pub fn hear(&mut self, outcomes: &[Outcome], pipeline: &Pipeline) {
        let mut cues = Vec::new();
        for outcome in outcomes {
            cues.extend(sound::cue_for(&outcome.event, outcome.on_disk));
            if let What::Window(state) = &outcome.event.what {
                let before = std::mem::replace(&mut self.inside, state.stretch().map(|s| s.target));
                cues.extend(before.filter(|_| self.inside.is_none()).and_then(|target| off(target, pipeline)));
            }
        }
        if !cues.is_empty() {
            self.speaker.say_all(cues);
        }
    }

    /// Says that session or record could not be written, once for each trouble.
    pub fn disk(&mut self, trouble: Option<String>) {
        if trouble.is_some() && trouble != self.disk {
            self.speaker.say(Cue::Trouble);
            self.disk = trouble;
        }
    }

    /// Words when sound was lost or found.
    pub fn news(&mut self) -> Option<(Weight, String)> {
        let status = self.speaker.status();
        if status == self.told {
            return None;
        }
        let before = std::mem::replace(&mut self.told, status);
        match (&before, &self.told) {
            (_, Status::Bell(why)) => Some((Weight::Refused, format!("no sound: {why}; the terminal's bell rings"))),
            (Status::Bell(_), Status::Playing(name)) => Some((Weight::Good, format!("sound is back: {name}"))),
            _ => None,
        }
    }

    /// The outing is over: what waits is still said, for a second at most.
    pub fn close(&self) {
        self.speaker.close(std::time::Duration::from_secs(1));
    }
}

/// The window of this target was left: too slow or too fast, where the speed is still known.
fn off(target: usize, pipeline: &Pipeline) -> Option<Cue> {
    let speed_kmh = pipeline.speed_kmh(pipeline.now())?;
    let rule = pipeline.hold().rule();
    sound::off_speed(speed_kmh, rule.targets_kmh[target], rule.tolerance_kmh)
}
