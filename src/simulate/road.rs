//! The drive: a plan of steps → where the van is, how fast, what is fitted, and what the passenger would do.
//!
//! Step by step in simulated time; nothing here knows of pressures. The passenger goes by the speed alone, as
//! one who hears "held" and presses the key a moment later.

use super::chance::{Chance, RATE_HZ, STEP_S, Wander};
use crate::stream::command::Command;
use crate::units::KMH_PER_M_S;

const ACCELERATION_M_S2: f64 = 1.5;
const BRAKING_M_S2: f64 = 2.0;
/// How softly the driver comes up to a speed: remaining difference over this time, s.
const EASE_S: f64 = 1.2;
const TURNING_KMH: f64 = 15.0;
const TURNING_DEG_S: f64 = 22.0;
/// What the driver cannot hold, km/h, and how long such a lapse lasts, s.
const DRIVER_SD_KMH: f64 = 0.8;
const DRIVER_TIME_S: f64 = 4.0;
/// What the passenger knows of the outing: window (a shade narrower than ±2, as one sees it), settle and dwell.
const SEEN_TOLERANCE_KMH: f64 = 1.85;
const HELD_AFTER_S: f64 = 8.0;
const REACTION_S: f64 = 1.2;
/// A target is given up when it could not be held for this long, s.
const PATIENCE_S: f64 = 40.0;

/// One step of the plan.
#[derive(Clone, Copy, Debug)]
pub(super) enum Step {
    /// Stand still; with a letter, that configuration is fitted meanwhile.
    Stand { seconds: f64, fit: Option<&'static str> },
    /// Slow down and turn round.
    Turn,
    /// Reach a speed and hold it for at least so long; the incident happens meanwhile.
    Hold { target_kmh: f64, least_s: f64, incident: Option<Incident> },
    /// Brake to standstill.
    Stop,
}

/// What disturbs a stretch, soon after the speed was reached.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Incident {
    /// A lorry comes the other way.
    Lorry,
    /// The cable of the gauge slips out.
    Unplugged,
}

/// Seconds from reaching the speed to the incident.
const INCIDENT_AFTER_S: f64 = 4.0;
/// The passenger sees the lorry and presses, s.
const MARK_AFTER_S: f64 = INCIDENT_AFTER_S + 1.2;

/// Where the van is and what it does, at one moment.
#[derive(Clone, Copy, Debug)]
pub(super) struct Motion {
    /// Speed over ground, m/s; exactly 0 while standing.
    pub(super) speed_m_s: f64,
    /// Heading, degrees.
    pub(super) track_deg: f64,
    /// Way east of the start, m.
    pub(super) east_m: f64,
    /// Letter of what is fitted.
    pub(super) fitted: &'static str,
    /// What happens just now.
    pub(super) incident: Option<Incident>,
}

/// Driver, passenger and plan.
#[derive(Clone, Debug)]
pub(super) struct Drive {
    plan: Vec<Step>,
    at: usize,
    /// Steps of simulated time since this step of the plan began.
    ticks: u32,
    lapse: Wander,
    base_m_s: f64,
    track_deg: f64,
    turned_deg: f64,
    east_m: f64,
    fitted: &'static str,
    /// Time since the target's window was entered, and whether the passenger has taken, s.
    inside_s: Option<f64>,
    reached_s: Option<f64>,
    taken: bool,
}

impl Drive {
    pub(super) fn new(plan: Vec<Step>, chance: Chance) -> Self {
        Self {
            plan,
            at: 0,
            ticks: 0,
            lapse: Wander::new(chance, DRIVER_SD_KMH / KMH_PER_M_S, DRIVER_TIME_S),
            base_m_s: 0.0,
            track_deg: 90.0,
            turned_deg: 0.0,
            east_m: 0.0,
            fitted: "A",
            inside_s: None,
            reached_s: None,
            taken: false,
        }
    }

    /// One step of time, with what the passenger does at it; `None` when the plan is done.
    pub(super) fn step(&mut self) -> Option<(Motion, Vec<Command>)> {
        let step = *self.plan.get(self.at)?;
        let lapse_m_s = self.lapse.step();
        let mut commands = Vec::new();
        let mut incident = None;
        let done = match step {
            Step::Stand { seconds, fit } => self.stand(seconds, fit, &mut commands),
            Step::Turn => self.turn(),
            Step::Stop => {
                self.approach(0.0);
                self.base_m_s == 0.0
            }
            Step::Hold { target_kmh, least_s, incident: planned } => {
                self.approach(target_kmh / KMH_PER_M_S);
                let speed_m_s = self.base_m_s + lapse_m_s * self.share();
                let done = self.watch(speed_m_s * KMH_PER_M_S - target_kmh, least_s, &mut commands);
                incident = planned.filter(|_| self.reached_s.is_some_and(just(INCIDENT_AFTER_S)));
                if planned == Some(Incident::Lorry) && self.reached_s.is_some_and(just(MARK_AFTER_S)) {
                    commands.push(Command::Mark("lorry".to_string()));
                }
                done
            }
        };
        let speed_m_s = (self.base_m_s + lapse_m_s * self.share()).max(0.0);
        self.east_m += speed_m_s * sine_of_degrees(self.track_deg) * STEP_S;
        let motion =
            Motion { speed_m_s, track_deg: self.track_deg, east_m: self.east_m, fitted: self.fitted, incident };
        self.ticks += 1;
        if done {
            (self.at, self.ticks, self.turned_deg) = (self.at + 1, 0, 0.0);
            (self.inside_s, self.reached_s, self.taken) = (None, None, false);
        }
        Some((motion, commands))
    }

