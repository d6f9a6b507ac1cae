//! Names: which words may be one, which are taken, which was probably meant.
//!
//! [`Known`] is the one table of names for ports, channels, taps, cores and configurations: it refuses a
//! second of the same name and looks up references, naming the nearest when there is none.

use super::cursor::Value;
use super::problem::{printable, shown};
use crate::units::Unit;
use std::collections::BTreeMap;

/// Longest name, in characters.
const LONGEST_NAME: usize = 64;
const AMBIGUOUS: &str = "inH2O";
/// Longest title or description, in characters.
const LONGEST_TEXT: usize = 200;

/// A word for records and commands: ASCII letters, digits and the marks given.
pub(super) fn word(value: &Value, marks: &str) -> Option<String> {
    let text = value.text()?;
    let fits = text.chars().all(|c| c.is_ascii_alphanumeric() || marks.contains(c));
    if fits && !text.is_empty() && text.len() <= LONGEST_NAME {
        return Some(text.to_string());
    }
    let allowed: Vec<_> = marks.chars().map(|c| format!("`{c}`")).collect();
    value.refuse(
        format!("`{}` cannot be a name here", shown(text)),
        format!("1 to {LONGEST_NAME} of the letters a to z and A to Z, digits, {}; no blanks", allowed.join(" ")),
    );
    None
}

/// A tap's or core's name: printable, no blanks, no `=`, since commands write `p1=base-high`.
pub(super) fn tap_name(value: &Value) -> Option<String> {
    let text = value.text()?;
    let fits = text.chars().all(|c| printable(c) && !c.is_whitespace() && c != '=');
    if fits && !text.is_empty() && text.chars().count() <= LONGEST_NAME {
        return Some(text.to_string());
    }
    value.refuse(
        format!("`{}` cannot be a name here", shown(text)),
        format!("1 to {LONGEST_NAME} visible characters, no blanks, no `=`: for example base-high"),
    );
    None
}

/// Words for people: printable, not blank.
pub(super) fn line(value: &Value) -> Option<String> {
    let text = value.text()?;
    if text.chars().all(printable) && !text.trim().is_empty() && text.chars().count() <= LONGEST_TEXT {
        return Some(text.to_string());
    }
    value.refuse(
        format!("`{}` is `{}`", value.key, shown(text)),
        format!("1 to {LONGEST_TEXT} visible characters; no control, bidirectional or zero-width ones"),
    );
    None
}

/// One of a few fixed words.
pub(super) fn choice<T: Copy>(value: &Value, choices: &[(&str, T)]) -> Option<T> {
    let text = value.text()?;
    let found = choices.iter().find(|(word, _)| *word == text).map(|(_, meaning)| *meaning);
    if found.is_none() {
        let words = || choices.iter().map(|(word, _)| *word);
        let guess = nearest(text, words()).map(|k| format!("did you mean \"{k}\"? ")).unwrap_or_default();
        let what = format!("`{}` is \"{}\"", value.key, shown(text));
        value.refuse(what, format!("{guess}allowed: {}", list(words())));
    }
    found
}

