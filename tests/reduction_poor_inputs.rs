//! Poor data never give a panic, nor a number that is none: what cannot be told is absent, and a flag says why.

use crate::reduction_outings::{Course, Day, Series, Step, p, plan, segment, session, setup, tap};
use std::collections::BTreeMap;
use steadytap::reduction::compare::Verdict;
use steadytap::reduction::plan::Why;
use steadytap::reduction::{Options, Reduction, ReductionError, reduce};
use steadytap::report;
use steadytap::session::{Change, Direction, End, Entry, Session, TapsChange, Void};
use steadytap::units::{StreamTime, micros};

const BOTH: [Direction; 2] = [Direction::Out, Direction::Back];

pub fn day() -> Day {
    Day {
        taps: 3,
        letters: vec!["A", "B"],
        plan: plan(&[0, 1, 0], 2, &BOTH),
        change: vec![vec![0.0, 0.03, -0.01]],
        scatter: [0.002, 0.002],
        drift: 0.01,
        zero_drift_pa: 2.0,
        course: Course::Straight,
        noise_pa: 0.5,
        wind_kmh: 5.0,
        wind_sd_kmh: 2.0,
        gust_kmh: 3.0,
        heading: 0.005,
        seed: 42,
    }
}

/// Everything that is written of these sessions is sound; the reduction comes back.
#[track_caller]
fn sound(sessions: &[Session], options: &Options) -> Reduction {
    let made = reduce(sessions, options).expect("poor data are no error");
    let json = report::json(&made);
    let value: serde_json::Value = serde_json::from_str(&json).expect("it parses");
    finite(&value);
    let text = report::text(&made, &sessions[0].header.setup.outing.show);
    let csv = String::from_utf8(report::csv(&made)).expect("it is text");
    for written in [&text, &csv, &json] {
        let bare = written.split(|c: char| !c.is_ascii_alphanumeric()).map(str::to_ascii_lowercase);
        assert!(!bare.into_iter().any(|word| word == "nan" || word == "inf"), "{written}");
    }
    for line in text.lines() {
        assert!(line.chars().count() <= 100, "{} columns: {line}", line.chars().count());
    }
    made
}

fn finite(value: &serde_json::Value) {
    match value {
        serde_json::Value::Number(n) => assert!(n.as_f64().is_some_and(f64::is_finite)),
        serde_json::Value::Array(all) => all.iter().for_each(finite),
        serde_json::Value::Object(all) => all.values().for_each(finite),
        _ => {}
    }
}

#[track_caller]
fn says(made: &Reduction, words: &str) {
    assert!(made.flags.iter().any(|f| f.contains(words)), "{words:?} is not in {:#?}", made.flags);
}

#[track_caller]
fn undecided(made: &Reduction) {
    assert!(made.comparisons.iter().all(|c| c.verdict == Verdict::Undecided && c.delta.u95.is_none()));
}

fn edited(mut outing: Session, edit: impl Fn(&mut steadytap::session::Segment)) -> Session {
    for entry in &mut outing.entries {
        if let Entry::Segment(segment) = entry {
            edit(segment);
        }
    }
    outing
}

#[test]
fn an_empty_session() {
    let made = sound(&[session(setup(3, &["A", "B"]))], &Options::default());
    says(&made, "no pass to reduce");
    says(&made, "never zeroed");
    assert!(made.levels.is_empty() && made.comparisons.is_empty() && made.next.is_none());
    assert_eq!(reduce(&[], &Options::default()).err(), Some(ReductionError::NoSession));
}

#[test]
fn one_pass() {
    let made =
        sound(&[Day { plan: vec![Step::Zero, Step::Pass(0, Direction::Out)], ..day() }.outing()], &Options::default());
    says(&made, "nothing to compare: drive the baseline A");
    says(&made, "one zero only");
    assert_eq!(made.levels.len(), 3);
    assert!(made.levels.iter().all(|l| l.cp.u95.is_none()));
    let next = made.next.expect("B was not driven");
    assert_eq!((next.configuration.as_str(), next.why), ("B", Why::NotDriven));
}

