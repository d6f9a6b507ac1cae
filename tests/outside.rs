//! The formulas give what sources outside this project say: `outside/checks.json` holds inputs, expected values,
//! tolerances and the source of each; here stands which of our functions answers it.
//!
//! A number passes when |got − expected| ≤ abs + rel·|expected|; `tolerance.fields` replaces the pair for single fields.

use nalgebra::{DMatrix, DVector};
use serde_json::{Value, json};
use std::collections::BTreeMap;
use steadytap::config::{Air, Channel, Convert, ProbeModel};
use steadytap::hold::statistics::{Accumulator, Place, lag_one_autocorrelation};
use steadytap::reduction::inference::{effective_dof, holm, passes_for, power, t_quantile, t_two_sided_p};
use steadytap::reduction::probe::{corrected_cp, dynamic_pressure, mach_of, pair, speed_of, total_over_static};
use steadytap::reduction::{air, model, zeros::Zeros};
use steadytap::session::{ChannelStatistics, Entry, Session, Zero};
use steadytap::signal::Scaler;
use steadytap::stream::nmea::{self, Sentence};
use steadytap::stream::record;
use steadytap::units::{PRESSURES, Quantity, SPEEDS, StreamTime, Unit, micros};

/// Pa in a millimetre of mercury (conventional; NIST SP 811), for checks whose inputs are in it.
const PA_PER_MMHG: f64 = 133.322387415;

fn number(v: &Value, key: &str) -> f64 {
    v[key].as_f64().unwrap_or_else(|| panic!("input {key} is a number"))
}

fn numbers(v: &Value, key: &str) -> Vec<f64> {
    let list = v[key].as_array().unwrap_or_else(|| panic!("input {key} is a list"));
    list.iter().map(|x| x.as_f64().unwrap_or(f64::INFINITY)).collect()
}

/// What our functions say; only the fields that they answer.
fn got(id: &str, i: &Value) -> Value {
    match id.split('-').next().unwrap_or("") {
        "air" => of_air(id, i),
        "unit" => of_unit(i),
        "pitot" => of_pitot(id, i),
        "seg" => of_segment(id, i),
        "tst" => of_tests(id, i),
        "lin" => of_model(i),
        "wnd" => of_wind(i),
        "cal" => of_calibration(id, i),
        "nmea" => of_nmea(id, i),
        other => panic!("nothing answers {other}"),
    }
}

fn of_air(id: &str, i: &Value) -> Value {
    if id.starts_with("air-psv") {
        return json!({"p_sv_cipm_Pa": air::saturation_pressure(number(i, "t_C") + air::CELSIUS_ZERO_K)});
    }
    if id.starts_with("air-mu") {
        return json!({"mu_Pa_s": air::viscosity(number(i, "t_C") + air::CELSIUS_ZERO_K)});
    }
    if id.starts_with("air-isa") {
        let s = air::standard(number(i, "geopotential_altitude_m"));
        let mut all = json!({"T_K": s.kelvin, "p_Pa": s.pressure_pa(), "rho_kg_m3": s.density, "mu_Pa_s": air::viscosity(s.kelvin)});
        if i["geometric_altitude_m"].is_number() {
            all["a_m_s"] = json!(air::speed_of_sound(s.kelvin));
        }
        return all;
    }
    let p = i["p_Pa"].as_f64().unwrap_or_else(|| number(i, "p_mmHg") * PA_PER_MMHG);
    let a = Air { temperature_c: number(i, "t_C"), pressure_hpa: p / 100.0, humidity_pct: number(i, "rh") * 100.0 };
    let mut all = json!({"rho_kg_m3": air::density(&a)});
    if id.starts_with("air-cipm") {
        let xv = air::vapour_fraction(&a);
        all["x_v"] = json!(xv);
        all["Z"] = json!(air::compressibility(&a, xv));
        all["enhancement"] = json!(air::enhancement(p, a.temperature_c));
        all["p_sv_Pa"] = json!(air::saturation_pressure(a.temperature_c + air::CELSIUS_ZERO_K));
    }
    all
}

