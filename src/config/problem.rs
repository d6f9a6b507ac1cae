//! What is wrong with a configuration file: where, what, and what would be right.

use std::fmt;

/// A file as text.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Source {
    /// Its name, for messages.
    pub path: String,
    /// What stands in it.
    pub text: String,
}

/// What a file says it is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// `steadytap = "rig 1"`.
    Rig,
    /// `steadytap = "car 1"`.
    Car,
    /// `steadytap = "outing 1"`.
    Outing,
}

impl Kind {
    /// What its first key must say.
    pub const fn words(self) -> &'static str {
        match self {
            Self::Rig => "rig 1",
            Self::Car => "car 1",
            Self::Outing => "outing 1",
        }
    }
}

/// A place in a file; line and column count from 1, columns in characters.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Place {
    /// The file's name.
    pub file: String,
    /// Line.
    pub line: usize,
    /// Column.
    pub column: usize,
}

impl Place {
    /// The place of a byte of a source.
    pub fn of(source: &Source, byte: usize) -> Self {
        let mut byte = byte.min(source.text.len());
        while !source.text.is_char_boundary(byte) {
            byte -= 1;
        }
        let before = &source.text[..byte];
        let line_start = before.rfind('\n').map_or(0, |at| at + 1);
        Self {
            file: source.path.clone(),
            line: before.matches('\n').count() + 1,
            column: before[line_start..].chars().count() + 1,
        }
    }
}

/// Whether a problem forbids going on.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Severity {
    /// It does.
    Error,
    /// It should be looked at.
    Warning,
}

/// One problem of a configuration file.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Problem {
    /// Where.
    pub place: Place,
    /// How bad.
    pub severity: Severity,
    /// What is wrong.
    pub what: String,
    /// What would be right.
    pub hint: Option<String>,
}

impl fmt::Display for Problem {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let word = if self.severity == Severity::Error { "error" } else { "warning" };
        let Place { file, line, column } = &self.place;
        write!(f, "{word}: {} ({file}:{line}:{column})", self.what)?;
        match &self.hint {
            Some(hint) => write!(f, "\n\nhint: {hint}"),
            None => Ok(()),
        }
    }
}