#[test]
fn one_pass_each_has_no_verdict() {
    let steps = vec![Step::Zero, Step::Pass(0, Direction::Out), Step::Pass(1, Direction::Out), Step::Zero];
    let made = sound(&[Day { plan: steps, ..day() }.outing()], &Options::default());
    undecided(&made);
    says(&made, "too few passes for any interval");
    says(&made, "one pass of A only");
    assert!(matches!(made.next.expect("more passes help").why, Why::Narrows { from_to: None, .. }));
}

#[test]
fn no_zero() {
    let mut day = day();
    day.plan.retain(|step| *step != Step::Zero);
    let made = sound(&[day.outing()], &Options::default());
    says(&made, "never zeroed: sensor offsets are in every pressure");
    assert!(made.comparisons.iter().all(|c| c.delta.u95.is_some()));
}

#[test]
fn no_dynamic_pressure() {
    let without = |names: &'static [&'static str]| {
        edited(day().outing(), move |s| names.iter().for_each(|n| drop(s.channels.remove(*n))))
    };
    let made = sound(&[without(&["q"])], &Options::default());
    says(&made, "no probe: a fallback");
    assert!(made.levels.iter().all(|l| (l.cp.value + 0.2).abs() < 0.3));
    let made = sound(&[without(&["q", "speed"])], &Options::default());
    says(&made, "passes without q");
    assert!(made.levels.is_empty());
}

#[test]
fn a_dynamic_pressure_near_nothing() {
    for level in [0.0, 1e-300, 0.5, -40.0] {
        let poor = edited(day().outing(), |s| {
            let q = s.channels.get_mut("q").expect("there is q");
            q.mean = level;
            q.bins.iter_mut().flatten().for_each(|b| *b = level);
        });
        let made = sound(&[poor], &Options::default());
        says(&made, "passes with q below 5 Pa give no Cp");
        assert!(made.levels.is_empty(), "{level}");
    }
}

#[test]
fn all_voided() {
    let mut outing = day().outing();
    for segment in 1..=12 {
        outing.entries.push(Entry::Void(Void { t: StreamTime::ZERO, segment }));
    }
    let made = sound(&[outing], &Options::default());
    says(&made, "no pass to reduce");
    assert_eq!(made.left_out.len(), 12);
}

#[test]
fn one_way_and_neither_way() {
    for way in [Direction::Out, Direction::Back, Direction::Other] {
        let made = sound(&[Day { plan: plan(&[0, 1, 0], 3, &[way]), ..day() }.outing()], &Options::default());
        assert!(made.comparisons.iter().all(|c| c.delta.u95.is_some()), "{way:?}");
        assert!(made.next.is_none_or(|next| next.direction == way), "{way:?}");
    }
    // Out with the one, back with the other: the way and the part cannot be told apart.
    let mut day = day();
    day.plan.retain(|s| !matches!(s, Step::Pass(0, Direction::Back) | Step::Pass(1, Direction::Out)));
    let made = sound(&[day.outing()], &Options::default());
    says(&made, "A was driven one way only");
    says(&made, "B was driven one way only");
}

#[test]
fn a_tap_that_changed_its_channel_half_way() {
    let mut outing = day().outing();
    let moved: BTreeMap<String, String> = [(p(1), tap(0)), (p(0), tap(1)), (p(2), tap(2))].into();
    let mut at = 0;
    for (i, entry) in outing.entries.iter_mut().enumerate() {
        if let Entry::Segment(s) = entry
            && s.id > 6
        {
            at = if at == 0 { i } else { at };
            s.taps = moved.clone();
            let (a, b) = (s.channels[&p(0)].clone(), s.channels[&p(1)].clone());
            s.channels.insert(p(0), b);
            s.channels.insert(p(1), a);
        }
    }
    outing.entries.insert(at, Entry::Taps(TapsChange { t: StreamTime::ZERO, taps: moved }));
    let made = sound(&[outing], &Options::default());
    let channels = |i: usize| made.passes[i].taps[&tap(0)].channel.as_str();
    assert_eq!((channels(0), channels(11)), ("p1", "p2"));
    assert!(made.comparisons.iter().all(|c| c.passes == [8, 4]));
}

