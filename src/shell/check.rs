//! `check`: rig, car, outing, session and record files; every problem at once, with its place and remedy.

use super::player::Source;
use super::storage::Disk;
use super::{Trouble, files, space};
use crate::config::{self, Kind, Severity};
use crate::session::codec;
use std::path::Path;

/// What was found in one file.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Found {
    /// What the file is, in words.
    pub summary: String,
    /// What must be put right.
    pub errors: Vec<Trouble>,
    /// What should be looked at.
    pub warnings: Vec<Trouble>,
}

/// Checks one file.
pub fn check(path: &Path) -> Found {
    let head = match head(path) {
        Ok(head) => head,
        Err(trouble) => return Found { errors: vec![trouble], ..Found::default() },
    };
    if head.starts_with(b"{") {
        session(path)
    } else if path.extension().is_some_and(|e| e == "toml") || looks_like_toml(&head) {
        toml(path)
    } else {
        record(path)
    }
}

fn head(path: &Path) -> Result<Vec<u8>, Trouble> {
    use std::io::Read;
    let failed = |e| files::cannot_read(path, &e);
    let file = std::fs::File::open(path).map_err(failed)?;
    if file.metadata().map_err(failed)?.is_dir() {
        return Err(Trouble::new("this is a directory, not a file").at(path.display()).hint("name a file in it"));
    }
    let mut head = Vec::new();
    file.take(4096).read_to_end(&mut head).map_err(failed)?;
    Ok(head)
}

fn looks_like_toml(head: &[u8]) -> bool {
    head.split(|c| *c == b'\n').any(|line| line.trim_ascii().starts_with(b"steadytap"))
}

fn toml(path: &Path) -> Found {
    let source = match files::source(path) {
        Ok(source) => source,
        Err(trouble) => return Found { errors: vec![trouble], ..Found::default() },
    };
    let (word, problems) = match config::kind(&source) {
        Some(Kind::Rig) => ("rig", config::check_rig(&source)),
        Some(Kind::Car) => ("car", config::check_car(&source)),
        Some(Kind::Outing) => return outing(path),
        None if source.text.contains("\"keys ") => {
            let errors = super::keyfile::read(path).err().into_iter().collect();
            return Found { summary: "file of keys".to_string(), errors, warnings: Vec::new() };
        }
        // It says what is wrong with the line that should say what the file is.
        None => ("", config::check_outing(&source)),
    };
    sorted(word, &problems)
}

fn outing(path: &Path) -> Found {
    match files::setup_and_warnings(path) {
        Ok((setup, mut warnings)) => {
            warnings.extend(little_room(&setup));
            Found { summary: "outing".to_string(), errors: Vec::new(), warnings }
        }
        Err(errors) => Found { summary: "outing".to_string(), errors, warnings: Vec::new() },
    }
}

/// The disk of the sessions' own place is nearly full.
fn little_room(setup: &config::Setup) -> Option<Trouble> {
    let place = files::data_directory()?.join("outing.session");
    let (free, _) = space::room(&Disk, &place, &setup.rig)?;
    let words = space::low(free, space::most_bytes_per_s(&setup.rig))?;
    let directory = place.parent()?.display().to_string();
    Some(Trouble::new(words).at(directory).hint("or give another disk with --session when you drive"))
}

fn sorted(word: &str, problems: &[config::Problem]) -> Found {
    let of = |severity| problems.iter().filter(|p| p.severity == severity).map(files::trouble).collect::<Vec<_>>();
    Found { summary: word.to_string(), errors: of(Severity::Error), warnings: of(Severity::Warning) }
}

fn session(path: &Path) -> Found {
    let bytes = match files::read(path, files::LARGEST_SESSION) {
        Ok(bytes) => bytes,
        Err(trouble) => return Found { errors: vec![trouble], ..Found::default() },
    };
    let contents = codec::read(&bytes);
    let place = |line| format!("{}:{line}", path.display());
    let mut errors: Vec<Trouble> = contents
        .damage
        .iter()
        .map(|d| {
            Trouble::new(format!("this line is left out: {}", d.what))
                .at(place(d.line))
                .hint("the lines before and after it are read all the same")
        })
        .collect();
    if contents.header.is_none() && contents.damage.is_empty() {
        errors.push(Trouble::new("the first line is no header").at(place(1)));
    }
    Found { summary: format!("session with {} entries", contents.entries.len()), errors, warnings: Vec::new() }
}

fn record(path: &Path) -> Found {
    let mut commands = 0u64;
    let mut errors = Vec::new();
    let read = Source::open(path, None).and_then(|mut source| {
        while source.next(&mut |told| {
            if let crate::stream::record::Told::Command { at, words } = told {
                commands += 1;
                if let Err(e) = crate::stream::command::Command::parse(&words) {
                    errors.push(Trouble::new(e.to_string()).at(format!("{}, at {at}", path.display())));
                }
            }
        })? {}
        Ok(source)
    });
    let source = match read {
        Ok(source) => source,
        Err(trouble) => return Found { errors: vec![trouble], ..Found::default() },
    };
    let tally = source.tally();
    if let Some((line, what)) = tally.first_damage {
        let what = format!("{} damaged lines, the first: {what}", tally.damaged);
        let hint = "damaged lines are passed over, the rest is read";
        errors.push(Trouble::new(what).at(format!("{}:{line}", path.display())).hint(hint));
    }
    let summary = format!("record with {} lines, {commands} commands", tally.good);
    Found { summary, errors, warnings: Vec::new() }
}
