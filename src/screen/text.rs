//! Safe strings on a terminal: how wide they are, and what they are in ASCII.

pub use crate::text::safe;
use ratatui::text::Span;

/// Columns that a safe string takes.
pub fn width(text: &str) -> usize {
    Span::raw(text).width()
}

/// A safe string in ASCII alone: typographic signs by their nearest, anything else by `?`.
pub fn ascii(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        match c {
            c if c.is_ascii() => out.push(c),
            '—' | '–' => out.push('-'),
            '±' => out.push_str("+-"),
            '×' => out.push('x'),
            '·' => out.push('.'),
            '…' => out.push('~'),
            '°' => out.push_str("deg"),
            _ => out.push('?'),
        }
    }
    out
}

/// Words in lines of at most so many characters.
pub(super) fn folded(text: &str, columns: usize) -> Vec<String> {
    let mut lines = vec![String::new()];
    for word in text.split_whitespace() {
        let last = lines.last_mut().expect("there is a line");
        if last.is_empty() {
            last.push_str(word);
        } else if last.chars().count() + 1 + word.chars().count() <= columns {
            last.push(' ');
            last.push_str(word);
        } else {
            lines.push(word.to_string());
        }
    }
    lines
}
