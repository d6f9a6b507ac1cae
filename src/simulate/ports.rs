//! The wires: readings and motion → the bytes of the gauge and of the GPS, with the moment each line ends.
//!
//! The gauge is an invented microcontroller (columns at 50 Hz after one banner line); the GPS sends NMEA 0183
//! RMC at 5 Hz and GGA at 1 Hz. Faults act here, on bytes, as they do on the road.

use super::chance::{Chance, RATE_HZ};
use super::road::Motion;
use super::van::{Reading, TAP_RANGE_PA, altitude_m};
use super::{Fault, FaultKind, Moment};
use crate::units::{KMH_PER_KNOT, KMH_PER_M_S, StreamTime};

/// The gauge's port in the rig.
pub const GAUGE: &str = "gauge";
/// The GPS's port in the rig.
pub const GPS: &str = "gps";

const STEP_US: i64 = 1_000_000 / RATE_HZ as i64;
/// A line is whole so long after its sample (the van's lag counts the mean, 7 ms, in): the wire, then what the USB
/// adapter adds (up to), µs.
const GAUGE_WIRE_US: i64 = 6_000;
const GAUGE_JITTER_US: u64 = 2_000;
const GPS_WIRE_US: i64 = 60_000;
const GPS_JITTER_US: u64 = 8_000;
const GGA_AFTER_US: i64 = 10_000;
/// Every so many lines the wire disturbs one.
const DISTURBED_EVERY: u64 = 20_011;
const BANNER: &[u8] = b"# pressure gauge, five taps and q, 50 lines a second\r\n";

/// The moment of a step of time.
pub(super) fn moment_of(tick: u64) -> StreamTime {
    StreamTime::from_micros(tick as i64 * STEP_US)
}

fn active(faults: &[Fault], at: StreamTime, kind: FaultKind) -> bool {
    faults.iter().any(|f| f.kind == kind && f.from <= at && at < f.to)
}

/// The gauge and its cable.
#[derive(Clone, Debug)]
pub(super) struct Gauge {
    jitter: Chance,
    garbage: Chance,
    lines: u64,
    /// Step at which the controller started; none while it has no power.
    started: Option<u64>,
    stuck_pa: Option<f64>,
}

impl Gauge {
    pub(super) fn new(seed: u64) -> Self {
        Self { jitter: Chance::new(seed, 40), garbage: Chance::new(seed, 41), lines: 0, started: None, stuck_pa: None }
    }

    /// What the port brings of one step's sample.
    pub(super) fn step(&mut self, tick: u64, reading: Reading, faults: &[Fault], out: &mut Vec<Moment>) {
        let now = moment_of(tick);
        let at = now.plus(GAUGE_WIRE_US + self.jitter.below(GAUGE_JITTER_US) as i64);
        let unplugged = active(faults, now, FaultKind::Unplugged);
        match (self.started, unplugged) {
            (None, true) => return,
            (Some(started), true) => {
                self.started = None;
                let mut bytes = columns(tick - started, &reading).into_bytes();
                bytes.truncate(bytes.len() / 2);
                out.push(Moment::Line { at, port: GAUGE, bytes });
                out.push(Moment::Event { at: at.plus(1_000), port: GAUGE, word: "lost" });
                return;
            }
            (None, false) => self.start(tick, at.plus(-1_000), out),
            (Some(_), false) => {
                let reset = active(faults, now, FaultKind::Reset);
                if reset && !active(faults, moment_of(tick - 1), FaultKind::Reset) {
                    self.start(tick, at.plus(-1_000), out);
                }
            }
        }
        if active(faults, now, FaultKind::Silent(GAUGE)) {
            return;
        }
        let bytes = self.line(tick, reading, faults);
        out.push(Moment::Line { at, port: GAUGE, bytes });
    }

    /// Power comes: the port is found again (unless this is the beginning), the controller greets, its clock is zero.
    fn start(&mut self, tick: u64, at: StreamTime, out: &mut Vec<Moment>) {
        if self.lines > 0 && self.started.is_none() {
            out.push(Moment::Event { at, port: GAUGE, word: "found" });
        }
        self.started = Some(tick);
        out.push(Moment::Line { at, port: GAUGE, bytes: BANNER.to_vec() });
    }

