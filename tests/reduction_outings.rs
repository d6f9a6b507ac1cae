//! Simulated outings as session values, no bytes: what the reduction is tried on. The van, its taps and its day are invented.

use std::collections::BTreeMap;
use steadytap::config::{
    Air, Car, Channel, Configuration, Convert, LineFormat, Outing, Port, Probe, ProbeFactor, ProbeModel, Rig, Setup,
    Show, Tap, Watch,
};
use steadytap::hold::statistics::{Accumulator, Place};
use steadytap::reduction::air;
use steadytap::session::{
    AirSource, ChannelStatistics, Direction, Entry, Header, SCHEMA, Segment, SegmentAir, Session, Zero,
};
use steadytap::units::{Quantity, StreamTime, micros};

/// Bins of one dwell and of one zero, and their width, s.
pub const BINS: usize = 24;
pub const BIN_S: f64 = 0.5;

/// SplitMix64, and a normal number by Box and Muller.
pub struct Chance(pub u64);

impl Chance {
    pub fn uniform(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let z = (self.0 ^ (self.0 >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        (((z ^ (z >> 31)) >> 11) as f64 + 0.5) / (1u64 << 53) as f64
    }

    pub fn normal(&mut self) -> f64 {
        let (a, b) = (self.uniform(), self.uniform());
        (-2.0 * a.ln()).sqrt() * (std::f64::consts::TAU * b).cos()
    }

    pub fn between(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * self.uniform()
    }
}

fn channel(name: &str, quantity: Quantity) -> Channel {
    Channel {
        name: name.to_string(),
        port: "gauge".to_string(),
        field: name.to_string(),
        quantity,
        unit: quantity.inside().to_string(),
        convert: Convert::Linear { gain: 1.0, offset: 0.0 },
        range: None,
        lag_s: 0.0,
        damping_s: 0.0,
        stale_s: 0.5,
    }
}

/// Name of the channel and of the tap with a number from 0.
pub fn p(i: usize) -> String {
    format!("p{}", i + 1)
}
pub fn tap(i: usize) -> String {
    format!("tap-{}", i + 1)
}

pub fn setup(taps: usize, letters: &[&str]) -> Setup {
    let port = Port {
        name: "gauge".to_string(),
        device: Some("/dev/ttyACM0".to_string()),
        usb: None,
        baud: 115_200,
        format: LineFormat::Pairs,
        columns: Vec::new(),
        dtr: false,
    };
    let mut channels = vec![channel("speed", Quantity::Speed), channel("q", Quantity::DynamicPressure)];
    channels.extend((0..taps).map(|i| channel(&p(i), Quantity::Pressure)));
    let place = |i: usize| Tap {
        name: tap(i),
        at: [3.9, 0.0, 0.5 + 0.2 * i as f64],
        normal: [1.0, 0.0, 0.0],
        area_m2: None,
        group: None,
    };
    Setup {
        rig: Rig { ports: vec![port], channels },
        car: Car {
            name: "High-roof van (invented)".to_string(),
            reference_area_m2: 3.4,
            wheelbase_m: 3.2,
            taps: (0..taps).map(place).collect(),
            cores: Vec::new(),
            contour: Vec::new(),
            probe: Probe { model: ProbeModel::Static, factor: ProbeFactor::Stated(1.0) },
            ride_height: None,
        },
        outing: Outing {
            title: "Rear flaps (invented)".to_string(),
            watch: Watch::Channel("speed".to_string()),
            targets_kmh: vec![100.0],
            tolerance_kmh: 2.0,
            settle_s: 2.0,
            dwell_s: 12.0,
            slope: None,
            out_track_deg: Some(90.0),
            passes: 4,
            resolve_pa: 5.0,
            show: Show { speed: "km/h".to_string(), pressure: "Pa".to_string() },
            air: Air::STANDARD,
            air_stated: true,
            configurations: letters
                .iter()
                .enumerate()
                .map(|(i, l)| Configuration {
                    letter: (*l).to_string(),
                    name: format!("state {l}"),
                    baseline: i == 0,
                    parameter: None,
                })
                .collect(),
            taps: (0..taps).map(|i| (p(i), tap(i))).collect(),
        },
    }
}

pub fn session(setup: Setup) -> Session {
    let header = Header { schema: SCHEMA.to_string(), version: "0.1.0".to_string(), started: None, setup };
    Session { header, entries: Vec::new(), damage: Vec::new() }
}

/// Statistics of a channel that has one sample a bin.
pub fn statistics(values: &[f64]) -> ChannelStatistics {
    let mut all = Accumulator::new(false, values.len());
    for (bin, value) in values.iter().enumerate() {
        all.push(Place { us: micros(BIN_S * (bin as f64 + 0.5)), bin }, *value, false);
    }
    all.finish().expect("there are values")
}

pub type Series = BTreeMap<String, Vec<f64>>;

pub fn zero(id: u32, t0: f64, series: &Series) -> Entry {
    Entry::Zero(Zero {
        id,
        t0: StreamTime::from_micros(micros(t0)),
        t1: StreamTime::from_micros(micros(t0 + BIN_S * BINS as f64)),
        bin_s: BIN_S,
        channels: series.iter().map(|(c, v)| (c.clone(), statistics(v))).collect(),
    })
}

/// A segment of 100 km/h; every segment is a stretch of its own.
pub fn segment(setup: &Setup, id: u32, t0: f64, (letter, way): (&str, Direction), series: &Series) -> Segment {
    Segment {
        id,
        t0: StreamTime::from_micros(micros(t0)),
        t1: StreamTime::from_micros(micros(t0 + BIN_S * BINS as f64)),
        target_kmh: Some(setup.outing.targets_kmh[0]),
        stretch: id,
        dwell: 1,
        configuration: letter.to_string(),
        direction: way,
        track_deg: None,
        taps: setup.outing.taps.clone(),
        zero: None,
        air: SegmentAir { air: setup.outing.air, source: AirSource::Stated },
        gps_utc: None,
        flags: Vec::new(),
        bin_s: BIN_S,
        channels: series.iter().map(|(c, v)| (c.clone(), statistics(v))).collect(),
    }
}

/// How a drift goes on over the outing: its value at a share 0–1 of the whole time, −½ to ½.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Course {
    Straight,
    /// A sensor or an engine that warms up: three quarters of the way in the first quarter of the time.
    Warming,
}

impl Course {
    fn at(self, share: f64) -> f64 {
        match self {
            Self::Straight => share - 0.5,
            Self::Warming => (1.0 - (-share * 4.0f64.ln() * 4.0).exp()) / (1.0 - (-4.0f64.ln() * 4.0).exp()) - 0.5,
        }
    }
}

/// What a simulated day is like. Cp unless a unit is given.
#[derive(Clone, Debug)]
pub struct Day {
    pub taps: usize,
    pub letters: Vec<&'static str>,
    /// Zeros and passes in order.
    pub plan: Vec<Step>,
    /// True differences from the first letter, by letter (first left out) and tap.
    pub change: Vec<Vec<f64>>,
    /// Scatter between passes: one draw for all taps, one for each.
    pub scatter: [f64; 2],
    /// Drift over the whole outing: of the level, and of the sensors' zeros in Pa.
    pub drift: f64,
    pub zero_drift_pa: f64,
    pub course: Course,
    /// Noise of a bin, Pa.
    pub noise_pa: f64,
    /// Head wind on the way out, its change from pass to pass, gusts within a pass (sd of the bins), km/h.
    pub wind_kmh: f64,
    pub wind_sd_kmh: f64,
    pub gust_kmh: f64,
    /// Half the difference between the two ways.
    pub heading: f64,
    pub seed: u64,
}

#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Step {
    Zero,
    /// Index of the letter, and which way.
    Pass(usize, Direction),
    /// Minutes at standstill: the part is changed.
    Refit(f64),
}

