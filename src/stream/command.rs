//! What the person did, in the words that stand in a record after `@`: the meaning of a key, not the key.
//!
//! [`Command`] ↔ words. A replay obeys these, so they are as much part of a record as the bytes.

use crate::config::Air;
use std::collections::BTreeMap;
use std::fmt;

/// Longest text of a mark or note, in characters; the rest is cut.
pub const LONGEST_TEXT: usize = 500;

/// One thing that a person can tell the instrument.
#[derive(Clone, Debug, PartialEq)]
pub enum Command {
    /// Keep the held dwell, or the next.
    Take,
    /// Keep every good dwell from now on, as if `take` were pressed for each.
    TakeEvery,
    /// A segment by hand begins.
    SpanBegin,
    /// It ends.
    SpanEnd,
    /// Withdraw a segment.
    Void(u32),
    /// A withdrawn segment counts again.
    Restore(u32),
    /// A segment was tagged with the wrong configuration.
    CorrectConfiguration(u32, String),
    /// A segment was tagged with the wrong direction.
    CorrectDirection(u32, crate::session::Direction),
    /// Average the channels at standstill.
    Zero,
    /// Another configuration is fitted.
    Configuration(String),
    /// Direction by hand, or by track again.
    Direction(DirectionWord),
    /// The target to drive next, km/h.
    Target(f64),
    /// Note a moment.
    Mark(String),
    /// Words for the file.
    Note(String),
    /// Channel → tap for the channels named; the others stay.
    Taps(BTreeMap<String, String>),
    /// The air as measured by hand.
    Air(Air),
}

/// Argument of `direction`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum DirectionWord {
    /// Set by hand.
    By(crate::session::Direction),
    /// By track.
    Auto,
}

/// Words that are no command.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum CommandError {
    /// Not one of the command words.
    #[error(
        "unknown command `{0}`: expected take, span, void, restore, correct, zero, configuration, direction, target, mark, note, taps or air"
    )]
    Unknown(String),
    /// A known word with arguments that do not fit.
    #[error("`{word}` needs {needs}")]
    Argument {
        /// The command word.
        word: &'static str,
        /// What should follow it.
        needs: &'static str,
    },
}

impl Command {
    /// It decides what is kept; passed over where every dwell is kept anyway.
    pub fn decides_what_is_kept(&self) -> bool {
        matches!(self, Self::Take | Self::TakeEvery | Self::SpanBegin | Self::SpanEnd) || self.names_a_segment()
    }

    /// It is about a segment by its number, which is another where other dwells are kept.
    fn names_a_segment(&self) -> bool {
        matches!(self, Self::Void(_) | Self::Restore(_) | Self::CorrectConfiguration(..) | Self::CorrectDirection(..))
    }

    /// Reads the words after `@`.
    ///
    /// # Errors
    /// [`CommandError`] for an unknown word or arguments that do not fit.
    pub fn parse(words: &str) -> Result<Self, CommandError> {
        let words = words.trim();
        let (word, rest) = words.split_once(' ').unwrap_or((words, ""));
        let rest = rest.trim();
        let needs = |word, needs| CommandError::Argument { word, needs };
        let alone = |command, word| if rest.is_empty() { Ok(command) } else { Err(needs(word, "nothing after it")) };
        match word {
            "take" => match rest {
                "" => Ok(Self::Take),
                "every" => Ok(Self::TakeEvery),
                _ => Err(needs("take", "nothing after it, or every")),
            },
            "zero" => alone(Self::Zero, "zero"),
            "span" => match rest {
                "begin" => Ok(Self::SpanBegin),
                "end" => Ok(Self::SpanEnd),
                _ => Err(needs("span", "begin or end")),
            },
            "void" => rest.parse().map(Self::Void).map_err(|_| needs("void", "a segment number")),
            "restore" => rest.parse().map(Self::Restore).map_err(|_| needs("restore", "a segment number")),
            "correct" => correction(rest)
                .ok_or(needs("correct", "a segment number, then configuration or direction, then what it was")),
            "configuration" if !rest.is_empty() && !rest.contains(' ') => Ok(Self::Configuration(rest.to_string())),
            "configuration" => Err(needs("configuration", "one letter of the outing")),
            "direction" => direction(rest).map(Self::Direction).ok_or(needs("direction", "out, back, other or auto")),
            "target" => finite(rest)
                .filter(|v| *v > 0.0 && *v < 1000.0)
                .map(Self::Target)
                .ok_or(needs("target", "a speed in km/h")),
            "mark" => Ok(Self::Mark(clip(rest))),
            "note" if !rest.is_empty() => Ok(Self::Note(clip(rest))),
            "note" => Err(needs("note", "some words")),
            "taps" => taps(rest).map(Self::Taps).ok_or(needs("taps", "channel=tap pairs")),
            "air" => air(rest).map(Self::Air).ok_or(needs("air", "temperature °C, pressure hPa, humidity %")),
            other => Err(CommandError::Unknown(other.to_string())),
        }
    }
}