    fn line(&mut self, tick: u64, mut reading: Reading, faults: &[Fault]) -> Vec<u8> {
        let now = moment_of(tick);
        self.lines += 1;
        if active(faults, now, FaultKind::WrongBaud) {
            return self.noise();
        }
        if active(faults, now, FaultKind::Saturated) {
            reading.taps_pa[3] = TAP_RANGE_PA[0];
        }
        self.stuck_pa = active(faults, now, FaultKind::Stuck).then(|| self.stuck_pa.unwrap_or(reading.taps_pa[1]));
        reading.taps_pa[1] = self.stuck_pa.unwrap_or(reading.taps_pa[1]);
        let mut text = columns(tick - self.started.unwrap_or(tick), &reading);
        if active(faults, now, FaultKind::ExtraField) {
            text.push_str(",0.00");
        }
        let mut bytes = text.into_bytes();
        if self.lines.is_multiple_of(7) && active(faults, now, FaultKind::Hostile) {
            bytes = hostile(self.lines / 7);
        }
        if self.lines.is_multiple_of(DISTURBED_EVERY) {
            let place = self.garbage.below(bytes.len() as u64) as usize;
            bytes[place] |= 0x80;
        }
        bytes.extend(b"\r\n");
        bytes
    }

    /// What a wrong speed makes of a line: bytes with high bits; that a line feed ends them is mere chance.
    fn noise(&mut self) -> Vec<u8> {
        let mut bytes: Vec<u8> = (0..24).map(|_| 0x80 | self.garbage.below(128) as u8).collect();
        bytes.push(b'\n');
        bytes
    }
}

/// Bytes that a terminal would obey if they were shown as they are, and numbers that are none.
fn hostile(number: u64) -> Vec<u8> {
    const LINES: [&[u8]; 5] =
        [b"\x00\x00\x00", b"\x1b]0;x\x07", b"\x1b[2J\x1b[31m1,2,3", b"nan,inf,1e999,0x10,,,,,,", b"=1+1\x07\\\x7f"];
    LINES[(number % LINES.len() as u64) as usize].to_vec()
}

fn columns(ticks_up: u64, reading: &Reading) -> String {
    let mut text = (ticks_up * 1000 / u64::from(RATE_HZ)).to_string();
    let taps = reading.taps_pa.iter().map(|v| (*v, 2));
    let rest = [(reading.q_pa, 2), (reading.temperature_c, 2), (reading.barometer_hpa, 2), (reading.humidity_pct, 1)];
    for (value, decimals) in taps.chain(rest) {
        text.push(',');
        text.push_str(&format!("{value:.decimals$}"));
    }
    text
}

/// The GPS receiver.
#[derive(Clone, Debug)]
pub(super) struct Gps {
    jitter: Chance,
    noise: Chance,
}

/// Start of the invented road: in the open ocean, so that nobody takes it for a real one. Degrees north and west.
const START_NORTH_DEG: f64 = 45.0;
const START_WEST_DEG: f64 = 30.0;
/// Metres in a degree of latitude, and of longitude at 45° (sphere of 6371 km).
const METRES_PER_DEG_NORTH: f64 = 111_195.0;
const METRES_PER_DEG_EAST: f64 = 78_627.0;
/// How far the road lies north of the start, m: nothing but a place to put it.
const ROAD_NORTH_M: f64 = 240.0;
const SPEED_NOISE_KN: f64 = 0.02;
const TRACK_NOISE_DEG: f64 = 0.3;
/// Below this the receiver gives no track, m/s.
const NO_TRACK_BELOW_M_S: f64 = 0.5;
/// UTC of stream time 0 in the sentences: 2026-06-14 09:12:00.
const START_OF_DAY_S: i64 = (9 * 60 + 12) * 60;
const DATE: &str = "140626";

