//! The one gate between a foreign string and whatever shows it: a terminal cell, a page.
//!
//! Names, notes and lines of ports come from files and wires; [`safe`] makes them fit to be shown: nothing in its
//! result moves a cursor, rings, changes colour, turns the writing direction or hides.

use unicode_width::UnicodeWidthStr;

/// Makes a string safe to show: control characters become `\xNN`; characters without a width of their own (bidi
/// controls, zero-width joiners, combining marks, variation selectors) and line separators become `\u{N}`.
/// What remains takes one or two columns a character. Applying it twice changes nothing more.
///
/// ```
/// assert_eq!(steadytap::text::safe("a\u{202E}b\x1B"), "a\\u{202E}b\\x1B");
/// ```
pub fn safe(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        if c.is_control() {
            out.push_str(&format!("\\x{:02X}", u32::from(c)));
        } else if c.is_ascii() {
            out.push(c);
        } else if matches!(c, '\u{2028}' | '\u{2029}' | '\u{AD}') || c.encode_utf8(&mut [0; 4]).width() == 0 {
            out.push_str(&format!("\\u{{{:X}}}", u32::from(c)));
        } else {
            out.push(c);
        }
    }
    out
}
