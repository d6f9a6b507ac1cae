//! The speaker: plays cues and the guidance tone on a thread of its own; nobody ever waits for it.
//!
//! [`Speaker::say`] puts a cue into the [`Queue`] and returns. The thread plays what is most urgent through the first way that works:
//! the sound server (`pulse`; elsewhere than on Linux the `device`), a `program` of the system, the terminal's bell. A way that fails
//! is left for the next with the same cue, and looked for again every five seconds. Trouble is repeated until acknowledged.

pub mod bank;
#[cfg(not(target_os = "linux"))]
mod device;
mod program;
#[cfg(target_os = "linux")]
mod pulse;
mod voice;
pub mod wav;

use super::Trouble;
use crate::sound::Cue;
use crate::sound::queue::Queue;
use bank::Bank;
use std::collections::BTreeMap;
use std::path::PathBuf;
use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};
use std::time::{Duration, Instant};
use voice::Voice;

/// Time between two soundings of a trouble that nobody has acknowledged.
const TROUBLE_AGAIN: Duration = Duration::from_secs(5);
/// Time between two looks at whether the server is still there.
const BEAT: Duration = Duration::from_secs(1);
/// A guidance that is not renewed for so long is over.
const GUIDED: Duration = Duration::from_secs(1);

/// How cues are heard now.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Status {
    /// Looking for a way.
    Starting,
    /// They are played; through what.
    Playing(&'static str),
    /// The terminal's bell rings instead; why.
    Bell(String),
    /// They were asked to be silent.
    Muted,
}

/// A handle on the speaker; it may be cloned.
#[derive(Clone)]
pub struct Speaker {
    shared: Arc<Shared>,
}

struct Shared {
    state: Mutex<State>,
    changed: Condvar,
    guide: Arc<Guide>,
}

struct State {
    queue: Queue,
    sounding: bool,
    muted: bool,
    trouble_again: Option<Instant>,
    status: Status,
    closing: bool,
    ended: bool,
}

/// What the thread does next.
enum Next {
    Play(Cue),
    Look,
    End,
}

impl Speaker {
    /// Starts the thread. `replacements`: WAV files by the word of the cue; `speech`: the next pass is spoken where the system can.
    ///
    /// # Errors
    /// [`Trouble`] when a word names no cue or a file cannot be used. That nothing plays is no error: see [`Speaker::status`].
    pub fn start(replacements: &BTreeMap<String, PathBuf>, speech: bool) -> Result<Self, Trouble> {
        let bank = Bank::new(replacements)?;
        let state = State {
            queue: Queue::default(),
            sounding: false,
            muted: false,
            trouble_again: None,
            status: Status::Starting,
            closing: false,
            ended: false,
        };
        let shared =
            Arc::new(Shared { state: Mutex::new(state), changed: Condvar::new(), guide: Arc::new(Guide::default()) });
        let theirs = shared.clone();
        std::thread::spawn(move || theirs.run(bank, speech));
        Ok(Self { shared })
    }

    /// Lets a cue be heard.
    pub fn say(&self, cue: Cue) {
        self.say_all([cue]);
    }

    /// Lets cues of one moment be heard, the most urgent first.
    pub fn say_all(&self, cues: impl IntoIterator<Item = Cue>) {
        let mut state = self.shared.lock();
        if state.muted {
            return;
        }
        for cue in cues {
            state.queue.push(cue);
            if cue == Cue::Trouble {
                state.trouble_again = Some(Instant::now() + TROUBLE_AGAIN);
            }
        }
        self.shared.changed.notify_all();
    }

    /// Where the speed is beside the window, as [`crate::sound::guidance::place`] gives it. Must be renewed at least once a second.
    pub fn guide(&self, place: Option<f64>) {
        if self.shared.guide.set(place) {
            self.shared.changed.notify_all();
        }
    }

    /// Silent, or heard again. What waits is not made up for.
    pub fn mute(&self, muted: bool) {
        let mut state = self.shared.lock();
        state.muted = muted;
        if muted {
            (state.queue, state.trouble_again) = (Queue::default(), None);
        }
        self.shared.guide.hush(muted);
    }

    /// Trouble has been seen: its sound is not repeated.
    pub fn acknowledge(&self) {
        self.shared.lock().trouble_again = None;
    }

