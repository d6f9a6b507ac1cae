//! Words → a command → an exit status.
//!
//! 0 done · 1 the work found a problem in its input · 2 wrong usage · 3 finished but something was degraded. Data goes to standard
//! output, talk to standard error.
#![expect(clippy::disallowed_macros, reason = "this room talks to the person at the shell")]

mod manual;

use crate::config::{self, Setup};
use crate::pneumatics::{self, Gas, Tube};
use crate::shell::feed::Feed;
use crate::shell::outing::{self, Ending, Plan};
use crate::shell::player::{Pace, Source};
use crate::shell::{Trouble, check, cues, files, listen, reduce, rehold, say, serial};
use crate::simulate;
use clap::{Args, CommandFactory, Parser, Subcommand};
use std::path::{Path, PathBuf};

/// Tells, before you drive home, whether a body change moved the air pressures, by how much, and how sure you may be.
#[derive(Parser, Debug)]
#[command(
    name = "steadytap",
    version = manual::version(),
    about = "Decides on the road, with honest uncertainty, whether a body change moved the air pressures",
    after_help = "\
Examples:
  steadytap                         a whole outing on a simulated van, no hardware
  steadytap reduce outing.session   what the passes say; more: steadytap manual | man -l -"
)]
struct Words {
    #[command(subcommand)]
    command: Option<Word>,
}

#[derive(Subcommand, Debug)]
enum Word {
    /// A whole outing on a simulated van: the real screen, engine and files
    Rehearse(Rehearse),
    /// The live screen on the rig's serial ports, or on a record
    Drive(Drive),
    /// What is plugged in and talking, with a rig stanza to paste
    Listen {
        /// Only this device, such as /dev/ttyACM0
        port: Option<String>,
    },
    /// Validates rig, car, outing, session and record files: every problem at once
    Check {
        /// Files to check
        #[arg(required = true)]
        files: Vec<PathBuf>,
    },
    /// The same hold rule over a record again, perhaps with another window
    Rehold(Rehold),
    /// Coefficients, differences and verdicts of sessions
    Reduce(Reduce),
    /// The response of a tube and a sensor's volume: delay, bandwidth, settling time
    Hose(Hose),
    /// Plays every sound with its meaning, or writes them as WAV files
    Cues(Cues),
    /// Completions for a shell, on standard output
    Completions {
        /// The shell
        shell: clap_complete::Shell,
    },
    /// The manual as a man page, on standard output
    Manual,
}

#[derive(Args, Debug, Default)]
struct Run {
    /// Session file; an existing one is gone on with [default: a new one in the data directory]
    #[arg(long, value_name = "FILE")]
    session: Option<PathBuf>,
    /// Write no record beside the session
    #[arg(long)]
    no_record: bool,
    /// No screen: keep every full dwell, print one line an event, then the reduction
    #[arg(long)]
    unattended: bool,
    /// Stop after so many seconds of stream time
    #[arg(long = "for", value_name = "SECONDS", value_parser = positive)]
    seconds: Option<f64>,
    /// Times real time, or max
    #[arg(long, value_name = "N|max")]
    fast: Option<Pace>,
    /// Draw with ASCII alone
    #[arg(long)]
    plain: bool,
    /// A file of your own keys [default: keys.toml in the configuration directory, if there is one]
    #[arg(long, value_name = "FILE")]
    keys: Option<PathBuf>,
    /// No sound; without a screen there is none anyway
    #[arg(long)]
    mute: bool,
    /// The driver is alone: every held dwell is kept, guided by sound; begins once the car stands
    #[arg(long, conflicts_with = "unattended")]
    solo: bool,
}

#[derive(Args, Debug, Default)]
struct Rehearse {
    #[command(flatten)]
    run: Run,
    /// Another simulated day
    #[arg(long, default_value_t = 1)]
    seed: u64,
}

#[derive(Args, Debug)]
struct Drive {
    /// The outing file
    outing: PathBuf,
    /// Feed it from this record instead of the ports; - is standard input
    #[arg(long, value_name = "RECORD")]
    stream: Option<PathBuf>,
    #[command(flatten)]
    run: Run,
}

