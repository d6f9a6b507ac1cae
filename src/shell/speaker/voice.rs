//! The first way that works: server or device, program, bell; each failure goes on to the next with the same cue.

use super::bank::Bank;
#[cfg(not(target_os = "linux"))]
use super::device::Server;
#[cfg(target_os = "linux")]
use super::pulse::Server;
use super::{Guide, Status, program};
use crate::sound::Cue;
use std::io::{IsTerminal, Write};
use std::sync::Arc;
use std::time::{Duration, Instant};

/// Time between two tries to find a way that failed.
const AGAIN: Duration = Duration::from_secs(5);

/// Silence after a cue: two that run into each other have the rhythm of neither.
const GAP: Duration = Duration::from_millis(120);

/// What plays cues, on the speaker's own thread.
pub struct Voice {
    bank: Bank,
    speech: bool,
    guide: Arc<Guide>,
    server: Option<Server>,
    /// When the server was last looked for.
    looked: Instant,
    /// Programs are tried again at the same time as the server.
    programs_fail: bool,
    status: Status,
}

impl Voice {
    /// Looks for a way.
    pub fn new(bank: Bank, speech: bool, guide: Arc<Guide>) -> Self {
        let (looked, status) = (Instant::now(), Status::Starting);
        let mut voice = Self { bank, speech, guide, server: None, looked, programs_fail: false, status };
        voice.connect();
        voice
    }

    /// How cues are heard now.
    pub fn status(&self) -> Status {
        self.status.clone()
    }

    fn connect(&mut self) {
        (self.looked, self.programs_fail) = (Instant::now(), false);
        match Server::connect() {
            Ok(server) => {
                self.bank.prepare(server.rate());
                self.status = Status::Playing(server.name());
                self.server = Some(server);
            }
            Err(why) => self.without_server(why),
        }
    }

    fn without_server(&mut self, why: String) {
        self.server = None;
        self.bank.prepare(program::RATE_HZ);
        // A program that plays goes on doing so until it fails.
        if !matches!(self.status, Status::Playing(name) if program::is_one(name)) {
            self.status = Status::Bell(why);
        }
    }

    /// Plays a cue by the first way that works.
    pub fn play(&mut self, cue: Cue) {
        if self.speech && self.speak(cue) {
            return;
        }
        self.guide.make_way(true);
        self.sound(cue);
        std::thread::sleep(GAP);
        self.guide.make_way(false);
        self.tend_guidance();
    }

    fn sound(&mut self, cue: Cue) {
        if let Some(server) = &mut self.server {
            match server.play(&self.bank.sound(cue)) {
                Ok(()) => return,
                Err(why) => self.lose(why),
            }
        }
        if !self.programs_fail {
            match program::play(&self.bank.sound(cue)) {
                Ok(name) => {
                    self.status = Status::Playing(name);
                    return;
                }
                Err(why) => {
                    self.programs_fail = true;
                    self.status = match &self.status {
                        Status::Bell(first) => Status::Bell(format!("{first}; {why}")),
                        _ => Status::Bell(why),
                    };
                }
            }
        }
        ring();
    }

    fn speak(&self, cue: Cue) -> bool {
        let Cue::Next { configuration_index, direction } = cue else { return false };
        let letter = char::from(b'A' + configuration_index.min(25) as u8);
        program::speak(&format!("configuration {letter}, {}", direction.word()))
    }

    /// Looks after the server: still there, or to be found again; and after the guidance tone.
    pub fn look(&mut self) {
        match &mut self.server {
            Some(server) => {
                if let Err(why) = server.alive() {
                    self.lose(why);
                    ring();
                }
            }
            None if self.looked.elapsed() >= AGAIN => self.connect(),
            None => {}
        }
        self.tend_guidance();
    }

    fn tend_guidance(&mut self) {
        if let Some(server) = &mut self.server
            && let Err(why) = server.guide(&self.guide)
        {
            self.lose(why);
        }
    }

    fn lose(&mut self, why: String) {
        self.looked = Instant::now();
        self.without_server(why);
    }
}

/// The terminal's bell, where there is a terminal.
fn ring() {
    if std::io::stderr().is_terminal() {
        let _ = std::io::stderr().write_all(b"\x07");
    } else if std::io::stdout().is_terminal() {
        let mut out = std::io::stdout().lock();
        let _ = out.write_all(b"\x07").and_then(|()| out.flush());
    }
}
