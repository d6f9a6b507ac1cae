//! One run of the instrument, from opening the session to the printed reduction; with a screen or without.

use super::engine::{Arrival, Engine, Outcome};
use super::feed::{Feed, Running, Sender};
use super::journal::Journal;
use super::recorder::Recorder;
use super::watch::Watch;
use super::{Trouble, clock, files, live, rehold, say, terminal};
use crate::config::Setup;
use crate::pipeline::{Event, What};
use crate::session::{Entry, Session};
use crate::units::StreamTime;
use std::io::Write;
use std::path::{Path, PathBuf};
use std::thread::JoinHandle;
use std::time::{Duration, Instant};

/// How a run was asked for.
#[derive(Clone, Debug)]
pub struct Plan {
    /// Name of the outing, for the default file name.
    pub name: String,
    /// Session file; none: a new one in the data directory.
    pub session: Option<PathBuf>,
    /// Write a record beside it.
    pub record: bool,
    /// No screen; every good dwell is kept.
    pub unattended: bool,
    /// Stop after so many seconds of stream time.
    pub seconds: Option<f64>,
    /// The simulated van: its scripted trouble is no degradation.
    pub rehearsal: bool,
    /// The rig file, which a calibration is written to; none where the rig is built in.
    pub rig: Option<PathBuf>,
    /// A file of keys instead of the one in the configuration directory.
    pub keys: Option<PathBuf>,
    /// Draw with ASCII alone.
    pub plain: bool,
    /// No sound.
    pub mute: bool,
    /// The driver is alone.
    pub solo: bool,
}

/// How a run ended.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Ending {
    /// All well.
    Done,
    /// Finished, but something was degraded; what.
    Degraded(Vec<String>),
}

/// Runs an outing.
///
/// # Errors
/// [`Trouble`] when it cannot begin, or the stream cannot be read on.
pub fn run(setup: &Setup, feed: Feed, plan: &Plan) -> Result<Ending, Trouble> {
    if !plan.unattended {
        terminal::require()?;
    }
    let started = match &feed {
        Feed::Record(source, _) => source.started(),
        Feed::Ports(_) | Feed::Van(..) => Some(clock::rfc3339(clock::utc_now())),
    };
    let path = session_path(plan)?;
    let opened = Journal::open(&path, &rehold::header(setup, started.clone()))?;
    let mut degraded = Vec::new();
    if let Some(torn) = &opened.repaired {
        degraded.push(format!("the session had a torn end; it was moved to {}", torn.display()));
    }
    for damage in opened.before.iter().flat_map(|s| &s.damage).filter(|d| d.what != crate::session::DamageKind::Torn) {
        degraded.push(format!("the session's line {} is left out: {}", damage.line, damage.what));
    }
    degraded.iter().for_each(say);
    let first_started = opened.before.as_ref().map_or(started, |s| s.header.started.clone());
    let recorder = match plan.record {
        true => Some(Recorder::beside(&path, first_started.as_deref())?),
        false => None,
    };
    let ports = matches!(feed, Feed::Ports(_));
    if let Some((free, hours)) = super::space::room(&**opened.journal.storage(), &path, &setup.rig).filter(|_| ports) {
        say(format!("the disk has room for at least {hours:.0} hours of record ({} MiB)", free >> 20));
    }
    let shift_us = opened.before.as_ref().map_or(0, |s| shift(s, ports));
    // A live stream is watched even where nobody looks.
    let seen = !plan.unattended || ports;
    let mut engine =
        Engine::new(setup, opened.journal, opened.before.as_ref(), seen).shifted(shift_us).recording(recorder);
    if ports {
        engine = engine.in_mid_line();
    }
    let mut running = feed.start(&setup.rig);
    let played = running.played.take();
    let engine = if plan.unattended { unattended(engine, running, plan) } else { live::run(engine, running, plan)? };
    if let Some(Ok(played)) = played.filter(JoinHandle::is_finished).map(JoinHandle::join) {
        let tally = played?;
        if tally.damaged * 100 > tally.lines {
            degraded.push(format!("{} of {} lines of the record were damaged", tally.damaged, tally.lines));
        } else if tally.damaged > 0 {
            say(format!("{} damaged lines of the record were passed over", tally.damaged));
        }
        if tally.unknown_command > 0 {
            say(format!("{} commands of the record are not understood and were passed over", tally.unknown_command));
        }
        if tally.unknown_port > 0 {
            say(format!("{} lines of ports that the rig does not name were passed over", tally.unknown_port));
        }
    }
    degraded.extend(degradation(&engine, plan));
    conclude(&engine);
    Ok(if degraded.is_empty() { Ending::Done } else { Ending::Degraded(degraded) })
}

