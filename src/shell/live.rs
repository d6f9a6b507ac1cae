//! The live screen: the engine on one thread, the terminal on another, neither waits for the other.
//!
//! The engine publishes views; the terminal draws the newest when it can, at most twenty times a second. A terminal that is not
//! drained stops the drawing and nothing else.

use super::ear::Ear;
use super::engine::{Arrival, Engine, Outcome};
use super::feed::{Running, Sender};
use super::going_on::{Gone, Left, with_screen};
use super::outing::Plan;
use super::reducer::Reducer;
use super::solo::Solo;
use super::speaker::Speaker;
use super::{Trouble, keyboard, terminal};
use crate::config::Convert;
use crate::screen::keys::{self, Action};
use crate::screen::seen::Surroundings;
use crate::screen::{Face, Journal, Message, Overlay, Spot, View, Weight, messages};
use crate::stream::command::Command;
use crate::units::StreamTime;
use crossterm::event::Event as TerminalEvent;
use std::path::PathBuf;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};
use std::sync::mpsc::{Receiver, RecvTimeoutError, channel};
use std::time::{Duration, Instant};
use tokio::sync::watch;

/// Least time between two frames.
const FRAME: Duration = Duration::from_millis(50);
/// Time between two readings of the live figures: digits that change faster cannot be read.
const READING: Duration = Duration::from_millis(200);
/// Messages that stay on the screen.
const MESSAGES: usize = 8;
/// Arrivals taken between two looks at the clock.
const BATCH: usize = 2000;
/// How long leaving waits for a terminal that is not drained.
const PATIENCE: Duration = Duration::from_secs(1);

/// Runs the screen until somebody leaves.
///
/// # Errors
/// [`Trouble`] when the terminal cannot be used, or one of the threads broke (everything kept is on the disk then).
pub fn run(engine: Engine, running: Running, plan: &Plan) -> Result<Engine, Trouble> {
    let gone = Gone::default();
    let hung_up = gone.clone();
    super::outing::stop_on_signals(running.sender.clone(), move |_| hung_up.say());
    let own = super::keyfile::own(plan.keys.as_deref())?;
    let face = terminal::face(plan, own.bindings);
    let looked = Arc::new(AtomicUsize::new(NOBODY));
    let speaker = Speaker::start(&own.sounds, plan.solo)?;
    speaker.mute(plan.mute);
    let silent = Arc::new(AtomicBool::new(false));
    let alone = plan.solo.then(|| Alone { solo: Solo::default(), silent: silent.clone(), speaker: speaker.clone() });
    let desk = Desk {
        alone,
        gone: gone.clone(),
        ..Desk::new(engine, running.clock, plan, (looked.clone(), Ear::new(speaker.clone())))
    };
    let (publish, views) = watch::channel(desk.view());
    let keys_to = running.sender.clone();
    let (done, is_done) = channel();
    let rig = plan.rig.clone();
    let screen = std::thread::spawn(move || {
        let window = Window { views, face, looked, rig, speaker, silent };
        let ended = with_screen(&keys_to, &gone, || screen(window, &keys_to));
        let _ = done.send(());
        ended
    });
    let arrivals = running.arrivals;
    let engine = std::thread::spawn(move || desk.run(&arrivals, &publish)).join();
    // The engine dropped its end of the views, and the screen leaves by itself unless its terminal hangs.
    let drawn = match is_done.recv_timeout(PATIENCE) {
        Ok(()) => screen.join().unwrap_or_else(|_| Err(Trouble::new("the screen broke"))),
        Err(_) => {
            terminal::abandon();
            Ok(())
        }
    };
    terminal::restore();
    let engine = engine.map_err(|_| {
        Trouble::new("the engine broke; what it said to have kept is on the disk")
            .hint("start again with the same --session")
    })?;
    drawn.map(|()| engine)
}

/// Nobody is in the workshop.
const NOBODY: usize = usize::MAX;

/// The engine and what is told about it.
struct Desk {
    engine: Engine,
    reducer: Reducer,
    /// Channel that is looked at in the workshop.
    looked: Arc<AtomicUsize>,
    alone: Option<Alone>,
    clock: Option<super::clock::StreamClock>,
    shift_us: i64,
    seconds: Option<f64>,
    messages: Vec<Message>,
    outcomes: Vec<Outcome>,
    ended: bool,
    ear: Ear,
    /// The terminal has gone.
    gone: Gone,
    /// The run goes on without it, and keeps every full dwell.
    unwatched: bool,
}

/// The driver is alone.
struct Alone {
    solo: Solo,
    /// The guidance tone is off.
    silent: Arc<AtomicBool>,
    speaker: Speaker,
}

