//! Invented moments of an invented outing with a high-roof van.

use std::sync::Arc;
use steadytap::config::Show;
use steadytap::reduction::workshop::{Point, StepResponse};
use steadytap::screen::bench::{Bench, BenchRow, Calibrating};
use steadytap::screen::findings::Findings;
use steadytap::screen::*;
use steadytap::units::{Quantity, StreamTime};

pub fn face() -> Face {
    Face::default()
}

pub fn with(overlay: Overlay) -> Face {
    Face { overlay, ..face() }
}

pub fn note() -> Overlay {
    let text = "lorry ahead, gusts from the \u{202e}left 漢字".to_string();
    Overlay::Prompt(Prompt { kind: PromptKind::Note, text, complaint: None })
}

fn at(seconds: f64) -> StreamTime {
    StreamTime::from_micros((seconds * 1e6) as i64)
}

fn row(label: &str, channel: &str, quantity: Quantity, level: f64) -> Row {
    let trace = (0..60).map(|i| Some(level + 6.0 * (f64::from(i) * 0.37).sin() + 3.0 * (f64::from(i) * 1.1).cos()));
    Row {
        label: label.into(),
        channel: channel.into(),
        quantity,
        unit: quantity.inside().into(),
        live: Some(level + 3.26),
        held: None,
        fluctuation: None,
        trace: trace.collect(),
        saturated: false,
        stale: false,
        stuck: false,
    }
}

fn rows() -> Vec<Row> {
    vec![
        row("base-high", "p1", Quantity::Pressure, -102.5),
        row("base-low", "p2", Quantity::Pressure, -88.1),
        row("roof-front", "p3", Quantity::Pressure, -310.7),
        row("nose", "p4", Quantity::Pressure, 412.3),
        row("q", "q", Quantity::DynamicPressure, 471.9),
        row("speed", "speed", Quantity::Speed, 100.2),
        row("track", "track", Quantity::Track, 91.0),
    ]
}

fn port(name: &str, lines_per_s: f64) -> PortHealth {
    PortHealth { name: name.into(), state: PortState::Good, lines_per_s, rejected_share: 0.0, last_bad: None }
}

fn message(seconds: f64, weight: Weight, text: &str) -> Message {
    Message { at: at(seconds), weight, text: text.into() }
}

/// Rolling, nothing held yet.
fn base() -> View {
    View {
        title: "Rear flaps (invented)".into(),
        now: at(754.2),
        show: Show { speed: "km/h".into(), pressure: "Pa".into() },
        window: Window {
            state: WindowState::Steady,
            speed_kmh: Some(100.4),
            target_kmh: 100.0,
            tolerance_kmh: 2.0,
            progress: 0.45,
            left_s: 3.3,
            airspeed: false,
        },
        targets_kmh: vec![80.0, 100.0],
        held: None,
        armed: false,
        span: None,
        rows: rows(),
        tag: Tag {
            configuration: "B".into(),
            name: "flaps 120 mm".into(),
            direction: "out",
            by_hand: false,
            pass: 3,
            wanted: 4,
        },
        ports: vec![port("gauge", 50.0), port("gps", 5.0)],
        journal: Journal { file: "rear-flaps.session".into(), trouble: None, recording: true },
        messages: vec![
            message(12.0, Weight::Good, "zero 1 taken"),
            message(300.5, Weight::Quiet, "configuration B"),
            message(610.0, Weight::Good, "kept 11 B out 100"),
            message(688.1, Weight::Refused, "dwell rejected: slope"),
        ],
        kept: 11,
        last_segment: Some(11),
        configurations: vec![("A".into(), "bare doors".into()), ("B".into(), "flaps 120 mm".into())],
        stood_s: None,
        asks: None,
        plan: Some("drive B out at 100.0 km/h, pass 3 of 4".into()),
        findings: None,
        bench: None,
        zero_age_s: Some(742.0),
        ended: false,
    }
}

