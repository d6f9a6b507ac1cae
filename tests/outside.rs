//! The formulas give what sources outside this project say: `outside/checks.json` holds inputs, expected values,
//! tolerances and the source of each; here stands which of our functions answers it.
//!
//! A number passes when |got − expected| ≤ abs + rel·|expected|; `tolerance.fields` replaces the pair for single fields.

use nalgebra::{DMatrix, DVector};
use serde_json::{Value, json};
use std::collections::BTreeMap;
use steadytap::config::{Air, Channel, Convert, ProbeModel};
use steadytap::hold::statistics::{Accumulator, Place, lag_one_autocorrelation};
use steadytap::pneumatics::{Gas, Tube, settle_of_lag_s, with_leak};
use steadytap::reduction::inference::{effective_dof, holm, passes_for, power, t_quantile, t_two_sided_p};
use steadytap::reduction::probe::{corrected_cp, dynamic_pressure, mach_of, pair, speed_of, total_over_static};
use steadytap::reduction::wind::{self, Leg};
use steadytap::reduction::workshop::{self, Point};
use steadytap::reduction::{air, contour, cores, force, model, sweep, zeros::Zeros};
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
        "wnd" => of_wind(id, i),
        "frc" => of_force(id, i),
        "bas" => of_base(id, i),
        "swp" => of_sweep(id, i),
        "tub" => of_tube(id, i),
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
    if id == "air-sens" || id == "air-budget" {
        return of_air_sensitivities(id, i);
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

/// Relative change of the density for a small step of each input, by central differences.
fn of_air_sensitivities(id: &str, i: &Value) -> Value {
    let a = Air {
        temperature_c: number(i, "t_C"),
        pressure_hpa: number(i, "p_Pa") / 100.0,
        humidity_pct: number(i, "rh") * 100.0,
    };
    let slope = |step: f64, of: fn(Air, f64) -> Air| {
        (air::density(&of(a, step)).ln() - air::density(&of(a, -step)).ln()) / (2.0 * step)
    };
    let per_k = slope(1e-3, |a, d| Air { temperature_c: a.temperature_c + d, ..a });
    let per_pa = slope(1.0, |a, d| Air { pressure_hpa: a.pressure_hpa + d / 100.0, ..a });
    let per_rh = slope(1e-4, |a, d| Air { humidity_pct: a.humidity_pct + 100.0 * d, ..a });
    if id == "air-sens" {
        return json!({"dlnrho_dT_perK": per_k, "dlnrho_dp_perPa": per_pa, "dlnrho_drh": per_rh});
    }
    let parts = [per_k * number(i, "u_T_K"), per_pa * number(i, "u_p_Pa"), per_rh * number(i, "u_rh")];
    let u = parts.iter().map(|p| p * p).sum::<f64>().sqrt();
    // V goes with 1/√ρ at one q.
    json!({"u_rel_rho": u, "u_rel_V_from_q": u / 2.0})
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

fn of_wind(id: &str, i: &Value) -> Value {
    let two = |a: &str, b: &str| [number(i, a), number(i, b)];
    match id {
        "wnd-pair-crosswind" => {
            // Two runs with the resultant as airspeed; the pair's k against the true one.
            let (v, w, k) = (number(i, "V"), number(i, "headwind"), number(i, "k_true"));
            let air = |c: f64| [(v + w).hypot(c) / k, (v - w).hypot(c) / k];
            let error = |c: &f64| pair([v, v], air(*c)).expect("airspeeds are positive").k / k - 1.0;
            json!({"k_error_rel": numbers(i, "crosswind").iter().map(error).collect::<Vec<_>>()})
        }
        "wnd-fit-degenerate" => {
            let legs = [0.0, 180.0, 0.0, 180.0].map(|t| Leg { ground_m_s: 27.8, track_deg: t, air_m_s: 27.0 });
            json!({"solvable": wind::fit(&legs).is_ok()})
        }
        _ if id.starts_with("wnd-fit") => {
            let legs = numbers(i, "Vg").into_iter().zip(numbers(i, "track_deg")).zip(numbers(i, "Va_indicated"));
            let legs: Vec<Leg> = legs.map(|((g, t), a)| Leg { ground_m_s: g, track_deg: t, air_m_s: a }).collect();
            let fit = wind::fit(&legs).expect("the headings span the plane");
            let mut all = json!({"k": fit.k, "wind_north_to": fit.towards[0], "wind_east_to": fit.towards[1]});
            if id.contains("noisy") {
                let covariance = fit.covariance.expect("degrees of freedom");
                all["rss"] = json!(fit.rss);
                all["dof"] = json!(fit.dof);
                all["se"] = json!([0, 1, 2].map(|j| covariance[(j, j)].sqrt()));
                all["cov"] = json!([0, 1, 2].map(|r| [0, 1, 2].map(|c| covariance[(r, c)])));
            } else {
                all["wind_speed"] = json!(fit.speed_m_s());
                all["wind_from_deg"] = json!(fit.from_deg());
            }
            all
        }
        "wnd-gs-multitap" => {
            let p: Vec<[f64; 2]> = numbers(i, "p1").into_iter().zip(numbers(i, "p2")).map(|(a, b)| [a, b]).collect();
            let found = wind::ground_speed_pair(two("V1", "V2"), number(i, "rho"), &p).expect("the taps tell a wind");
            json!({"headwind": found.head_wind_m_s, "cp": found.cp, "rss": found.rss, "se_headwind": found.se_m_s})
        }
        "wnd-gs-u" => {
            // The wind's change for a small change of either pressure.
            let v = number(i, "V");
            let wind =
                |p: [f64; 2]| wind::ground_speed_pair([v, v], number(i, "rho"), &[p]).expect("a wind").head_wind_m_s;
            let p = two("p1", "p2");
            let by = |k: usize| {
                let moved = |d: f64| std::array::from_fn(|j| if j == k { p[j] + d } else { p[j] });
                (wind(moved(1e-3)) - wind(moved(-1e-3))) / 2e-3 * number(i, "u_p")
            };
            json!({"headwind": wind(p), "u_headwind": by(0).hypot(by(1))})
        }
        _ if id.starts_with("wnd-gs") => {
            let found = wind::ground_speed_pair(two("V1", "V2"), number(i, "rho"), &[two("p1", "p2")]).expect("a wind");
            json!({"headwind_on_run1": found.head_wind_m_s, "cp": found.cp[0]})
        }
        "wnd-bias" => {
            // The mean of q over the pair against q at ground speed: what dividing by ground speed overstates.
            let v = number(i, "V");
            let q = |v: f64| dynamic_pressure(1.2, v * 3.6);
            let cell = |c: &f64, w: &f64| (q((v + w).hypot(*c)) + q((v - w).hypot(*c))) / 2.0 / q(v) - 1.0;
            let row = |c: &f64| numbers(i, "headwind").iter().map(|w| cell(c, w)).collect::<Vec<_>>();
            json!({"cp_naive_error_rel": numbers(i, "crosswind").iter().map(row).collect::<Vec<_>>()})
        }
        "wnd-ab-false" => {
            let (v, a, b) = (number(i, "V"), number(i, "headwind_A"), number(i, "headwind_B"));
            let q = |v: f64| dynamic_pressure(1.2, v * 3.6);
            let both = |w: f64| q(v + w) + q(v - w);
            json!({"false_change_single_direction": q(v + b) / q(v + a) - 1.0, "false_change_out_and_back": both(b) / both(a) - 1.0})
        }
        _ => {
            let found = pair(two("Vg1", "Vg2"), two("Va1", "Va2")).expect("airspeeds are positive");
            json!({"k": found.k, "headwind_on_run1": found.head_wind})
        }
    }
}

fn of_force(id: &str, i: &Value) -> Value {
    let g = steadytap::units::STANDARD_GRAVITY;
    match id {
        "frc-trade" => {
            let p = numbers(i, "zone_pressures_Pa");
            let area = number(i, "zone2_kgf") * g / -p[1];
            let kgf: Vec<f64> = p.iter().map(|p| -force::patch(*p, area, [0.0, 0.0, -1.0])[2] / g).collect();
            let total: f64 = kgf.iter().sum();
            let at_200 = total * dynamic_pressure(1.2, 200.0) / dynamic_pressure(1.2, 100.0);
            json!({"area_m2": area, "zone_kgf": kgf, "total_kgf": total, "total_kgf_at_200": at_200})
        }
        "frc-patches" => {
            let patches = i["patches"].as_array().expect("patches");
            let three = |v: &Value| -> [f64; 3] { serde_json::from_value(v.clone()).expect("three numbers") };
            let about = three(&i["moment_reference"]);
            let (mut f, mut m) = ([0.0; 3], [0.0; 3]);
            for p in patches {
                let one = force::patch(p[0].as_f64().unwrap(), p[1].as_f64().unwrap(), three(&p[2]));
                let turn = force::moment(three(&p[3]), about, one);
                (0..3).for_each(|k| (f[k], m[k]) = (f[k] + one[k], m[k] + turn[k]));
            }
            json!({"F_N": f, "M_Nm": m, "F_kgf": f.map(|f| f / g)})
        }
        "frc-axle" => {
            let loads = i["loads"].as_array().expect("loads");
            let (mut front, mut rear) = (0.0, 0.0);
            for load in loads {
                let at = [number(load, "x_behind_front_axle_m"), 0.0, 0.0];
                let [f, r] = force::axles([0.0, 0.0, number(load, "Fz_N")], at, number(i, "wheelbase_m"));
                (front, rear) = (front + f, rear + r);
            }
            json!({"total_Fz_N": front + rear, "rear_N": rear, "front_N": front, "front_share": front / (front + rear)})
        }
        "frc-axle-drag" => {
            let (fz, l, rear) = (number(i, "Fz_N"), number(i, "wheelbase_m"), number(i, "rear_from_vertical_N"));
            let at = [rear * l / fz, 0.0, number(i, "height_m")];
            let [f, r] = force::axles([number(i, "drag_N"), 0.0, fz], at, l);
            json!({"rear_N": r, "front_N": f, "transfer_N": rear - r})
        }
        "frc-const" => {
            let points: Vec<[f64; 2]> = serde_json::from_value(i["polygon_ccw"].clone()).expect("points");
            let about: [f64; 2] = serde_json::from_value(i["moment_point"].clone()).expect("a point");
            let s = contour::section(&points, &vec![number(i, "cp"); points.len()], about, 1.0);
            json!({"cx": s.cx, "cy": s.cz, "cm": s.cm})
        }
        "frc-sae" => {
            // One lift where its moment about mid-wheelbase, nose up, is the coefficient's.
            let (lift, moment) = (number(i, "C_L"), number(i, "C_PM_about_midwheelbase_per_wheelbase"));
            let [front, rear] = force::axles([0.0, 0.0, lift], [0.5 - moment / lift, 0.0, 0.0], 1.0);
            json!({"C_LF": front, "C_LR": rear})
        }
        "frc-jouk" => {
            let sections: Vec<[f64; 3]> = numbers(i, "N").iter().map(|n| joukowski(*n as usize, i)).collect();
            let column = |k: usize| sections.iter().map(|s| s[k]).collect::<Vec<_>>();
            json!({"cl_polygon": column(0), "cd_polygon": column(1), "cm_polygon": column(2)})
        }
        _ if id.starts_with("frc-cyl") => {
            let gamma = number(i, "Gamma_over_RU");
            let sections = numbers(i, "N").into_iter().map(|n| {
                let angle = |j: usize| 2.0 * std::f64::consts::PI * j as f64 / n;
                let points: Vec<[f64; 2]> = (0..n as usize).map(|j| [angle(j).cos(), angle(j).sin()]).collect();
                let cp = |p: &[f64; 2]| 1.0 - (2.0 * p[1] + gamma / (2.0 * std::f64::consts::PI)).powi(2);
                let cps: Vec<f64> = points.iter().map(cp).collect();
                contour::section(&points, &cps, [0.0, 0.0], 2.0)
            });
            let all: Vec<_> = sections.collect();
            json!({"cl_polygon": all.iter().map(|s| s.cz).collect::<Vec<_>>(), "cd_polygon": all.iter().map(|s| s.cx).collect::<Vec<_>>(),
                "cm_polygon": all.iter().map(|s| s.cm).collect::<Vec<_>>()})
        }
        _ => {
            // F goes with q at one density.
            let q = |key: &str| dynamic_pressure(1.2, number(i, key));
            json!({"F2": number(i, "F") * q("V2_kmh") / q("V1_kmh")})
        }
    }
}

/// Lift, drag and nose-up moment of a polygon of `n` points on a Joukowski aerofoil, from the trailing edge, with the Cp of its potential flow
/// (map ζ + c²/ζ, Kutta condition; the limit of the velocity at the trailing edge).
fn joukowski(n: usize, i: &Value) -> [f64; 3] {
    use nalgebra::Complex;
    let centre = numbers(i, "circle_centre");
    let (c, alpha) = (number(i, "c"), number(i, "alpha_deg").to_radians());
    let mu = Complex::new(centre[0], centre[1]);
    let radius = (c - mu).norm();
    let beta = (centre[1] / radius).asin();
    let circulation = 4.0 * std::f64::consts::PI * radius * (alpha + beta).sin();
    let (turn, vortex) = (Complex::from_polar(1.0, alpha), Complex::new(0.0, circulation / std::f64::consts::TAU));
    let (mut points, mut cp) = (Vec::new(), Vec::new());
    for k in 0..n {
        let zeta = mu + Complex::from_polar(radius, std::f64::consts::TAU * k as f64 / n as f64 - beta);
        let from = zeta - mu;
        let velocity = if k == 0 {
            (turn * 2.0 * radius * radius / from.powi(3) - vortex / from.powi(2)) * c / 2.0
        } else {
            (turn.conj() - turn * radius * radius / from.powi(2) + vortex / from) / (1.0 - c * c / zeta.powi(2))
        };
        let z = zeta + c * c / zeta;
        points.push([z.re, z.im]);
        cp.push(1.0 - velocity.norm_sqr());
    }
    let s = contour::section(&points, &cp, [0.0, 0.0], number(i, "chord"));
    [s.cz * alpha.cos() - s.cx * alpha.sin(), s.cz * alpha.sin() + s.cx * alpha.cos(), -s.cm]
}

fn of_base(id: &str, i: &Value) -> Value {
    match id {
        "bas-base" => {
            let (area, reference) = (numbers(i, "tap_area_m2"), number(i, "A_ref_m2"));
            let whole: f64 = area.iter().sum();
            let sum =
                |cp: &[f64]| area.iter().zip(cp).map(|(a, cp)| force::patch(*cp, *a, [1.0, 0.0, 0.0])[0]).sum::<f64>();
            let (a, b) = (sum(&numbers(i, "cp_A")), sum(&numbers(i, "cp_B")));
            let parts: Vec<f64> =
                area.iter().zip(numbers(i, "u_of_each_difference")).map(|(a, u)| a * u / reference).collect();
            let [independent, common] = force::independent_and_common(&parts);
            json!({"A_base_m2": whole, "mean_cp_A": -a / whole, "mean_cp_B": -b / whole, "cd_base_A": a / reference,
                "delta_cd": (b - a) / reference, "u_delta_cd_independent": independent, "u_delta_cd_fully_correlated": common})
        }
        "bas-simple" => {
            let f = force::patch(number(i, "delta_mean_cp_base"), number(i, "A_base_m2"), [1.0, 0.0, 0.0])[0];
            json!({"delta_cd": f / number(i, "A_ref_m2")})
        }
        "bas-power" => {
            let q = dynamic_pressure(number(i, "rho"), number(i, "V_kmh"));
            let drag = number(i, "delta_cd") * number(i, "A_ref_m2") * q;
            json!({"delta_drag_N": drag, "delta_power_W": drag * number(i, "V_kmh") / 3.6})
        }
        "bas-core-fit" => {
            let points: Vec<[f64; 2]> =
                numbers(i, "v_m_s").into_iter().zip(numbers(i, "dp_Pa")).map(|(v, p)| [v, p]).collect();
            let (plain, relative) = (cores::fit(&points, false).unwrap(), cores::fit(&points, true).unwrap());
            json!({"a": plain.a, "b": plain.b, "a_relative_weighting": relative.a, "b_relative_weighting": relative.b})
        }
        "bas-core-inv" => {
            let curve = cores::Curve { a: number(i, "a"), b: number(i, "b") };
            json!({"v_m_s": numbers(i, "dp_Pa").into_iter().map(|p| curve.velocity(p)).collect::<Vec<_>>()})
        }
        "bas-core-ratio" => {
            let curve = cores::Curve { a: number(i, "a"), b: number(i, "b") };
            let v = |key: &str| curve.velocity(number(i, key)).unwrap();
            json!({"flow_ratio": v("dp_new_Pa") / v("dp_baseline_Pa")})
        }
        _ => {
            let bench = cores::Curve { a: number(i, "a_bench"), b: number(i, "b_bench") };
            let curve =
                bench.in_air(number(i, "mu") / number(i, "mu_bench"), number(i, "rho") / number(i, "rho_bench"));
            json!({"a": curve.a, "b": curve.b, "v_m_s": curve.velocity(number(i, "dp_Pa"))})
        }
    }
}

/// The quadratic of `swp-quad`, on which three other checks rest.
fn quadratic() -> (sweep::Quadratic, model::Fit, Vec<f64>, Vec<f64>) {
    let x: Vec<f64> = [0.0, 5.0, 10.0, 15.0, 20.0, 25.0].into_iter().flat_map(|x| [x, x]).collect();
    #[expect(clippy::approx_constant, reason = "a measured Cp happens to be near 1/π")]
    let y = vec![-0.212, -0.219, -0.262, -0.255, -0.291, -0.298, -0.318, -0.325, -0.334, -0.329, -0.338, -0.345];
    let design = DMatrix::from_fn(x.len(), 3, |i, j| x[i].powi(j as i32));
    let fit = model::fit(&design, &DVector::from_vec(y.clone())).expect("a full-rank design");
    (sweep::Quadratic::of(&fit).expect("degrees of freedom"), fit, x, y)
}

fn of_sweep(id: &str, i: &Value) -> Value {
    let (curve, fit, x, y) = quadratic();
    let within = |set| match set {
        sweep::Interval::Within(a, b) => ("interval", [a, b]),
        sweep::Interval::Outside(a, b) => ("outside", [a, b]),
        other => panic!("{other:?}"),
    };
    match id {
        "swp-quad" => {
            let levels = DMatrix::from_fn(x.len(), 6, |r, c| f64::from(u8::from(r / 2 == c)));
            let free = model::fit(&levels, &DVector::from_vec(y)).expect("two passes a level");
            let test =
                sweep::lack_of_fit((fit.residuals.norm_squared(), fit.dof), (free.residuals.norm_squared(), free.dof));
            let (f, p) = test.expect("there are replicates");
            json!({"b": curve.b, "se": ([0, 1, 2].map(|j| curve.covariance[(j, j)].sqrt())), "dof": fit.dof, "s": fit.variance.map(f64::sqrt),
                "lack_of_fit_F": f, "lack_of_fit_p": p, "ss_pure_error": free.residuals.norm_squared()})
        }
        "swp-cross" => {
            let x = curve.crossing(number(i, "target"), [0.0, 25.0]).expect("it crosses");
            let ([low, high], open) = curve.crossing_interval(number(i, "target"), [0.0, 25.0]).expect("it crosses");
            assert_eq!(open, [false, false]);
            json!({"x_cross": x, "slope": curve.slope(x), "se_fit_at_cross": curve.se(x), "se_x_delta": curve.crossing_se(x), "ci95_inversion": [low, high]})
        }
        "swp-cross-flat" => {
            let x = curve.crossing(number(i, "target"), [0.0, 25.0]).expect("it crosses");
            let ([low, _], [_, open]) = curve.crossing_interval(number(i, "target"), [0.0, 25.0]).expect("it crosses");
            json!({"x_cross": x, "ci95_low": low, "band_still_contains_target_at_x25": open})
        }
        "swp-vertex" => {
            let (x, set, g) = curve.vertex().expect("it is curved");
            let (kind, bounds) = within(set);
            json!({"x_vertex": x, "se_delta": curve.vertex_se(), "fieller_kind": kind, "ci95_fieller": bounds, "g": g})
        }
        _ if id.starts_with("swp-line") => {
            let x = numbers(i, "x");
            let design = DMatrix::from_fn(x.len(), 2, |r, c| x[r].powi(c as i32));
            let fit = model::fit(&design, &DVector::from_vec(numbers(i, "y"))).expect("a full-rank design");
            let s2 = fit.variance.expect("degrees of freedom");
            let (b0, b1) = (fit.estimates[0], fit.estimates[1]);
            let v = |r, c| fit.unscaled[(r, c)] * s2;
            // x = (target − b₀)/b₁.
            let t = t_quantile(0.975, fit.dof as f64).unwrap();
            let (set, g) = sweep::fieller(number(i, "target") - b0, b1, (v(0, 0), v(1, 1), -v(0, 1)), t);
            let (kind, mut bounds) = within(set);
            bounds.sort_by(f64::total_cmp);
            json!({"b0": b0, "b1": b1, "x_cross": (number(i, "target") - b0) / b1, "g": g, "kind": kind, "fieller_bounds": bounds})
        }
        "swp-pchip-cross" => {
            let curve = sweep::Pchip::new(&numbers(i, "x"), &numbers(i, "y_means")).unwrap();
            json!({"x_cross": curve.crossings(number(i, "target"))[0]})
        }
        _ => {
            let curve = sweep::Pchip::new(&numbers(i, "x"), &numbers(i, "y")).unwrap();
            let at = numbers(i, "x_eval").into_iter().map(|x| curve.at(x));
            json!({"node_slopes": curve.slopes, "y_eval": at.collect::<Vec<_>>(), "crossings": curve.crossings(number(i, "target"))})
        }
    }
}

fn of_tube(id: &str, i: &Value) -> Value {
    if id == "tub-leak" {
        let p = with_leak(number(i, "p"), number(i, "R_tube_Pa_s_m3"), number(i, "R_leak_Pa_s_m3"));
        return json!({"p_indicated": p});
    }
    if id == "tub-mean" {
        let tube = Tube { length_m: 2.0, bore_mm: 1.0, volume_cm3: 0.5 };
        return json!({"H": (tube.response(1e-9, &Gas::STANDARD).norm() * 1e9).round() / 1e9});
    }
    let tube = Tube {
        length_m: number(i, "length_m"),
        bore_mm: number(i, "bore_m") * 1e3,
        volume_cm3: number(i, "volume_m3") * 1e6,
    };
    if id == "tub-lumped" {
        let isothermal = Gas { polytropic: 1.0, ..Gas::STANDARD };
        let tau = |gas: &Gas| tube.time_constant_s(gas);
        return json!({"tau_isentropic_s": tau(&Gas::STANDARD), "tau_isothermal_s": tau(&isothermal),
            "t_settle_1pct_s": settle_of_lag_s(tau(&Gas::STANDARD))});
    }
    let gas = Gas { polytropic: number(i, "k_polytropic"), ..Gas::STANDARD };
    let (peak_hz, peak) = tube.resonance(&gas).unwrap_or((0.01, tube.response(0.01, &gas).norm()));
    if id.starts_with("tub-fig") {
        return json!({"peak_H": peak, "f_peak_Hz": peak_hz, "H_at_100Hz": tube.response(100.0, &gas).norm(),
            "report_peak_H": peak, "report_f_peak_Hz": peak_hz});
    }
    let gain = numbers(i, "f_Hz").into_iter().map(|hz| tube.response(hz, &gas).norm()).collect::<Vec<_>>();
    let phase = numbers(i, "f_Hz").into_iter().map(|hz| unwrapped_phase_deg(&tube, hz, &gas)).collect::<Vec<_>>();
    json!({"H_abs": gain, "phase_deg": phase, "tau_lumped_s": tube.time_constant_s(&gas), "low_frequency_delay_s": -phase[0] / 360.0 / 0.5,
        "f_1pct_amplitude_Hz": tube.bandwidth_hz(0.01, &gas), "f_10pct_amplitude_Hz": tube.bandwidth_hz(0.1, &gas),
        "peak_H": peak, "f_peak_Hz": peak_hz})
}

/// Phase followed up from 0 Hz, degrees.
fn unwrapped_phase_deg(tube: &Tube, hz: f64, gas: &Gas) -> f64 {
    let mut phase = 0.0;
    for step in 1..=2000 {
        let next = tube.response(hz * f64::from(step) / 2000.0, gas).arg().to_degrees();
        phase = next + 360.0 * ((phase - next) / 360.0_f64).round();
    }
    phase
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
        "cal-water" => {
            json!({"rho_kg_m3": numbers(i, "t_C").into_iter().map(workshop::water_density).collect::<Vec<_>>()})
        }
        "cal-mano" => {
            let pa = workshop::water_column(
                1000.0 * number(i, "height_m"),
                number(i, "t_C"),
                number(i, "rho_air"),
                number(i, "g"),
            );
            json!({"p_Pa": pa})
        }
        "cal-line" | "cal-quad" => {
            // The raw figure is the voltage; the quadratic's is less its offset.
            let offset = i["V_offset"].as_f64().unwrap_or(0.0);
            let points: Vec<Point> = numbers(i, "V")
                .into_iter()
                .zip(numbers(i, "p_Pa"))
                .map(|(v, reference)| Point { raw: v - offset, reference })
                .collect();
            let fit = workshop::calibrate(&points).expect("the points tell a curve");
            let new: Vec<f64> = numbers(i, "V_new").into_iter().map(|v| v - offset).collect();
            let t = t_quantile(0.975, points.len() as f64 - fit.coefficients.len() as f64).unwrap();
            let pressures: Vec<f64> = new.iter().map(|v| fit.at(*v)).collect();
            let half: Vec<f64> = new.iter().map(|v| fit.prediction_u95(*v).unwrap()).collect();
            let u: Vec<f64> = half.iter().map(|u95| u95 / t).collect();
            if id == "cal-line" {
                return json!({"b0": fit.coefficients[0], "b1": fit.coefficients[1], "s": fit.residual_sd, "p_pred": pressures,
                    "u_single_reading": u, "U95_single": half});
            }
            json!({"b": fit.coefficients, "s": fit.residual_sd, "p_quadratic": fit.straight_p, "p_pred": pressures, "u_single": u})
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

/// The setting where a change becomes worth knowing is a crossing of the same curves (checks swp-cross and swp-pchip-mono).
#[test]
fn a_change_worth_knowing_is_reached_where_the_curve_crosses_it() {
    let (curve, ..) = quadratic();
    // A baseline at 0 that is known: the difference is the curve.
    let swept = sweep::Swept {
        levels: vec![(0.0, curve.at(0.0)), (25.0, curve.at(25.0))],
        quadratic: Some(curve.clone()),
        difference: Some(curve),
        baseline: Some(0.0),
        lack_of_fit_p: None,
    };
    let found = sweep::reaches(&swept, 0.3).expect("it gets there");
    assert!((found.at - 11.017412867939008).abs() < 1e-6, "{found:?}");
    let ([low, high], open) = found.interval.expect("a quadratic has a band");
    assert!((low - 10.272578275090325).abs() < 1e-4 && (high - 11.820467320137599).abs() < 1e-4 && open == [false; 2]);
    assert_eq!(sweep::reaches(&swept, 1.0), None, "never beyond the tested range");
    let levels =
        [0.0, 5.0, 10.0, 15.0, 20.0, 25.0].into_iter().zip([-0.2155, -0.2585, -0.2945, -0.3215, -0.3315, -0.3415]);
    let drawn = sweep::Swept {
        levels: levels.collect(),
        quadratic: None,
        difference: None,
        baseline: Some(-0.2155),
        lack_of_fit_p: Some(0.01),
    };
    let found = sweep::reaches(&drawn, 0.3 - 0.2155).expect("it gets there");
    assert!((found.at - 10.875338624257264).abs() < 1e-6 && found.interval.is_none(), "{found:?}");
}
