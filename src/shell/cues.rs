//! `cues`: every sound with its name and meaning, one after another, so that people learn them in the workshop; or as files.

use super::outing::Ending;
use super::speaker::bank::{Bank, cue_named};
use super::speaker::{Speaker, Status, wav};
use super::{Trouble, files};
use crate::sound::Cue;
use crate::sound::guidance::Guidance;
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

/// The word of the guidance tone, which is no cue.
const GUIDANCE: &str = "guidance";
const GUIDANCE_MEANS: &str = "beside the window: a quiet tone, falling while too slow, rising while too fast";
/// Where the speed is while the tone is learnt: too slow, too fast.
const GUIDED_AT: [f64; 2] = [-0.4, 0.4];
/// How long each is heard.
const GUIDED: Duration = Duration::from_millis(2000);
/// Time between two renewals.
const RENEWED: Duration = Duration::from_millis(250);

/// Plays the cues, or writes them.
///
/// # Errors
/// [`Trouble`] when a word names no cue, or a file cannot be used or written.
pub fn cues(task: &Task) -> Result<Ending, Trouble> {
    let (cues, guided) = match task.only.as_deref() {
        Some(GUIDANCE) => (Vec::new(), true),
        Some(word) => (vec![cue_named(word)?], false),
        None => (Cue::ALL.to_vec(), true),
    };
    match &task.write {
        Some(directory) => write((&cues, guided), directory, &task.replacements),
        None => play((&cues, guided), &task.replacements),
    }
}

fn play((cues, guided): (&[Cue], bool), replacements: &BTreeMap<String, PathBuf>) -> Result<Ending, Trouble> {
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
    if guided {
        println!("{GUIDANCE:8} {GUIDANCE_MEANS}");
        guide(&speaker);
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

/// First too slow, then too fast.
fn guide(speaker: &Speaker) {
    let turns = GUIDED.as_millis() / RENEWED.as_millis();
    for place in GUIDED_AT {
        for _ in (0..turns).filter(|_| matches!(speaker.status(), Status::Playing(_))) {
            speaker.guide(Some(place));
            std::thread::sleep(RENEWED);
        }
        speaker.guide(None);
        std::thread::sleep(RENEWED);
    }
}

fn write(
    (cues, guided): (&[Cue], bool),
    directory: &Path,
    replacements: &BTreeMap<String, PathBuf>,
) -> Result<Ending, Trouble> {
    std::fs::create_dir_all(directory).map_err(|e| {
        Trouble::new(format!("the directory cannot be made: {e}"))
            .at(directory.display())
            .hint("give another place with --write DIR")
    })?;
    let mut bank = Bank::new(replacements)?;
    bank.prepare(RATE_HZ);
    for cue in cues {
        write_sound(directory, cue.word(), &bank.sound(*cue))?;
    }
    if guided {
        let n = (GUIDED.as_secs_f64() * f64::from(RATE_HZ)) as usize;
        let mut tone = Guidance::default();
        let pauses = GUIDED_AT.into_iter().flat_map(|place| [(Some(place), n), (None, n / 4)]);
        let samples: Vec<f32> = pauses.flat_map(|(place, n)| tone.block(place, RATE_HZ, n)).collect();
        write_sound(directory, GUIDANCE, &samples)?;
    }
    Ok(Ending::Done)
}

fn write_sound(directory: &Path, word: &str, samples: &[f32]) -> Result<(), Trouble> {
    let path = directory.join(format!("{word}.wav"));
    let bytes = wav::encode(samples, RATE_HZ);
    // The same sound under the same name is there already; another one is never overwritten.
    if std::fs::read(&path).ok().as_deref() != Some(&bytes) {
        files::write_new(&path, &bytes)?;
    }
    println!("{}", path.display());
    Ok(())
}
