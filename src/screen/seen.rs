//! The view of a pipeline: every figure that the screens draw, taken out of the instrument.

use super::bench::{Bench, BenchRow};
use super::figures::Figures;
use super::findings::Findings;
use super::{Held, Journal, Kept, Message, PortHealth, Row, Tag, View, Window, WindowState, text};
use crate::hold::{State, Stretch};
use crate::pipeline::Pipeline;
use crate::pipeline::plan::Planned;
use crate::reduction::plan::Why;
use crate::session::Segment;
use crate::units::{Quantity, StreamTime};
use std::collections::BTreeSet;
use std::sync::Arc;

/// What the instrument's surroundings add to a view.
pub struct Surroundings<'a> {
    /// Stream time now.
    pub now: StreamTime,
    /// Session file and disk.
    pub journal: Journal,
    /// Segments whose line is on a disk.
    pub on_disk: &'a BTreeSet<u32>,
    /// What happened last.
    pub messages: &'a [Message],
    /// What the session says so far.
    pub findings: Option<Arc<Findings>>,
    /// The channel that is looked at in the workshop; none while nobody is there.
    pub workshop: Option<usize>,
    /// The stream is over.
    pub ended: bool,
}

impl View {
    /// What there is to see of `pipeline`.
    pub fn of(pipeline: &Pipeline, around: Surroundings<'_>) -> Self {
        let (setup, logbook, now) = (pipeline.setup(), pipeline.logbook(), around.now);
        let live = logbook.segments().iter().filter(|s| !s.void);
        let planned = crate::pipeline::plan::next(logbook.segments(), &setup.outing, logbook.configuration());
        let stood_s = logbook.stood_s(now);
        Self {
            title: text::safe(&setup.outing.title),
            now,
            show: setup.outing.show.clone(),
            window: window(pipeline, now),
            targets_kmh: pipeline.hold().rule().targets_kmh.clone(),
            held: held(pipeline, &around),
            armed: logbook.armed(),
            span: logbook.span(),
            rows: rows(pipeline, now),
            tag: tag(pipeline, now),
            ports: ports(pipeline, now),
            kept: u32::try_from(live.clone().count()).unwrap_or(u32::MAX),
            last_segment: live.map(|s| s.id).max(),
            configurations: setup.outing.configurations.iter().map(|c| (c.letter.clone(), c.name.clone())).collect(),
            stood_s,
            asks: planned
                .as_ref()
                .map(|next| next.configuration.clone())
                .filter(|letter| letter != logbook.configuration() && stood_s.is_some()),
            plan: plan(pipeline, planned, around.findings.as_deref()),
            bench: around.workshop.map(|channel| bench(pipeline, channel, now)),
            findings: around.findings.clone(),
            zero_age_s: logbook.zero().map(|z| now.since(z.t1) as f64 / 1e6),
            journal: around.journal,
            messages: around.messages.to_vec(),
            ended: around.ended,
        }
    }
}

/// The running stretch; none once the watched channel has been silent for too long.
fn running(pipeline: &Pipeline, now: StreamTime) -> Option<&Stretch> {
    pipeline.hold().state().stretch().filter(|_| pipeline.speed_kmh(now).is_some())
}

fn window(pipeline: &Pipeline, now: StreamTime) -> Window {
    let rule = pipeline.hold().rule();
    let speed_kmh = pipeline.speed_kmh(now);
    let stretch = running(pipeline, now);
    let target_kmh = match stretch {
        Some(s) => rule.targets_kmh[s.target],
        None => aim(pipeline, speed_kmh),
    };
    let (progress, left_us) = stretch.map_or((0.0, 0), |s| {
        let age = now.since(s.t0);
        let (done, whole) = match pipeline.hold().state() {
            State::Settling(_) => (age, rule.settle_us),
            _ => ((age - rule.settle_us).rem_euclid(rule.dwell_us), rule.dwell_us),
        };
        ((done as f64 / whole.max(1) as f64).clamp(0.0, 1.0), (whole - done).max(0))
    });
    let state = match (pipeline.hold().state(), speed_kmh) {
        (_, None) => WindowState::NoSpeed,
        (State::Off, Some(v)) if v < target_kmh => WindowState::TooSlow,
        (State::Off, Some(_)) => WindowState::TooFast,
        (State::Settling(_), _) => WindowState::Settling,
        (State::Steady(_), _) => WindowState::Steady,
        (State::Held(_), _) => WindowState::Held,
    };
    let airspeed = matches!(pipeline.setup().outing.watch, crate::config::Watch::Airspeed(_));
    let tolerance_kmh = rule.tolerance_kmh;
    Window { state, speed_kmh, target_kmh, tolerance_kmh, progress, left_s: left_us as f64 / 1e6, airspeed }
}

