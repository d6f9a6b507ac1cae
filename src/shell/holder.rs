//! Who holds the lock of a file: a name and a number to end, where the system tells.

use std::path::Path;

/// The process that holds a lock on this file.
#[cfg(target_os = "linux")]
pub fn of(path: &Path) -> Option<String> {
    use std::os::unix::fs::MetadataExt;
    let inode = path.metadata().ok()?.ino().to_string();
    let locks = std::fs::read_to_string("/proc/locks").ok()?;
    // `1: FLOCK  ADVISORY  WRITE 1234 08:01:5678 0 EOF` (proc_locks(5)).
    let pid = locks.lines().find_map(|line| {
        let words: Vec<&str> = line.split_whitespace().collect();
        let [_, kind, _, _, pid, place, ..] = words[..] else { return None };
        (kind == "FLOCK" && place.rsplit(':').next() == Some(inode.as_str())).then(|| pid.to_string())
    })?;
    let name = std::fs::read_to_string(format!("/proc/{pid}/comm")).ok()?;
    Some(format!("{}, process {pid}", crate::text::safe(name.trim())))
}

/// The process that holds a lock on this file: other systems do not say.
#[cfg(not(target_os = "linux"))]
pub fn of(_: &Path) -> Option<String> {
    None
}
