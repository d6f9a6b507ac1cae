//! What the passenger sees: a [`View`] drawn into a buffer, and the one key table.
//!
//! The view is plain data made from the pipeline and the state of the journal; drawing it is pure, so that
//! a screen is tested as text. Speeds are km/h and pressures Pa in here; [`View::show`] says how they are shown.

mod below;
pub mod bench;
mod canvas;
mod digits;
mod drive;
mod figures;
pub mod findings;
pub mod keys;
pub mod layby;
pub mod messages;
mod overlays;
mod picture;
mod rows;
pub mod seen;
pub mod text;
mod theme;

pub use theme::Theme;

pub use crate::pipeline::health::Condition as PortState;

use crate::config::Show;
use crate::reduction::workshop::StepResponse;
use crate::units::StreamTime;
use bench::{Bench, BenchFace, Calibrating};
use canvas::Canvas;
use findings::Findings;
use keys::Bindings;
use layby::LaybyFace;
use ratatui::buffer::Buffer;
use std::sync::Arc;

/// The cautions: shown at the first start, in the README, and before a drive alone.
pub const SAFETY: [&str; 8] = [
    "The driver drives and touches nothing; the passenger works the laptop.",
    "Alone: start and stop it only when parked.",
    "Obey the law and the conditions of the road.",
    "Secure laptop, hoses and mast: nothing may come loose, hide the view or lie",
    "in an airbag's way; keep hoses off hot and moving parts.",
    "The figures are test results, not approval of a part: strength, road",
    "legality and handling are for licensed people and local rules.",
    "",
];

/// State of the interface itself, which no record holds: what is open, how it is drawn.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Face {
    /// Colours.
    pub theme: Theme,
    /// Draw with ASCII alone (old consoles, screen readers).
    pub plain: bool,
    /// The driver is alone: nothing that invites reading.
    pub solo: bool,
    /// Where the car is.
    pub spot: Spot,
    /// What is looked at beside the road.
    pub layby: LaybyFace,
    /// What is looked at in the workshop.
    pub bench: BenchFace,
    /// Keys that the person has put elsewhere.
    pub bindings: Bindings,
    /// What lies over the place.
    pub overlay: Overlay,
    /// The key that took or voided last and when it last came, to tell a held key from a second press.
    pub last_key: Option<(crossterm::event::KeyCode, StreamTime)>,
}

/// The three places, named after where the car is.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Spot {
    /// In the workshop.
    Bench,
    /// Moving.
    #[default]
    Drive,
    /// Parked beside the road.
    Layby,
}

impl Spot {
    /// The next one.
    pub const fn next(self) -> Self {
        match self {
            Self::Bench => Self::Drive,
            Self::Drive => Self::Layby,
            Self::Layby => Self::Bench,
        }
    }
    /// The one before.
    pub const fn before(self) -> Self {
        self.next().next()
    }
    /// Its name.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Bench => "Bench",
            Self::Drive => "Drive",
            Self::Layby => "Layby",
        }
    }
}

/// What lies over a place; over Drive it never stops the one key from taking, save where text is typed.
#[derive(Clone, Debug, Default, PartialEq)]
pub enum Overlay {
    /// Nothing.
    #[default]
    None,
    /// The cautions, at the first start; any key closes them, and acts.
    Safety,
    /// The key table.
    Help,
    /// "Leave?"
    Quit,
    /// "Void this segment?"
    Void(u32),
    /// The list of configurations and which one is marked.
    Configuration(usize),
    /// "Leave Drive while the car moves?"
    Away(Spot),
    /// One segment looked into.
    Segment(u32),
    /// The list of configurations, to correct a segment's.
    Correct(u32, usize),
    /// A sensor against a reference.
    Calibration(Calibrating),
    /// A hose that holds a pressure, since then.
    Leak(Option<StreamTime>),
    /// A hose that passes a step on; the last one seen.
    Step(Option<StepResponse>),
    /// A line of text being typed.
    Prompt(Prompt),
}

/// A line of text being typed.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Prompt {
    /// What it will become.
    pub kind: PromptKind,
    /// So far, as typed.
    pub text: String,
    /// Why the last Enter was refused.
    pub complaint: Option<String>,
}

/// What a typed line becomes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum PromptKind {
    /// A note.
    Note,
    /// A note on a segment.
    NoteOn(u32),
    /// The air measured by hand.
    Air,
    /// Channels on taps.
    Taps,
}

/// Draws the place over the whole buffer. Pure; any size, down to one cell, is drawn without panic.
pub fn render(view: &View, face: &Face, buffer: &mut Buffer) {
    let mut canvas = Canvas::new(buffer, face.theme, face.plain);
    if drive::too_small(&canvas) {
        drive::draw_small(view, face, &mut canvas);
    } else {
        match face.spot {
            Spot::Bench => bench::draw(view, face, &mut canvas),
            Spot::Drive => drive::draw(view, face, &mut canvas),
            Spot::Layby => layby::draw(view, face, &mut canvas),
        }
        overlays::draw(view, face, &mut canvas);
    }
}

