//! The session file: every line is on the disk before anybody hears "kept".
//!
//! Lines are appended and `fdatasync`ed; a new file's directory too. After one failed write or sync the file is never trusted again:
//! the whole session is written to a fallback place and goes on there, and that is said. The lines of this run stay in memory for it.

use super::Trouble;
use crate::session::codec::{self, Contents};
use crate::session::{Entry, Header, Session};
use std::fs::{File, OpenOptions, TryLockError};
use std::io::{self, Read, Seek, SeekFrom, Write};
use std::path::{Path, PathBuf};

/// Largest session file that is read, bytes.
const LARGEST: u64 = 1 << 30;

/// An open session file.
pub struct Journal {
    path: PathBuf,
    file: Option<File>,
    /// The whole file as it should be: what was there, and what this run added.
    content: Vec<u8>,
    /// How much of `content` is on the disk.
    synced: usize,
    trouble: Option<String>,
}

/// What was found when a session was opened.
pub struct Opened {
    /// Ready to append.
    pub journal: Journal,
    /// What an earlier run left; none for a new file.
    pub before: Option<Session>,
    /// A torn tail was moved there.
    pub repaired: Option<PathBuf>,
}

impl Journal {
    /// Opens `path` to go on with it, or makes it with `header`.
    ///
    /// # Errors
    /// [`Trouble`] when another program writes it, it is no session, it is of another setup, or it cannot be made.
    pub fn open(path: &Path, header: &Header) -> Result<Opened, Trouble> {
        let place = path.display();
        if std::fs::symlink_metadata(path).is_ok_and(|m| !m.is_file()) {
            return Err(Trouble::new("the session is no plain file")
                .at(place)
                .hint("give another name with --session"));
        }
        let new = !path.exists();
        let file = OpenOptions::new().read(true).append(true).create(true).open(path);
        let mut file = file.map_err(|e| cannot_make(path, &e))?;
        lock(&file, path)?;
        let mut bytes = Vec::new();
        let read = (&mut file).take(LARGEST).read_to_end(&mut bytes);
        read.map_err(|e| Trouble::new(format!("the session cannot be read: {e}")).at(place))?;
        if bytes.is_empty() {
            return Self::begin(path, file, header, new);
        }
        let contents = codec::read(&bytes);
        // Only what is our session may be repaired: anything else is left as it lies.
        resumable(path, &contents, header)?;
        let repaired = repair(path, &file, &mut bytes, &contents)?;
        let synced = bytes.len();
        let journal = Self { path: path.to_path_buf(), file: Some(file), content: bytes, synced, trouble: None };
        Ok(Opened { journal, before: contents.session(), repaired })
    }

    fn begin(path: &Path, file: File, header: &Header, new: bool) -> Result<Opened, Trouble> {
        let mut journal =
            Self { path: path.to_path_buf(), file: Some(file), content: Vec::new(), synced: 0, trouble: None };
        let header = Entry::Session(Box::new(header.clone()));
        let written = journal.try_append(codec::encode(&header).as_bytes());
        written.and_then(|()| if new { sync_directory(path) } else { Ok(()) }).map_err(|e| {
            if new {
                let _ = std::fs::remove_file(path);
            }
            cannot_make(path, &e)
        })?;
        Ok(Opened { journal, before: None, repaired: None })
    }

    /// Appends entries and syncs once. True when all of them are on a disk, here or in the fallback place.
    pub fn append(&mut self, entries: &[&Entry]) -> bool {
        let lines: String = entries.iter().map(|e| codec::encode(e)).collect();
        match self.try_append(lines.as_bytes()) {
            Ok(()) => true,
            Err(error) => self.rescue(&error),
        }
    }

    fn try_append(&mut self, lines: &[u8]) -> io::Result<()> {
        self.content.extend_from_slice(lines);
        let file = self.file.as_mut().ok_or_else(|| io::Error::other("not written since the first failure"))?;
        file.write_all(lines)?;
        file.sync_data()?;
        self.synced = self.content.len();
        Ok(())
    }

    /// Writes the whole session to the first fallback place that takes it.
    fn rescue(&mut self, error: &io::Error) -> bool {
        let failed = self.path.display().to_string();
        self.file = None;
        let name = self.path.file_name().map_or("outing.session".into(), |n| n.to_string_lossy().into_owned());
        for directory in [super::files::data_directory(), Some(std::env::temp_dir())].into_iter().flatten() {
            if let Ok((path, file)) = write_whole(&directory, &name, &self.content) {
                self.trouble = Some(format!("{failed}: {error}; the session goes on in {}", path.display()));
                (self.path, self.file, self.synced) = (path, Some(file), self.content.len());
                return true;
            }
        }
        self.trouble = Some(format!("{failed}: {error}; nothing more is on the disk, free some space"));
        false
    }

