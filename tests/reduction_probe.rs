//! The probe's factor of the day is right on the roads that people drive, and as sure as it says.
//!
//! Roads, winds and noise are invented; the truth is the factor that made the airspeeds.

use crate::reduction_outings::{Chance, Course, Day, plan};
use std::collections::BTreeMap;
use steadytap::config::{Probe, ProbeFactor, ProbeModel};
use steadytap::reduction::airspeed::{self, Factor, Source};
use steadytap::reduction::passes::{DynamicPressure, Pass};
use steadytap::reduction::probe::total_over_static;
use steadytap::reduction::{Options, Reduction, reduce};
use steadytap::session::{Direction, Entry};

const PROBE: Probe = Probe { model: ProbeModel::Static, factor: ProbeFactor::Pairs };
const TRUE_K: f64 = 1.05;
/// Sea level of ISO 2533.
const PRESSURE_PA: f64 = 101_325.0;
const DENSITY: f64 = 1.225;
const SOUND_M_S: f64 = 340.294;

/// What a probe shows at an airspeed: impact pressure of NACA Report 1135, equation 44.
fn impact(air_m_s: f64) -> f64 {
    PRESSURE_PA * (total_over_static(air_m_s / SOUND_M_S) - 1.0)
}

fn pass(i: usize, direction: Direction, ground_m_s: f64, track_deg: Option<f64>, air_m_s: f64) -> Pass {
    Pass {
        session: 0,
        segments: vec![i as u32],
        configuration: "A".to_string(),
        direction,
        target_kmh: 100.0,
        t_s: 120.0 * i as f64,
        q: Some(DynamicPressure { pa: impact(air_m_s), measured: Some(("q".to_string(), None)) }),
        speed_kmh: Some(3.6 * ground_m_s),
        track_deg,
        density: DENSITY,
        temperature_c: 15.0,
        pressure_pa: PRESSURE_PA,
        heights: BTreeMap::new(),
        taps: BTreeMap::new(),
    }
}

struct Road {
    /// Headings in turn, degrees.
    tracks: &'static [f64],
    /// Spread of the track about each, degrees.
    jitter_deg: f64,
    /// Towards north and east, m/s.
    wind: [f64; 2],
    /// Of the airspeed of a pass, m/s.
    noise_m_s: f64,
}

const STRAIGHT: Road = Road { tracks: &[90.0, 270.0], jitter_deg: 1.0, wind: [0.0, 0.0], noise_m_s: 0.2 };

fn day(chance: &mut Chance, road: &Road, passes: usize) -> Vec<Pass> {
    let one = |i: usize| {
        let middle = road.tracks[i % road.tracks.len()];
        let direction = match middle {
            90.0 => Direction::Out,
            270.0 => Direction::Back,
            _ => Direction::Other,
        };
        let track = middle + road.jitter_deg * chance.normal();
        let ground = 27.78 + 0.1 * chance.normal();
        let (east, north) = track.to_radians().sin_cos();
        let air = (ground * north - road.wind[0]).hypot(ground * east - road.wind[1]);
        pass(i, direction, ground, Some(track), air / TRUE_K + road.noise_m_s * chance.normal())
    };
    (0..passes).map(one).collect()
}

fn factor(passes: &[Pass]) -> Factor {
    airspeed::factor(&PROBE, &airspeed::pairs(passes), passes).0
}

/// Errors of k over many days, sorted by size, and the share of days whose 95 % interval holds the truth.
fn study(road: &Road, passes: usize, days: usize, mut each: impl FnMut(&Factor)) -> (Vec<f64>, f64) {
    let mut chance = Chance(0xfac7 + passes as u64);
    let (mut errors, mut covered) = (Vec::new(), 0);
    for _ in 0..days {
        let found = factor(&day(&mut chance, road, passes));
        covered += usize::from(found.u95.is_some_and(|u| (found.k - TRUE_K).abs() <= u));
        errors.push((found.k / TRUE_K - 1.0).abs());
        each(&found);
    }
    errors.sort_by(f64::total_cmp);
    (errors, covered as f64 / days as f64)
}

#[test]
fn a_straight_road_gives_the_factor_by_pairs_however_the_track_jitters() {
    for jitter_deg in [0.0, 0.2, 1.0, 2.0] {
        let road = Road { jitter_deg, ..STRAIGHT };
        let (errors, covered) =
            study(&road, 8, 1000, |f| assert_eq!(f.source, Source::Pairs(4), "jitter {jitter_deg}"));
        println!("straight, jitter {jitter_deg}°: error of k 95 % below {:.4}, covered {covered:.3}", errors[950]);
        // 0.2 m/s on each of eight passes is 0.2/27.8/√8 = 0.25 %, two of which are 0.5 %.
        assert!(errors[950] < 0.006, "{}", errors[950]);
        assert!(errors[999] < 0.012, "{}", errors[999]);
    }
}

#[test]
fn the_factor_of_pairs_is_as_sure_as_it_says() {
    for passes in [4, 6, 8, 16] {
        let (_, covered) = study(&STRAIGHT, passes, 4000, |_| {});
        println!("{passes} passes in pairs: covered {covered:.4}");
        assert!((0.935..=0.965).contains(&covered), "{passes} passes: {covered}");
    }
}

