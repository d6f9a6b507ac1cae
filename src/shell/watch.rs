//! Trouble of a live stream in words, where no screen shows it: each is told when it begins and when it is over.

use crate::pipeline::Pipeline;
use crate::pipeline::health::Condition;
use crate::units::StreamTime;

/// What was told last.
#[derive(Debug, Default)]
pub struct Watch {
    conditions: Vec<Condition>,
    stale: Vec<bool>,
    saturated: Vec<bool>,
}

impl Watch {
    /// Lines for everything that has changed since the last look.
    pub fn look(&mut self, pipeline: &Pipeline, now: StreamTime) -> Vec<String> {
        let rig = &pipeline.setup().rig;
        let mut lines = Vec::new();
        self.conditions.resize(rig.ports.len(), Condition::Waiting);
        for (i, port) in rig.ports.iter().enumerate() {
            let condition = pipeline.health(i).condition(now);
            if std::mem::replace(&mut self.conditions[i], condition) != condition {
                lines.extend(words(condition).map(|words| format!("{now} {words} {}", port.name)));
            }
        }
        self.stale.resize(rig.channels.len(), false);
        self.saturated.resize(rig.channels.len(), false);
        for (i, channel) in rig.channels.iter().enumerate() {
            let Some(eye) = pipeline.eye(i).filter(|eye| eye.latest().is_some()) else { continue };
            let (stale, saturated) = (eye.stale(now), eye.saturated(now));
            if std::mem::replace(&mut self.stale[i], stale) != stale {
                lines.push(format!("{now} {} {}", if stale { "stale" } else { "fresh" }, channel.name));
            }
            if std::mem::replace(&mut self.saturated[i], saturated) != saturated && saturated {
                lines.push(format!("{now} saturated {}", channel.name));
            }
        }
        lines
    }
}

/// A port's condition as a line of a log begins; lost and found are told as they happen.
fn words(condition: Condition) -> Option<&'static str> {
    match condition {
        Condition::Waiting | Condition::Lost => None,
        Condition::Good => Some("good"),
        Condition::CheckBaud => Some("trouble bytes arrive but no line parses: check baud"),
        Condition::Silent => Some("silent"),
        Condition::NoFix => Some("no-fix"),
    }
}