fn of_unit(i: &Value) -> Value {
    let word = i["unit"].as_str().expect("a unit has a name");
    let pressure = match word {
        "lbf/in2" => "psi",
        "lbf/ft2" => "psf",
        "inHg conventional" => "inHg",
        "mmHg conventional" | "mmHg" => "mmHg",
        "mmH2O conventional" | "mmH2O" => "mmH2O",
        "cmH2O conventional" | "cmH2O" => "cmH2O",
        "inH2O conventional" => "inH2O",
        "inH2O (4 degC, 39.2 degF)" => "inH2O-4C",
        "inH2O (60 degF)" => "inH2O-60F",
        other => other,
    };
    if let Some(unit) = Unit::find(PRESSURES, pressure) {
        return json!({"value_Pa": unit.to_inside(number(i, "value"))});
    }
    let speed = match word {
        "mile/h" => "mph",
        "knot" => "kn",
        other => other,
    };
    let unit = Unit::find(SPEEDS, speed).unwrap_or_else(|| panic!("no unit {word}"));
    json!({"value_m_per_s": unit.to_inside(number(i, "value")) / 3.6})
}

fn of_pitot(id: &str, i: &Value) -> Value {
    if id.starts_with("pitot-q") {
        let (v, p) = (number(i, "V_kmh"), number(i, "p_Pa"));
        let q = dynamic_pressure(number(i, "rho_kg_m3"), v);
        let mach = v / 3.6 / number(i, "a_m_s");
        let impact = p * (total_over_static(mach) - 1.0);
        return json!({"q_Pa": q, "M": mach, "impact_qc_Pa": impact, "qc_over_q_minus_1": impact / q - 1.0});
    }
    if id.starts_with("pitot-V") {
        let v = speed_of(number(i, "rho_kg_m3"), number(i, "q_Pa"));
        return json!({"V_kmh": v, "V_m_s": v / 3.6});
    }
    if id.starts_with("pitot-M") {
        let m = number(i, "M");
        let ratio = total_over_static(m);
        return json!({"pt_over_p": ratio, "p_over_pt": 1.0 / ratio, "qc_over_q": (ratio - 1.0) / (0.7 * m * m)});
    }
    if id.starts_with("pitot-inv") {
        let mach = mach_of(number(i, "qc_Pa") / number(i, "p_Pa"));
        return json!({"M": mach, "V_m_s": mach * air::speed_of_sound(number(i, "T_K"))});
    }
    let (k, cp) = (number(i, "k_speed"), number(i, "cp_measured"));
    json!({"cp_static_error_model": corrected_cp(cp, k, ProbeModel::Static), "cp_gain_only_model": corrected_cp(cp, k, ProbeModel::Gain)})
}

/// The NumAcc sets by their rules.
fn num_acc(id: &str) -> Vec<f64> {
    let pairs = |base: f64| {
        std::iter::once(base + 0.2).chain((0..1000).map(move |i| base + if i % 2 == 0 { 0.1 } else { 0.3 })).collect()
    };
    match id {
        "seg-nist-numacc1" => vec![10_000_001.0, 10_000_003.0, 10_000_002.0],
        "seg-nist-numacc2" => {
            std::iter::once(1.2).chain((0..1000).map(|i| if i % 2 == 0 { 1.1 } else { 1.3 })).collect()
        }
        "seg-nist-numacc3" => pairs(1_000_000.0),
        _ => pairs(10_000_000.0),
    }
}

fn of_segment(id: &str, i: &Value) -> Value {
    if id == "seg-zero" {
        return of_zero(i);
    }
    let series = num_acc(id);
    let mut accumulator = Accumulator::new(false, 20);
    for (n, x) in series.iter().enumerate() {
        accumulator.push(Place { us: n as i64 * 1000, bin: n / 50 }, *x, false);
    }
    let s = accumulator.finish().expect("there are samples");
    json!({"n": s.n, "mean": s.mean, "sd": s.sd, "r1": lag_one_autocorrelation(&series)})
}