pub fn held(kept: Kept) -> View {
    let mut view = base();
    view.window.state = WindowState::Held;
    view.held = Some(Held { target_kmh: 100.0, t0: at(744.0), t1: at(750.0), kept });
    for row in &mut view.rows {
        row.held = row.live.map(|v| v - 3.26);
        row.fluctuation = Some(4.31);
    }
    if let Kept::OnDisk(id) = kept {
        (view.kept, view.last_segment) = (12, Some(id));
        view.messages.push(message(753.0, Weight::Good, "kept 12 B out 100"));
    }
    view
}

pub fn not_kept() -> View {
    let mut view = held(Kept::Failed(12));
    view.journal.trouble = Some("no space left on device; segments stay in memory".into());
    view.messages.push(message(753.0, Weight::Trouble, "segment 12 could not be written"));
    view
}

pub fn no_speed() -> View {
    let mut view = base();
    (view.window.state, view.window.speed_kmh) = (WindowState::NoSpeed, None);
    (view.kept, view.last_segment, view.zero_age_s) = (0, None, None);
    view.ports[1].state = PortState::NoFix;
    view.messages.clear();
    for row in &mut view.rows[5..] {
        (row.live, row.stale) = (None, true);
        row.trace = vec![None; 60];
    }
    view
}

pub fn off_slow() -> View {
    let mut view = held(Kept::OnDisk(12));
    (view.window.state, view.window.speed_kmh) = (WindowState::TooSlow, Some(87.3));
    view
}

pub fn off_fast() -> View {
    let mut view = held(Kept::OnDisk(12));
    (view.window.state, view.window.speed_kmh) = (WindowState::TooFast, Some(103.6));
    view
}

pub fn settling() -> View {
    let mut view = base();
    view.window = Window { state: WindowState::Settling, progress: 0.4, left_s: 1.2, ..view.window };
    view
}

pub fn steady() -> View {
    let mut view = base();
    for row in &mut view.rows {
        row.fluctuation = Some(3.9);
    }
    view
}

pub fn span() -> View {
    let mut view = off_slow();
    view.span = Some(at(741.7));
    view.tag = Tag { direction: "back", by_hand: true, ..view.tag };
    view.armed = true;
    view
}

pub fn trouble() -> View {
    let mut view = held(Kept::OnDisk(12));
    view.ports[1].state = PortState::Lost;
    view.ports[1].lines_per_s = 0.0;
    view.ports[0].rejected_share = 0.021;
    view.ports[0].last_bad = Some(("12345,1.0,\\x1B[2J".into(), "six fields expected".into()));
    view.rows[0].saturated = true;
    view.rows[2].stuck = true;
    view.rows[5].stale = true;
    view.window = Window { state: WindowState::NoSpeed, speed_kmh: None, ..view.window };
    view.journal.trouble = Some("no space left on device; segments stay in memory".into());
    view.journal.recording = false;
    view.messages.push(message(754.0, Weight::Trouble, "gps lost"));
    view
}

pub fn wrong_baud(channels: usize) -> View {
    let mut view = many(channels);
    view.ports.push(port("heights", 0.0));
    view.ports[0].state = PortState::CheckBaud;
    view.ports[0].rejected_share = 1.0;
    view
}

pub fn many(channels: usize) -> View {
    let mut view = held(Kept::No);
    let one = view.rows[0].clone();
    view.rows = (1..=channels).map(|i| Row { label: format!("contour-{i:02}"), ..one.clone() }).collect();
    view
}

pub fn twenty() -> View {
    let mut view = many(20);
    view.rows[7].saturated = true;
    view
}

pub fn hostile() -> View {
    let mut view = held(Kept::No);
    let names = [
        "\x1b]0;owned\x07tap",
        "\u{202e}hgih-esab",
        "漢字の屋根のタップ前",
        "e\u{301}te\u{301}\u{200b}",
        "\x1b[2J",
        "a\tb\nc",
        "",
    ];
    for (row, name) in view.rows.iter_mut().zip(names) {
        row.label = name.into();
    }
    view.title = "\x1b[31mRear\u{2066} flaps\x07".into();
    view.tag.name = "klappen \u{202e}mm 021".into();
    view.journal.file = "a\x1bb.session".into();
    view.messages.push(message(753.0, Weight::Quiet, "note \x1b]8;;http://x\x07 漢字"));
    view
}

