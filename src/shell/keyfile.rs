//! The file of keys: where a person's own keys and sounds stand, for all places at once.
//!
//! ```toml
//! steadytap = "keys 1"
//! [keys]
//! take = ["Space", "F5"]
//! mark = "x"
//! [sounds]
//! kept = "my-kept.wav"
//! ```

use super::speaker::bank::cue_named;
use super::{Trouble, files};
use crate::screen::keys::Bindings;
use serde::Deserialize;
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Written {
    steadytap: String,
    #[serde(default)]
    keys: BTreeMap<String, toml::Spanned<Keys>>,
    #[serde(default)]
    sounds: BTreeMap<String, PathBuf>,
}

/// What a person has made his own.
#[derive(Debug, Default)]
pub struct Own {
    /// Keys.
    pub bindings: Bindings,
    /// WAV files by the word of the cue.
    pub sounds: BTreeMap<String, PathBuf>,
}

#[derive(Deserialize)]
#[serde(untagged)]
enum Keys {
    One(String),
    Several(Vec<String>),
}

/// Where it is looked for when none is named.
pub fn place() -> Option<PathBuf> {
    files::config_directory().map(|d| d.join("keys.toml"))
}

/// What the named file says, else the one in its place, else the usual keys and sounds.
///
/// # Errors
/// [`Trouble`] when there is one and it cannot be used.
pub fn own(named: Option<&Path>) -> Result<Own, Trouble> {
    match named.map(Path::to_path_buf).or_else(|| place().filter(|path| path.exists())) {
        Some(path) => read(&path),
        None => Ok(Own::default()),
    }
}

/// Reads one file of keys.
///
/// # Errors
/// [`Trouble`] with line, column and remedy.
pub fn read(path: &Path) -> Result<Own, Trouble> {
    let source = files::source(path)?;
    let at = |offset: usize| {
        let before = &source.text[..source.text.floor_char_boundary(offset)];
        let column = before.rsplit('\n').next().map_or(0, |line| line.chars().count()) + 1;
        format!("{}:{}:{column}", path.display(), before.matches('\n').count() + 1)
    };
    let hint = "the file reads: steadytap = \"keys 1\", then [keys], then name = \"key\" or name = [\"key\", \"key\"]";
    let written: Written = toml::from_str(&source.text)
        .map_err(|e| Trouble::new(e.message().to_string()).at(at(e.span().map_or(0, |s| s.start))).hint(hint))?;
    if written.steadytap != "keys 1" {
        return Err(Trouble::new("this is no file of keys that this program reads").at(at(0)).hint(hint));
    }
    // One name after another, so that the line of the first wrong one can be told.
    let mut good: Vec<(&str, Vec<&str>)> = Vec::new();
    let mut in_order: Vec<_> = written.keys.iter().collect();
    in_order.sort_by_key(|(_, keys)| keys.span().start);
    for (name, keys) in in_order {
        good.push((
            name,
            match keys.get_ref() {
                Keys::One(word) => vec![word.as_str()],
                Keys::Several(words) => words.iter().map(String::as_str).collect(),
            },
        ));
    }
    let bindings = Bindings::new(good.iter().cloned()).map_err(|e| {
        let wrong = (1..=good.len()).find(|n| Bindings::new(good[..*n].iter().cloned()).is_err());
        let span = wrong.and_then(|n| written.keys.get(good[n - 1].0)).map_or(0, |keys| keys.span().start);
        Trouble::new(e.to_string()).at(at(span)).hint(hint)
    })?;
    let sounds_at = at(source.text.find("[sounds]").unwrap_or(0));
    written.sounds.keys().try_for_each(|word| cue_named(word).map(drop)).map_err(|trouble| trouble.at(sounds_at))?;
    // Sounds are named relative to the file.
    let beside = |sound: PathBuf| path.parent().unwrap_or(Path::new("")).join(sound);
    Ok(Own { bindings, sounds: written.sounds.into_iter().map(|(word, sound)| (word, beside(sound))).collect() })
}