fn of_zero(i: &Value) -> Value {
    let zero = |id, t: f64, value: f64, u: f64| {
        let statistics = ChannelStatistics {
            n: 100,
            mean: value,
            sd: None,
            min: value,
            max: value,
            se: Some(u),
            slope: None,
            bins: vec![],
        };
        let t = StreamTime::from_micros(micros(t));
        Entry::Zero(Zero { id, t0: t, t1: t, bin_s: 0.3, channels: BTreeMap::from([("p".to_string(), statistics)]) })
    };
    let setup = steadytap::cli::van().expect("the van's files are good");
    let entries = vec![
        zero(1, number(i, "t0"), number(i, "zero0_Pa"), number(i, "u0_Pa")),
        zero(2, number(i, "t1"), number(i, "zero1_Pa"), number(i, "u1_Pa")),
    ];
    let session = Session { header: steadytap::shell::rehold::header(&setup, None), entries, damage: vec![] };
    let zeros = Zeros::of(&session);
    let at = |t: &f64| zeros.at("p", StreamTime::from_micros(micros(*t))).expect("there are zeros");
    let (times, raw) = (numbers(i, "t"), numbers(i, "p_raw_Pa"));
    let corrected: Vec<f64> = times.iter().zip(&raw).map(|(t, p)| p - at(t).pa).collect();
    let u = |t: &f64| at(t).parts.iter().map(|(k, w)| (w * zeros.standard_error(*k, "p")).powi(2)).sum::<f64>().sqrt();
    json!({"p_corrected_Pa": corrected, "u_zero_Pa": times.iter().map(u).collect::<Vec<_>>()})
}

fn of_tests(id: &str, i: &Value) -> Value {
    let t = |p: f64| numbers(i, "dof").iter().map(|dof| t_quantile(p, *dof)).collect::<Vec<_>>();
    match id {
        "tst-t95" => json!({"t": t(0.975)}),
        "tst-t-frac" => json!({"t_0975": t(0.975), "t_0995": t(0.995), "t_080": t(0.80)}),
        "tst-t-p" => {
            let row = |dof: &f64| numbers(i, "t").iter().map(|t| t_two_sided_p(*t, *dof)).collect::<Vec<_>>();
            json!({"p_two_sided": numbers(i, "dof").iter().map(row).collect::<Vec<_>>()})
        }
        "tst-power" => {
            let n: Vec<_> = numbers(i, "delta_over_sd").iter().map(|d| passes_for(*d, 0.05)).collect();
            let sizes = numbers(i, "delta_over_sd");
            let at = sizes.iter().zip(&n).map(|(d, n)| {
                let n = f64::from(n.expect("these sizes can be found"));
                power(d * (n / 2.0).sqrt(), 2.0 * n - 2.0, 0.05)
            });
            json!({"power_at_n": at.collect::<Vec<_>>(), "n_per_config": n})
        }
        "tst-mdd" => {
            // The size that is found with probability 0.8 is where the power crosses it.
            let size = |n: &f64| {
                let (mut low, mut high) = (0.0, 20.0);
                for _ in 0..60 {
                    let middle = f64::midpoint(low, high);
                    let found = power(middle * (n / 2.0).sqrt(), 2.0 * n - 2.0, 0.05).expect("dof is positive");
                    if found < 0.8 { low = middle } else { high = middle }
                }
                low
            };
            json!({"delta_over_sd": numbers(i, "n_per_config").iter().map(size).collect::<Vec<_>>()})
        }
        "tst-gum-h1" => {
            let parts: Vec<(f64, f64)> = numbers(i, "u_nm").iter().map(|u| u * u).zip(numbers(i, "dof")).collect();
            json!({"nu_eff_full": effective_dof(&parts), "uc_nm": parts.iter().map(|p| p.0).sum::<f64>().sqrt()})
        }
        "tst-gum-g41" => {
            let u = numbers(i, "u_rel_percent");
            let parts: Vec<(f64, f64)> = u.iter().map(|u| u * u).zip(numbers(i, "n").iter().map(|n| n - 1.0)).collect();
            json!({"nu_eff_full": effective_dof(&parts), "uc_full": parts.iter().map(|p| p.0).sum::<f64>().sqrt()})
        }
        _ => json!({"p_adjusted": holm(&numbers(i, "p"))}),
    }
}

