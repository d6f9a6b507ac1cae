//! What the workshop measures is what is there: a leak's rate, a hose's lag; and a calibration goes into the rig file without disturbing it.
//!
//! Traces are made from the law that is looked for (first-order decay and step), with invented noise.

use crate::reduction_outings::Chance;
use std::path::Path;
use steadytap::config::{self, Convert, Source};
use steadytap::reduction::workshop::{LEAK_ALLOWED, decay, step_response};
use steadytap::shell::calibration;

fn held(chance: &mut Chance, tau_s: f64, noise_pa: f64) -> Vec<(f64, f64)> {
    (0..80).map(|i| 0.25 * f64::from(i)).map(|t| (t, 300.0 * (-t / tau_s).exp() + noise_pa * chance.normal())).collect()
}

#[test]
fn the_rate_of_a_leak_is_found_and_as_sure_as_it_says() {
    let (mut covered, days) = (0, 2000);
    let mut chance = Chance(11);
    for _ in 0..days {
        let found = decay(&held(&mut chance, 60.0, 1.5)).expect("it decays");
        covered += usize::from((found.rate_per_s - 1.0 / 60.0).abs() <= found.rate_u95);
    }
    let share = covered as f64 / f64::from(days);
    assert!((0.935..=0.965).contains(&share), "{share}");
}

/// A hose with a lag of 50 ms that empties in τ through its leak reads low by lag/(lag + τ) (divider of two resistances).
#[test]
fn a_tight_hose_passes_and_a_leaking_one_fails() {
    let mut chance = Chance(12);
    let tight = decay(&held(&mut chance, 1e9, 0.3)).expect("it stands");
    assert!(tight.falsifies(0.05) <= LEAK_ALLOWED, "{tight:?}");
    let leaking = decay(&held(&mut chance, 4.0, 0.3)).expect("it decays");
    let expected = 0.05 / (0.05 + 4.0);
    assert!((leaking.falsifies(0.05) - expected).abs() < 0.02 * expected, "{} {expected}", leaking.falsifies(0.05));
    assert!(leaking.falsifies(0.05) > LEAK_ALLOWED);
    assert_eq!(decay(&[(0.0, 0.0), (1.0, 0.0), (2.0, 0.0), (3.0, 0.0)]), None, "nothing held");
    assert_eq!(decay(&[(0.0, 5.0), (1.0, -5.0), (2.0, 5.0), (3.0, -5.0)]), None, "noise about nothing");
}

#[test]
fn the_lag_of_a_first_order_step_is_found() {
    let mut chance = Chance(13);
    for lag_s in [0.05, 0.12, 0.4] {
        let value = |t: f64| if t < 2.0 { 250.0 } else { 250.0 * (-(t - 2.0) / lag_s).exp() };
        let trace: Vec<(f64, f64)> =
            (0..400).map(|i| 0.01 * f64::from(i)).map(|t| (t, value(t) + 0.3 * chance.normal())).collect();
        let found = step_response(&trace).expect("a step");
        assert!((found.lag_s - lag_s).abs() < 0.05 * lag_s + 0.002, "{lag_s}: {found:?}");
        assert!((found.resolution_s - 0.01).abs() < 1e-9 && (found.from_to[0] - 250.0).abs() < 1.0);
    }
    let noise: Vec<(f64, f64)> = (0..400).map(|i| (0.01 * f64::from(i), chance.normal())).collect();
    assert_eq!(step_response(&noise), None);
}

fn rig() -> String {
    std::fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("configs/van-rig.toml")).unwrap()
}

#[test]
fn a_calibration_changes_one_line_of_the_rig_file_and_no_comment() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("rig.toml");
    std::fs::write(&path, rig()).unwrap();
    for convert in [
        Convert::Linear { gain: 0.499981, offset: -1023.959143 },
        Convert::Points(vec![[0.0, -10.0], [1.0, 0.5], [2.0, 11.0]]),
    ] {
        calibration::write(&path, "p2", &convert).unwrap();
        let after = std::fs::read_to_string(&path).unwrap();
        let other =
            |text: &str| text.lines().filter(|l| !l.starts_with("convert")).map(str::to_string).collect::<Vec<_>>();
        assert_eq!(other(&after), other(&rig()));
        let source = |name: &str| {
            let text =
                std::fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("configs").join(name)).unwrap();
            Source::new(name, text)
        };
        let read =
            config::setup(&source("van-outing.toml"), &Source::new("rig.toml", after), &source("van.toml")).unwrap();
        let channel = read.setup.rig.channels.iter().find(|c| c.name == "p2").unwrap();
        assert_eq!(channel.convert, convert);
    }
    let before = std::fs::read(&path).unwrap();
    let refused = calibration::write(&path, "no-such", &Convert::Linear { gain: 1.0, offset: 0.0 }).unwrap_err();
    assert!(refused.what.contains("no channel `no-such`"), "{refused}");
    assert_eq!(std::fs::read(&path).unwrap(), before);
}
