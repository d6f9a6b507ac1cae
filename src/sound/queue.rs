//! What is heard first: trouble, then kept, then the rest in order; never two at once.
//!
//! A full queue drops what is not trouble or kept. What waits to be said about the window is out of date when the next such cue
//! comes, or a kept one. Trouble that waits already speaks for all that comes after it: its sound is repeated until acknowledged.

use super::Cue;
use std::collections::VecDeque;

/// Cues that wait, other than kept and trouble.
const ROOM: usize = 4;

/// Cues that wait for the speaker.
#[derive(Clone, Debug, Default)]
pub struct Queue {
    trouble: bool,
    kept: usize,
    rest: VecDeque<Cue>,
}

impl Queue {
    /// One more; false when it was dropped.
    pub fn push(&mut self, cue: Cue) -> bool {
        match cue {
            Cue::Trouble => self.trouble = true,
            Cue::Kept => {
                self.rest.retain(|waiting| !waiting.is_of_the_window());
                self.kept += 1;
            }
            cue => {
                if cue.is_of_the_window() {
                    self.rest.retain(|waiting| !waiting.is_of_the_window());
                }
                if self.rest.len() >= ROOM {
                    return false;
                }
                self.rest.push_back(cue);
            }
        }
        true
    }

    /// The next to be heard.
    pub fn pop(&mut self) -> Option<Cue> {
        if std::mem::take(&mut self.trouble) {
            return Some(Cue::Trouble);
        }
        if self.kept > 0 {
            self.kept -= 1;
            return Some(Cue::Kept);
        }
        self.rest.pop_front()
    }

    /// Nothing waits.
    pub fn is_empty(&self) -> bool {
        !self.trouble && self.kept == 0 && self.rest.is_empty()
    }
}
