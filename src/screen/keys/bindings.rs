//! Keys that the person has put elsewhere: names of the table's rows → keys, and the words for keys.
//!
//! `Space`, `Enter`, `Tab`, `Esc`, `Backspace`, arrows, `PageUp`, `F1`, `Ctrl-x` and single letters ↔ key codes. Nothing is read here.

use super::{Key, KeyRow, TABLE};
use crossterm::event::KeyCode;
use std::collections::BTreeMap;

/// Words for keys that are no letters.
const NAMED: [(&str, KeyCode); 14] = [
    ("Space", KeyCode::Char(' ')),
    ("Enter", KeyCode::Enter),
    ("Tab", KeyCode::Tab),
    ("Shift-Tab", KeyCode::BackTab),
    ("Esc", KeyCode::Esc),
    ("Backspace", KeyCode::Backspace),
    ("Up", KeyCode::Up),
    ("Down", KeyCode::Down),
    ("Left", KeyCode::Left),
    ("Right", KeyCode::Right),
    ("PageUp", KeyCode::PageUp),
    ("PageDown", KeyCode::PageDown),
    ("Home", KeyCode::Home),
    ("End", KeyCode::End),
];

/// Rows of the table that have other keys.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Bindings {
    other: BTreeMap<&'static str, Vec<Key>>,
}

/// Why a file of keys cannot be used.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum BindingError {
    /// No row has that name.
    #[error("there is no key named `{0}`; the names are {names}", names = names())]
    NoSuchName(String),
    /// Not a key.
    #[error(
        "`{0}` is no key: give a letter, Ctrl- and a letter, F1 to F12, or one of Space, Enter, Tab, Esc, PageUp and the like"
    )]
    NoSuchKey(String),
    /// Two rows of one place have the same key.
    #[error("`{key}` would be both `{first}` and `{second}` in one place: give one of them another key")]
    Twice {
        /// The key.
        key: String,
        /// First row.
        first: String,
        /// Second row.
        second: String,
    },
}

fn names() -> String {
    TABLE.iter().map(|row| row.name).filter(|name| !name.is_empty()).collect::<Vec<_>>().join(", ")
}

impl Bindings {
    /// Puts rows on other keys.
    ///
    /// # Errors
    /// [`BindingError`] for an unknown name or key, or a key that would do two things in one place.
    pub fn new<'a>(written: impl IntoIterator<Item = (&'a str, Vec<&'a str>)>) -> Result<Self, BindingError> {
        let mut bindings = Self::default();
        for (name, words) in written {
            let row = TABLE.iter().find(|row| row.name == name && !name.is_empty());
            let row = row.ok_or_else(|| BindingError::NoSuchName(name.to_string()))?;
            let keys = words.iter().map(|word| key(word).ok_or_else(|| BindingError::NoSuchKey((*word).to_string())));
            bindings.other.insert(row.name, keys.collect::<Result<_, _>>()?);
        }
        bindings.unique()?;
        Ok(bindings)
    }

    fn unique(&self) -> Result<(), BindingError> {
        for (i, row) in TABLE.iter().enumerate() {
            for other in TABLE[i + 1..].iter().filter(|other| other.places.iter().any(|p| row.places.contains(p))) {
                if let Some(key) = self.of(row).iter().find(|key| self.of(other).contains(key)) {
                    let of =
                        |row: &KeyRow| if row.name.is_empty() { row.does.to_string() } else { row.name.to_string() };
                    return Err(BindingError::Twice { key: word(*key), first: of(row), second: of(other) });
                }
            }
        }
        Ok(())
    }

    /// The keys of a row.
    pub fn of<'a>(&'a self, row: &'a KeyRow) -> &'a [Key] {
        self.other.get(row.name).map_or(row.keys, Vec::as_slice)
    }

    /// The keys of a row as printed.
    pub fn shown(&self, row: &KeyRow) -> String {
        self.of(row).iter().map(|key| word(*key)).collect::<Vec<_>>().join(" ")
    }
}

/// The word for a key.
fn word((code, control): Key) -> String {
    let bare = match code {
        KeyCode::Char(c) if c != ' ' => {
            if control {
                c.to_ascii_uppercase().to_string()
            } else {
                c.to_string()
            }
        }
        KeyCode::F(n) => format!("F{n}"),
        code => NAMED.iter().find(|(_, named)| *named == code).map_or("?", |(word, _)| word).to_string(),
    };
    if control { format!("Ctrl-{bare}") } else { bare }
}

/// The key of a word; letters are small.
fn key(word: &str) -> Option<Key> {
    if let Some(named) = NAMED.iter().find(|(name, _)| name.eq_ignore_ascii_case(word)) {
        return Some((named.1, false));
    }
    let control = word.strip_prefix("Ctrl-");
    let mut letters = control.unwrap_or(word).chars();
    match (letters.next(), letters.next()) {
        (Some(c), None) if !c.is_whitespace() && !c.is_control() => {
            Some((KeyCode::Char(c.to_ascii_lowercase()), control.is_some()))
        }
        (Some('F'), Some(_)) => word[1..].parse().ok().filter(|n| (1..=12).contains(n)).map(|n| (KeyCode::F(n), false)),
        _ => None,
    }
}