    /// Where the session is being written now.
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// What is wrong, if anything.
    pub fn trouble(&self) -> Option<&str> {
        self.trouble.as_deref()
    }

    /// The session as far as it is known, for a reduction.
    pub fn contents(&self) -> Contents {
        codec::read(&self.content)
    }

    /// Everything that was appended is on a disk.
    pub fn all_on_disk(&self) -> bool {
        self.synced == self.content.len()
    }
}

fn write_whole(directory: &Path, name: &str, content: &[u8]) -> io::Result<(PathBuf, File)> {
    std::fs::create_dir_all(directory)?;
    for n in 1..1000 {
        let path = directory.join(format!("rescued-{n}-{name}"));
        match OpenOptions::new().append(true).create_new(true).open(&path) {
            Ok(mut file) => {
                file.write_all(content)?;
                file.sync_data()?;
                sync_directory(&path)?;
                return Ok((path, file));
            }
            Err(e) if e.kind() == io::ErrorKind::AlreadyExists => {}
            Err(e) => return Err(e),
        }
    }
    Err(io::ErrorKind::AlreadyExists.into())
}

fn cannot_make(path: &Path, error: &io::Error) -> Trouble {
    let hint = match error.kind() {
        io::ErrorKind::NotFound => "make the directory first, or give another place with --session",
        io::ErrorKind::PermissionDenied | io::ErrorKind::ReadOnlyFilesystem => {
            "give a place where you may write, with --session"
        }
        io::ErrorKind::StorageFull => "free some space, or give another disk with --session",
        _ => "give another place with --session",
    };
    Trouble::new(format!("the session file cannot be written: {error}")).at(path.display()).hint(hint)
}

fn lock(file: &File, path: &Path) -> Result<(), Trouble> {
    match file.try_lock() {
        Ok(()) => Ok(()),
        Err(TryLockError::WouldBlock) => Err(Trouble::new("another steadytap is writing this session")
            .at(path.display())
            .hint("end that one first, or give another name with --session")),
        // A file system without locks (some network and USB ones): go on, nobody can be refused there.
        Err(TryLockError::Error(_)) => Ok(()),
    }
}

/// Moves a torn tail to `*.torn`, so that the next line starts clean.
fn repair(path: &Path, file: &File, bytes: &mut Vec<u8>, contents: &Contents) -> Result<Option<PathBuf>, Trouble> {
    let failed =
        |e: io::Error| Trouble::new(format!("the session's torn end cannot be repaired: {e}")).at(path.display());
    if contents.end_missing {
        bytes.push(b'\n');
        (&*file).write_all(b"\n").and_then(|()| file.sync_data()).map_err(failed)?;
        return Ok(None);
    }
    if contents.whole_length == bytes.len() {
        return Ok(None);
    }
    let tail = bytes.split_off(contents.whole_length);
    let mut torn = path.as_os_str().to_owned();
    torn.push(".torn");
    let torn = PathBuf::from(torn);
    let mut saved = OpenOptions::new().append(true).create(true).open(&torn).map_err(failed)?;
    saved.write_all(&tail).and_then(|()| saved.write_all(b"\n")).and_then(|()| saved.sync_all()).map_err(failed)?;
    file.set_len(contents.whole_length as u64).and_then(|()| file.sync_all()).map_err(failed)?;
    (&*file).seek(SeekFrom::End(0)).map_err(failed)?;
    Ok(Some(torn))
}

/// Whether these are the contents of a session that rests on the same setup.
fn resumable(path: &Path, contents: &Contents, header: &Header) -> Result<(), Trouble> {
    let hint = "give another name with --session to begin a new one";
    let Some(found) = &contents.header else {
        return Err(Trouble::new("this is no session file, or its first line is damaged")
            .at(format!("{}:1", path.display()))
            .hint(hint));
    };
    if found.setup != header.setup {
        return Err(Trouble::new("this session was begun with another rig, car or outing")
            .at(path.display())
            .hint(hint));
    }
    Ok(())
}

#[cfg(unix)]
fn sync_directory(path: &Path) -> io::Result<()> {
    let directory = path.parent().filter(|p| !p.as_os_str().is_empty()).unwrap_or(Path::new("."));
    File::open(directory)?.sync_all()
}

#[cfg(not(unix))]
fn sync_directory(_: &Path) -> io::Result<()> {
    Ok(()) // A directory cannot be opened for this there; the file system journals the name.
}