fn session_path(plan: &Plan) -> Result<PathBuf, Trouble> {
    if let Some(path) = &plan.session {
        return Ok(path.clone());
    }
    let directory = files::data_directory().ok_or_else(|| {
        Trouble::new("there is no home directory for the session").hint("say where with --session FILE")
    })?;
    std::fs::create_dir_all(&directory).map_err(|e| {
        Trouble::new(format!("the data directory cannot be made: {e}"))
            .at(directory.display())
            .hint("say where the session goes with --session FILE")
    })?;
    Ok(directory.join(format!("{}-{}.session", plan.name, clock::file_stamp())))
}

/// A session goes on a second after its last entry; with ports, at the time that has passed since it began.
fn shift(session: &Session, ports: bool) -> i64 {
    let last = session.entries.iter().map(time_of).max().unwrap_or(StreamTime::ZERO);
    let after = last.micros() / 1_000_000 * 1_000_000 + 2_000_000;
    let started = session.header.started.as_deref().and_then(|s| chrono::DateTime::parse_from_rfc3339(s).ok());
    let passed = started.map_or(0, |s| clock::utc_now().signed_duration_since(s).num_microseconds().unwrap_or(0));
    if ports { after.max(passed) } else { after }
}

fn time_of(entry: &Entry) -> StreamTime {
    match entry {
        Entry::Session(_) => StreamTime::ZERO,
        Entry::Zero(z) => z.t1,
        Entry::Segment(s) => s.t1,
        Entry::Rejected(r) => r.t1,
        Entry::Void(v) | Entry::Restore(v) => v.t,
        Entry::Correct(c) => c.t,
        Entry::Mark(m) | Entry::Note(m) => m.t,
        Entry::Configuration(c) | Entry::Direction(c) => c.t,
        Entry::Taps(t) => t.t,
        Entry::Air(a) => a.t,
        Entry::Fault(f) => f.t,
        Entry::End(e) => e.t,
    }
}

// ---------------------------------------------------------------- without a screen

fn unattended(mut engine: Engine, running: Running, plan: &Plan) -> Engine {
    stop_on_signals(running.sender.clone(), |to| {
        to.send(Arrival::Stop);
    });
    let mut outcomes = Vec::new();
    let mut first = None;
    let mut watch = Watch::default();
    engine.keep_every(StreamTime::ZERO, &mut outcomes);
    loop {
        match running.arrivals.recv_timeout(Duration::from_millis(200)) {
            Ok(Arrival::End | Arrival::Stop) | Err(std::sync::mpsc::RecvTimeoutError::Disconnected) => break,
            Ok(arrival) => engine.take(arrival, &mut outcomes),
            Err(std::sync::mpsc::RecvTimeoutError::Timeout) => {}
        }
        engine.look_after(Instant::now(), &mut outcomes);
        tell(&mut outcomes);
        for notice in engine.notices() {
            let _ = writeln!(std::io::stdout().lock(), "{} trouble {notice}", engine.pipeline().now());
        }
        if let Some(clock) = running.clock {
            let now = clock.now().plus(engine.shift_us());
            let mut out = std::io::stdout().lock();
            for line in watch.look(engine.pipeline(), now) {
                let _ = writeln!(out, "{line}");
            }
        }
        let now = running.clock.map_or_else(|| engine.pipeline().now(), |c| c.now());
        let first = *first.get_or_insert(if running.clock.is_some() { StreamTime::ZERO } else { now });
        if plan.seconds.is_some_and(|s| now.since(first) as f64 >= s * 1e6) {
            break;
        }
    }
    engine.finish(&mut outcomes);
    tell(&mut outcomes);
    engine
}

/// One line an event on standard output.
fn tell(outcomes: &mut Vec<Outcome>) {
    let mut out = std::io::stdout().lock();
    for outcome in outcomes.drain(..) {
        if let Some(words) = words(&outcome.event, outcome.on_disk) {
            let _ = writeln!(out, "{} {words}", outcome.event.at);
        }
    }
    let _ = out.flush();
}