fn of_model(i: &Value) -> Value {
    let rows: Vec<Vec<f64>> = serde_json::from_value(i["design"].clone()).expect("a design");
    let (n, k) = (rows.len(), rows[0].len());
    let design = DMatrix::from_fn(n, k, |r, c| rows[r][c]);
    let fit = model::fit(&design, &DVector::from_vec(numbers(i, "cp"))).expect("a full-rank design");
    let names: Vec<&str> = ["A", "B", "C"].into_iter().take(k - 1).chain(["drift_per_h"]).collect();
    let beta: BTreeMap<&str, f64> = names.iter().copied().zip(fit.estimates.iter().copied()).collect();
    let se = |j: usize| {
        let mut c = DVector::zeros(k);
        c[j] = 1.0;
        fit.variance_of(&c).map(f64::sqrt)
    };
    let mut all = json!({"beta": beta});
    if i["design_columns"].is_array() {
        let contrast = DVector::from_fn(k, |j, _| [-1.0, 1.0].get(j).copied().unwrap_or(0.0));
        let se_of = fit.variance_of(&contrast).map(f64::sqrt);
        all["se"] = json!(names.iter().enumerate().map(|(j, name)| (*name, se(j))).collect::<BTreeMap<_, _>>());
        all["dof"] = json!(fit.dof);
        all["s"] = json!(fit.variance.map(f64::sqrt));
        all["rss"] = json!(fit.residuals.norm_squared());
        all["contrasts"] = json!({"B-A": {"estimate": fit.value(&contrast), "se": se_of}});
    }
    all
}

fn of_wind(i: &Value) -> Value {
    let found = pair([number(i, "Vg1"), number(i, "Vg2")], [number(i, "Va1"), number(i, "Va2")])
        .expect("airspeeds are positive");
    json!({"k": found.k, "headwind_on_run1": found.head_wind})
}

fn scaler(unit: &str, convert: Convert) -> Scaler {
    Scaler::new(&Channel {
        name: "p".into(),
        port: "gauge".into(),
        field: "p".into(),
        quantity: Quantity::Pressure,
        unit: unit.into(),
        convert,
        range: None,
        lag_s: 0.0,
        tube: None,
        damping_s: 0.0,
        stale_s: 1.0,
    })
}

fn of_calibration(id: &str, i: &Value) -> Value {
    // The datasheet's P/kPa = (Vout/Vs − 0.5)/0.2.
    let ratiometric = |supply: f64| scaler("Pa", Convert::Ratiometric { supply, zero: 0.5, span: 0.2, full: 1000.0 });
    match id {
        "cal-ratiometric" => {
            let p = numbers(i, "Vs").into_iter().zip(numbers(i, "Vout")).map(|(vs, v)| ratiometric(vs).scale(v).0);
            json!({"p_Pa": p.collect::<Vec<_>>()})
        }
        "cal-ratiometric-trap" => {
            let (actual, assumed) = (number(i, "Vs_actual"), number(i, "Vs_assumed"));
            let p = numbers(i, "p_true_Pa")
                .into_iter()
                .map(|p| ratiometric(assumed).scale(actual * (0.2 * p / 1000.0 + 0.5)).0);
            json!({"p_reported_Pa": p.collect::<Vec<_>>()})
        }
        "cal-counts" => {
            let counts = scaler("Pa", Convert::Linear { gain: 1.0 / number(i, "scale_per_Pa"), offset: 0.0 });
            json!({"p_Pa": numbers(i, "counts").into_iter().map(|c| counts.scale(c).0).collect::<Vec<_>>()})
        }
        _ => {
            let t0 = number(i, "t0");
            let t = numbers(i, "t_C");
            let design = DMatrix::from_fn(t.len(), 2, |r, c| if c == 0 { 1.0 } else { t[r] - t0 });
            let fit = model::fit(&design, &DVector::from_vec(numbers(i, "b_C"))).expect("a full-rank design");
            let at = DVector::from_vec(vec![1.0, number(i, "t_pred") - t0]);
            json!({"y1_full": fit.estimates[0], "y2_full": fit.estimates[1], "dof": fit.dof,
                "u_b30_full": fit.variance_of(&at).map(f64::sqrt)})
        }
    }
}