/// Level of a tap of the first letter.
pub fn level(i: usize) -> f64 {
    -0.15 - 0.07 * i as f64
}

impl Day {
    /// Pressures of one interval: `q` true dynamic pressure, `cp` by tap.
    fn times(&self) -> (Vec<f64>, f64) {
        let mut t = 60.0;
        let mut times = Vec::new();
        for step in &self.plan {
            times.push(t);
            t += match step {
                Step::Zero => 60.0,
                Step::Pass(..) => 180.0,
                Step::Refit(minutes) => 60.0 * minutes,
            };
        }
        (times, t)
    }

    /// The outing as the session that it would leave.
    pub fn outing(&self) -> Session {
        let mut chance = Chance(self.seed);
        let mut made = session(setup(self.taps, &self.letters));
        let (times, end) = self.times();
        let mut sides = || -> Vec<f64> { (0..=self.taps).map(|_| chance.between(-1.0, 1.0)).collect() };
        let (drift, zero_drift, offset, heading) = (sides(), sides(), sides(), sides());
        let offsets = |t: f64, i: usize| 6.0 * offset[i] + self.zero_drift_pa * zero_drift[i] * self.course.at(t / end);
        let density = air::density(&Air::STANDARD);
        let mut ids = [0u32; 2];
        for (step, t0) in self.plan.iter().zip(&times) {
            let bin_t = |k: usize| t0 + BIN_S * (k as f64 + 0.5);
            match *step {
                Step::Refit(_) => {}
                Step::Zero => {
                    let mut still = |i: usize| -> Vec<f64> {
                        (0..BINS).map(|k| offsets(bin_t(k), i) + self.noise_pa * chance.normal()).collect()
                    };
                    let mut series: Series = (0..self.taps).map(|i| (p(i), still(i))).collect();
                    series.insert("q".to_string(), still(self.taps));
                    ids[0] += 1;
                    made.entries.push(zero(ids[0], *t0, &series));
                }
                Step::Pass(letter, way) => {
                    let sign = if way == Direction::Back { -1.0 } else { 1.0 };
                    let wind = sign * self.wind_kmh + self.wind_sd_kmh * chance.normal();
                    let common = self.scatter[0] * chance.normal();
                    let mut gust = 0.0;
                    let q: Vec<f64> = (0..BINS)
                        .map(|_| {
                            gust = 0.7 * gust + self.gust_kmh * (1.0f64 - 0.49).sqrt() * chance.normal();
                            0.5 * density * ((100.0 + wind + gust) / 3.6).powi(2)
                        })
                        .collect();
                    let mut series = Series::new();
                    for i in 0..self.taps {
                        let change = if letter == 0 { 0.0 } else { self.change[letter - 1][i] };
                        let cp = level(i)
                            + change
                            + common
                            + self.scatter[1] * chance.normal()
                            + sign * self.heading * heading[i]
                            + self.drift * drift[i] * self.course.at(t0 / end);
                        let seen = (0..BINS)
                            .map(|k| cp * q[k] + offsets(bin_t(k), i) + self.noise_pa * chance.normal())
                            .collect();
                        series.insert(p(i), seen);
                    }
                    let seen = (0..BINS)
                        .map(|k| q[k] + offsets(bin_t(k), self.taps) + self.noise_pa * chance.normal())
                        .collect();
                    series.insert("q".to_string(), seen);
                    series.insert("speed".to_string(), (0..BINS).map(|_| 100.0 + 0.3 * chance.normal()).collect());
                    ids[1] += 1;
                    let letter = self.letters[letter];
                    let segment = segment(&made.header.setup, ids[1], *t0, (letter, way), &series);
                    made.entries.push(Entry::Segment(Box::new(segment)));
                }
            }
        }
        made
    }
}

/// Blocks of passes in the order of `blocks` (indices of letters), `passes` of each way in each block, a zero before each and at the end.
pub fn plan(blocks: &[usize], passes: usize, ways: &[Direction]) -> Vec<Step> {
    let mut plan = Vec::new();
    for block in blocks {
        plan.push(Step::Zero);
        for _ in 0..passes {
            plan.extend(ways.iter().map(|way| Step::Pass(*block, *way)));
        }
        plan.push(Step::Refit(8.0));
    }
    plan.push(Step::Zero);
    plan
}