#[test]
fn three_headings_give_factor_and_wind_as_sure_as_they_say() {
    let loop_road = Road { tracks: &[90.0, 210.0, 330.0], wind: [1.0, 2.5], ..STRAIGHT };
    let mut winds = Vec::new();
    let (errors, covered) = study(&loop_road, 12, 1000, |f| {
        assert_eq!(f.source, Source::Headings(12));
        winds.push(f.wind.as_ref().expect("headings tell the wind").speed_m_s());
    });
    winds.sort_by(f64::total_cmp);
    println!(
        "three headings: error of k 95 % below {:.4}, covered {covered:.3}, wind {:.2} m/s",
        errors[950], winds[500]
    );
    assert!((0.93..=0.97).contains(&covered), "{covered}");
    assert!((winds[500] - 1f64.hypot(2.5)).abs() < 0.1, "{}", winds[500]);
}

#[test]
fn one_pair_says_that_it_does_not_know_how_sure_it_is() {
    let passes = day(&mut Chance(1), &STRAIGHT, 2);
    let found = factor(&passes);
    assert_eq!((found.source, found.u), (Source::Pairs(1), None));
    assert!(found.source.words().contains("drive another pair"), "{}", found.source.words());
}

#[test]
fn a_pass_is_in_one_pair_at_most() {
    let passes = day(&mut Chance(2), &STRAIGHT, 7);
    assert_eq!(airspeed::pairs(&passes).len(), 3);
}

/// Compressible flow: the incompressible speed is high by M²/8, 0.33 % at 200 km/h.
#[test]
fn a_true_probe_has_factor_one_at_every_speed() {
    for kmh in [50.0, 100.0, 200.0, 300.0] {
        let v = kmh / 3.6;
        let passes = [pass(0, Direction::Out, v, None, v), pass(1, Direction::Back, v, None, v)];
        let k = factor(&passes).k;
        // 1.4 · 101325/1.225 is 340.294² to a part in 10⁶.
        assert!((k - 1.0).abs() < 1e-5, "{kmh} km/h: {k}");
    }
}

/// A day whose session asks for the factor by pairs; its taps have an area.
fn reduced(model: ProbeModel, tracks: Option<[f64; 3]>) -> Reduction {
    let day = Day {
        taps: 2,
        letters: vec!["A", "B"],
        plan: plan(&[0, 1, 0, 1], 2, &[Direction::Out, Direction::Back]),
        change: vec![vec![0.05, 0.0]],
        scatter: [0.001, 0.001],
        drift: 0.0,
        zero_drift_pa: 0.0,
        course: Course::Straight,
        noise_pa: 0.3,
        wind_kmh: 5.0,
        wind_sd_kmh: 2.0,
        gust_kmh: 3.0,
        heading: 0.0,
        seed: 7,
    };
    let mut session = day.outing();
    session.header.setup.car.probe = Probe { model, ..PROBE };
    session.header.setup.car.taps.iter_mut().for_each(|t| t.area_m2 = Some(0.5));
    let segments = session.entries.iter_mut().filter_map(|e| if let Entry::Segment(s) = e { Some(s) } else { None });
    for (i, segment) in segments.enumerate() {
        segment.track_deg = tracks.map(|tracks| tracks[i % 3]);
    }
    reduce(&[session], &Options::default()).expect("one session reduces")
}

/// JCGM 100:2008, equation 10: with Cp = 1 − (1 − Cp_m)/k² a relative error ε of k moves Cp by 2ε(1 − Cp), with Cp = Cp_m/k² by −2εCp,
/// and either moves a difference by −2ε times itself.
#[test]
fn the_factors_uncertainty_is_in_levels_differences_and_forces() {
    for model in [ProbeModel::Static, ProbeModel::Gain] {
        let r = reduced(model, None);
        let relative = r.probe_factor.u.expect("several pairs").0 / r.probe_factor.k;
        let by = |cp: f64| if model == ProbeModel::Static { 2.0 * (1.0 - cp) } else { -2.0 * cp };
        for level in &r.levels {
            let expected = level.apart.unwrap().0.hypot(by(level.cp.value) * relative);
            assert!((level.cp.u.unwrap() / expected - 1.0).abs() < 1e-9, "{model:?} {level:?}");
        }
        let delta = r.comparisons.iter().find(|c| c.tap == "tap-1").unwrap().delta;
        assert!(delta.u.unwrap() > 2.0 * relative * delta.value.abs(), "{delta:?}");
        // Two taps of 0.5 m² that face rearward: drag is −0.5 q (Cp₁ + Cp₂), and moves by −0.5 q (by(Cp₁) + by(Cp₂)).
        for force in r.forces.iter().filter(|f| !f.difference) {
            let cps = r.levels.iter().filter(|l| l.configuration == force.configuration).map(|l| l.cp.value);
            let common = 0.5 * r.at_q_pa * relative * cps.map(by).sum::<f64>();
            assert!(force.newton.u.unwrap() >= common.abs(), "{model:?}: {} under {common}", force.newton.u.unwrap());
        }
    }
}

#[test]
fn many_headings_of_a_session_give_the_days_wind() {
    let r = reduced(ProbeModel::Static, Some([90.0, 210.0, 330.0]));
    assert_eq!(r.probe_factor.source, Source::Headings(r.passes.len()));
    assert!(r.probe_factor.wind.is_some() && r.probe_factor.u.is_some());
}
