//! What the pressures mean, through the whole reduction: forces, axle loads by two routes, base drag, a core's flow, the contour, a sweep. Each is set
//! against the truth that made the session, worked out here by hand from the same laws (Bernoulli, dF = −p n dA, the lever rule).
//!
//! The van and its figures are invented.

use crate::reduction_outings::{BINS, Chance, Series, p, segment, session, setup, zero};
use steadytap::config::{AxleHeight, Channel, Core, Parameter, RideHeight};
use steadytap::reduction::compare::Estimate;
use steadytap::reduction::force::Component;
use steadytap::reduction::sweep::Quadratic;
use steadytap::reduction::{Options, Reduction, air, reduce};
use steadytap::session::{Direction, Entry, Session};
use steadytap::units::Quantity;

/// A without a setting; B to E with flaps of so many mm.
const LETTERS: [&str; 5] = ["A", "B", "C", "D", "E"];
const SETTINGS: [f64; 4] = [60.0, 120.0, 180.0, 240.0];
/// Two base taps, roof, bonnet, radiator front and rear.
const TAPS: usize = 6;
const AREA: [f64; 4] = [1.5, 1.2, 1.0, 0.4];
const BENCH: [f64; 2] = [12.0, 4.0];
const WHEEL_RATE: [f64; 2] = [46.0, 52.0];
/// Lift of each axle at 100 km/h in standard air, N.
const LIFT: [f64; 2] = [-60.0, 85.0];

/// Cp of the upper base tap over flap length x: −0.22 + 0.0008 x − 2·10⁻⁶ x², best at 200 mm.
fn base_high(x: f64) -> f64 {
    -0.22 + 0.0008 * x - 2e-6 * x * x
}

/// Face velocity of the core over airspeed.
fn flow(letter: usize) -> f64 {
    if letter == 2 { 0.16 } else { 0.12 }
}

/// q and airspeed at a speed in standard air.
fn q_at(kmh: f64) -> f64 {
    0.5 * 1.225 * (kmh / 3.6f64).powi(2)
}

fn cps(letter: usize) -> [f64; 4] {
    let high = if letter == 0 { -0.17 } else { base_high(SETTINGS[letter - 1]) };
    [high, -0.18, -0.45, 0.30]
}

/// The session of that day.
pub fn outing() -> Session {
    let mut made = setup(TAPS, &LETTERS);
    let height = |name: &str| Channel {
        name: name.to_string(),
        quantity: Quantity::RideHeight,
        unit: "mm".to_string(),
        ..made.rig.channels[2].clone()
    };
    let heights = [height("hf"), height("hr")];
    made.rig.channels.extend(heights);
    let normals = [[1.0, 0.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 1.0], [-0.6, 0.0, 0.8]];
    let places = [[4.1, 0.0, 2.0], [4.1, 0.0, 1.0], [3.7, 0.0, 2.6], [-0.8, 0.0, 1.05]];
    for (i, tap) in made.car.taps.iter_mut().enumerate().take(4) {
        (tap.at, tap.normal, tap.area_m2) = (places[i], normals[i], Some(AREA[i]));
        tap.group = (i < 2).then(|| "base".to_string());
    }
    made.car.contour = [3, 2, 0, 1].map(crate::reduction_outings::tap).to_vec();
    let bench = [1.0, 2.0, 4.0, 6.0].map(|v| [v, BENCH[0] * v + BENCH[1] * v * v]).to_vec();
    made.car.cores = vec![Core {
        name: "radiator".to_string(),
        front: crate::reduction_outings::tap(4),
        rear: crate::reduction_outings::tap(5),
        bench,
    }];
    let axle = |channel: &str, rate| Some(AxleHeight { channel: channel.to_string(), wheel_rate_n_per_mm: rate });
    made.car.ride_height = Some(RideHeight { front: axle("hf", WHEEL_RATE[0]), rear: axle("hr", WHEEL_RATE[1]) });
    for (c, x) in made.outing.configurations.iter_mut().skip(1).zip(SETTINGS) {
        c.parameter = Some(Parameter { name: "flap length".to_string(), unit: "mm".to_string(), value: x });
    }
    drive(session(made))
}

