//! Faults of hoses and sensors are named by tap from the data, and a healthy outing is left in peace.
#![expect(clippy::disallowed_macros, reason = "the figures are for whoever runs the study with --nocapture")]

use crate::reduction_outings::{BIN_S, Chance, Course, Day, p, plan, statistics, tap};
use steadytap::reduction::plumbing::{Fault, Kind, faults};
use steadytap::reduction::{Options, reduce};
use steadytap::session::{Direction, Entry, Session};

const BOTH: [Direction; 2] = [Direction::Out, Direction::Back];

fn day(n: usize) -> Day {
    let pick = |of: &[f64], stride: usize| of[n / stride % of.len()];
    let mut chance = Chance(77 + n as u64);
    let blocks = [vec![0, 1, 0], vec![0, 1, 0, 1, 0, 1], vec![0, 1]][n % 3].clone();
    Day {
        taps: 6,
        letters: vec!["A", "B"],
        plan: plan(&blocks, 2 + n % 3, &BOTH),
        // Changes of the body up to 30 Pa on every tap.
        change: vec![(0..6).map(|_| chance.between(-0.06, 0.06)).collect()],
        scatter: [0.002, pick(&[0.001, 0.003], 2)],
        drift: pick(&[0.0, 0.02], 4),
        zero_drift_pa: pick(&[0.0, 4.0], 8),
        course: if n.is_multiple_of(5) { Course::Warming } else { Course::Straight },
        noise_pa: pick(&[0.3, 1.0, 2.0], 3),
        wind_kmh: pick(&[0.0, 8.0], 7),
        wind_sd_kmh: 2.0,
        gust_kmh: pick(&[1.5, 4.0], 9),
        heading: 0.01,
        seed: 0xfa_0175 + n as u64,
    }
}

fn found(outing: &Session) -> Vec<Fault> {
    let sessions = [outing.clone()];
    faults(&reduce(&sessions, &Options::default()).expect("one session reduces"), &sessions)
}

/// Changes what channels read from a segment on; they are given and taken without their sensors' offsets.
fn tamper(outing: &mut Session, from: u32, with: impl Fn(&mut Vec<Vec<f64>>, &[f64])) {
    let offsets: Vec<f64> = outing
        .entries
        .iter()
        .find_map(
            |e| if let Entry::Zero(z) = e { Some((0..6).map(|i| z.channels[&p(i)].mean).collect()) } else { None },
        )
        .expect("the outing has a zero");
    for entry in &mut outing.entries {
        let Entry::Segment(segment) = entry else { continue };
        if segment.id < from {
            continue;
        }
        let bins = |name: &str| -> Vec<f64> { segment.channels[name].bins.iter().flatten().copied().collect() };
        let mut all: Vec<Vec<f64>> = (0..6).map(|i| bins(&p(i)).iter().map(|x| x - offsets[i]).collect()).collect();
        with(&mut all, &bins("q"));
        for (i, values) in all.iter().enumerate() {
            let seen: Vec<f64> = values.iter().map(|x| x + offsets[i]).collect();
            segment.channels.insert(p(i), statistics(&seen));
        }
    }
}

/// Every day with the fault: how many name it at that tap, and what else they say.
#[track_caller]
fn proven(kind: Kind, at: &str, from: u32, with: impl Fn(&mut Vec<Vec<f64>>, &[f64]) + Copy) {
    let (days, mut named, mut other) = (30, 0, Vec::new());
    for n in 0..days {
        let mut outing = day(n).outing();
        tamper(&mut outing, from, with);
        let faults = found(&outing);
        named += usize::from(faults.iter().any(|f| f.kind == kind && f.tap == at));
        other.extend(faults.into_iter().filter(|f| f.kind != kind || f.tap != at));
    }
    println!("{kind:?}: named in {named} of {days}, {} others", other.len());
    other.iter().take(5).for_each(|f| println!("  {f}"));
    assert!(named * 10 >= days * 9, "{named} of {days}");
    assert!(other.len() * 10 <= days, "{other:?}");
}

#[test]
fn healthy_outings_are_left_in_peace() {
    let mut spoken = Vec::new();
    for n in 0..200 {
        spoken.extend(found(&day(n).outing()).into_iter().map(|f| (n, f.to_string())));
    }
    assert!(spoken.is_empty(), "{spoken:#?}");
}

#[test]
fn swapped_hoses_are_seen_against_their_own_earlier_passes() {
    proven(Kind::Swapped, "tap-2 and tap-5", 4, |all, _| all.swap(1, 4));
}

#[test]
fn a_hose_on_the_wrong_port_of_its_sensor_is_seen() {
    proven(Kind::Reversed, "tap-4", 4, |all, _| all[3].iter_mut().for_each(|x| *x = -*x));
}

#[test]
fn more_than_stagnation_is_impossible() {
    proven(Kind::Reversed, "tap-1", 0, |all, q| {
        let chance = &mut Chance(q[0].to_bits());
        all[0] = q.iter().map(|q| 1.25 * q + chance.normal()).collect();
    });
}

#[test]
fn a_blocked_hose_is_seen() {
    proven(Kind::Blocked, "tap-3", 3, |all, q| {
        let chance = &mut Chance(q[0].to_bits());
        all[2].iter_mut().for_each(|x| *x = -90.0 + 0.5 * chance.normal());
    });
}

/// Water passes slow changes on, of first order with 6 s here.
#[test]
fn a_hose_with_water_in_it_is_seen() {
    proven(Kind::Blocked, "tap-5", 3, |all, _| {
        let mut slow = all[4].iter().sum::<f64>() / all[4].len() as f64;
        for x in &mut all[4] {
            slow += (*x - slow) * BIN_S / 6.0;
            *x = slow;
        }
    });
}

#[test]
fn a_leak_is_seen_against_earlier_passes() {
    proven(Kind::Leak, "tap-6", 4, |all, _| all[5].iter_mut().for_each(|x| *x *= 0.4));
}

#[test]
fn a_sensor_that_stands_still_is_seen() {
    proven(Kind::Stuck, "tap-2", 3, |all, _| all[1].iter_mut().for_each(|x| *x = -101.25));
}

/// A lag of one bin, half a second.
#[test]
fn a_hose_that_is_longer_than_the_others_is_seen() {
    proven(Kind::Late, &tap(3), 0, |all, _| {
        let (first, n) = (all[3][0], all[3].len());
        all[3].copy_within(0..n - 1, 1);
        all[3][0] = first;
    });
}

#[test]
fn a_fault_is_named_with_its_channel_and_what_to_look_at() {
    let mut outing = day(1).outing();
    tamper(&mut outing, 4, |all, _| all.swap(1, 4));
    let flags = reduce(&[outing], &Options::default()).expect("one session reduces").flags;
    assert!(
        flags.iter().any(|f| f.starts_with("tap-2 and tap-5 (p2 and p5): ") && f.ends_with("are their hoses swapped?")),
        "{flags:#?}"
    );
}

/// What else is said of healthy outings, in shares of them.
#[test]
fn other_prompts_are_rare_on_healthy_outings() {
    let mut counts = [0; 3];
    for n in 0..100 {
        let flags = reduce(&[day(n).outing()], &Options::default()).expect("one session reduces").flags;
        for (count, word) in counts.iter_mut().zip(["stands out", "independent averages", "first half"]) {
            *count += usize::from(flags.iter().any(|f| f.contains(word)));
        }
    }
    println!("stands out, few independent averages, moves within: {counts:?} of 100");
    assert!(counts.iter().all(|n| *n <= 5), "{counts:?}");
}
