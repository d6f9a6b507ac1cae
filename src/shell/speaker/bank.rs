//! The sounds at the rate of whatever plays them: built in, or out of files that replace them.

use super::wav::{self, Wave};
use crate::shell::Trouble;
use crate::sound::{self, Cue};
use std::collections::BTreeMap;
use std::path::PathBuf;
use std::sync::Arc;

/// Every sound that may be asked for.
#[derive(Default)]
pub struct Bank {
    replaced: BTreeMap<&'static str, Wave>,
    rate: u32,
    ready: BTreeMap<Cue, Arc<[f32]>>,
}

impl Bank {
    /// The built-in sounds, some replaced by files, by the word of the cue.
    ///
    /// # Errors
    /// [`Trouble`] when a word names no cue, or a file cannot be used.
    pub fn new(replacements: &BTreeMap<String, PathBuf>) -> Result<Self, Trouble> {
        let mut replaced = BTreeMap::new();
        for (word, path) in replacements {
            replaced.insert(cue_named(word)?.word(), wav::read_wav(path)?);
        }
        Ok(Self { replaced, ..Self::default() })
    }

    /// Makes every sound at this rate, so that none has to be made when it is wanted.
    pub fn prepare(&mut self, rate: u32) {
        if rate != self.rate {
            (self.rate, self.ready) = (rate, BTreeMap::new());
            Cue::ALL.into_iter().for_each(|cue| drop(self.sound(cue)));
        }
    }

    /// The samples of a cue at the prepared rate.
    pub fn sound(&mut self, cue: Cue) -> Arc<[f32]> {
        if let Some(samples) = self.ready.get(&cue) {
            return samples.clone();
        }
        let samples: Arc<[f32]> = match self.replaced.get(cue.word()) {
            Some(wave) => wav::resampled(wave, self.rate).into(),
            None => sound::synthesise(cue, self.rate).into(),
        };
        self.ready.insert(cue, samples.clone());
        samples
    }

    /// The rate that everything was prepared for.
    pub fn rate(&self) -> u32 {
        self.rate
    }
}

/// The cue of a word.
///
/// # Errors
/// [`Trouble`] when there is none.
pub fn cue_named(word: &str) -> Result<Cue, Trouble> {
    Cue::ALL.into_iter().find(|cue| cue.word() == word).ok_or_else(|| {
        let known: Vec<&str> = Cue::ALL.iter().map(|cue| cue.word()).collect();
        Trouble::new(format!("there is no cue `{}`", word.escape_default()))
            .hint(format!("it is one of {}", known.join(", ")))
    })
}
