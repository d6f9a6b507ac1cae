//! Trade units become the ones used inside by their definitions, and back without loss.

use proptest::prelude::*;
use steadytap::units::{ANGLES, HUMIDITIES, LENGTHS, PRESSURES, Quantity, SPEEDS, StreamTime, TEMPERATURES, Unit};

fn inside(units: &[Unit], name: &str, figure: f64) -> f64 {
    Unit::find(units, name).unwrap_or_else(|| panic!("no unit {name}")).to_inside(figure)
}

#[track_caller]
fn near(got: f64, expected: f64) {
    assert!((got - expected).abs() <= 1e-12 * expected.abs().max(100.0), "{got} against {expected}");
}

/// Definitions from memory: SI Brochure (kelvin, radian), NIST SP 811 (degree Fahrenheit, inch), all exact.
#[test]
fn temperatures_angles_lengths_and_humidities_are_by_definition() {
    for (name, figure, celsius) in
        [("degC", -3.5, -3.5), ("K", 273.15, 0.0), ("K", 300.0, 26.85), ("degF", 32.0, 0.0), ("degF", 212.0, 100.0)]
    {
        near(inside(TEMPERATURES, name, figure), celsius);
    }
    // Where both scales show the same figure.
    near(inside(TEMPERATURES, "degF", -40.0), -40.0);
    near(inside(ANGLES, "rad", std::f64::consts::PI), 180.0);
    near(inside(ANGLES, "deg", 271.5), 271.5);
    for (name, millimetres) in [("mm", 1.0), ("cm", 10.0), ("m", 1000.0), ("in", 25.4)] {
        near(inside(LENGTHS, name, 1.0), millimetres);
    }
    near(inside(HUMIDITIES, "1", 0.6), 60.0);
    near(inside(HUMIDITIES, "%", 60.0), 60.0);
}

/// NIST SP 811: 1 cmH2O (conventional) is 98.0665 Pa; 2 inH2O by its three definitions.
#[test]
fn the_three_inches_of_water_are_told_apart() {
    near(inside(PRESSURES, "cmH2O", 1.0), 98.0665);
    for (name, pascals) in [("inH2O", 498.17782), ("inH2O-4C", 498.163871), ("inH2O-60F", 497.680140)] {
        assert!((inside(PRESSURES, name, 2.0) / pascals - 1.0).abs() < 1e-8, "{name}");
    }
    near(inside(PRESSURES, "bar", 1.0), 100_000.0);
    near(inside(PRESSURES, "kPa", 1.0), 1000.0);
    near(inside(SPEEDS, "m/s", 10.0), 36.0);
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn every_unit_goes_there_and_back(figure in -1e4f64..1e4) {
        for unit in Quantity::ALL.iter().flat_map(|q| q.units()) {
            let back = unit.from_inside(unit.to_inside(figure));
            prop_assert!((back - figure).abs() < 1e-9, "{} {figure} {back}", unit.name);
        }
    }

    #[test]
    fn a_stream_time_reads_back_as_written(us in 0i64..9_000_000_000_000_000) {
        let t = StreamTime::from_micros(us);
        prop_assert_eq!(StreamTime::parse(t.to_string().as_bytes()), Some(t));
    }

    #[test]
    fn what_is_no_stream_time_is_none(text in "[-+]?[0-9]{0,3}[.,]?[0-9]{0,7}[ e]?") {
        let (whole, decimals) = text.split_once('.').unwrap_or((&text, ""));
        let good = |part: &str| !part.is_empty() && part.bytes().all(|c| c.is_ascii_digit());
        let expected = good(whole) && good(decimals) && decimals.len() == 6;
        prop_assert_eq!(StreamTime::parse(text.as_bytes()).is_some(), expected, "{}", text);
    }
}
