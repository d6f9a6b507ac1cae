//! Every starting point in `configs/` is good and runs on a stream of its own in `sample-streams/`, and its reduction finds what was put into it.
//!
//! The streams are made here from an invented drive (`STEADYTAP_UPDATE=1` writes them anew): two rounds of A and B, each out and back, with a zero
//! before each, in a wind of 1 m/s.

use crate::reduction_outings::Chance;
use crate::same_bytes_same_session::{program, read};
use crate::samples_and_readme::is_as_made;
use std::path::{Path, PathBuf};
use steadytap::reduction::compare::{Comparison, Verdict};
use steadytap::reduction::{Options, Reduction, reduce};
use steadytap::stream::nmea::checksum;

const DENSITY: f64 = 1.2075;
const STEP_S: f64 = 0.2;
const HEAD_WIND_M_S: f64 = 1.0;
/// Invented sensor offsets, Pa, and noise.
const OFFSET_PA: f64 = 1.7;
const NOISE_PA: f64 = 0.4;

/// One moment of the drive.
#[derive(Clone, Copy)]
pub struct Moment {
    t: f64,
    speed_m_s: f64,
    track_deg: f64,
    changed: bool,
    q: f64,
}

/// What a board prints at a moment: its port's name and its line.
pub type Board = fn(&Moment, &mut dyn FnMut(f64) -> f64) -> Vec<(&'static str, String)>;

/// Bench curve of the radiator in `core-car.toml`, about 12 v + 15.8 v² fitted; the drop at a velocity between its points.
fn drop_at(v: f64) -> f64 {
    let points = [[0.0, 0.0], [1.0, 38.0], [2.0, 104.0], [3.0, 197.0], [4.5, 389.0], [6.0, 640.0]];
    let i = points.iter().position(|p| p[0] >= v).unwrap_or(5).max(1);
    let ([x0, y0], [x1, y1]) = (points[i - 1], points[i]);
    y0 + (y1 - y0) * (v - x0) / (x1 - x0)
}

pub fn hand(m: &Moment, noisy: &mut dyn FnMut(f64) -> f64) -> Vec<(&'static str, String)> {
    let cp = if m.changed { -0.16 } else { -0.22 };
    vec![("board", format!("p1={:.2}", noisy(cp * m.q)))]
}

fn two(m: &Moment, noisy: &mut dyn FnMut(f64) -> f64) -> Vec<(&'static str, String)> {
    let high = if m.changed { -0.17 } else { -0.22 };
    let mv = |pa: f64| 2500.0 + 2.0 * pa;
    vec![
        ("front", format!("{{\"q\":{:.2},\"p1\":{:.2},\"t\":18.1}}", noisy(m.q), noisy(0.29 * m.q))),
        ("rear", format!("{:.0},{:.2},{:.2}", 1000.0 * m.t, mv(noisy(high * m.q)), mv(noisy(-0.24 * m.q)))),
    ]
}

fn core(m: &Moment, noisy: &mut dyn FnMut(f64) -> f64) -> Vec<(&'static str, String)> {
    let airspeed = (2.0 * m.q / DENSITY).sqrt();
    let velocity = airspeed * if m.changed { 0.12 } else { 0.08 };
    let front = 0.62 * m.q;
    vec![(
        "gauge",
        format!("{:.0},{:.2},{:.2},{:.2}", 1000.0 * m.t, noisy(front), noisy(front - drop_at(velocity)), noisy(m.q)),
    )]
}

fn height(m: &Moment, noisy: &mut dyn FnMut(f64) -> f64) -> Vec<(&'static str, String)> {
    // Lift that grows with q: rear 0.35 m² without the spoiler and 0.10 m² with it, over 52 N/mm.
    let rear = if m.changed { 0.10 } else { 0.35 } * m.q / 52.0;
    let roof = if m.changed { -0.35 } else { -0.55 };
    vec![(
        "gauge",
        format!(
            "{:.0},{:.2},{:.2},{:.2},{:.3},{:.3}",
            1000.0 * m.t,
            noisy(roof * m.q),
            noisy(-0.2 * m.q),
            noisy(m.q),
            300.0 + 0.02 * (noisy(0.0) - OFFSET_PA),
            320.0 + rear + 0.02 * (noisy(0.0) - OFFSET_PA)
        ),
    )]
}

fn gps(m: &Moment) -> String {
    let (knots, seconds) = (m.speed_m_s * 3.6 / 1.852, 9 * 3600 + m.t as u32);
    let (h, min, s) = (seconds / 3600, seconds / 60 % 60, f64::from(seconds % 60) + m.t.fract());
    let body =
        format!("GPRMC,{h:02}{min:02}{s:05.2},A,5012.0000,N,00812.0000,E,{knots:.3},{:.1},140626,,,A", m.track_deg);
    format!("${body}*{:02X}", checksum(body.as_bytes()))
}

/// The whole drive as a record.
pub fn record(board: Board) -> String {
    let mut chance = Chance(0x5eed);
    let mut out = String::from("# steadytap record 1\n# started 2026-06-14T09:00:00.000Z\n");
    let (mut t, mut step) = (0.0, 0u32);
    let mut drive = |seconds: f64, speed: &dyn Fn(f64) -> f64, (track_deg, changed): (f64, bool), out: &mut String| {
        let from: f64 = t;
        while t < from + seconds - 1e-9 {
            let speed_m_s = speed(t - from);
            let wind = if track_deg == 90.0 { HEAD_WIND_M_S } else { -HEAD_WIND_M_S };
            let gust = 0.2 * chance.normal();
            let air = if speed_m_s > 0.5 { speed_m_s + wind + gust } else { 0.0 };
            let m = Moment { t, speed_m_s, track_deg, changed, q: 0.5 * DENSITY * air * air };
            let mut noisy = |pa: f64| pa + OFFSET_PA + NOISE_PA * chance.normal();
            for (port, line) in board(&m, &mut noisy) {
                out.push_str(&format!("{t:.6} {port} {line}\n"));
            }
            if step.is_multiple_of(2) {
                out.push_str(&format!("{:.6} gps {}\n", t + 0.05, gps(&m)));
            }
            step += 1;
            t += STEP_S;
        }
        t
    };
    for round in 0..4 {
        let changed = round % 2 == 1;
        let end = drive(14.0, &|_| 0.0, (90.0, changed), &mut out);
        out.push_str(&format!("{:.6} @configuration {}\n", end - 0.1, if changed { "B" } else { "A" }));
        out.push_str(&format!("{:.6} @zero\n", end - 0.05));
        for track in [90.0, 270.0] {
            drive(8.0, &|s| 25.0 * s / 8.0, (track, changed), &mut out);
            let end = drive(10.0, &|s| 25.0 + 0.1 * (s * 1.3).sin(), (track, changed), &mut out);
            out.push_str(&format!("{:.6} @take\n", end - 0.1));
            drive(6.0, &|s| 25.0 * (1.0 - s / 6.0), (track, changed), &mut out);
        }
    }
    let end = drive(14.0, &|_| 0.0, (90.0, false), &mut out);
    out.push_str(&format!("{:.6} @zero\n", end - 0.05));
    out
}

fn root() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
}

