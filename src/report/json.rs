//! The reduction as JSON, schema `steadytap.reduction/1`. Never a non-finite number; what is not known is null, with the reason in `flags`.

use crate::reduction::airspeed::WindPair;
use crate::reduction::compare::Estimate;
use crate::reduction::contour::ContourRow;
use crate::reduction::cores::CoreRow;
use crate::reduction::force::{AxleRow, BaseRow, ForceRow};
use crate::reduction::sweep::{Interval, SweepRow};
use crate::reduction::{Drift, MeanAir, Reduction};
use crate::session::AirSource;
use crate::units::{KMH_PER_M_S, STANDARD_GRAVITY};
use serde_json::{Value, json};

/// The whole reduction as one JSON object and a line end.
pub fn json(r: &Reduction) -> String {
    let taps: Vec<Value> = r
        .levels
        .iter()
        .map(|l| {
            json!({"tap": l.tap, "configuration": l.configuration, "target_kmh": l.target_kmh, "passes": l.passes,
                "cp": number(l.cp.value), "cp_u95": option(l.cp.u95),
                "pa_at": number(l.cp.value * r.at_q_pa), "pa_at_u95": pa_u95(&l.cp, r)})
        })
        .collect();
    let comparisons: Vec<Value> = r
        .comparisons
        .iter()
        .map(|c| {
            json!({"tap": c.tap, "target_kmh": c.target_kmh, "baseline": r.baseline, "configuration": c.configuration,
                "delta_cp": number(c.delta.value), "delta_cp_u95": option(c.delta.u95),
                "delta_pa_at": number(c.delta.value * r.at_q_pa), "delta_pa_at_u95": pa_u95(&c.delta, r),
                "p_adjusted": option(c.p_adjusted), "verdict": c.verdict.word(), "passes_needed": c.passes_needed})
        })
        .collect();
    let object = json!({
        "schema": "steadytap.reduction/1",
        "baseline": r.baseline,
        "at_kmh": r.at_kmh,
        "air": r.air.as_ref().map(air),
        "taps": taps,
        "comparisons": comparisons,
        "wind": winds(r),
        "drift": r.drift.iter().map(drift).collect::<Vec<_>>(),
        "forces": r.forces.iter().map(force).collect::<Vec<_>>(),
        "balance": {"axles": r.balance.iter().map(axle).collect::<Vec<_>>()},
        "base_drag": r.base_drag.iter().map(base).collect::<Vec<_>>(),
        "cores": r.cores.iter().map(core).collect::<Vec<_>>(),
        "sweeps": r.sweeps.iter().map(sweep).collect::<Vec<_>>(),
        "contour": r.contour.iter().map(contour).collect::<Vec<_>>(),
        "flags": r.flags,
    });
    let mut text = serde_json::to_string_pretty(&object).expect("a JSON value has string keys");
    text.push('\n');
    text
}

/// A number that JSON can say, or null.
pub(super) fn number(x: f64) -> Value {
    serde_json::Number::from_f64(x).map_or(Value::Null, Value::Number)
}

pub(super) fn option(x: Option<f64>) -> Value {
    x.map_or(Value::Null, number)
}

fn pa_u95(e: &Estimate, r: &Reduction) -> Value {
    option(e.u95.map(|u| u * r.at_q_pa))
}

fn air(a: &MeanAir) -> Value {
    json!({"temperature_c": number(a.air.temperature_c), "pressure_hpa": number(a.air.pressure_hpa),
        "humidity_pct": number(a.air.humidity_pct), "density_kg_m3": number(a.density), "source": source(a.source)})
}

/// Where the air comes from, in a word.
pub(super) fn source(source: AirSource) -> &'static str {
    match source {
        AirSource::Assumed => "assumed",
        AirSource::Stated => "stated",
        AirSource::Measured => "measured",
    }
}

/// Every pair, and the vector where many headings tell it.
fn winds(r: &Reduction) -> Vec<Value> {
    let mut all: Vec<Value> = r.wind.iter().map(wind).collect();
    all.extend(r.probe_factor.wind.as_ref().map(|w| {
        json!({"target_kmh": null, "k": number(w.k), "wind_kmh": number(w.speed_m_s() * KMH_PER_M_S), "from_deg": number(w.from_deg())})
    }));
    all
}

fn wind(w: &WindPair) -> Value {
    json!({"target_kmh": w.target_kmh, "t_s": number(w.t_s), "k": number(w.k), "head_wind_out_kmh": number(w.head_wind_out_kmh)})
}

