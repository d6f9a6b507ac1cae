//! A record as a source: its lines at their times, at real time, a multiple of it, or unpaced.

use super::Trouble;
use super::clock::StreamClock;
use super::engine::Arrival;
use crate::config::Rig;
use crate::stream::command::Command;
use crate::stream::record::{self, Line, Reader, Tally, Told};
use crate::units::StreamTime;
use std::fs::File;
use std::io::{self, Read};
use std::path::Path;

/// Bytes read at once.
const BLOCK: usize = 256 * 1024;
/// Bytes of it that are looked at together.
const PART: usize = 4 * 1024;
/// Bytes without one good line after which a file is taken for something else.
const PROOF: u64 = 1024 * 1024;

/// How fast a stream is played.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Pace {
    /// So many stream seconds a second.
    Times(f64),
    /// As fast as it goes.
    Max,
}

impl Pace {
    /// Stream seconds in a second, if it is paced.
    pub fn speed(self) -> Option<f64> {
        match self {
            Self::Times(n) => Some(n),
            Self::Max => None,
        }
    }
}

impl std::str::FromStr for Pace {
    type Err = String;
    fn from_str(word: &str) -> Result<Self, String> {
        if word == "max" {
            return Ok(Self::Max);
        }
        let n = word.parse::<f64>().ok().filter(|n| n.is_finite() && *n > 0.0 && *n <= 10_000.0);
        n.map(Self::Times).ok_or_else(|| format!("`{word}` is neither a factor such as 10 nor max"))
    }
}

/// A record that is being read.
pub struct Source {
    name: String,
    input: Box<dyn Read + Send>,
    block: Vec<u8>,
    reader: Reader,
    bytes: u64,
    /// Bytes of the block that were read ahead for the header.
    ahead: usize,
    /// Size of the file, where it has one.
    pub size: Option<u64>,
}

impl Source {
    /// Opens a record; `-` is standard input. Without a rig every port's lines are good.
    ///
    /// # Errors
    /// [`Trouble`] when there is none to read.
    pub fn open(path: &Path, rig: Option<&Rig>) -> Result<Self, Trouble> {
        let name = path.display().to_string();
        let (input, size): (Box<dyn Read + Send>, _) = if name == "-" {
            (Box::new(io::stdin()), None)
        } else {
            let failed = |e| super::files::cannot_read(path, &e);
            let file = File::open(path).map_err(failed)?;
            let metadata = file.metadata().map_err(failed)?;
            if metadata.is_dir() {
                return Err(Trouble::new("this is a directory, not a record").at(name).hint("name a file in it"));
            }
            (Box::new(file), metadata.is_file().then_some(metadata.len()))
        };
        let reader = Reader::new(rig.map(|r| r.ports.as_slice()));
        let mut source = Self { name, input, block: vec![0; BLOCK], reader, bytes: 0, ahead: 0, size };
        source.ahead = source.read()?;
        source.look_ahead()?;
        Ok(source)
    }

    /// What was read ahead must be of a record before anything is made of it; a pipe may bring its lines later.
    fn look_ahead(&self) -> Result<(), Trouble> {
        let mut reader = Reader::new(None);
        let whole = self.size == Some(self.ahead as u64);
        // One good line is enough: of a block that begins as a record does the rest is not read twice.
        for part in self.block[..self.ahead].chunks(PART) {
            reader.push(part, &mut |_| ());
            if reader.tally.good > 0 {
                break;
            }
        }
        if whole {
            reader.finish();
        }
        self.readable(&reader.tally)?;
        let enough = whole || (self.ahead == BLOCK && reader.tally.damaged > 0);
        if enough { self.proven(&reader.tally, self.ahead as u64) } else { Ok(()) }
    }

    fn readable(&self, tally: &Tally) -> Result<(), Trouble> {
        let Some(version) = tally.version.as_ref().filter(|v| *v != "1") else { return Ok(()) };
        let what = format!("this is a record of version {version}; this program reads version 1");
        Err(Trouble::new(what).at(format!("{}:1", self.name)).hint("use a newer steadytap"))
    }