/// The stream is as made; the program takes outing and stream and keeps eight passes; their reduction.
fn run(name: &str, board: Board) -> Reduction {
    let stream = format!("sample-streams/{name}.record");
    is_as_made(&stream, record(board).as_bytes());
    let stream = root().join(stream);
    let dir = tempfile::tempdir().unwrap();
    let session = dir.path().join("a.session");
    let outing = root().join(format!("configs/{name}-outing.toml"));
    let rehold = |extra: &[&str]| {
        let paths = [stream.as_path(), outing.as_path(), Path::new("--session"), session.as_path()];
        program().arg("rehold").args(paths).args(extra).output().unwrap()
    };
    let output = rehold(&["--as-driven"]);
    assert!(output.status.success(), "{name}: {}", String::from_utf8_lossy(&output.stderr));
    let reduced = reduce(&[read(&session)], &Options::default()).unwrap();
    assert_eq!(reduced.passes.len(), 8, "{name}: {:?}", reduced.left_out);
    let live = program()
        .args([
            "drive",
            outing.to_str().unwrap(),
            "--stream",
            stream.to_str().unwrap(),
            "--unattended",
            "--fast",
            "max",
        ])
        .args(["--session", dir.path().join("b.session").to_str().unwrap(), "--no-record"])
        .output()
        .unwrap();
    assert!(live.status.success(), "{name}: {}", String::from_utf8_lossy(&live.stderr));
    assert!(String::from_utf8_lossy(&live.stdout).contains("kept 8 "), "{name}");
    reduced
}

fn changed<'r>(r: &'r Reduction, tap: &str, by_cp: f64) -> &'r Comparison {
    let c = r.comparisons.iter().find(|c| c.tap == tap).unwrap_or_else(|| panic!("{tap} is compared"));
    let half = c.delta.u95.expect("an interval");
    assert!((c.delta.value - by_cp).abs() <= 1.5 * half, "{tap}: {} ± {half}, put in {by_cp}", c.delta.value);
    c
}

#[test]
fn one_sensor_and_a_receiver_find_a_change_without_a_probe() {
    let r = run("hand", hand);
    assert_eq!(changed(&r, "base-high", 0.06).verdict, Verdict::Changed);
    assert!(r.flags.iter().any(|f| f.contains("no probe")), "{:?}", r.flags);
}

#[test]
fn two_boards_feed_one_outing_by_airspeed() {
    let r = run("two", two);
    assert_eq!(changed(&r, "base-high", 0.05).verdict, Verdict::Changed);
    assert_eq!(changed(&r, "base-low", 0.0).verdict, Verdict::NoChange);
    assert!((r.probe_factor.k - 1.0).abs() < 0.02, "{:?}", r.probe_factor);
}

#[test]
fn a_core_shows_its_flow() {
    let r = run("core", core);
    let ratio = |letter: &str, difference| {
        let row = r.cores.iter().find(|c| c.configuration == letter && c.difference == difference);
        row.unwrap_or_else(|| panic!("{:?}", r.flags)).ratio
    };
    // The curve is drawn straight between the bench points here and fitted there: 3 % apart at most.
    assert!((ratio("A", false).value - 0.08).abs() < 0.03 * 0.08, "{:?}", ratio("A", false));
    assert!((ratio("B", false).value - 0.12).abs() < 0.03 * 0.12, "{:?}", ratio("B", false));
    assert!(ratio("B", true).value > 10.0 * ratio("B", true).u95.unwrap());
}

#[test]
fn ride_height_gives_axle_loads_beside_the_taps() {
    let r = run("height", height);
    let row = r.balance.iter().find(|b| b.difference).expect("a difference");
    let rear = row.ride_height[1].expect("a sensor");
    let expected = (0.10 - 0.35) * r.at_q_pa;
    assert!((rear.value - expected).abs() <= 1.6 * rear.u95.unwrap(), "{rear:?} {expected}");
    assert!(row.taps[1].value < 0.0, "{:?}", row.taps);
    changed(&r, "roof-rear", 0.20);
}
