//! The file of keys: where a person's own keys stand, for all places at once.
//!
//! ```toml
//! steadytap = "keys 1"
//! [keys]
//! take = ["Space", "F5"]
//! mark = "x"
//! ```

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
}

#[derive(Deserialize)]
#[serde(untagged)]
enum Keys {
    One(String),
    Several(Vec<String>),
}

/// Where it is looked for when none is named.
pub fn place() -> Option<PathBuf> {
    directories::ProjectDirs::from("", "", "steadytap").map(|d| d.config_dir().join("keys.toml"))
}

/// The keys of the named file, else of the one in its place, else the usual ones.
///
/// # Errors
/// [`Trouble`] when there is one and it cannot be used.
pub fn bindings(named: Option<&Path>) -> Result<Bindings, Trouble> {
    match named.map(Path::to_path_buf).or_else(|| place().filter(|path| path.exists())) {
        Some(path) => read(&path),
        None => Ok(Bindings::default()),
    }
}

/// Reads one file of keys.
///
/// # Errors
/// [`Trouble`] with line, column and remedy.
pub fn read(path: &Path) -> Result<Bindings, Trouble> {
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
    let all = Bindings::new(good.iter().cloned());
    all.map_err(|e| {
        let wrong = (1..=good.len()).find(|n| Bindings::new(good[..*n].iter().cloned()).is_err());
        let span = wrong.and_then(|n| written.keys.get(good[n - 1].0)).map_or(0, |keys| keys.span().start);
        Trouble::new(e.to_string()).at(at(span)).hint(hint)
    })
}