fn drift(d: &Drift) -> Value {
    json!({"channel": d.channel, "from_s": number(d.from_s), "to_s": number(d.to_s), "change_pa": number(d.change_pa),
        "u_pa": number(d.u_pa), "exceeds": d.exceeds})
}

fn force(f: &ForceRow) -> Value {
    let bounds = f.bounds.map(|b| b.map(number));
    json!({"group": f.group, "configuration": f.configuration, "target_kmh": f.target_kmh, "difference": f.difference,
        "component": f.component.word(), "force_n": number(f.newton.value), "force_n_u95": option(f.newton.u95),
        "force_kgf": number(f.newton.value / STANDARD_GRAVITY), "force_kgf_u95": option(f.newton.u95.map(|u| u / STANDARD_GRAVITY)),
        "u95_independent_n": bounds.as_ref().map(|b| &b[0]), "u95_common_n": bounds.as_ref().map(|b| &b[1])})
}

fn axle(a: &AxleRow) -> Value {
    let [front, rear] = &a.taps;
    let height = |i: usize| a.ride_height[i].as_ref();
    let apart = |i: usize, e: &Estimate| option(height(i).map(|h| h.value - e.value));
    json!({"configuration": a.configuration, "target_kmh": a.target_kmh, "difference": a.difference,
        "front_lift_n": number(front.value), "front_lift_n_u95": option(front.u95),
        "rear_lift_n": number(rear.value), "rear_lift_n_u95": option(rear.u95),
        "front_lift_by_ride_height_n": option(height(0).map(|h| h.value)), "front_lift_by_ride_height_n_u95": option(height(0).and_then(|h| h.u95)),
        "rear_lift_by_ride_height_n": option(height(1).map(|h| h.value)), "rear_lift_by_ride_height_n_u95": option(height(1).and_then(|h| h.u95)),
        "front_routes_apart_n": apart(0, front), "rear_routes_apart_n": apart(1, rear)})
}

fn base(b: &BaseRow) -> Value {
    json!({"configuration": b.configuration, "target_kmh": b.target_kmh, "difference": b.difference,
        "mean_cp": number(b.mean_cp.value), "mean_cp_u95": option(b.mean_cp.u95),
        "cd_base_contribution": number(b.cd.value), "cd_base_contribution_u95": option(b.cd.u95),
        "power_w": number(b.power_w.value), "power_w_u95": option(b.power_w.u95)})
}

fn core(c: &CoreRow) -> Value {
    json!({"core": c.core, "configuration": c.configuration, "target_kmh": c.target_kmh, "difference": c.difference,
        "velocity_ratio": number(c.ratio.value), "velocity_ratio_u95": option(c.ratio.u95),
        "velocity_m_s": number(c.velocity_m_s.value), "velocity_m_s_u95": option(c.velocity_m_s.u95)})
}

fn contour(c: &ContourRow) -> Value {
    let [drag, lift, moment] = &c.coefficients;
    json!({"configuration": c.configuration, "target_kmh": c.target_kmh, "difference": c.difference,
        "section_cd": number(drag.value), "section_cd_u95": option(drag.u95), "section_cl": number(lift.value),
        "section_cl_u95": option(lift.u95), "section_cm": number(moment.value), "section_cm_u95": option(moment.u95)})
}

fn sweep(s: &SweepRow) -> Value {
    let bounds = s.extreme.map(|(_, set)| match set {
        Interval::Within(a, b) => json!([number(a), number(b)]),
        Interval::Outside(..) | Interval::All | Interval::Nowhere => Value::Null,
    });
    let levels: Vec<Value> = s.levels.iter().map(|(x, cp)| json!({"setting": number(*x), "cp": number(*cp)})).collect();
    json!({"tap": s.tap, "target_kmh": s.target_kmh, "parameter": s.parameter.0, "unit": s.parameter.1, "levels": levels,
        "quadratic": s.quadratic.as_ref().map(|q| q.b.map(number)), "lack_of_fit_p": option(s.lack_of_fit_p),
        "extreme": option(s.extreme.map(|e| e.0)), "extreme_interval95": bounds,
        "worth_knowing_at": option(s.crossing.map(|c| c.at)),
        "worth_knowing_interval95": s.crossing.and_then(|c| c.interval).map(|(ends, _)| ends.map(number)),
        "worth_knowing_open": s.crossing.and_then(|c| c.interval).map(|(_, open)| open)})
}