#[derive(Args, Debug)]
struct Rehold {
    /// The record; - is standard input
    record: PathBuf,
    /// The outing file
    outing: PathBuf,
    /// Table of every full dwell and channel; - is standard output
    #[arg(long, value_name = "FILE")]
    csv: Option<PathBuf>,
    /// A new session file
    #[arg(long, value_name = "FILE")]
    session: Option<PathBuf>,
    /// Obey the record's own take, span and void: gives the driven session again
    #[arg(long)]
    as_driven: bool,
    /// Other target speeds, km/h
    #[arg(long, value_name = "KMH", value_parser = positive, value_delimiter = ',')]
    target: Vec<f64>,
    /// Another half width of the window, km/h
    #[arg(long, value_name = "KMH", value_parser = positive)]
    tolerance: Option<f64>,
    /// Another settling time, s
    #[arg(long, value_name = "SECONDS", value_parser = not_negative)]
    settle: Option<f64>,
    /// Another length of a dwell, s
    #[arg(long, value_name = "SECONDS", value_parser = positive)]
    dwell: Option<f64>,
}

#[derive(Args, Debug)]
struct Reduce {
    /// Session files of one car and baseline
    #[arg(required = true)]
    sessions: Vec<PathBuf>,
    /// One page of HTML with pictures, tables and methods; - is standard output
    #[arg(long, value_name = "FILE")]
    report: Option<PathBuf>,
    /// Tables in long form; - is standard output
    #[arg(long, value_name = "FILE")]
    csv: Option<PathBuf>,
    /// Everything as JSON; - is standard output
    #[arg(long, value_name = "FILE")]
    json: Option<PathBuf>,
    /// Speed at which pressures and forces are stated, km/h [default: the first target]
    #[arg(long, value_name = "KMH", value_parser = positive)]
    at: Option<f64>,
    /// Compare with this configuration instead
    #[arg(long, value_name = "LETTER")]
    baseline: Option<String>,
}

#[derive(Args, Debug)]
struct Hose {
    /// Length of the tube, m
    #[arg(long, value_name = "M", value_parser = positive)]
    length: f64,
    /// Its bore, mm
    #[arg(long, value_name = "MM", value_parser = positive)]
    bore: f64,
    /// Volume of sensor and fittings, cm³
    #[arg(long, value_name = "CM3", value_parser = positive)]
    volume: f64,
    /// Air temperature, °C
    #[arg(long, value_name = "C", default_value_t = 15.0, allow_negative_numbers = true)]
    temperature: f64,
    /// Air pressure, hPa
    #[arg(long, value_name = "HPA", default_value_t = 1013.25, value_parser = positive)]
    pressure: f64,
}

#[derive(Args, Debug)]
struct Cues {
    /// Write them into this directory instead, as 48 kHz 16-bit WAV files; no other file is overwritten
    #[arg(long, value_name = "DIR")]
    write: Option<PathBuf>,
    /// Only this one: window, steady, held, kept, refused, slow, fast, next, done, trouble or guidance
    #[arg(long, value_name = "WORD")]
    only: Option<String>,
    /// A WAV file of at most 5 s in place of a sound
    #[arg(long, value_name = "WORD=FILE", value_parser = replacement)]
    replace: Vec<(String, PathBuf)>,
}

fn replacement(text: &str) -> Result<(String, PathBuf), String> {
    match text.split_once('=') {
        Some((word, file)) if !word.is_empty() && !file.is_empty() => Ok((word.to_string(), PathBuf::from(file))),
        _ => Err(format!("`{text}` is not WORD=FILE, such as kept=bell.wav")),
    }
}

fn number(text: &str) -> Result<f64, String> {
    text.parse::<f64>().ok().filter(|v| v.is_finite() && *v < 1e6).ok_or_else(|| format!("`{text}` is no number"))
}

fn positive(text: &str) -> Result<f64, String> {
    number(text).and_then(|v| if v > 0.0 { Ok(v) } else { Err("must be above 0".to_string()) })
}

fn not_negative(text: &str) -> Result<f64, String> {
    number(text).and_then(|v| if v >= 0.0 { Ok(v) } else { Err("must not be below 0".to_string()) })
}

/// How the program ends.
enum Outcome {
    Done,
    Misused(Trouble),
    Degraded(Vec<String>),
    Problems(Vec<Trouble>),
}

impl From<Trouble> for Outcome {
    fn from(trouble: Trouble) -> Self {
        Self::Problems(vec![trouble])
    }
}