/// A unit of the list. Bare `inH2O` is refused though it is one: people mean three different things by it.
pub(super) fn unit_of(value: &Value, units: &'static [Unit]) -> Option<&'static str> {
    let text = value.text()?;
    let known = || units.iter().map(|u| u.name).filter(|name| *name != AMBIGUOUS);
    if let Some(name) = known().find(|name| *name == text) {
        return Some(name);
    }
    let key = value.key;
    if text == AMBIGUOUS && units.iter().any(|u| u.name == AMBIGUOUS) {
        let hint = "say inH2O-4C (249.082 Pa) or inH2O-60F (248.84 Pa); \
                    for the conventional one take unit = \"Pa\" and a gain of 249.089";
        value.refuse(format!("`{key}` is \"inH2O\", which has several sizes"), hint);
        return None;
    }
    let guess = nearest(text, known()).map(|k| format!("did you mean {k}? ")).unwrap_or_default();
    value.refuse(format!("`{key}` is \"{}\"", shown(text)), format!("{guess}allowed: {}", unit_names(units)));
    None
}

/// The units that may be named, for a hint.
pub(super) fn unit_names(units: &[Unit]) -> String {
    let names: Vec<_> = units.iter().map(|u| u.name).filter(|name| *name != AMBIGUOUS).collect();
    names.join(", ")
}

/// The names of one kind, what stands behind each, and where it was given.
pub(super) struct Known<T> {
    noun: &'static str,
    remedy: &'static str,
    names: BTreeMap<String, (usize, T)>,
    /// Whether every name of the kind could be read; without that a missing name is no proof of a mistake.
    pub(super) whole: bool,
}

impl<T> Known<T> {
    /// No names yet. With `whole` false nothing is ever called unknown.
    pub(super) fn new(noun: &'static str, whole: bool) -> Self {
        Self { noun, remedy: "give each a name of its own", names: BTreeMap::new(), whole }
    }

    /// For a list of which each entry may stand once.
    pub(super) fn once(noun: &'static str) -> Self {
        Self { remedy: "each may stand here once", ..Self::new(noun, true) }
    }

    /// Takes a name that was read, or notes that one could not be; refuses a second of that name.
    pub(super) fn add(&mut self, name: Option<(&Value, &str)>, behind: T) {
        let Some((value, name)) = name else {
            self.whole = false;
            return;
        };
        if let Some((first, _)) = self.names.get(name) {
            let first = value.log.spot(*first);
            let what = format!("a second {} `{}`: the first is at {first}", self.noun, shown(name));
            value.refuse(what, self.remedy);
        } else {
            self.names.insert(name.to_string(), (value.at(), behind));
        }
    }

    pub(super) fn get(&self, name: &str) -> Option<&T> {
        self.names.get(name).map(|(_, behind)| behind)
    }

    /// The first in file order of which `fits` holds.
    pub(super) fn first(&self, fits: impl Fn(&T) -> bool) -> Option<(&str, &T)> {
        let fitting = self.names.iter().filter(|(_, (_, behind))| fits(behind));
        fitting.min_by_key(|(_, (at, _))| *at).map(|(name, (_, behind))| (name.as_str(), behind))
    }

    /// What stands behind a name; says so if there is no such name.
    pub(super) fn find(&self, name: &str, value: &Value, at: usize) -> Option<&T> {
        let found = self.get(name);
        if found.is_none() && self.whole && !value.log.full() {
            let names = || self.names.keys().map(String::as_str);
            let guess = nearest(name, names()).map(|k| format!("did you mean `{k}`? ")).unwrap_or_default();
            value.log.error(
                at,
                format!("no {} `{}`", self.noun, shown(name)),
                format!("{guess}known: {}", list(names())),
            );
        }
        found
    }
}

/// Up to twelve words for a hint.
pub(super) fn list<'w>(words: impl Iterator<Item = &'w str>) -> String {
    let mut words = words.map(shown);
    let first: Vec<_> = words.by_ref().take(12).collect();
    match (first.is_empty(), words.next()) {
        (true, _) => "none".into(),
        (_, None) => first.join(", "),
        (_, Some(_)) => first.join(", ") + ", …",
    }
}

/// The word that a person who wrote `word` probably meant, if any is near: at most two edits in five letters.
pub(super) fn nearest<'w>(word: &str, known: impl Iterator<Item = &'w str>) -> Option<&'w str> {
    let length = word.chars().count();
    if length > LONGEST_NAME {
        return None;
    }
    let near = |k: &&str| edits(word, k) * 5 <= 2 * length.max(k.chars().count()).max(3);
    known.take(LONGEST_TEXT).filter(near).min_by_key(|k| edits(word, k))
}

/// Insertions, deletions, replacements and swaps of neighbours between two words (optimal string alignment).
fn edits(a: &str, b: &str) -> usize {
    let (a, b): (Vec<char>, Vec<char>) = (a.chars().collect(), b.chars().collect());
    let mut rows = vec![(0..=b.len()).collect::<Vec<_>>()];
    for i in 1..=a.len() {
        let mut row = vec![i];
        for j in 1..=b.len() {
            let replaced = rows[i - 1][j - 1] + usize::from(a[i - 1] != b[j - 1]);
            let mut best = replaced.min(rows[i - 1][j] + 1).min(row[j - 1] + 1);
            if i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1] {
                best = best.min(rows[i - 2][j - 2] + 1);
            }
            row.push(best);
        }
        rows.push(row);
    }
    rows[a.len()][b.len()]
}

#[cfg(test)]
mod tests {
    use super::{edits, nearest};

    #[test]
    fn edits_of_words_counted_by_hand() {
        assert_eq!(edits("range", "ranges"), 1);
        assert_eq!(edits("baud", "buad"), 1);
        assert_eq!(edits("kitten", "sitting"), 3);
        assert_eq!(edits("", "tap"), 3);
    }

    #[test]
    fn what_is_far_from_all_has_no_nearest() {
        assert_eq!(nearest("colour", ["name", "from", "unit"].into_iter()), None);
        assert_eq!(nearest("form", ["name", "from", "unit"].into_iter()), Some("from"));
    }
}