/// Everything that the three places draw.
#[derive(Clone, Debug, PartialEq)]
pub struct View {
    /// Title of the outing.
    pub title: String,
    /// Stream time now.
    pub now: StreamTime,
    /// Display units.
    pub show: Show,
    /// State of the speed window.
    pub window: Window,
    /// All targets of the outing, km/h.
    pub targets_kmh: Vec<f64>,
    /// The dwell that is held, if any.
    pub held: Option<Held>,
    /// `take` was pressed and waits for the next full dwell.
    pub armed: bool,
    /// A span is open since then.
    pub span: Option<StreamTime>,
    /// Channels on taps, then the dynamic pressure, then other channels, in rig order.
    pub rows: Vec<Row>,
    /// What the next segment will be tagged with.
    pub tag: Tag,
    /// Health of every port.
    pub ports: Vec<PortHealth>,
    /// Session file and disk.
    pub journal: Journal,
    /// What happened last, newest last, at most eight.
    pub messages: Vec<Message>,
    /// Segments kept and not voided.
    pub kept: u32,
    /// The newest segment that is not voided.
    pub last_segment: Option<u32>,
    /// Letters and names of all configurations.
    pub configurations: Vec<(String, String)>,
    /// Seconds since the last zero; none: never zeroed.
    pub zero_age_s: Option<f64>,
    /// For how long the car has stood, s; none while it moves.
    pub stood_s: Option<f64>,
    /// The letter that is to be fitted next, where that is another: what a driver alone confirms.
    pub asks: Option<String>,
    /// What to drive next, in words; none when all that was wanted is driven.
    pub plan: Option<String>,
    /// What the session says so far; none before the first segment.
    pub findings: Option<Arc<Findings>>,
    /// What the workshop sees; none while nobody looks.
    pub bench: Option<Bench>,
    /// The stream has ended (a replay or rehearsal is over).
    pub ended: bool,
}

/// The speed window now.
#[derive(Clone, Debug, PartialEq)]
pub struct Window {
    /// Which of the four states.
    pub state: WindowState,
    /// Watched speed, km/h; none when stale or never seen.
    pub speed_kmh: Option<f64>,
    /// Target the speed belongs to, or the nearest or chosen one, km/h.
    pub target_kmh: f64,
    /// Half width, km/h.
    pub tolerance_kmh: f64,
    /// Progress of settling (in settling) or of the running dwell (in steady and held), 0–1.
    pub progress: f64,
    /// Seconds left until settled or until the dwell is full.
    pub left_s: f64,
    /// The watched channel is an airspeed.
    pub airspeed: bool,
}

/// The four states of the speed window; off says why.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum WindowState {
    /// No speed: nothing received, or stale.
    NoSpeed,
    /// Below the window.
    TooSlow,
    /// Above it.
    TooFast,
    /// Inside, younger than the settling time.
    Settling,
    /// Inside and averaging, no full dwell yet.
    Steady,
    /// A full dwell has been averaged; its values stand still.
    Held,
}

/// The held dwell.
#[derive(Clone, Debug, PartialEq)]
pub struct Held {
    /// Target speed, km/h.
    pub target_kmh: f64,
    /// First moment.
    pub t0: StreamTime,
    /// Last moment.
    pub t1: StreamTime,
    /// Whether it was kept, and is on the disk.
    pub kept: Kept,
}

/// Fate of the held dwell.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kept {
    /// Not taken (yet).
    No,
    /// Taken; not known to be on the disk.
    Writing(u32),
    /// On the disk.
    OnDisk(u32),
    /// Writing failed; it is in memory only.
    Failed(u32),
}

/// One channel.
#[derive(Clone, Debug, PartialEq)]
pub struct Row {
    /// Tap name where the channel sits on one, else the channel's name.
    pub label: String,
    /// Channel name.
    pub channel: String,
    /// What it measures; decides unit and decimals.
    pub quantity: crate::units::Quantity,
    /// The unit that the rig names; shown where the quantity has none of its own.
    pub unit: String,
    /// Damped live value; none when never seen.
    pub live: Option<f64>,
    /// Mean of the held dwell.
    pub held: Option<f64>,
    /// Standard deviation of the held dwell, else of the running one.
    pub fluctuation: Option<f64>,
    /// The last half minute, oldest first, one point a half second; none where nothing came.
    pub trace: Vec<Option<f64>>,
    /// At an end of its range within the last second.
    pub saturated: bool,
    /// Silent for longer than its limit.
    pub stale: bool,
    /// The same value for five seconds beside living channels.
    pub stuck: bool,
}

/// Tag of the next segment.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Tag {
    /// Configuration letter.
    pub configuration: String,
    /// Its name.
    pub name: String,
    /// `out`, `back` or `other`.
    pub direction: &'static str,
    /// The direction was set by key.
    pub by_hand: bool,
    /// Which pass the next one is, from 1.
    pub pass: u32,
    /// Passes wanted.
    pub wanted: u32,
}

/// Health of one port.
#[derive(Clone, Debug, PartialEq)]
pub struct PortHealth {
    /// Its name.
    pub name: String,
    /// How it is.
    pub state: PortState,
    /// Lines a second over the last five seconds.
    pub lines_per_s: f64,
    /// Share of rejected lines over the last ten seconds, 0–1.
    pub rejected_share: f64,
    /// The last line that did not parse, escaped, and why.
    pub last_bad: Option<(String, String)>,
}

/// Session file and disk.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Journal {
    /// File name of the session.
    pub file: String,
    /// What is wrong, if anything.
    pub trouble: Option<String>,
    /// The record is being written.
    pub recording: bool,
}

/// Something that happened.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Message {
    /// When.
    pub at: StreamTime,
    /// How bad.
    pub weight: Weight,
    /// The words, escaped.
    pub text: String,
}

/// How much a message matters.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Weight {
    /// For the record.
    Quiet,
    /// Something good.
    Good,
    /// Something refused, with the remedy.
    Refused,
    /// Something broken.
    Trouble,
}