fn correction(words: &str) -> Option<Command> {
    let words: Vec<&str> = words.split_whitespace().collect();
    let [id, what, to] = words[..] else { return None };
    let id = id.parse().ok()?;
    match (what, direction(to)) {
        ("configuration", _) => Some(Command::CorrectConfiguration(id, to.to_string())),
        ("direction", Some(DirectionWord::By(way))) => Some(Command::CorrectDirection(id, way)),
        _ => None,
    }
}

fn clip(text: &str) -> String {
    text.chars().take(LONGEST_TEXT).collect::<String>().trim_end().to_string()
}

fn finite(text: &str) -> Option<f64> {
    text.parse::<f64>().ok().filter(|v| v.is_finite())
}

fn direction(word: &str) -> Option<DirectionWord> {
    use crate::session::Direction::{Back, Other, Out};
    Some(match word {
        "out" => DirectionWord::By(Out),
        "back" => DirectionWord::By(Back),
        "other" => DirectionWord::By(Other),
        "auto" => DirectionWord::Auto,
        _ => return None,
    })
}

fn taps(words: &str) -> Option<BTreeMap<String, String>> {
    let pairs: Option<BTreeMap<_, _>> = words
        .split_whitespace()
        .map(|pair| {
            let (channel, tap) = pair.split_once('=')?;
            (!channel.is_empty() && !tap.is_empty()).then(|| (channel.to_string(), tap.to_string()))
        })
        .collect();
    pairs.filter(|p| !p.is_empty())
}

fn air(words: &str) -> Option<Air> {
    let values: Vec<f64> = words.split_whitespace().map(finite).collect::<Option<_>>()?;
    let [temperature_c, pressure_hpa, humidity_pct] = values[..] else { return None };
    let plausible = (-60.0..=70.0).contains(&temperature_c)
        && (300.0..=1200.0).contains(&pressure_hpa)
        && (0.0..=100.0).contains(&humidity_pct);
    plausible.then_some(Air { temperature_c, pressure_hpa, humidity_pct })
}

impl fmt::Display for Command {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Take => write!(f, "take"),
            Self::TakeEvery => write!(f, "take every"),
            Self::SpanBegin => write!(f, "span begin"),
            Self::SpanEnd => write!(f, "span end"),
            Self::Void(id) => write!(f, "void {id}"),
            Self::Restore(id) => write!(f, "restore {id}"),
            Self::CorrectConfiguration(id, letter) => write!(f, "correct {id} configuration {letter}"),
            Self::CorrectDirection(id, way) => write!(f, "correct {id} direction {}", way.word()),
            Self::Zero => write!(f, "zero"),
            Self::Configuration(letter) => write!(f, "configuration {letter}"),
            Self::Direction(DirectionWord::By(way)) => write!(f, "direction {}", way.word()),
            Self::Direction(DirectionWord::Auto) => write!(f, "direction auto"),
            Self::Target(kmh) => write!(f, "target {kmh}"),
            Self::Mark(text) if text.is_empty() => write!(f, "mark"),
            Self::Mark(text) => write!(f, "mark {text}"),
            Self::Note(text) => write!(f, "note {text}"),
            Self::Taps(map) => {
                write!(f, "taps")?;
                map.iter().try_for_each(|(channel, tap)| write!(f, " {channel}={tap}"))
            }
            Self::Air(a) => write!(f, "air {} {} {}", a.temperature_c, a.pressure_hpa, a.humidity_pct),
        }
    }
}