pub fn mph() -> View {
    let mut view = held(Kept::No);
    view.show = Show { speed: "mph".into(), pressure: "inH2O-4C".into() };
    view
}

/// Parked beside the road with a whole day driven.
pub fn layby() -> View {
    let mut view = off_slow();
    view.window = Window { state: WindowState::TooSlow, speed_kmh: Some(0.0), ..view.window };
    view.findings = Some(Arc::new(Findings::of(&crate::reduction_meaning::outing(), 1)));
    (view.kept, view.plan) = (40, None);
    view
}

/// Alone, parked for long enough to read.
pub fn alone_parked() -> View {
    let mut view = layby();
    (view.stood_s, view.asks) = (Some(14.0), Some("C".into()));
    view.plan = Some("park and fit C, then drive C out at 100.0 km/h, pass 1 of 4".into());
    view
}

/// In the workshop: five channels, one of them loud; the first one's traces stand still at a raw 2048.
pub fn bench() -> View {
    let mut view = layby();
    let row = |channel: &str, tap: &str, quantity, raw: f64, value: f64| BenchRow {
        channel: channel.into(),
        tap: tap.into(),
        from: format!("gauge.{channel}"),
        unit: if quantity == Quantity::Speed { "km/h" } else { "Pa" }.into(),
        quantity,
        raw: Some(raw),
        value: Some(value),
        rate_per_s: 50.0,
        noise: [Some(0.31), Some(0.30)],
        zero: (quantity != Quantity::Speed).then_some(-2.4),
        lag_s: 0.05,
        saturated: false,
        stale: false,
        stuck: false,
    };
    let mut rows = vec![
        row("p1", "base-high", Quantity::Pressure, 2048.0, -2.6),
        row("p2", "base-low", Quantity::Pressure, 2051.5, 1.4),
        row("p3", "roof-front", Quantity::Pressure, 2039.0, -8.8),
        row("q", "", Quantity::DynamicPressure, 12.25, -1.1),
        row("speed", "", Quantity::Speed, 0.011, 0.0),
    ];
    rows[2].noise[0] = Some(2.6);
    let wobble = |i: i32| 0.2 * f64::from(i % 7 - 3);
    view.bench = Some(Bench {
        rows,
        fine: (0..400).map(|i| [750.0 + 0.0105 * f64::from(i), 2048.0 + wobble(i), -0.2 + 0.1 * wobble(i)]).collect(),
        air: None,
        coarse: (0..100).map(|i| (729.2 + 0.25 * f64::from(i), 250.0 * (-0.001 * f64::from(i)).exp())).collect(),
    });
    view
}

/// Four points of a straight sensor, 0.5 Pa a count.
pub fn calibration() -> Overlay {
    let point = |raw: f64, reference: f64| Point { raw, reference };
    Overlay::Calibration(Calibrating {
        points: vec![point(2048.0, 0.0), point(2248.2, 100.0), point(2547.9, 250.0), point(1847.9, -100.0)],
        text: "490".into(),
        ..Calibrating::default()
    })
}

pub fn step() -> Overlay {
    Overlay::Step(Some(StepResponse { from_to: [250.0, 0.0], lag_s: 0.12, resolution_s: 0.02 }))
}

pub fn all() -> Vec<View> {
    vec![
        layby(),
        bench(),
        no_speed(),
        off_slow(),
        off_fast(),
        settling(),
        steady(),
        held(Kept::No),
        held(Kept::Writing(12)),
        held(Kept::OnDisk(12)),
        not_kept(),
        span(),
        trouble(),
        wrong_baud(3),
        wrong_baud(16),
        twenty(),
        many(40),
        hostile(),
        mph(),
    ]
}
