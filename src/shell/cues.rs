//! `cues`: every sound with its name and meaning, one after another, so that people learn them in the workshop; or as files.

use super::outing::Ending;
use super::speaker::bank::{Bank, cue_named};
use super::speaker::{Speaker, Status, wav};
use super::{Trouble, files};
use crate::sound::Cue;
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::time::Duration;

/// What was asked for.
#[derive(Clone, Debug, Default)]
pub struct Task {
    /// Write the sounds into this directory instead of playing them.
    pub write: Option<PathBuf>,
    /// Only the cue of this word.
    pub only: Option<String>,
    /// WAV files in place of sounds, by the word of the cue.
    pub replacements: BTreeMap<String, PathBuf>,
}

/// Sample rate of the files, Hz.
const RATE_HZ: u32 = 48_000;
/// Silence between two cues.
const PAUSE: Duration = Duration::from_millis(600);
/// How long looking for a way to play, or playing one, may take.
const PATIENCE: Duration = Duration::from_secs(10);

/// Plays the cues, or writes them.
///
/// # Errors
/// [`Trouble`] when a word names no cue, or a file cannot be used or written.
pub fn cues(task: &Task) -> Result<Ending, Trouble> {
    let cues = match &task.only {
        Some(word) => vec![cue_named(word)?],
        None => Cue::ALL.to_vec(),
    };
    match &task.write {
        Some(directory) => write(&cues, directory, &task.replacements),
        None => play(&cues, &task.replacements),
    }
}

fn play(cues: &[Cue], replacements: &BTreeMap<String, PathBuf>) -> Result<Ending, Trouble> {
    let speaker = Speaker::start(replacements, false)?;
    speaker.wait_until_quiet(PATIENCE);
    for cue in cues {
        println!("{:8} {}", cue.word(), cue.meaning());
        speaker.say(*cue);
        speaker.acknowledge();
        speaker.wait_until_quiet(PATIENCE);
        if matches!(speaker.status(), Status::Playing(_)) {
            std::thread::sleep(PAUSE);
        }
    }
    let status = speaker.status();
    speaker.close(PATIENCE);
    Ok(match status {
        Status::Bell(why) => {
            let hint = "start the sound server, or install pulseaudio-utils or alsa-utils";
            Ending::Degraded(vec![format!("no sound: {why}; the terminal's bell rings instead\n\nhint: {hint}")])
        }
        Status::Starting => Ending::Degraded(vec!["no sound: the sound server does not answer".to_string()]),
        Status::Playing(_) | Status::Muted => Ending::Done,
    })
}

fn write(cues: &[Cue], directory: &Path, replacements: &BTreeMap<String, PathBuf>) -> Result<Ending, Trouble> {
    std::fs::create_dir_all(directory).map_err(|e| {
        Trouble::new(format!("the directory cannot be made: {e}"))
            .at(directory.display())
            .hint("give another place with --write DIR")
    })?;
    let mut bank = Bank::new(replacements)?;
    bank.prepare(RATE_HZ);
    for cue in cues {
        let path = directory.join(format!("{}.wav", cue.word()));
        let bytes = wav::encode(&bank.sound(*cue), RATE_HZ);
        // The same sound under the same name is there already; another one is never overwritten.
        if std::fs::read(&path).ok().as_deref() != Some(&bytes) {
            files::write_new(&path, &bytes)?;
        }
        println!("{}", path.display());
    }
    Ok(Ending::Done)
}
