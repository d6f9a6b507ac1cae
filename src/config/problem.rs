//! What is wrong in a file: where, what, and what to do about it.
//!
//! [`Log`] turns byte offsets of one source into places and keeps every problem until the whole file is
//! read. Whatever it quotes from a file is escaped here, so that no file writes to a terminal by itself.

use std::cell::RefCell;
use std::fmt;

/// A file's text, loaded by the shell.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Source {
    /// The path as the person named it; for messages only.
    pub path: String,
    /// The whole text.
    pub text: String,
}

impl Source {
    /// A text and the path it came from.
    pub fn new(path: impl Into<String>, text: impl Into<String>) -> Self {
        Self { path: path.into(), text: text.into() }
    }
}

/// Where in a file, counted from 1; columns in characters.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Place {
    /// Path of the file.
    pub file: String,
    /// Line.
    pub line: usize,
    /// Column.
    pub column: usize,
}

impl fmt::Display for Place {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}:{}:{}", visible(&self.file), self.line, self.column)
    }
}

/// Whether a problem stops the work.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Severity {
    /// The file cannot be used.
    Error,
    /// It can, but probably not as meant.
    Warning,
}

/// One thing wrong. `{}` is one line, `{:#}` adds the hint below a blank line.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Problem {
    /// Where.
    pub place: Place,
    /// How bad.
    pub severity: Severity,
    /// What is wrong.
    pub what: String,
    /// The next thing to do.
    pub hint: String,
}

impl Problem {
    /// Whether it stops the work.
    pub fn is_error(&self) -> bool {
        self.severity == Severity::Error
    }
}

impl fmt::Display for Problem {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let word = if self.is_error() { "error" } else { "warning" };
        write!(f, "{word}: {} ({})", self.what, self.place)?;
        if f.alternate() && !self.hint.is_empty() {
            write!(f, "\n\nhint: {}", self.hint)?;
        }
        Ok(())
    }
}

/// Problems kept of one file; more help nobody.
const MOST: usize = 200;

/// The problems of one source.
pub(super) struct Log<'a> {
    source: &'a Source,
    /// Offsets of the line feeds.
    breaks: Vec<usize>,
    problems: RefCell<Vec<Problem>>,
}

impl<'a> Log<'a> {
    pub(super) fn new(source: &'a Source) -> Self {
        let breaks = source.text.bytes().enumerate().filter(|(_, byte)| *byte == b'\n').map(|(at, _)| at);
        Self { source, breaks: breaks.collect(), problems: RefCell::default() }
    }

    /// Line of a byte offset, from 1.
    pub(super) fn line(&self, at: usize) -> usize {
        self.breaks.partition_point(|end| *end < at) + 1
    }

    /// Line and column of a byte offset.
    pub(super) fn place(&self, at: usize) -> Place {
        let line = self.line(at);
        let start = line.checked_sub(2).map_or(0, |above| self.breaks[above] + 1);
        let before = &self.source.text[start..self.source.text.floor_char_boundary(at).max(start)];
        Place { file: self.source.path.clone(), line, column: before.chars().count() + 1 }
    }

    pub(super) fn error(&self, at: usize, what: impl Into<String>, hint: impl Into<String>) {
        self.push(at, Severity::Error, (what.into(), hint.into()));
    }

    pub(super) fn warn(&self, at: usize, what: impl Into<String>, hint: impl Into<String>) {
        self.push(at, Severity::Warning, (what.into(), hint.into()));
    }

    /// No more will be kept, so that no more effort is due.
    pub(super) fn full(&self) -> bool {
        self.problems.borrow().len() > MOST
    }

    fn push(&self, at: usize, severity: Severity, (what, hint): (String, String)) {
        if self.full() {
            return;
        }
        let place = self.place(at);
        let mut problems = self.problems.borrow_mut();
        match problems.len() {
            n if n < MOST => problems.push(Problem { place, severity, what, hint }),
            MOST => problems.push(Problem {
                place,
                severity: Severity::Error,
                what: format!("more than {MOST} problems: the rest is not shown"),
                hint: "put these right first".into(),
            }),
            _ => {}
        }
    }

    /// A place of the same file, in words.
    pub(super) fn spot(&self, at: usize) -> String {
        let Place { line, column, .. } = self.place(at);
        format!("line {line}, column {column}")
    }

    /// All of them, in the order of the file.
    pub(super) fn finish(self) -> Vec<Problem> {
        let mut problems = self.problems.into_inner();
        let count = problems.len().min(MOST);
        problems[..count].sort_by_key(|p| (p.place.line, p.place.column));
        problems
    }
}

/// Text of a file as it may stand in a message: at most 60 characters, the unprintable ones as `\u{…}`.
pub(super) fn shown(text: &str) -> String {
    let mut all = text.chars();
    let mut out: String = all.by_ref().take(60).map(escaped).collect();
    if all.next().is_some() {
        out.push('…');
    }
    out
}

/// The whole text, unprintable characters as `\u{…}`.
pub(super) fn visible(text: &str) -> String {
    text.chars().map(escaped).collect()
}

fn escaped(c: char) -> String {
    if printable(c) { c.into() } else { c.escape_unicode().to_string() }
}

/// Whether a character shows as itself: no control, no change of writing direction, nothing of zero width.
pub(super) fn printable(c: char) -> bool {
    let hidden = matches!(c,
        '\u{ad}' | '\u{34f}' | '\u{61c}' | '\u{115f}' | '\u{1160}' | '\u{180b}'..='\u{180f}' | '\u{200b}'..='\u{200f}'
        | '\u{2028}'..='\u{202e}' | '\u{2060}'..='\u{206f}' | '\u{3164}' | '\u{fe00}'..='\u{fe0f}' | '\u{feff}'
        | '\u{ffa0}' | '\u{fff0}'..='\u{fffb}' | '\u{e0000}'..='\u{e0fff}');
    !hidden && !c.is_control()
}