#[test]
fn channels_of_one_sample() {
    let setup = setup(3, &["A", "B"]);
    let mut outing = session(setup.clone());
    for id in 1..=6 {
        let series: Series = [("q", 470.0), ("p1", -80.0 - f64::from(id)), ("p2", 0.0), ("p3", -10.0)]
            .map(|(name, x)| (name.to_string(), vec![x]))
            .into();
        let place = (if id % 2 == 0 { "A" } else { "B" }, Direction::Out);
        outing.entries.push(Entry::Segment(Box::new(segment(&setup, id, 200.0 * f64::from(id), place, &series))));
    }
    let made = sound(&[outing], &Options::default());
    assert!(made.passes.iter().all(|p| p.taps.values().all(|t| t.cp_se.is_none())));
    // Taps without any scatter have no interval, so no verdict.
    let still = made.comparisons.iter().find(|c| c.tap == tap(2)).expect("it is compared");
    assert_eq!(still.verdict, Verdict::Undecided);
    says(&made, "the passes of tap-3 agree to the last digit");
}

#[test]
fn values_beyond_sense() {
    for huge in [1e300, -1e300, f64::MAX, 1e150, 1e-300] {
        for channel in ["p1", "q", "speed"] {
            for every in [1, 2] {
                let poor = edited(day().outing(), |s| {
                    if s.id % every == 0 {
                        let c = s.channels.get_mut(channel).expect("it is there");
                        (c.mean, c.min, c.max) = (huge, huge, huge);
                        c.bins.iter_mut().flatten().for_each(|b| *b = huge);
                        (c.sd, c.se) = (Some(huge.abs()), Some(huge.abs()));
                    }
                });
                sound(&[poor], &Options { at_kmh: Some(250.0), baseline: None });
            }
        }
        let mut zeros = day().outing();
        for entry in &mut zeros.entries {
            if let Entry::Zero(z) = entry {
                z.channels.values_mut().for_each(|c| (c.mean, c.se) = (huge, Some(huge.abs())));
            }
        }
        sound(&[zeros], &Options::default());
    }
}

#[test]
fn long_names_stay_within_the_page() {
    let long = "a very long name of a part with many words and averyveryverylongwordthatisnotbrokenanywhere ".repeat(3);
    let mut outing = day().outing();
    let setup = &mut outing.header.setup;
    (setup.outing.title, setup.car.name) = (long.clone(), long.clone());
    setup.outing.configurations.iter_mut().for_each(|c| c.name = long.clone());
    setup.outing.show.pressure = "inH2O-60F".to_string();
    let made = sound(&[outing], &Options::default());
    says(&made, "A and B have one name");
}

#[test]
fn two_sessions() {
    let (one, two) = (day().outing(), Day { seed: 43, ..day() }.outing());
    let made = sound(&[one.clone(), two.clone()], &Options::default());
    assert!(made.comparisons.iter().all(|c| c.passes == [16, 8]));
    assert!(made.comparisons.iter().all(|c| c.delta.dof.is_some_and(|dof| dof >= 17.0)));
    let other = Day { letters: vec!["B", "A"], ..day() }.outing();
    let both = [one, other];
    let different = ReductionError::DifferentBaselines("A".to_string(), "B".to_string());
    assert_eq!(reduce(&both, &Options::default()).err(), Some(different));
    let named = sound(&both, &Options { at_kmh: None, baseline: Some("B".to_string()) });
    assert!(named.comparisons.iter().all(|c| c.configuration == "A"));
    let mut car = two;
    car.header.setup.car.name = "another".to_string();
    assert!(matches!(reduce(&[both[0].clone(), car], &Options::default()), Err(ReductionError::DifferentCars(..))));
}