    /// UTC of stream time 0, if the record begins with it.
    pub fn started(&self) -> Option<String> {
        let head = self.block[..self.ahead].split(|c| *c == b'\n').take(2);
        head.filter_map(record::parse).find_map(|line| match line {
            Line::Started(instant) => Some(instant.to_string()),
            _ => None,
        })
    }

    fn read(&mut self) -> Result<usize, Trouble> {
        loop {
            match self.input.read(&mut self.block) {
                Ok(n) => return Ok(n),
                Err(e) if e.kind() == io::ErrorKind::Interrupted => {}
                Err(e) => return Err(Trouble::new(format!("the record cannot be read: {e}")).at(&self.name)),
            }
        }
    }

    /// Reads the next block and hands its good lines to `each`. False at the end.
    ///
    /// # Errors
    /// [`Trouble`] when reading fails, or what is read is no record.
    pub fn next(&mut self, each: &mut impl FnMut(Told<'_>)) -> Result<bool, Trouble> {
        let n = match std::mem::take(&mut self.ahead) {
            0 => self.read()?,
            n => n,
        };
        if n == 0 {
            self.reader.finish();
            return self.proven(&self.reader.tally, self.bytes).map(|()| false);
        }
        self.bytes += n as u64;
        self.reader.push(&self.block[..n], each);
        let tally = &self.reader.tally;
        self.readable(tally)?;
        if tally.good == 0 && self.bytes > PROOF {
            self.proven(tally, self.bytes)?;
        }
        Ok(true)
    }

    /// It is a record at all: it has one good line.
    fn proven(&self, tally: &Tally, bytes: u64) -> Result<(), Trouble> {
        let hint = "a record line reads `12.345678 gauge 1.0,2.0`: seconds with six decimals, port, line";
        if bytes == 0 || (tally.good == 0 && tally.damaged == 0) {
            return Err(Trouble::new("the record is empty").at(&self.name).hint(hint));
        }
        if tally.good == 0 {
            let line = tally.first_damage.map_or(1, |(line, _)| line);
            let what = "this is no record: not one of its lines has a head";
            return Err(Trouble::new(what).at(format!("{}:{line}", self.name)).hint(hint));
        }
        Ok(())
    }

    /// What was read so far.
    pub fn tally(&self) -> &Tally {
        &self.reader.tally
    }
    /// Bytes read so far.
    pub fn bytes(&self) -> u64 {
        self.bytes
    }
    /// The file's name.
    pub fn name(&self) -> &str {
        &self.name
    }

    /// Plays the record into `send` until it ends or `send` says stop.
    ///
    /// # Errors
    /// As [`Source::next`].
    pub fn play(&mut self, pace: Pace, send: &mut impl FnMut(Arrival) -> bool) -> Result<(), Trouble> {
        let mut clock: Option<StreamClock> = None;
        let mut going = true;
        while going {
            let mut unknown = 0;
            let more = self.next(&mut |told| {
                if !going {
                    return;
                }
                let Some((at, arrival)) = arrival(&told) else {
                    unknown += 1;
                    return;
                };
                if let Pace::Times(n) = pace {
                    let clock = clock.get_or_insert_with(|| StreamClock::start(at, Some(n)));
                    if let Some(wait) = clock.until(at) {
                        std::thread::sleep(wait);
                    }
                }
                going = send(arrival);
            })?;
            self.reader.tally.unknown_command += unknown;
            going &= more;
        }
        Ok(())
    }
}

/// What a record's line is for the engine, and when; none for a command that is not understood.
fn arrival(told: &Told<'_>) -> Option<(StreamTime, Arrival)> {
    Some(match told {
        Told::Line { at, port, line } => (*at, Arrival::Line { port: *port, at: *at, line: line.to_vec() }),
        Told::Event { at, port, word } => (*at, Arrival::Port { port: *port, at: *at, word: word.to_string() }),
        Told::Command { at, words } => (*at, Arrival::Command { at: *at, command: Command::parse(words).ok()? }),
    })
}