/// The target to drive next: the one chosen by key, else the nearest to the speed, else the first.
fn aim(pipeline: &Pipeline, speed_kmh: Option<f64>) -> f64 {
    let rule = pipeline.hold().rule();
    let nearest = || speed_kmh.filter(|v| *v > 20.0).and_then(|v| rule.nearest_kmh(v));
    pipeline.logbook().aim_kmh().or_else(nearest).unwrap_or(rule.targets_kmh[0])
}

fn held(pipeline: &Pipeline, around: &Surroundings<'_>) -> Option<Held> {
    let held = pipeline.logbook().held()?;
    let kept = match held.kept {
        None => Kept::No,
        Some(id) if around.on_disk.contains(&id) => Kept::OnDisk(id),
        Some(id) if around.journal.trouble.is_some() => Kept::Failed(id),
        Some(id) => Kept::Writing(id),
    };
    let s = &held.segment;
    Some(Held { target_kmh: s.target_kmh.unwrap_or(0.0), t0: s.t0, t1: s.t1, kept })
}

/// Channels on taps first, then q, then the others, each in rig order; the watched channel has its large digits.
fn rows(pipeline: &Pipeline, now: StreamTime) -> Vec<Row> {
    let (channels, taps) = (&pipeline.setup().rig.channels, pipeline.logbook().taps());
    let place = |i: &usize| match channels[*i].quantity {
        _ if taps.contains_key(&channels[*i].name) => 0,
        Quantity::DynamicPressure => 1,
        _ => 2,
    };
    let mut order: Vec<usize> = (0..channels.len()).filter(|i| *i != pipeline.watched() || place(i) < 2).collect();
    order.sort_by_key(place);
    let held = pipeline.logbook().held().map(|h| &h.segment);
    order.into_iter().map(|i| row(pipeline, i, held, now)).collect()
}

fn row(pipeline: &Pipeline, i: usize, held: Option<&Segment>, now: StreamTime) -> Row {
    let channel = &pipeline.setup().rig.channels[i];
    let eye = pipeline.eye(i);
    let statistics = held.and_then(|s| s.channels.get(&channel.name));
    let collecting = || pipeline.hold().collecting().and_then(|d| d.interval.channels[i].finish()).and_then(|s| s.sd);
    let zero = match channel.quantity {
        Quantity::Pressure | Quantity::DynamicPressure => pipeline.logbook().zero_of(i),
        _ => 0.0,
    };
    let label = pipeline.logbook().taps().get(&channel.name).unwrap_or(&channel.name);
    // Something else must live for a value that stands still to be stuck.
    let alive = || {
        (0..pipeline.setup().rig.channels.len())
            .any(|k| pipeline.eye(k).is_some_and(|e| !e.stale(now) && !e.still(now)))
    };
    let pressure = matches!(channel.quantity, Quantity::Pressure | Quantity::DynamicPressure);
    Row {
        label: text::safe(label),
        channel: channel.name.clone(),
        quantity: channel.quantity,
        unit: text::safe(&channel.unit),
        live: eye.and_then(|e| e.live()).map(|x| x - zero),
        held: statistics.map(|s| s.mean - zero),
        fluctuation: statistics.map_or_else(collecting, |s| s.sd),
        trace: eye.map(|e| e.trace(now)).unwrap_or_default(),
        saturated: eye.is_some_and(|e| e.saturated(now)),
        stale: eye.is_some_and(|e| e.stale(now)),
        stuck: pressure && eye.is_some_and(|e| e.still(now)) && alive(),
    }
}

fn tag(pipeline: &Pipeline, now: StreamTime) -> Tag {
    let (logbook, outing) = (pipeline.logbook(), &pipeline.setup().outing);
    let letter = logbook.configuration();
    let name = outing.configurations.iter().find(|c| c.letter == letter).map_or("", |c| c.name.as_str());
    let window = window(pipeline, now);
    let stretch = running(pipeline, now).filter(|s| s.complete > 0).map(|_| pipeline.hold().stretches());
    Tag {
        configuration: text::safe(letter),
        name: text::safe(name),
        direction: logbook.direction().word(),
        by_hand: logbook.by_hand().is_some(),
        pass: logbook.pass(window.target_kmh, stretch),
        wanted: outing.passes,
    }
}

