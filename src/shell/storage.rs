//! What the session file asks of a disk: open, append, sync, cut, and how much room is left.
//!
//! [`Disk`] does it. The crash tests put a model in its place that keeps live and durable bytes apart and fails where it is told to;
//! the journal itself never learns which of the two it writes to.

use std::fs::{File, OpenOptions, TryLockError};
use std::io::{self, Read, Write};
use std::path::{Path, PathBuf};

/// What bears a name.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// Nothing.
    Missing,
    /// A plain file.
    Plain,
    /// A directory, a link, a device: no session.
    Other,
}

/// A place for files.
pub trait Storage: Send + Sync {
    /// What bears this name, a link not followed.
    fn kind(&self, path: &Path) -> Kind;
    /// Opens a file to read and append, made if it is missing.
    ///
    /// # Errors
    /// When it cannot be opened or made.
    fn open(&self, path: &Path) -> io::Result<Box<dyn StoredFile>>;
    /// Makes a new file to append to, and the directories above it.
    ///
    /// # Errors
    /// When there is one already, or it cannot be made.
    fn create(&self, path: &Path) -> io::Result<Box<dyn StoredFile>>;
    /// Makes the name of a file outlast a power cut.
    ///
    /// # Errors
    /// When its directory cannot be synced.
    fn sync_directory(&self, path: &Path) -> io::Result<()>;
    /// Removes a file that holds nothing of worth.
    fn remove(&self, path: &Path);
    /// Bytes that may still be written beside `path`; none where nobody knows.
    fn free_space(&self, path: &Path) -> Option<u64>;
    /// Where a session goes on whose own place has failed, best first.
    fn fallbacks(&self) -> Vec<PathBuf>;
}

/// An open file; what is written goes to its end.
pub trait StoredFile: Read + Write + Send {
    /// True when this program alone writes the file, false when another does.
    fn lock(&self) -> bool;
    /// Waits until what was written is on the disk. After an error nothing of it may be believed, whatever a second call says.
    ///
    /// # Errors
    /// When it is not on the disk.
    fn sync_data(&self) -> io::Result<()>;
    /// Its name still stands in its directory: what is written to a file without one is lost when it is closed.
    fn is_named(&self) -> bool;
    /// Cuts the file.
    ///
    /// # Errors
    /// When it cannot be cut.
    fn truncate(&self, length: u64) -> io::Result<()>;
}

/// The real one.
#[derive(Clone, Copy, Debug, Default)]
pub struct Disk;

impl Storage for Disk {
    fn kind(&self, path: &Path) -> Kind {
        match std::fs::symlink_metadata(path) {
            Ok(found) if found.is_file() => Kind::Plain,
            Ok(_) => Kind::Other,
            Err(_) => Kind::Missing,
        }
    }

    fn open(&self, path: &Path) -> io::Result<Box<dyn StoredFile>> {
        Ok(Box::new(OpenOptions::new().read(true).append(true).create(true).open(path)?))
    }

    fn create(&self, path: &Path) -> io::Result<Box<dyn StoredFile>> {
        std::fs::create_dir_all(directory_of(path))?;
        Ok(Box::new(OpenOptions::new().read(true).append(true).create_new(true).open(path)?))
    }

    #[cfg(unix)]
    fn sync_directory(&self, path: &Path) -> io::Result<()> {
        File::open(directory_of(path))?.sync_all()
    }

    #[cfg(not(unix))]
    fn sync_directory(&self, _: &Path) -> io::Result<()> {
        Ok(()) // A directory cannot be opened for this there; the file system journals the name.
    }

    fn remove(&self, path: &Path) {
        let _ = std::fs::remove_file(path);
    }

    #[cfg(unix)]
    fn free_space(&self, path: &Path) -> Option<u64> {
        let found = rustix::fs::statvfs(directory_of(path)).ok()?;
        found.f_bavail.checked_mul(found.f_frsize)
    }

    #[cfg(not(unix))]
    fn free_space(&self, _: &Path) -> Option<u64> {
        None
    }

    fn fallbacks(&self) -> Vec<PathBuf> {
        super::files::data_directory().into_iter().chain([std::env::temp_dir()]).collect()
    }
}

impl StoredFile for File {
    fn lock(&self) -> bool {
        // A file system without locks (some network and USB ones): go on, nobody can be refused there.
        !matches!(self.try_lock(), Err(TryLockError::WouldBlock))
    }

    fn sync_data(&self) -> io::Result<()> {
        Self::sync_data(self)
    }

    #[cfg(unix)]
    fn is_named(&self) -> bool {
        use std::os::unix::fs::MetadataExt;
        self.metadata().is_ok_and(|found| found.nlink() > 0)
    }

    #[cfg(not(unix))]
    fn is_named(&self) -> bool {
        true // An open file cannot be removed there.
    }

    fn truncate(&self, length: u64) -> io::Result<()> {
        self.set_len(length)
    }
}

/// The directory that a file is in.
fn directory_of(path: &Path) -> &Path {
    path.parent().filter(|p| !p.as_os_str().is_empty()).unwrap_or(Path::new("."))
}