/// Runs the program on these words and gives its exit status.
pub fn run(words: impl IntoIterator<Item = std::ffi::OsString>) -> u8 {
    let words = match Words::try_parse_from(words) {
        Ok(words) => words,
        Err(e) => {
            let _ = e.print();
            return u8::try_from(e.exit_code()).unwrap_or(2);
        }
    };
    let outcome = match words.command.unwrap_or_else(|| Word::Rehearse(Rehearse { seed: 1, ..Rehearse::default() })) {
        Word::Rehearse(words) => rehearse(&words),
        Word::Drive(words) => drive(&words),
        Word::Listen { port } => listen(port.as_deref()),
        Word::Check { files } => check_files(&files),
        Word::Rehold(words) => rehold_record(words),
        Word::Reduce(words) => reduce_sessions(words),
        Word::Hose(words) => hose(&words),
        Word::Cues(words) => ended(cues::cues(&cues::Task {
            write: words.write,
            only: words.only,
            replacements: words.replace.into_iter().collect(),
        })),
        Word::Completions { shell } => printed(&manual::completions(Words::command(), shell)),
        Word::Manual => printed(&manual::page(Words::command())),
    };
    match outcome {
        Outcome::Done => 0,
        Outcome::Misused(trouble) => {
            say(trouble);
            2
        }
        Outcome::Degraded(what) => {
            what.iter().for_each(|what| say(format!("degraded: {what}")));
            3
        }
        Outcome::Problems(troubles) => {
            for (i, trouble) in troubles.iter().enumerate() {
                say(format!("{}{trouble}", if i > 0 { "\n" } else { "" }));
            }
            1
        }
    }
}

fn ended(result: Result<Ending, Trouble>) -> Outcome {
    match result {
        Ok(Ending::Done) => Outcome::Done,
        Ok(Ending::Degraded(what)) => Outcome::Degraded(what),
        Err(trouble) => trouble.into(),
    }
}

impl Run {
    fn plan(&self, name: &str, rehearsal: bool) -> Plan {
        Plan {
            name: name.to_string(),
            session: self.session.clone(),
            record: !self.no_record,
            unattended: self.unattended,
            seconds: self.seconds,
            rehearsal,
            rig: None,
            keys: self.keys.clone(),
            plain: self.plain,
            mute: self.mute,
            solo: self.solo,
        }
    }
}

// ---------------------------------------------------------------- the commands

/// Rig, car and outing of the simulated van: the same files that `configs/` holds.
pub fn van() -> Result<Setup, Vec<config::Problem>> {
    let source = |path: &str, text: &str| config::Source::new(path, text);
    config::setup(
        &source("configs/van-outing.toml", include_str!("../configs/van-outing.toml")),
        &source("configs/van-rig.toml", include_str!("../configs/van-rig.toml")),
        &source("configs/van.toml", include_str!("../configs/van.toml")),
    )
    .map(|checked| checked.setup)
}

fn rehearse(words: &Rehearse) -> Outcome {
    let setup = match van() {
        Ok(setup) => setup,
        Err(problems) => return Outcome::Problems(files::troubles(&problems)),
    };
    let pace = words.run.fast.unwrap_or(Pace::Times(1.0));
    let feed = Feed::Van(Box::new(simulate::Outing::new(words.seed)), pace);
    ended(outing::run(&setup, feed, &words.run.plan("rehearsal", true)))
}

fn drive(words: &Drive) -> Outcome {
    let setup = match files::setup_and_warnings(&words.outing) {
        Ok((setup, warnings)) => {
            warnings.iter().for_each(|w| eprintln!("{}", w.to_string().replacen("error:", "warning:", 1)));
            setup
        }
        Err(troubles) => return Outcome::Problems(troubles),
    };
    let feed = match &words.stream {
        Some(record) => match Source::open(record, Some(&setup.rig)) {
            Ok(source) => Feed::Record(Box::new(source), words.run.fast.unwrap_or(Pace::Times(1.0))),
            Err(trouble) => return trouble.into(),
        },
        None if words.run.fast.is_some() => {
            let hint = "add --stream RECORD, or leave --fast out: ports go at their own speed";
            return Outcome::Misused(Trouble::new("--fast is for records").hint(hint));
        }
        None => match ports(&setup) {
            Ok(feed) => feed,
            Err(troubles) => return Outcome::Problems(troubles),
        },
    };
    let name = words.outing.file_stem().map_or("outing".into(), |s| s.to_string_lossy().into_owned());
    let plan = Plan { rig: files::rig_of(&words.outing), ..words.run.plan(&name, false) };
    ended(outing::run(&setup, feed, &plan))
}

/// Opens every port of the rig; every one that cannot be opened is told.
fn ports(setup: &Setup) -> Result<Feed, Vec<Trouble>> {
    let (mut readers, mut troubles) = (Vec::new(), Vec::new());
    for (index, port) in setup.rig.ports.iter().enumerate() {
        match serial::open(index, port) {
            Ok(reader) => readers.push(reader),
            Err(trouble) => troubles.push(trouble),
        }
    }
    if troubles.is_empty() { Ok(Feed::Ports(readers)) } else { Err(troubles) }
}