/// What is still wanted comes first; then what would narrow the widest interval most.
fn plan(pipeline: &Pipeline, planned: Option<Planned>, findings: Option<&Findings>) -> Option<String> {
    let (logbook, outing) = (pipeline.logbook(), &pipeline.setup().outing);
    let fitted = logbook.configuration();
    let words = |letter: &str, direction: &str, kmh: f64| {
        let fit = if letter == fitted { String::new() } else { format!("park and fit {}, then ", text::safe(letter)) };
        let figures = Figures::of(Quantity::Speed, &outing.show);
        format!("{fit}drive {} {direction} at {} {}", text::safe(letter), figures.short(kmh), figures.unit())
    };
    if let Some(next) = planned {
        let drive = words(&next.configuration, next.direction.word(), next.target_kmh);
        return Some(format!("{drive}, pass {} of {}", next.pass, outing.passes));
    }
    let next = findings?.reduction.as_ref().ok()?.next.as_ref()?;
    let drive = words(&next.configuration, next.direction.word(), next.target_kmh);
    Some(match &next.why {
        Why::NotDriven => format!("{drive}: it has no pass yet"),
        Why::Narrows { tap, .. } => format!("{drive}: {} is undecided", text::safe(tap)),
    })
}

/// What the workshop sees, with the traces of one channel.
fn bench(pipeline: &Pipeline, marked: usize, now: StreamTime) -> Bench {
    let setup = pipeline.setup();
    let zero_of = |i: usize| pipeline.logbook().zero().and_then(|z| z.channels.get(&setup.rig.channels[i].name));
    let row = |(i, channel): (usize, &crate::config::Channel)| {
        let seen = row(pipeline, i, None, now);
        let eye = pipeline.eye(i);
        let (rate_per_s, noise) = eye.map_or((0.0, None), |e| e.rate_and_noise(now));
        let newest = eye.and_then(|e| e.fine().next_back());
        BenchRow {
            channel: text::safe(&channel.name),
            tap: pipeline.logbook().taps().get(&channel.name).map(|t| text::safe(t)).unwrap_or_default(),
            from: text::safe(&format!("{}.{}", channel.port, channel.field)),
            unit: text::safe(&channel.unit),
            quantity: channel.quantity,
            raw: newest.map(|s| s.raw),
            value: newest.map(|s| s.value),
            rate_per_s,
            noise: [noise, zero_of(i).and_then(|s| s.sd)],
            zero: zero_of(i).map(|s| s.mean).filter(|_| channel.quantity.inside() == "Pa"),
            lag_s: channel.lag_s,
            saturated: seen.saturated,
            stale: seen.stale,
            stuck: seen.stuck,
        }
    };
    let zero = pipeline.logbook().zero_of(marked.min(setup.rig.channels.len() - 1));
    let eye = pipeline.eye(marked);
    let (fine, coarse) = eye.map_or((Vec::new(), Vec::new()), |eye| {
        let fine = eye.fine().map(|s| [s.at.seconds(), s.raw, s.value - zero]).collect();
        (fine, eye.coarse().map(|(t, value)| (t, value - zero)).collect())
    });
    let air = Some(pipeline.logbook().stated_air());
    Bench { air, rows: setup.rig.channels.iter().enumerate().map(row).collect(), fine, coarse }
}

fn ports(pipeline: &Pipeline, now: StreamTime) -> Vec<PortHealth> {
    let ports = pipeline.setup().rig.ports.iter().enumerate();
    ports
        .map(|(i, port)| {
            let health = pipeline.health(i);
            let escaped = |line: &[u8]| {
                let mut out = Vec::new();
                crate::stream::record::escape_into(&mut out, line);
                String::from_utf8_lossy(&out).into_owned()
            };
            PortHealth {
                name: port.name.clone(),
                state: health.condition(now),
                lines_per_s: health.lines_per_s(now),
                rejected_share: health.rejected_share(now),
                last_bad: health.last_bad().map(|(line, why)| (escaped(line), why.to_string())),
            }
        })
        .collect()
}