/// Four rounds of all configurations, each out and back, with a zero before each round and one at the end.
fn drive(mut made: Session) -> Session {
    let mut chance = Chance(0xbead);
    let setup = made.header.setup.clone();
    let density = air::density(&setup.outing.air);
    let (mut t, mut ids) = (60.0, [0, 0]);
    let still = |chance: &mut Chance| -> Series {
        let mut one = |name: &str, level: f64, noise: f64| {
            (name.to_string(), (0..BINS).map(|_| level + noise * chance.normal()).collect::<Vec<_>>())
        };
        let mut all: Series = (0..TAPS).map(|i| one(&p(i), 2.0, 0.5)).collect();
        all.extend([one("q", -1.0, 0.5), one("hf", 300.0, 0.05), one("hr", 320.0, 0.05)]);
        all
    };
    for _ in 0..4 {
        ids[0] += 1;
        made.entries.push(zero(ids[0], t, &still(&mut chance)));
        t += 60.0;
        for (letter, name) in LETTERS.iter().enumerate() {
            for (way, sign) in [(Direction::Out, 1.0), (Direction::Back, -1.0)] {
                let air_kmh = 100.0 + sign * 6.0 + 2.0 * chance.normal();
                let q = 0.5 * density * (air_kmh / 3.6f64).powi(2);
                let v = flow(letter) * air_kmh / 3.6;
                // The bench curve in the air of the day: viscosity by Sutherland, 20 °C and 1.204 kg/m³ on the bench.
                let a = BENCH[0] * air::viscosity(288.15) / air::viscosity(293.15);
                let drop = a * v + BENCH[1] * density / 1.204 * v * v;
                let mut means: Vec<f64> = cps(letter).iter().map(|cp| (cp + 0.002 * chance.normal()) * q).collect();
                means.extend([0.4 * q, 0.4 * q - drop]);
                let mut series = Series::new();
                let mut add = |name: String, mean: f64, noise: f64, chance: &mut Chance| {
                    series.insert(name, (0..BINS).map(|_| mean + noise * chance.normal()).collect())
                };
                for (i, mean) in means.iter().enumerate() {
                    add(p(i), mean + 2.0, 0.5, &mut chance);
                }
                add("q".to_string(), q - 1.0, 0.5, &mut chance);
                add("speed".to_string(), 100.0, 0.2, &mut chance);
                for (k, (name, rest)) in [("hf", 300.0), ("hr", 320.0)].into_iter().enumerate() {
                    add(name.to_string(), rest + LIFT[k] * q / q_at(100.0) / WHEEL_RATE[k], 0.3, &mut chance);
                }
                ids[1] += 1;
                made.entries.push(Entry::Segment(Box::new(segment(&setup, ids[1], t, (name, way), &series))));
                t += 150.0;
            }
        }
    }
    made.entries.push(zero(ids[0] + 1, t, &still(&mut chance)));
    made
}

fn reduced() -> Reduction {
    reduce(&[outing()], &Options::default()).expect("one session reduces")
}

/// The truth lies within 1.6 half-widths (one in a thousand lies outside by chance), and the half-width is below a bound that a useful answer needs.
#[track_caller]
fn meets(what: &str, e: Estimate, truth: f64, useful: f64) {
    let half = e.u95.unwrap_or_else(|| panic!("{what} has no half-width"));
    assert!((e.value - truth).abs() <= 1.6 * half, "{what}: {} ± {half}, truth {truth}", e.value);
    assert!(half > 0.0 && half < useful, "{what}: ± {half} is more than {useful}");
}

#[test]
fn panel_forces_are_those_of_the_pressures() {
    let r = reduced();
    let force = |group: Option<&str>, letter: &str, component, difference| {
        let found = r.forces.iter().find(|f| {
            f.group.as_deref() == group
                && f.configuration == letter
                && f.component == component
                && f.difference == difference
        });
        found.unwrap_or_else(|| panic!("a force of {group:?}, {letter}"))
    };
    let q = q_at(100.0);
    for (i, letter) in LETTERS.iter().enumerate() {
        let cp = cps(i);
        // Base faces +x: drag −p A. The bonnet's normal is (−0.6, 0, 0.8), the roof's (0, 0, 1).
        let base = -q * (cp[0] * AREA[0] + cp[1] * AREA[1]);
        let row = force(Some("base"), letter, Component::Drag, false);
        meets("base drag", row.newton, base, 4.0);
        let [independent, common] = row.bounds.expect("both bounds");
        assert!(independent < common, "two taps of one sign: {independent}, {common}");
        meets("all drag", force(None, letter, Component::Drag, false).newton, base + q * cp[3] * 0.6 * AREA[3], 4.0);
        let lift = -q * (cp[2] * AREA[2] + cp[3] * 0.8 * AREA[3]);
        meets("all lift", force(None, letter, Component::Lift, false).newton, lift, 3.0);
    }
    let change = -q * AREA[0] * (cps(3)[0] - cps(0)[0]);
    meets("change of base drag", force(Some("base"), "D", Component::Drag, true).newton, change, 4.0);
    assert!(!r.forces.iter().any(|f| f.component == Component::Side), "no tap faces sideways");
}

#[test]
fn axle_loads_come_by_two_routes() {
    let r = reduced();
    let q = q_at(100.0);
    for row in r.balance.iter().filter(|b| !b.difference) {
        let cp = cps(LETTERS.iter().position(|l| *l == row.configuration).unwrap());
        // Lever rule about the contact patches: roof at x 3.7, bonnet at −0.8; drag at its height loads the rear.
        let (roof, bonnet) = (-q * cp[2] * AREA[2], -q * cp[3] * AREA[3]);
        let drag_height = -q * (cp[0] * AREA[0] * 2.0 + cp[1] * AREA[1] * 1.0) + bonnet * -0.6 * 1.05;
        let rear = (roof * 3.7 + bonnet * 0.8 * -0.8 - drag_height) / 3.2;
        meets("rear by taps", row.taps[1], rear, 6.0);
        meets("front by taps", row.taps[0], roof + bonnet * 0.8 - rear, 6.0);
        for axle in [0, 1] {
            meets("axle by ride height", row.ride_height[axle].expect("it has a channel"), LIFT[axle], 20.0);
        }
    }
    assert_eq!(r.balance.len(), 9, "five levels and four differences");
}

