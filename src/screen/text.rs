//! The one gate between a foreign string and a terminal cell.
//!
//! Names, notes and lines of ports come from files and wires; [`safe`] makes them fit to be shown: nothing in its
//! result moves a cursor, rings, changes colour, turns the writing direction or hides.

use ratatui::text::Span;

/// Makes a string safe to show: control characters become `\xNN`; characters without a width of their own (bidi
/// controls, zero-width joiners, combining marks, variation selectors) and line separators become `\u{N}`.
/// What remains takes one or two columns a character. Applying it twice changes nothing more.
pub fn safe(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        if c.is_control() {
            out.push_str(&format!("\\x{:02X}", u32::from(c)));
        } else if c.is_ascii() {
            out.push(c);
        } else if matches!(c, '\u{2028}' | '\u{2029}' | '\u{AD}') || width(c.encode_utf8(&mut [0; 4])) == 0 {
            out.push_str(&format!("\\u{{{:X}}}", u32::from(c)));
        } else {
            out.push(c);
        }
    }
    out
}

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