fn of_nmea(id: &str, i: &Value) -> Value {
    match id {
        "nmea-checksum" => {
            let bodies = i["bodies"].as_array().expect("bodies").iter();
            let sums = bodies.map(|b| format!("{:02X}", nmea::checksum(b.as_str().expect("text").as_bytes())));
            return json!({"xor_hex": sums.collect::<Vec<_>>()});
        }
        "nmea-track-mean" => {
            let mut accumulator = Accumulator::new(true, 1);
            numbers(i, "track_deg").iter().for_each(|x| accumulator.push(Place { us: 0, bin: 0 }, *x, false));
            return json!({"circular_mean_deg": accumulator.finish().expect("there are samples").mean});
        }
        _ => {}
    }
    let sentence = i["sentence"].as_str().expect("a sentence").trim_end_matches("\r\n");
    match nmea::parse(sentence.as_bytes()) {
        Err(steadytap::stream::Reject::WrongChecksum) => json!({"error": "checksum"}),
        Err(steadytap::stream::Reject::NoChecksum) => json!({"error": "no checksum"}),
        Err(other) => json!({"error": other.to_string()}),
        Ok(Sentence::Rmc(r)) => {
            let date = r.date.map(|(d, m, y)| format!("{y:04}-{m:02}-{d:02}"));
            json!({"type": "RMC", "time_s": r.time_s, "valid": r.valid, "lat": r.lat, "lon": r.lon, "date": date,
                "speed_m_s": r.speed_kmh.map(|v| v / 3.6), "track_deg": r.track_deg})
        }
        Ok(Sentence::Vtg(v)) => {
            json!({"type": "VTG", "track_deg": v.track_deg, "speed_m_s": v.speed_kmh.map(|v| v / 3.6)})
        }
        Ok(Sentence::Gga(g)) => {
            json!({"type": "GGA", "time_s": g.time_s, "lat": g.lat, "lon": g.lon, "quality": g.quality, "alt_m": g.altitude_m})
        }
        Ok(Sentence::Other) => json!({"type": "other"}),
    }
}

// ---------------------------------------------------------------- the comparison

type Tolerance = (f64, f64);

/// Compares every field that we answer; numbers compared and what differs.
fn compare(
    got: &Value,
    want: &Value,
    (tolerance, fields): (Tolerance, &Value),
    path: &str,
    wrong: &mut Vec<String>,
) -> usize {
    let here =
        fields.get(path.rsplit('.').next().unwrap_or("")).map_or(tolerance, |t| (number(t, "rel"), number(t, "abs")));
    match (got, want) {
        (Value::Object(got), Value::Object(want)) => got
            .iter()
            .map(|(key, value)| match want.get(key) {
                Some(expected) => compare(value, expected, (here, fields), &format!("{path}.{key}"), wrong),
                None => {
                    wrong.push(format!("{path}.{key} is not among the expected fields"));
                    0
                }
            })
            .sum(),
        (Value::Array(got), Value::Array(want)) if got.len() == want.len() => {
            got.iter().zip(want).map(|(g, w)| compare(g, w, (here, fields), path, wrong)).sum()
        }
        (Value::Number(got), Value::Number(want)) => {
            let (g, w) = (got.as_f64().expect("a number"), want.as_f64().expect("a number"));
            if (g - w).abs() > here.1 + here.0 * w.abs() {
                wrong.push(format!("{path}: got {g}, expected {w}"));
            }
            1
        }
        (got, want) if got == want => 1,
        (got, want) => {
            wrong.push(format!("{path}: got {got}, expected {want}"));
            1
        }
    }
}