impl Desk {
    fn new(
        engine: Engine,
        clock: Option<super::clock::StreamClock>,
        plan: &Plan,
        (looked, ear): (Arc<AtomicUsize>, Ear),
    ) -> Self {
        let shift_us = engine.shift_us();
        let (messages, outcomes) = (Vec::new(), Vec::new());
        let contents = engine.journal().contents();
        let header = contents.header.unwrap_or_else(|| super::rehold::header(engine.pipeline().setup(), None));
        let reducer = Reducer::start(header, contents.entries);
        Self {
            engine,
            reducer,
            looked,
            alone: None,
            clock,
            shift_us,
            seconds: plan.seconds,
            messages,
            outcomes,
            ended: false,
            ear,
            gone: Gone::default(),
            unwatched: false,
        }
    }

    fn now(&self) -> StreamTime {
        let last = self.engine.pipeline().now();
        self.clock.map_or(last, |c| c.now().plus(self.shift_us).max(last))
    }

    fn run(mut self, arrivals: &Receiver<Arrival>, publish: &watch::Sender<View>) -> Engine {
        let mut published = Instant::now();
        let first = self.now();
        loop {
            let patience = READING.saturating_sub(published.elapsed());
            let stop = match arrivals.recv_timeout(patience) {
                Ok(arrival) => self.take(arrival) || arrivals.try_iter().take(BATCH).any(|a| self.take(a)),
                Err(RecvTimeoutError::Timeout) => false,
                Err(RecvTimeoutError::Disconnected) => true,
            };
            let over = self.seconds.is_some_and(|s| self.now().since(first) as f64 >= s * 1e6);
            if stop || over || (self.ended && self.unwatched) {
                break;
            }
            self.look_after();
            let news = self.hear();
            if let Some(alone) = &self.alone {
                alone.solo.guide(self.engine.pipeline(), self.now(), &alone.speaker);
            }
            let due = if news { FRAME } else { READING };
            if published.elapsed() >= due || (news && published.elapsed() >= FRAME / 2) {
                published = Instant::now();
                publish.send_replace(self.view());
            }
        }
        self.engine.finish(&mut self.outcomes);
        self.hear();
        publish.send_replace(self.view());
        self.ear.close();
        self.engine
    }

    /// Disk, record, and a terminal that has gone.
    fn look_after(&mut self) {
        self.engine.look_after(Instant::now(), &mut self.outcomes);
        let at = self.now();
        let told = self.engine.notices().into_iter().map(|text| Message { at, weight: Weight::Trouble, text });
        self.messages.extend(told);
        if self.gone.is_so() && !self.unwatched {
            self.unwatched = true;
            self.engine.keep_every(StreamTime::ZERO, &mut self.outcomes);
        }
    }

    /// True when somebody wants to leave.
    fn take(&mut self, arrival: Arrival) -> bool {
        match arrival {
            Arrival::Stop => return true,
            Arrival::End => {
                self.hear();
                self.ended = true;
                let (at, text) =
                    (self.now(), "the stream is over: Tab shows Layby, q leaves and prints the reduction".to_string());
                self.messages.push(Message { at, weight: Weight::Quiet, text });
            }
            // Alone every dwell is kept; whoever takes in a record that is driven again is not here.
            Arrival::Command { command: Command::Take, .. } if self.alone.is_some() => {}
            arrival => {
                self.engine.take(arrival, &mut self.outcomes);
                self.do_alone();
            }
        }
        false
    }

    /// What solo wants is done and said.
    fn do_alone(&mut self) {
        let Some(alone) = &mut self.alone else { return };
        let pipeline = self.engine.pipeline();
        let now = pipeline.now();
        let wanted = alone.solo.look(pipeline, now);
        alone.solo.silent = alone.silent.load(Ordering::Relaxed);
        if !wanted.cues.is_empty() {
            alone.speaker.say_all(wanted.cues);
        }
        for command in wanted.commands {
            self.engine.take(Arrival::Command { at: StreamTime::ZERO, command }, &mut self.outcomes);
        }
    }

    /// Turns outcomes into messages; true when something happened that must be seen at once.
    fn hear(&mut self) -> bool {
        self.ear.hear(&self.outcomes, self.engine.pipeline());
        self.ear.disk(self.trouble());
        self.outcomes
            .iter()
            .filter(|o| !o.again)
            .filter_map(|o| o.event.entry())
            .for_each(|entry| self.reducer.kept(entry));
        let sound = self.ear.news().map(|(weight, text)| Message { at: self.now(), weight, text });
        let news = !self.outcomes.is_empty() || sound.is_some();
        self.messages.extend(sound);
        self.messages.extend(self.outcomes.drain(..).filter_map(|o| messages::message(&o.event, o.on_disk)));
        let extra = self.messages.len().saturating_sub(MESSAGES);
        self.messages.drain(..extra);
        news
    }