/// The numbering of stretches begins anew after an end: the two are not one pass.
#[test]
fn a_session_that_went_on_after_its_end() {
    let mut outing = edited(day().outing(), |s| s.stretch = 1 + (s.id - 1) % 6);
    let at =
        outing.entries.iter().position(|e| matches!(e, Entry::Segment(s) if s.id == 7)).expect("there is a seventh");
    outing.entries.insert(at, Entry::End(End { t: StreamTime::from_micros(micros(2000.0)) }));
    assert_eq!(sound(&[outing], &Options::default()).passes.len(), 12);
}

#[test]
fn the_baseline_is_absent_or_another() {
    let mut day = day();
    day.plan.retain(|s| !matches!(s, Step::Pass(0, _)));
    let made = sound(&[day.outing()], &Options::default());
    says(&made, "nothing to compare: drive the baseline A");
    assert_eq!(made.next.expect("the baseline").configuration, "A");
    let b = Options { at_kmh: None, baseline: Some("B".to_string()) };
    let straight = sound(&[self::day().outing()], &Options::default());
    let turned = sound(&[self::day().outing()], &b);
    says(&turned, "the baseline was driven in one block");
    assert!(
        straight.comparisons.iter().zip(&turned.comparisons).all(|(s, t)| (s.delta.value + t.delta.value).abs() < 0.02)
    );
    let none = reduce(&[self::day().outing()], &Options { at_kmh: None, baseline: Some("Z".to_string()) });
    assert!(matches!(none, Err(ReductionError::NoSuchBaseline { .. })));
}

#[test]
fn stated_at_another_speed() {
    let slow = sound(&[day().outing()], &Options::default());
    let fast = sound(&[day().outing()], &Options { at_kmh: Some(250.0), baseline: None });
    assert!((fast.at_q_pa / slow.at_q_pa - 6.25).abs() < 1e-12);
    assert!(fast.levels.iter().zip(&slow.levels).all(|(f, s)| f.cp == s.cp));
    assert!(fast.comparisons.iter().zip(&slow.comparisons).all(|(f, s)| f.verdict == s.verdict));
}

/// Letters that the outing does not know, a configuration without passes.
#[test]
fn configurations_that_nobody_named() {
    let outing = edited(day().outing(), |s| {
        if s.configuration == "B" {
            s.configuration = "X".to_string();
        }
    });
    let mut outing = outing;
    outing.entries.push(Entry::Configuration(Change { t: StreamTime::ZERO, to: "X".to_string() }));
    let made = sound(&[outing], &Options::default());
    assert!(made.comparisons.is_empty());
    says(&made, "nothing to compare");
}

/// The pass that is advised is the one that narrows most: after many of the baseline, one of the other.
#[test]
fn the_next_pass_is_the_one_that_is_wanting() {
    let scattered = Day { scatter: [0.0, 0.02], ..day() };
    let one_of = |letter| [Step::Pass(letter, Direction::Out), Step::Pass(letter, Direction::Back)];
    let mut steps = vec![Step::Zero];
    steps.extend([one_of(0).repeat(3), one_of(1).to_vec(), one_of(0).repeat(3)].concat());
    let made = sound(&[Day { plan: steps, ..scattered }.outing()], &Options::default());
    let next = made.next.clone().expect("undecided");
    assert_eq!((next.configuration.as_str(), next.target_kmh), ("B", 100.0));
    let Why::Narrows { from_to: Some((from, to)), .. } = next.why else { panic!("it narrows an interval") };
    assert!(to < from);
    let text = report::text(&made, &setup(3, &["A", "B"]).outing.show);
    assert!(text.contains("Next: drive B ") && text.contains("would have found a change of"), "{text}");
    // All decided: nothing to drive.
    let clear = Day { scatter: [0.0, 0.0002], noise_pa: 0.05, ..day() };
    assert_eq!(sound(&[clear.outing()], &Options::default()).next, None);
}