/// An event in words, for a log; `kept` only when it is on the disk.
fn words(event: &Event, on_disk: bool) -> Option<String> {
    Some(match &event.what {
        What::Entry(entry) => match &**entry {
            Entry::Segment(s) => {
                let kept = if on_disk { "kept" } else { "not-on-disk" };
                let target = s.target_kmh.map_or("span".to_string(), |t| t.to_string());
                format!("{kept} {} {} {} {target}", s.id, s.configuration, s.direction.word())
            }
            Entry::Rejected(r) => format!("rejected {} {}", r.target_kmh, r.why.join(" ")),
            Entry::Zero(z) => format!("zero {}", z.id),
            Entry::Void(v) => format!("void {}", v.segment),
            Entry::Restore(v) => format!("restore {}", v.segment),
            Entry::Correct(c) => format!("correct {}", c.segment),
            Entry::Configuration(c) => format!("configuration {}", c.to),
            Entry::Direction(d) => format!("direction {}", d.to),
            Entry::Fault(f) => format!("{} {}", f.what, f.place),
            Entry::Mark(m) => format!("mark {}", crate::screen::text::safe(&m.text)),
            Entry::Note(m) => format!("note {}", crate::screen::text::safe(&m.text)),
            Entry::Taps(_) => "taps".to_string(),
            Entry::Air(a) => format!("air {} {} {}", a.air.temperature_c, a.air.pressure_hpa, a.air.humidity_pct),
            Entry::End(_) => "end".to_string(),
            Entry::Session(_) => return None,
        },
        What::Window(state) => match state.stretch() {
            Some(_) => format!("{} {}", word_of(state), "window"),
            None => "off window".to_string(),
        },
        What::Refused(why) => format!("refused {why}"),
        What::Dwell { .. } | What::Armed | What::Target(_) | What::SpanBegun => return None,
    })
}

fn word_of(state: &crate::hold::State) -> &'static str {
    use crate::hold::State;
    match state {
        State::Off => "off",
        State::Settling(_) => "settling",
        State::Steady(_) => "steady",
        State::Held(_) => "held",
    }
}

/// A signal that asks to end becomes a stop, in order, with everything kept; what a hang-up means is up to the caller.
pub fn stop_on_signals(sender: Sender, hung_up: impl Fn(&Sender) + Send + 'static) {
    let (ready, is_ready) = std::sync::mpsc::channel::<()>();
    std::thread::spawn(move || {
        let runtime = tokio::runtime::Builder::new_current_thread().enable_all().build();
        let Ok(runtime) = runtime else { return };
        runtime.block_on(wait_for_signal(|| hung_up(&sender), move || drop(ready)));
        sender.send(Arrival::Stop);
    });
    // A signal that comes before anybody waits for it would end the run on the spot.
    let _ = is_ready.recv();
}

#[cfg(unix)]
async fn wait_for_signal(hung_up: impl Fn(), ready: impl FnOnce()) {
    use tokio::signal::unix::{SignalKind, signal};
    let kinds = [SignalKind::interrupt(), SignalKind::terminate(), SignalKind::hangup()];
    let signals = kinds.map(signal);
    ready();
    let [Ok(mut a), Ok(mut b), Ok(mut c)] = signals else { return std::future::pending().await };
    loop {
        tokio::select! { _ = a.recv() => return, _ = b.recv() => return, _ = c.recv() => hung_up() }
    }
}

#[cfg(not(unix))]
async fn wait_for_signal(_: impl Fn(), ready: impl FnOnce()) {
    ready();
    let _ = tokio::signal::ctrl_c().await;
}

// ---------------------------------------------------------------- the end

fn degradation(engine: &Engine, plan: &Plan) -> Vec<String> {
    let mut what = Vec::new();
    let ports = &engine.pipeline().setup().rig.ports;
    for (i, port) in ports.iter().enumerate().filter(|_| !plan.rehearsal) {
        let health = engine.pipeline().health(i);
        if health.losses > 0 {
            what.push(format!("port {} was lost {} times", port.name, health.losses));
        }
        let all = health.good + health.rejected;
        if health.rejected * 100 > all {
            what.push(format!("{} of {all} lines of port {} were rejected", health.rejected, port.name));
        }
    }
    what.extend(engine.journal().trouble().map(str::to_string));
    what.extend(engine.stopped().iter().cloned());
    what
}

/// Prints the reduction and where everything is.
fn conclude(engine: &Engine) {
    if terminal::abandoned() {
        return;
    }
    let show = &engine.pipeline().setup().outing.show;
    let session = engine.journal().contents().session();
    let text = session.map(|s| super::reduce::text(&[s], show));
    let mut out = std::io::stdout().lock();
    let _ = match text {
        Some(Ok(text)) => writeln!(out, "\n{text}"),
        Some(Err(why)) => writeln!(out, "\nno reduction: {why}"),
        None => writeln!(out, "\nno reduction: the session's first line was not written"),
    };
    let _ = writeln!(out, "session {}", absolute(engine.journal().path()).display());
    if let Some(recorder) = engine.recorder() {
        let _ = writeln!(out, "record {}", absolute(recorder.path()).display());
    }
}

fn absolute(path: &Path) -> PathBuf {
    std::path::absolute(path).unwrap_or_else(|_| path.to_path_buf())
}