#[test]
fn base_pressure_becomes_drag_and_power() {
    let r = reduced();
    let row = r.base_drag.iter().find(|b| b.configuration == "D" && b.difference).expect("a difference");
    let change = cps(3)[0] - cps(0)[0];
    meets("mean base Cp", row.mean_cp, change * AREA[0] / (AREA[0] + AREA[1]), 0.003);
    meets("drag coefficient", row.cd, -change * AREA[0] / 3.4, 0.003);
    meets("power", row.power_w, -change * AREA[0] * q_at(100.0) * 100.0 / 3.6, 120.0);
}

#[test]
fn a_cores_flow_is_inverted_by_its_bench_curve() {
    let r = reduced();
    for row in r.cores.iter().filter(|c| !c.difference) {
        let letter = LETTERS.iter().position(|l| *l == row.configuration).unwrap();
        meets("velocity ratio", row.ratio, flow(letter), 0.004);
        meets("face velocity", row.velocity_m_s, flow(letter) * 100.0 / 3.6, 0.1);
    }
    let changed = r.cores.iter().find(|c| c.difference && c.configuration == "C").expect("a difference");
    meets("change of the ratio", changed.ratio, 0.04, 0.004);
}

/// Trapezoids by hand round bonnet (−0.8, 1.05), roof (3.7, 2.6), base (4.1, 2.0) and (4.1, 1.0), which run clockwise seen with x to the right and z up.
#[test]
fn the_contour_gives_section_coefficients() {
    let r = reduced();
    let cp = cps(0);
    let (points, cp) = ([[-0.8, 1.05], [3.7, 2.6], [4.1, 2.0], [4.1, 1.0]], [cp[3], cp[2], cp[0], cp[1]]);
    let (mut drag, mut lift) = (0.0, 0.0);
    for i in 0..4 {
        let (a, b, mean) = (points[i], points[(i + 1) % 4], (cp[i] + cp[(i + 1) % 4]) / 2.0);
        // The outward normal of a clockwise side is on its left: (−dz, dx); dF = −Cp n ds.
        drag += mean * (b[1] - a[1]);
        lift -= mean * (b[0] - a[0]);
    }
    let row = r.contour.iter().find(|c| c.configuration == "A" && !c.difference).expect("a level");
    meets("section drag", row.coefficients[0], drag / 4.9, 0.005);
    meets("section lift", row.coefficients[1], lift / 4.9, 0.005);
}

/// A has no setting: it is compared with, and takes no part in the curve.
#[test]
fn a_sweep_finds_its_curve_its_best_setting_and_where_it_gets_worth_knowing() {
    let r = reduced();
    let row = r.sweeps.iter().find(|s| s.tap == "tap-1").expect("a sweep");
    assert_eq!(row.levels.iter().map(|l| l.0).collect::<Vec<_>>(), SETTINGS);
    let curve = row.quadratic.as_ref().expect("the truth is a quadratic");
    for x in SETTINGS {
        assert!((curve.at(x) - base_high(x)).abs() < 4.0 * curve.se(x), "at {x}: {}", curve.at(x));
    }
    let (best, _) = row.extreme.expect("it is curved, best at 200");
    assert!((best - 200.0).abs() < 15.0, "{best}");
    // 5 Pa of 472.608 above A's −0.17: −0.22 + 0.0008 x − 2·10⁻⁶ x² = −0.15942, x = 101.5.
    let crossing = row.crossing.expect("it gets there");
    let ([low, high], open) = crossing.interval.expect("a quadratic has a band");
    assert!(low < 101.5 && 101.5 < high && high - low < 20.0 && open == [false; 2], "{crossing:?}");
    let still = r.sweeps.iter().find(|s| s.tap == "tap-2").expect("a sweep");
    assert!(still.crossing.is_none());
}

/// A curve that rises and falls again crosses a level twice: both the setting and its interval are of the first time. 4 x (1 − x) = 0.75 at ¼ and ¾, by hand.
#[test]
fn a_crossing_lies_in_its_interval() {
    for sign in [1.0, -1.0] {
        let covariance = nalgebra::DMatrix::from_diagonal_element(3, 3, 1e-6);
        let curve = Quadratic { b: [0.0, 4.0 * sign, -4.0 * sign], covariance, dof: 20 };
        let at = curve.crossing(0.75 * sign, [0.0, 1.0]).expect("it gets there");
        assert!((at - 0.25).abs() < 1e-12, "{at}");
        let ([low, high], _) = curve.crossing_interval(0.75 * sign, [0.0, 1.0]).expect("a band");
        assert!(low < at && at < high, "{at} in {low} to {high}");
    }
}