    /// What is wrong with session or record.
    fn trouble(&self) -> Option<String> {
        let recorder = || self.engine.recorder().and_then(|r| r.trouble());
        self.engine.journal().trouble().or_else(recorder).map(crate::screen::text::safe)
    }

    fn view(&self) -> View {
        let journal = self.engine.journal();
        let name = journal.path().file_name().map(|n| n.to_string_lossy().into_owned()).unwrap_or_default();
        let journal = Journal {
            file: crate::screen::text::safe(&name),
            trouble: self.trouble(),
            recording: self.engine.recorder().is_some_and(|r| r.trouble().is_none()),
        };
        let on_disk = &self.engine.on_disk;
        let looked = self.looked.load(Ordering::Relaxed);
        let around = Surroundings {
            now: self.now(),
            journal,
            on_disk,
            messages: &self.messages,
            findings: self.reducer.findings(),
            workshop: (looked != NOBODY).then_some(looked),
            ended: self.ended,
        };
        View::of(self.engine.pipeline(), around)
    }
}

/// What the screen's thread has.
struct Window {
    views: watch::Receiver<View>,
    face: Face,
    looked: Arc<AtomicUsize>,
    /// The rig file, for a calibration; none where the rig is built in.
    rig: Option<PathBuf>,
    speaker: Speaker,
    silent: Arc<AtomicBool>,
}

/// Draws views and reads keys until the engine is gone or somebody leaves.
fn screen(window: Window, keys_to: &Sender) -> Result<Left, Trouble> {
    let failed = |e: std::io::Error| Trouble::new(format!("the terminal cannot be used: {e}"));
    let runtime = tokio::runtime::Builder::new_current_thread().enable_all().build().map_err(failed)?;
    let terminal = terminal::enter().map_err(failed)?;
    // Once it could be taken, what cannot be drawn any more has gone.
    Ok(runtime.block_on(drawing(terminal, window, keys_to)).unwrap_or(Left::TerminalGone))
}

async fn drawing(mut terminal: terminal::Screen, mut window: Window, keys_to: &Sender) -> std::io::Result<Left> {
    let mut events = keyboard::start();
    loop {
        let view = window.views.borrow_and_update().clone();
        keys::look(&view, &mut window.face);
        let looked = if window.face.spot == Spot::Bench { window.face.bench.channel } else { NOBODY };
        window.looked.store(looked, Ordering::Relaxed);
        terminal.draw(&view, &window.face)?;
        let drawn = tokio::time::Instant::now();
        let event = tokio::select! {
            changed = window.views.changed() => {
                if changed.is_err() {
                    return Ok(Left::Asked);
                }
                None
            }
            event = events.recv() => match event {
                Some(event) => Some(event),
                None => return Ok(Left::TerminalGone),
            },
        };
        match event {
            // Alone any key of the remote says that the trouble was heard.
            Some(TerminalEvent::Key(_)) if window.face.solo && window.speaker.troubled() => {
                window.speaker.acknowledge()
            }
            Some(TerminalEvent::Key(key)) => match keys::press(&view, &mut window.face, key) {
                // Stamped by the engine: stream time is only known there.
                Some(Action::Command(command)) => {
                    keys_to.send(Arrival::Command { at: StreamTime::ZERO, command });
                }
                Some(Action::Quit) => return Ok(Left::Asked),
                Some(Action::Suspend) => terminal.suspend()?,
                Some(Action::Calibrate { channel, convert }) => window.calibrated(&channel, &convert),
                Some(Action::Acknowledge) => window.speaker.acknowledge(),
                Some(Action::Guidance) => drop(window.silent.fetch_xor(true, Ordering::Relaxed)),
                None => {}
            },
            Some(TerminalEvent::Paste(text)) => keys::paste(&mut window.face, &text),
            // A key is answered at once; a view may wait for its frame.
            Some(_) => {}
            None => tokio::time::sleep_until(drawn + FRAME).await,
        }
    }
}

impl Window {
    /// Writes a calibration, and says in its box what came of it.
    fn calibrated(&mut self, channel: &str, convert: &Convert) {
        let told = match &self.rig {
            None => "the rehearsal's rig is built in: nothing to write to".to_string(),
            Some(path) => match super::calibration::write(path, channel, convert) {
                Ok(()) => format!("written to {}; it counts from the next start on", path.display()),
                Err(trouble) => trouble.what,
            },
        };
        if let Overlay::Calibration(c) = &mut self.face.overlay {
            c.told = Some(told);
        }
    }
}
