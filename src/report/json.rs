//! The reduction as JSON, schema `steadytap.reduction/1`. Never a non-finite number; what is not known is null, with the reason in `flags`.

use crate::reduction::compare::Estimate;
use crate::reduction::{Drift, MeanAir, Reduction, WindPair};
use crate::session::AirSource;
use serde_json::{Value, json};

/// The whole reduction as one JSON object and a line end.
pub fn json(r: &Reduction) -> String {
    let taps: Vec<Value> = r
        .levels
        .iter()
        .map(|l| {
            json!({"tap": l.tap, "configuration": l.configuration, "target_kmh": l.target_kmh, "passes": l.passes,
                "cp": number(l.cp.value), "cp_u95": option(l.cp.u95),
                "pa_at": number(l.cp.value * r.at_q_pa), "pa_at_u95": pa_u95(&l.cp, r),
                "cp_between_sd": option(l.between.map(|b| b.sd)), "between_share": option(l.between.map(|b| b.share))})
        })
        .collect();
    let comparisons: Vec<Value> = r
        .comparisons
        .iter()
        .map(|c| {
            json!({"tap": c.tap, "target_kmh": c.target_kmh, "baseline": r.baseline, "configuration": c.configuration,
                "delta_cp": number(c.delta.value), "delta_cp_u95": option(c.delta.u95),
                "delta_pa_at": number(c.delta.value * r.at_q_pa), "delta_pa_at_u95": pa_u95(&c.delta, r),
                "p_adjusted": option(c.p_adjusted), "verdict": c.verdict.word(), "passes_needed": c.passes_needed,
                "delta_cp_detectable": option(c.detectable)})
        })
        .collect();
    let object = json!({
        "schema": "steadytap.reduction/1",
        "baseline": r.baseline,
        "at_kmh": r.at_kmh,
        "air": r.air.as_ref().map(air),
        "taps": taps,
        "comparisons": comparisons,
        "wind": r.wind.iter().map(wind).collect::<Vec<_>>(),
        "drift": r.drift.iter().map(drift).collect::<Vec<_>>(),
        "forces": [], "balance": {}, "base_drag": [], "cores": [], "sweeps": [], "contour": [],
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

fn wind(w: &WindPair) -> Value {
    json!({"target_kmh": w.target_kmh, "t_s": number(w.t_s), "k": number(w.k), "head_wind_out_kmh": number(w.head_wind_out_kmh)})
}

fn drift(d: &Drift) -> Value {
    json!({"channel": d.channel, "from_s": number(d.from_s), "to_s": number(d.to_s), "change_pa": number(d.change_pa),
        "u_pa": number(d.u_pa), "exceeds": d.exceeds})
}
