//! Sound by a program of the system, where no server takes it directly: a temporary WAV file and `pw-play`, `paplay` or `aplay`.

use super::wav;
use std::fs::OpenOptions;
use std::io::Write;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

/// Programs that play a WAV file, the best first, and what they are told before its name.
const PLAYERS: [(&str, &[&str]); 3] =
    [("pw-play", &["--latency", "20ms"]), ("paplay", &["--latency-msec=20"]), ("aplay", &["--quiet"])];
/// How much longer than its sound a program may take.
const PATIENCE: Duration = Duration::from_secs(2);
/// Rate of the temporary files, Hz.
pub const RATE_HZ: u32 = 48_000;

/// Plays through the first program that manages; its name.
///
/// # Errors
/// Why none did, in words.
pub fn play(samples: &[f32]) -> Result<&'static str, String> {
    let found: Vec<_> = PLAYERS.into_iter().filter(|(name, _)| in_path(name)).collect();
    if found.is_empty() {
        return Err("none of pw-play, paplay, aplay is installed".to_string());
    }
    let file = Temporary::new(&wav::encode(samples, RATE_HZ)).map_err(|e| format!("no temporary file: {e}"))?;
    let length = Duration::from_secs_f64(samples.len() as f64 / f64::from(RATE_HZ));
    let played = found.iter().find(|(name, words)| {
        let mut command = Command::new(name);
        runs(command.args(*words).arg(&file.0), length + PATIENCE)
    });
    let tried = || found.iter().map(|(name, _)| *name).collect::<Vec<_>>().join(", ");
    played.map(|(name, _)| *name).ok_or_else(|| format!("{} found nothing to play on", tried()))
}

/// It is the name of such a program.
pub fn is_one(name: &str) -> bool {
    PLAYERS.iter().any(|(player, _)| *player == name)
}

/// Says words through the system's speech, if it has one.
pub fn speak(words: &str) -> bool {
    let speakers: [(&str, &[&str]); 2] = [("spd-say", &["--wait"]), ("espeak-ng", &[])];
    speakers
        .into_iter()
        .filter(|(name, _)| in_path(name))
        .any(|(name, options)| runs(Command::new(name).args(options).arg(words), Duration::from_secs(5)))
}

fn in_path(name: &str) -> bool {
    let path = std::env::var_os("PATH").unwrap_or_default();
    std::env::split_paths(&path).any(|directory| directory.join(name).is_file())
}

/// Runs a program to its end, or ends it when it takes too long; true when it said that it had done its work.
fn runs(command: &mut Command, patience: Duration) -> bool {
    let spawned = command.stdin(Stdio::null()).stdout(Stdio::null()).stderr(Stdio::null()).spawn();
    let Ok(mut child) = spawned else { return false };
    let began = Instant::now();
    while began.elapsed() < patience {
        match child.try_wait() {
            Ok(Some(status)) => return status.success(),
            Ok(None) => std::thread::sleep(Duration::from_millis(5)),
            Err(_) => break,
        }
    }
    let _ = child.kill();
    let _ = child.wait();
    false
}

/// A file of our own in the temporary directory, gone when it is dropped.
struct Temporary(PathBuf);

impl Temporary {
    fn new(bytes: &[u8]) -> std::io::Result<Self> {
        let directory = std::env::temp_dir();
        let named = |n: u32| directory.join(format!("steadytap-{}-{n}.wav", std::process::id()));
        let mut last = std::io::ErrorKind::AlreadyExists.into();
        for path in (0..100).map(named) {
            match write_new(&path, bytes) {
                Ok(()) => return Ok(Self(path)),
                Err(e) if e.kind() == std::io::ErrorKind::AlreadyExists => last = e,
                Err(e) => return Err(e),
            }
        }
        Err(last)
    }
}

/// Never through a link that somebody else laid there.
fn write_new(path: &Path, bytes: &[u8]) -> std::io::Result<()> {
    OpenOptions::new().write(true).create_new(true).open(path)?.write_all(bytes)
}

impl Drop for Temporary {
    fn drop(&mut self) {
        let _ = std::fs::remove_file(&self.0);
    }
}