#[test]
#[expect(clippy::disallowed_macros, reason = "a test may show its figures")]
fn every_outside_check_is_met() {
    let checks: Vec<Value> = serde_json::from_str(include_str!("outside/checks.json")).expect("the checks are JSON");
    let (mut wrong, mut values) = (Vec::new(), 0);
    for check in &checks {
        let id = check["id"].as_str().expect("a check has an id");
        assert!(check["source"].as_str().is_some_and(|s| !s.is_empty()), "{id} names no source");
        let tolerance = (number(&check["tolerance"], "rel"), number(&check["tolerance"], "abs"));
        let fields = &check["tolerance"]["fields"];
        let mut differs = Vec::new();
        let compared = compare(&got(id, &check["inputs"]), &check["expected"], (tolerance, fields), id, &mut differs);
        assert!(compared > 0, "{id}: nothing was compared");
        values += compared;
        wrong.extend(differs);
    }
    println!("{} checks, {values} values", checks.len());
    assert!(wrong.is_empty(), "{} of {} checks' values differ:\n{}", wrong.len(), checks.len(), wrong.join("\n"));
    assert!(checks.len() > 90, "checks were lost");
}

/// Michelson's speeds of light in the order of NIST StRD `Michelso`: 299 + Speed/1000 of R's `morley`; last digits here.
#[test]
fn statistics_meet_the_certified_values_of_michelso() {
    const SPEED: [u16; 100] = [
        850, 740, 900, 1070, 930, 850, 950, 980, 980, 880, 1000, 980, 930, 650, 760, 810, 1000, 1000, 960, 960, 960,
        940, 960, 940, 880, 800, 850, 880, 900, 840, 830, 790, 810, 880, 880, 830, 800, 790, 760, 800, 880, 880, 880,
        860, 720, 720, 620, 860, 970, 950, 880, 910, 850, 870, 840, 840, 850, 840, 840, 840, 890, 810, 810, 820, 800,
        770, 760, 740, 750, 760, 910, 920, 890, 860, 880, 720, 840, 850, 850, 780, 890, 840, 780, 810, 760, 810, 790,
        810, 820, 850, 870, 870, 810, 740, 810, 940, 950, 800, 810, 870,
    ];
    let series: Vec<f64> = SPEED.iter().map(|s| 299.0 + f64::from(*s) / 1000.0).collect();
    let mut accumulator = Accumulator::new(false, 1);
    series.iter().for_each(|x| accumulator.push(Place { us: 0, bin: 0 }, *x, false));
    let s = accumulator.finish().expect("there are samples");
    // NIST StRD, univariate, Michelso: certified mean, standard deviation, lag-1 autocorrelation.
    assert!((s.mean / 299.8524 - 1.0).abs() < 1e-13, "mean {}", s.mean);
    assert!((s.sd.unwrap() / 0.0790105478190518 - 1.0).abs() < 1e-9, "sd {:?}", s.sd);
    let r1 = lag_one_autocorrelation(&series).unwrap();
    assert!((r1 / 0.535199668621283 - 1.0).abs() < 1e-9, "r1 {r1}");
}

/// The text of a record's `started` and the escape of a byte are what FORMATS says: `\xNN`, `\\`.
#[test]
fn an_escaped_line_reads_back_to_the_same_bytes() {
    let all: Vec<u8> = (0..=255).collect();
    let mut escaped = Vec::new();
    record::escape_into(&mut escaped, &all);
    assert!(escaped.iter().all(|c| (0x20..=0x7E).contains(c)));
    assert_eq!(record::unescape(&escaped).as_ref(), all);
}