    /// Lapses grow with speed: none at standstill.
    fn share(&self) -> f64 {
        (self.base_m_s / 20.0).min(1.0)
    }

    fn approach(&mut self, wanted_m_s: f64) {
        let wish = (wanted_m_s - self.base_m_s) / EASE_S;
        let change = wish.clamp(-BRAKING_M_S2, ACCELERATION_M_S2) * STEP_S;
        self.base_m_s += change;
        if wanted_m_s == 0.0 && self.base_m_s < 0.2 {
            self.base_m_s = 0.0;
        }
    }

    fn stand(&mut self, seconds: f64, fit: Option<&'static str>, commands: &mut Vec<Command>) -> bool {
        let now_s = f64::from(self.ticks) * STEP_S;
        if let Some(letter) = fit {
            if just(10.0)(now_s) {
                self.fitted = letter;
            }
            if just(12.0)(now_s) {
                commands.push(Command::Configuration(letter.to_string()));
            }
            if just(15.0)(now_s) && self.at < 8 {
                commands.push(Command::Note("dry road, light wind from the right going out".to_string()));
            }
        }
        if just(seconds - 2.0)(now_s) {
            commands.push(Command::Zero);
        }
        now_s >= seconds
    }

    fn turn(&mut self) -> bool {
        let slow_m_s = TURNING_KMH / KMH_PER_M_S;
        self.approach(slow_m_s);
        if (self.base_m_s - slow_m_s).abs() < 0.5 {
            self.turned_deg += TURNING_DEG_S * STEP_S;
            self.track_deg = (self.track_deg + TURNING_DEG_S * STEP_S) % 360.0;
        }
        let done = self.turned_deg >= 180.0;
        if done {
            self.track_deg = if self.track_deg < 180.0 { 90.0 } else { 270.0 };
        }
        done
    }

    /// The passenger watches how far the speed is off and takes once; the driver goes on until both are content.
    fn watch(&mut self, off_kmh: f64, least_s: f64, commands: &mut Vec<Command>) -> bool {
        if off_kmh.abs() > SEEN_TOLERANCE_KMH {
            self.inside_s = None;
        } else {
            self.inside_s = Some(self.inside_s.map_or(0.0, |s| s + STEP_S));
            self.reached_s.get_or_insert(0.0);
        }
        if !self.taken && self.inside_s.is_some_and(|s| s >= HELD_AFTER_S + REACTION_S) {
            self.taken = true;
            commands.push(Command::Take);
        }
        let Some(reached_s) = &mut self.reached_s else { return false };
        *reached_s += STEP_S;
        (*reached_s >= least_s && self.taken) || *reached_s >= PATIENCE_S
    }
}

/// Whether a clock that advances by steps has just come to `moment_s`.
fn just(moment_s: f64) -> impl Fn(f64) -> bool {
    move |now_s| ((now_s - moment_s) * f64::from(RATE_HZ)).round() == 0.0
}

/// Sine of an angle in degrees from 0 to 360: its Taylor series to the eleventh power after folding to ±90°;
/// the error stays below 6e-8 (first term left out: (π/2)¹³/13!).
pub(super) fn sine_of_degrees(deg: f64) -> f64 {
    let folded = if deg <= 90.0 {
        deg
    } else if deg <= 270.0 {
        180.0 - deg
    } else {
        deg - 360.0
    };
    let x = folded * (std::f64::consts::PI / 180.0);
    let square = x * x;
    let series = [110.0, 72.0, 42.0, 20.0, 6.0].iter().fold(1.0, |sum, d| 1.0 - square / d * sum);
    x * series
}

/// The whole outing: thirteen blocks A B C A … A, each out and back, at 80 and 100 km/h in one run.
pub(super) fn full_plan() -> Vec<Step> {
    let mut plan = vec![Step::Stand { seconds: 14.0, fit: None }];
    let mut runs = 0;
    for (block, letter) in ["A", "B", "C"].into_iter().cycle().take(13).enumerate() {
        if block > 0 {
            plan.extend([Step::Stop, Step::Stand { seconds: 28.0, fit: Some(letter) }, Step::Turn]);
        }
        for way in 0..2 {
            let incident = match runs {
                9 => Some(Incident::Lorry),
                14 => Some(Incident::Unplugged),
                _ => None,
            };
            plan.push(Step::Hold { target_kmh: 80.0, least_s: 11.0, incident: None });
            plan.push(Step::Hold { target_kmh: 100.0, least_s: 21.5, incident });
            plan.extend((way == 0).then_some(Step::Turn));
            runs += 1;
        }
    }
    plan.extend([Step::Stop, Step::Stand { seconds: 12.0, fit: None }]);
    plan
}

/// About four minutes: A out and back, B out and back, at 100 km/h.
pub(super) fn short_plan() -> Vec<Step> {
    let hold = Step::Hold { target_kmh: 100.0, least_s: 15.0, incident: None };
    let stand = |fit| Step::Stand { seconds: 24.0, fit };
    vec![
        Step::Stand { seconds: 12.0, fit: None },
        hold,
        Step::Turn,
        hold,
        Step::Stop,
        stand(Some("B")),
        Step::Turn,
        hold,
        Step::Turn,
        hold,
        Step::Stop,
        Step::Stand { seconds: 12.0, fit: None },
    ]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_sine_is_the_sine() {
        for tenth in 0..=3600 {
            let deg = f64::from(tenth) / 10.0;
            assert!((sine_of_degrees(deg) - deg.to_radians().sin()).abs() < 6e-8, "{deg}");
        }
    }
}
