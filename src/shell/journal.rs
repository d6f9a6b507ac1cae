//! The session file: every line is on the disk before anybody hears "kept".
//!
//! Lines are appended and `fdatasync`ed; a new file's directory too. After one failed write or sync the file is never trusted again:
//! the whole session is written to a fallback place and goes on there, and that is said. The lines of this run stay in memory for it.

use super::Trouble;
use super::files::LARGEST_SESSION;
use super::storage::{Disk, Kind, Storage, StoredFile};
use crate::session::codec::{self, Contents};
use crate::session::{Entry, Header, Session};
use std::io::{self, Read, Write};
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// An open session file.
pub struct Journal {
    storage: Arc<dyn Storage>,
    /// Its own name, wherever it has to go.
    name: String,
    path: PathBuf,
    file: Option<Box<dyn StoredFile>>,
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
    /// Opens `path` on the disk to go on with it, or makes it with `header`.
    ///
    /// # Errors
    /// [`Trouble`] when another program writes it, it is no session, it is of another setup, or it cannot be made.
    pub fn open(path: &Path, header: &Header) -> Result<Opened, Trouble> {
        Self::open_on(Arc::new(Disk), path, header)
    }

    /// The same in any storage.
    ///
    /// # Errors
    /// As [`Journal::open`].
    pub fn open_on(storage: Arc<dyn Storage>, path: &Path, header: &Header) -> Result<Opened, Trouble> {
        let place = path.display();
        let kind = storage.kind(path);
        if kind == Kind::Other {
            return Err(Trouble::new("the session is no plain file")
                .at(place)
                .hint("give another name with --session"));
        }
        let mut file = storage.open(path).map_err(|e| cannot_make(path, &e))?;
        if !file.lock() {
            let who = super::holder::of(path).map_or(String::new(), |who| format!(" ({who})"));
            return Err(Trouble::new(format!("another steadytap is writing this session{who}"))
                .at(place)
                .hint("end that one first, or give another name with --session"));
        }
        let mut bytes = Vec::new();
        let read = (&mut file).take(LARGEST_SESSION + 1).read_to_end(&mut bytes);
        read.map_err(|e| Trouble::new(format!("the session cannot be read: {e}")).at(&place))?;
        if bytes.len() as u64 > LARGEST_SESSION {
            return Err(Trouble::new(format!("the session is larger than {} MiB", LARGEST_SESSION >> 20))
                .at(place)
                .hint("give another name with --session"));
        }
        let name = path.file_name().map_or("outing.session".into(), |n| n.to_string_lossy()).into_owned();
        let journal = Self {
            storage,
            name,
            path: path.to_path_buf(),
            file: Some(file),
            content: bytes,
            synced: 0,
            trouble: None,
        };
        if journal.content.is_empty() { journal.begin(header, kind == Kind::Missing) } else { journal.go_on(header) }
    }

    fn begin(mut self, header: &Header, new: bool) -> Result<Opened, Trouble> {
        let header = Entry::Session(Box::new(header.clone()));
        let written = self.try_append(codec::encode(&header).as_bytes());
        written.and_then(|()| self.storage.sync_directory(&self.path)).map_err(|e| {
            if new {
                self.storage.remove(&self.path);
            }
            cannot_make(&self.path, &e)
        })?;
        Ok(Opened { journal: self, before: None, repaired: None })
    }

    fn go_on(mut self, header: &Header) -> Result<Opened, Trouble> {
        let contents = codec::read(&self.content);
        // Only what is our session may be repaired: anything else is left as it lies.
        resumable(&self.path, &contents, header)?;
        let failed = |e: io::Error| {
            Trouble::new(format!("the session cannot be gone on with: {e}"))
                .at(self.path.display())
                .hint("copy it to a good disk and go on with the copy")
        };
        let torn = self.content.split_off(contents.whole_length);
        let file = self.file.as_mut().expect("it was opened a moment ago");
        if contents.end_missing {
            self.content.push(b'\n');
            file.write_all(b"\n").map_err(failed)?;
        }
        let repaired = if torn.is_empty() { None } else { Some(set_aside(&*self.storage, &self.path, &torn)) };
        let repaired = repaired.transpose().map_err(failed)?;
        if repaired.is_some() {
            file.truncate(contents.whole_length as u64).map_err(failed)?;
        }
        // An earlier run that was killed may have written lines, or the name, that are not on the disk yet.
        file.sync_data().and_then(|()| self.storage.sync_directory(&self.path)).map_err(failed)?;
        self.synced = self.content.len();
        Ok(Opened { journal: self, before: contents.session(), repaired })
    }

    /// Appends entries and syncs once. True when everything up to them is on a disk, here or in the fallback place.
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
        if !file.is_named() {
            return Err(io::Error::new(io::ErrorKind::NotFound, "the file was removed"));
        }
        self.synced = self.content.len();
        Ok(())
    }

    /// Writes the whole session to the first fallback place that takes it.
    fn rescue(&mut self, error: &io::Error) -> bool {
        let failed = self.path.display().to_string();
        let first = self.file.take().is_some();
        for directory in self.storage.fallbacks() {
            if let Ok((path, file)) = write_whole(&*self.storage, &directory, &self.name, &self.content) {
                self.trouble = Some(format!("{failed}: {error}; the session goes on in {}", path.display()));
                (self.path, self.file, self.synced) = (path, Some(file), self.content.len());
                return true;
            }
        }
        // Of several failures in a row the first tells what is wrong.
        if first {
            self.trouble = Some(format!("{failed}: {error}; nothing more is on the disk, free some space"));
        }
        false
    }

    /// Where the session is being written now.
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// What it is written to.
    pub fn storage(&self) -> &Arc<dyn Storage> {
        &self.storage
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

fn write_whole(
    storage: &dyn Storage,
    directory: &Path,
    name: &str,
    content: &[u8],
) -> io::Result<(PathBuf, Box<dyn StoredFile>)> {
    for n in 1..1000 {
        let path = directory.join(format!("rescued-{n}-{name}"));
        let mut file = match storage.create(&path) {
            Err(e) if e.kind() == io::ErrorKind::AlreadyExists => continue,
            made => made?,
        };
        let _ = file.lock();
        let written = file.write_all(content).and_then(|()| file.sync_data());
        return match written.and_then(|()| storage.sync_directory(&path)) {
            Ok(()) => Ok((path, file)),
            Err(e) => {
                storage.remove(&path);
                Err(e)
            }
        };
    }
    Err(io::ErrorKind::AlreadyExists.into())
}

/// Saves a torn tail in `*.torn`, before it is cut off.
fn set_aside(storage: &dyn Storage, path: &Path, tail: &[u8]) -> io::Result<PathBuf> {
    let mut torn = path.as_os_str().to_owned();
    torn.push(".torn");
    let torn = PathBuf::from(torn);
    let mut saved = storage.open(&torn)?;
    saved.write_all(tail)?;
    saved.write_all(b"\n")?;
    saved.sync_data()?;
    storage.sync_directory(&torn)?;
    Ok(torn)
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