    /// Trouble is being repeated.
    pub fn troubled(&self) -> bool {
        self.shared.lock().trouble_again.is_some()
    }

    /// How cues are heard now.
    pub fn status(&self) -> Status {
        let state = self.shared.lock();
        if state.muted { Status::Muted } else { state.status.clone() }
    }

    /// Waits until everything that was said has been heard; false when that takes longer.
    pub fn wait_until_quiet(&self, patience: Duration) -> bool {
        self.wait(patience, |s| s.queue.is_empty() && !s.sounding && s.status != Status::Starting)
    }

    /// Ends the thread once it has said what waits; false when that takes longer.
    pub fn close(&self, patience: Duration) -> bool {
        self.guide(None);
        self.shared.lock().closing = true;
        self.shared.changed.notify_all();
        self.wait(patience, |s| s.ended)
    }

    fn wait(&self, patience: Duration, done: impl Fn(&State) -> bool) -> bool {
        let until = |state: &mut State| !done(state);
        let waited = self.shared.changed.wait_timeout_while(self.shared.lock(), patience, until);
        !waited.unwrap_or_else(PoisonError::into_inner).1.timed_out()
    }
}

impl Shared {
    fn lock(&self) -> MutexGuard<'_, State> {
        self.state.lock().unwrap_or_else(PoisonError::into_inner)
    }

    fn run(&self, bank: Bank, speech: bool) {
        let mut voice = Voice::new(bank, speech, self.guide.clone());
        loop {
            self.after(voice.status());
            match self.next() {
                Next::Play(cue) => voice.play(cue),
                Next::Look => voice.look(),
                Next::End => break,
            }
        }
        self.lock().ended = true;
        self.changed.notify_all();
    }

    /// A step is done.
    fn after(&self, status: Status) {
        let mut state = self.lock();
        (state.sounding, state.status) = (false, status);
        self.changed.notify_all();
    }

    fn next(&self) -> Next {
        let mut state = self.lock();
        let looked = Instant::now();
        let guided = self.guide.wanted();
        loop {
            let now = Instant::now();
            if state.trouble_again.is_some_and(|again| again <= now) {
                state.queue.push(Cue::Trouble);
                state.trouble_again = Some(now + TROUBLE_AGAIN);
            }
            if let Some(cue) = state.queue.pop() {
                state.sounding = true;
                return Next::Play(cue);
            }
            if state.closing {
                return Next::End;
            }
            if now.duration_since(looked) >= BEAT || self.guide.wanted() != guided {
                return Next::Look;
            }
            let beat = looked + BEAT;
            let until = state.trouble_again.map_or(beat, |again| again.min(beat));
            let waited = self.changed.wait_timeout(state, until.saturating_duration_since(now));
            state = waited.unwrap_or_else(PoisonError::into_inner).0;
        }
    }
}

/// What the guidance tone is to say; read by whatever plays it, sample block by sample block.
#[derive(Default)]
pub struct Guide(Mutex<Guided>);

#[derive(Default)]
struct Guided {
    place: Option<(f64, Instant)>,
    hushed: bool,
    muted: bool,
    faded: bool,
}

impl Guide {
    fn lock(&self) -> MutexGuard<'_, Guided> {
        self.0.lock().unwrap_or_else(PoisonError::into_inner)
    }

    /// True when the tone has to begin or to end.
    fn set(&self, place: Option<f64>) -> bool {
        let mut guided = self.lock();
        let before = guided.place.is_some();
        guided.place = place.map(|place| (place, Instant::now()));
        before != place.is_some()
    }

    fn hush(&self, muted: bool) {
        self.lock().muted = muted;
    }

    /// A cue sounds: the tone makes way for it.
    fn make_way(&self, hushed: bool) {
        self.lock().hushed = hushed;
    }

    fn wanted(&self) -> bool {
        self.place().is_some()
    }

    /// Where the speed is, while the tone is wanted.
    fn place(&self) -> Option<f64> {
        let guided = self.lock();
        let heard = !guided.hushed && !guided.muted;
        guided.place.filter(|(_, at)| heard && at.elapsed() < GUIDED).map(|(place, _)| place)
    }

    fn begin(&self) {
        self.lock().faded = false;
    }

    fn faded(&self) {
        self.lock().faded = true;
    }

    fn has_faded(&self) -> bool {
        self.lock().faded
    }
}