impl Gps {
    pub(super) fn new(seed: u64) -> Self {
        Self { jitter: Chance::new(seed, 50), noise: Chance::new(seed, 51) }
    }

    /// What the port brings of one step: nothing but at every tenth.
    pub(super) fn step(&mut self, tick: u64, motion: &Motion, faults: &[Fault], out: &mut Vec<Moment>) {
        if !tick.is_multiple_of(10) {
            return;
        }
        let now = moment_of(tick);
        let at = now.plus(GPS_WIRE_US + self.jitter.below(GPS_JITTER_US) as i64);
        let speed_kn = motion.speed_m_s * KMH_PER_M_S / KMH_PER_KNOT + SPEED_NOISE_KN * self.noise.normal();
        let track_deg = (motion.track_deg + TRACK_NOISE_DEG * self.noise.normal()).rem_euclid(360.0);
        let altitude = altitude_m(motion.east_m) + 0.3 * self.noise.normal();
        if active(faults, now, FaultKind::Silent(GPS)) {
            return;
        }
        let fix = !active(faults, now, FaultKind::NoFix);
        let course = (motion.speed_m_s >= NO_TRACK_BELOW_M_S).then_some(track_deg);
        let mut send = |at, body: String| {
            let mut bytes = sentence(&body);
            if active(faults, now, FaultKind::BadChecksum) {
                bytes[8] ^= 1;
            }
            out.push(Moment::Line { at, port: GPS, bytes });
        };
        send(at, if fix { rmc(now, speed_kn.abs(), course, motion.east_m) } else { rmc_void(now) });
        if tick.is_multiple_of(u64::from(RATE_HZ)) {
            let body = if fix { gga(now, altitude, motion.east_m) } else { gga_void(now) };
            send(at.plus(GGA_AFTER_US), body);
        }
    }
}

fn rmc(now: StreamTime, speed_kn: f64, track_deg: Option<f64>, east_m: f64) -> String {
    let track = track_deg.map_or(String::new(), |deg| format!("{deg:.2}"));
    format!("GPRMC,{},A,{},{speed_kn:.2},{track},{DATE},,,A", clock(now), position(east_m))
}

fn rmc_void(now: StreamTime) -> String {
    format!("GPRMC,{},V,,,,,,,{DATE},,,N", clock(now))
}

fn gga(now: StreamTime, altitude_m: f64, east_m: f64) -> String {
    format!("GPGGA,{},{},1,10,0.9,{altitude_m:.1},M,47.0,M,,", clock(now), position(east_m))
}

fn gga_void(now: StreamTime) -> String {
    format!("GPGGA,{},,,,,0,00,,,M,,M,,", clock(now))
}

/// `hhmmss.ss`
fn clock(now: StreamTime) -> String {
    let hundredths = now.micros() / 10_000;
    let seconds = START_OF_DAY_S + hundredths / 100;
    format!("{:02}{:02}{:02}.{:02}", seconds / 3600 % 24, seconds / 60 % 60, seconds % 60, hundredths % 100)
}

/// `ddmm.mmmm,N,dddmm.mmmm,W`
fn position(east_m: f64) -> String {
    let north = minutes_e4(START_NORTH_DEG + ROAD_NORTH_M / METRES_PER_DEG_NORTH);
    let west = minutes_e4(START_WEST_DEG - east_m / METRES_PER_DEG_EAST);
    let split = |m: u64| (m / 600_000, m / 10_000 % 60, m % 10_000);
    let ((nd, nm, nf), (wd, wm, wf)) = (split(north), split(west));
    format!("{nd:02}{nm:02}.{nf:04},N,{wd:03}{wm:02}.{wf:04},W")
}

/// Degrees in ten-thousandths of a minute.
fn minutes_e4(deg: f64) -> u64 {
    (deg * 600_000.0).round() as u64
}

/// `$body*hh` CR LF, hh the exclusive or of the body's bytes (NMEA 0183).
fn sentence(body: &str) -> Vec<u8> {
    let sum = body.bytes().fold(0, |sum, byte| sum ^ byte);
    format!("${body}*{sum:02X}\r\n").into_bytes()
}
