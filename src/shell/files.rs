//! Files that people name: configuration, sessions, outputs. Whole in, whole out.

use super::Trouble;
use crate::config::{self, Setup, Source};
use crate::session::Session;
use crate::session::codec;
use std::fs::{File, OpenOptions};
use std::io::{self, Read, Write};
use std::path::{Path, PathBuf};

/// Largest configuration file, bytes.
const LARGEST_CONFIG: u64 = 4 << 20;
/// Largest session file that is read, bytes.
pub const LARGEST_SESSION: u64 = 1 << 30;

fn directories() -> Option<directories::ProjectDirs> {
    directories::ProjectDirs::from("", "", "steadytap")
}

/// The platform's place for the program's data.
pub fn data_directory() -> Option<PathBuf> {
    directories().map(|d| d.data_dir().to_path_buf())
}

/// The platform's place for what a person sets once for all.
pub fn config_directory() -> Option<PathBuf> {
    directories().map(|d| d.config_dir().to_path_buf())
}

/// Why a file cannot be read, with the remedy.
pub fn cannot_read(path: &Path, error: &io::Error) -> Trouble {
    let trouble = match error.kind() {
        io::ErrorKind::NotFound => Trouble::new("there is no such file").hint("check the name and the directory"),
        io::ErrorKind::PermissionDenied => {
            Trouble::new("no right to read the file").hint("change its permissions, or copy it")
        }
        _ => Trouble::new(format!("the file cannot be read: {error}")).hint("give the right file"),
    };
    trouble.at(path.display())
}

/// Reads a whole file of at most `largest` bytes.
///
/// # Errors
/// [`Trouble`] when it is missing, unreadable, a directory or too large.
pub fn read(path: &Path, largest: u64) -> Result<Vec<u8>, Trouble> {
    let failed = |e| cannot_read(path, &e);
    let file = File::open(path).map_err(failed)?;
    if file.metadata().map_err(failed)?.is_dir() {
        return Err(Trouble::new("this is a directory, not a file").at(path.display()).hint("name a file in it"));
    }
    let mut bytes = Vec::new();
    file.take(largest + 1).read_to_end(&mut bytes).map_err(failed)?;
    if bytes.len() as u64 > largest {
        let what = format!("the file is larger than {} MiB", largest >> 20);
        return Err(Trouble::new(what).at(path.display()).hint("is this the right file?"));
    }
    Ok(bytes)
}

/// A configuration file as text.
///
/// # Errors
/// [`Trouble`] when it cannot be read or is not UTF-8.
pub fn source(path: &Path) -> Result<Source, Trouble> {
    let bytes = read(path, LARGEST_CONFIG)?;
    let text = String::from_utf8(bytes).map_err(|e| {
        let before = &e.as_bytes()[..e.utf8_error().valid_up_to()];
        let line = before.iter().filter(|c| **c == b'\n').count() + 1;
        Trouble::new("the file is not UTF-8 text")
            .at(format!("{}:{line}", path.display()))
            .hint("save it as UTF-8, or give the right file")
    })?;
    Ok(Source::new(path.display().to_string(), text))
}

/// Outing, rig and car, read from the outing file and the two files that it names; and what should be looked at.
///
/// # Errors
/// Every problem of all three files at once.
pub fn setup_and_warnings(outing: &Path) -> Result<(Setup, Vec<Trouble>), Vec<Trouble>> {
    let source_of_outing = source(outing).map_err(|t| vec![t])?;
    let head = config::outing_head(&source_of_outing).map_err(|p| troubles(&p))?;
    let beside = |name: &str| outing.parent().unwrap_or(Path::new("")).join(name);
    let (rig, car) = (source(&beside(&head.rig)), source(&beside(&head.car)));
    match (rig, car) {
        (Ok(rig), Ok(car)) => {
            let checked = config::setup(&source_of_outing, &rig, &car).map_err(|p| troubles(&p))?;
            Ok((checked.setup, troubles(&checked.warnings)))
        }
        (rig, car) => Err([rig.err(), car.err()].into_iter().flatten().collect()),
    }
}

/// The rig file that an outing names.
pub fn rig_of(outing: &Path) -> Option<PathBuf> {
    let head = config::outing_head(&source(outing).ok()?).ok()?;
    Some(outing.parent().unwrap_or(Path::new("")).join(head.rig))
}

/// Problems of configuration files as a person is told them.
pub fn troubles(problems: &[config::Problem]) -> Vec<Trouble> {
    problems.iter().map(trouble).collect()
}

/// One problem as a person is told it.
pub fn trouble(problem: &config::Problem) -> Trouble {
    let place = &problem.place;
    let at = format!("{}:{}:{}", place.file, place.line, place.column);
    Trouble { what: problem.what.clone(), place: Some(at), hint: Some(problem.hint.clone()) }
}

/// A session file.
///
/// # Errors
/// [`Trouble`] when it cannot be read or its first line cannot be believed.
pub fn session(path: &Path) -> Result<Session, Trouble> {
    session_and_sum(path).map(|(session, _)| session)
}