fn listen(device: Option<&str>) -> Outcome {
    match listen::listen(device) {
        Ok(text) => printed(&text),
        Err(trouble) => trouble.into(),
    }
}

/// Text on standard output; a reader that has gone away is no problem.
fn printed(text: &str) -> Outcome {
    files::write(Path::new("-"), text.as_bytes()).map_or_else(Outcome::from, |()| Outcome::Done)
}

fn check_files(paths: &[PathBuf]) -> Outcome {
    let (mut good, mut problems) = (String::new(), Vec::new());
    for path in paths {
        let found = check::check(path);
        found.warnings.iter().for_each(|w| eprintln!("{}", w.to_string().replacen("error:", "warning:", 1)));
        if found.errors.is_empty() {
            good.push_str(&format!("{}: good {}\n", path.display(), found.summary));
        }
        problems.extend(found.errors);
    }
    let printed = printed(&good);
    if problems.is_empty() { printed } else { Outcome::Problems(problems) }
}

fn rehold_record(words: Rehold) -> Outcome {
    if words.csv.is_none() && words.session.is_none() {
        let hint = "say --csv FILE, --csv - or --session FILE";
        return Outcome::Misused(Trouble::new("nothing to write").hint(hint));
    }
    let mut setup = match files::setup_and_warnings(&words.outing) {
        Ok((setup, _)) => setup,
        Err(troubles) => return Outcome::Problems(troubles),
    };
    let outing = &mut setup.outing;
    if !words.target.is_empty() {
        outing.targets_kmh = words.target;
    }
    outing.tolerance_kmh = words.tolerance.unwrap_or(outing.tolerance_kmh);
    outing.settle_s = words.settle.unwrap_or(outing.settle_s);
    outing.dwell_s = words.dwell.unwrap_or(outing.dwell_s);
    let task =
        rehold::Task { record: words.record, csv: words.csv, session: words.session, as_driven: words.as_driven };
    match rehold::rehold(&setup, &task) {
        Ok(found) => told(&found, &task.record),
        Err(trouble) => trouble.into(),
    }
}

/// What a re-hold found, on standard error; more than 1 % of lines lost is a degradation.
fn told(found: &rehold::Found, record: &Path) -> Outcome {
    let [good, rejected, unknown] = found.lines;
    let [dwells, not_held] = found.dwells;
    eprintln!(
        "{}: {good} lines, {rejected} rejected, {} damaged, {unknown} of other ports; {dwells} full dwells, {not_held} not held",
        record.display(),
        found.damaged
    );
    if found.unknown_command > 0 {
        eprintln!("{} commands of the record are not understood and were passed over", found.unknown_command);
    }
    let lost = rejected + found.damaged;
    if lost * 100 > good + lost {
        return Outcome::Degraded(vec![format!("{lost} of {} lines did not parse", good + lost)]);
    }
    Outcome::Done
}

fn reduce_sessions(words: Reduce) -> Outcome {
    let task = reduce::Task {
        sessions: words.sessions,
        report: words.report,
        csv: words.csv,
        json: words.json,
        at_kmh: words.at,
        baseline: words.baseline,
    };
    match reduce::reduce(&task) {
        Ok(degraded) if degraded.is_empty() => Outcome::Done,
        Ok(degraded) => Outcome::Degraded(degraded),
        Err(trouble) => trouble.into(),
    }
}

/// Largest tube that the laminar, long-wave theory is meant for: length m, bore mm, volume cm³.
const LARGEST_TUBE: (f64, f64, f64) = (50.0, 20.0, 1000.0);

fn hose(words: &Hose) -> Outcome {
    let (length, bore, volume) = LARGEST_TUBE;
    let plausible = words.length <= length && words.bore <= bore && words.volume <= volume;
    if !plausible || !(-60.0..=70.0).contains(&words.temperature) || !(300.0..=1200.0).contains(&words.pressure) {
        let hint = format!("up to {length} m, {bore} mm, {volume} cm³, -60 to 70 °C, 300 to 1200 hPa");
        return Trouble::new("no such hose: a value is outside what the theory is meant for").hint(hint).into();
    }
    let tube = Tube { length_m: words.length, bore_mm: words.bore, volume_cm3: words.volume };
    print!("{}", pneumatics::describe(&tube, &Gas::air(words.temperature, words.pressure)));
    Outcome::Done
}