/// A session file, and the CRC-32C of its bytes.
///
/// # Errors
/// As [`session`].
pub fn session_and_sum(path: &Path) -> Result<(Session, u32), Trouble> {
    let bytes = read(path, LARGEST_SESSION)?;
    let contents = codec::read(&bytes);
    let why = contents.damage.first().filter(|d| d.line == 1).map(|d| d.what.to_string());
    let session = contents.session().ok_or_else(|| {
        let why = why.unwrap_or_else(|| "it is empty".to_string());
        Trouble::new(format!("this is no session, or its first line is damaged: {why}"))
            .at(format!("{}:1", path.display()))
            .hint("a session begins with {\"kind\":\"session\",\"schema\":\"steadytap.session/1\"")
    })?;
    Ok((session, codec::sum(&bytes)))
}

/// Refuses an output that is one of the inputs: it would be lost.
///
/// # Errors
/// [`Trouble`] when it is.
pub fn spares(output: Option<&Path>, inputs: &[PathBuf]) -> Result<(), Trouble> {
    let Some(real) = output.and_then(|o| o.canonicalize().ok()) else { return Ok(()) };
    match inputs.iter().find(|input| input.canonicalize().is_ok_and(|i| i == real)) {
        Some(input) => Err(Trouble::new("the output would overwrite what it is made of")
            .at(input.display())
            .hint("give the output another name; nothing was overwritten")),
        None => Ok(()),
    }
}

/// Writes a whole file, or nothing: under another name first, then in one step. `-` is standard output.
///
/// # Errors
/// [`Trouble`] when it cannot be written.
pub fn write(path: &Path, bytes: &[u8]) -> Result<(), Trouble> {
    if path == Path::new("-") {
        let written = io::stdout().lock().write_all(bytes).and_then(|()| io::stdout().flush());
        return match written {
            Err(e) if e.kind() != io::ErrorKind::BrokenPipe => {
                Err(Trouble::new(format!("standard output cannot be written: {e}")))
            }
            _ => Ok(()),
        };
    }
    // A device or a pipe is written to, never replaced; so is what a link points to.
    if !replaced(path) {
        return OpenOptions::new().write(true).truncate(true).open(path).and_then(|mut f| f.write_all(bytes)).map_err(
            |e| Trouble::new(format!("it cannot be written to: {e}")).at(path.display()).hint("give another place"),
        );
    }
    Staged::new(path, bytes)?.put()
}

/// Writes several files and streams, or none of the files: all are written under other names before the first gets its own.
///
/// # Errors
/// [`Trouble`] when one cannot be written.
pub fn write_all(outputs: &[(&Path, Vec<u8>)]) -> Result<(), Trouble> {
    let (files, streams): (Vec<_>, Vec<_>) =
        outputs.iter().partition(|(path, _)| *path != Path::new("-") && replaced(path));
    if let Some((path, _)) = files.iter().enumerate().find(|(i, f)| files[..*i].iter().any(|g| g.0 == f.0)).map(|f| f.1)
    {
        return Err(Trouble::new("two outputs have this name").at(path.display()).hint("give each a name of its own"));
    }
    let staged: Vec<Staged<'_>> =
        files.into_iter().map(|(path, bytes)| Staged::new(path, bytes)).collect::<Result<_, _>>()?;
    streams.into_iter().try_for_each(|(path, bytes)| write(path, bytes))?;
    staged.into_iter().try_for_each(Staged::put)
}

/// A file of this name would be replaced as a whole: it is none yet, or a plain one.
fn replaced(path: &Path) -> bool {
    std::fs::symlink_metadata(path).map_or(true, |m| m.is_file())
}

/// A whole file under another name, gone again unless it is put in its place.
struct Staged<'a> {
    path: &'a Path,
    partial: PathBuf,
}

impl<'a> Staged<'a> {
    fn new(path: &'a Path, bytes: &[u8]) -> Result<Self, Trouble> {
        let mut partial = path.as_os_str().to_owned();
        partial.push(format!(".{}.partial", std::process::id()));
        let staged = Self { path, partial: PathBuf::from(partial) };
        File::create(&staged.partial)
            .and_then(|mut file| file.write_all(bytes).and_then(|()| file.sync_all()))
            .map_err(|e| staged.trouble(&e))?;
        Ok(staged)
    }

    fn put(self) -> Result<(), Trouble> {
        std::fs::rename(&self.partial, self.path).map_err(|e| self.trouble(&e))
    }

    fn trouble(&self, e: &io::Error) -> Trouble {
        Trouble::new(format!("the file cannot be written: {e}")).at(self.path.display()).hint("give another place")
    }
}

impl Drop for Staged<'_> {
    fn drop(&mut self) {
        // Gone already where it was put in its place.
        let _ = std::fs::remove_file(&self.partial);
    }
}

/// Writes a whole new file; an existing one is never touched.
///
/// # Errors
/// [`Trouble`] when there is one already, or it cannot be written.
pub fn write_new(path: &Path, bytes: &[u8]) -> Result<(), Trouble> {
    let made = OpenOptions::new().write(true).create_new(true).open(path);
    let mut file = made.map_err(|e| match e.kind() {
        io::ErrorKind::AlreadyExists => Trouble::new("the file exists already")
            .at(path.display())
            .hint("give another name; nothing was overwritten"),
        _ => Trouble::new(format!("the file cannot be written: {e}")).at(path.display()).hint("give another place"),
    })?;
    file.write_all(bytes).and_then(|()| file.sync_all()).map_err(|e| {
        let _ = std::fs::remove_file(path);
        Trouble::new(format!("the file cannot be written: {e}")).at(path.display()).hint("free some space")
    })
}
