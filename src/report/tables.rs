//! The reduction as CSV in long form: one value a row, so that every table has the same columns.

use crate::reduction::Reduction;
use crate::reduction::compare::Estimate;

const HEAD: [&str; 8] = ["table", "tap", "configuration", "target_kmh", "quantity", "value", "u95", "note"];

/// All tables as one CSV.
pub fn csv(r: &Reduction) -> Vec<u8> {
    let mut out = csv::Writer::from_writer(Vec::new());
    let mut row = |cells: [String; 8]| {
        out.write_record(cells.map(|c| guarded(&c))).expect("writing to memory cannot fail");
    };
    row(HEAD.map(str::to_string));
    for l in &r.levels {
        let head = ["taps".to_string(), l.tap.clone(), l.configuration.clone(), l.target_kmh.to_string()];
        let passes = format!("{} passes", l.passes);
        row(cells(&head, "cp", (Some(l.cp.value), l.cp.u95), &passes));
        row(cells(&head, "pa_at", (Some(l.cp.value * r.at_q_pa), l.cp.u95.map(|u| u * r.at_q_pa)), &passes));
    }
    for c in &r.comparisons {
        let head = ["comparisons".to_string(), c.tap.clone(), c.configuration.clone(), c.target_kmh.to_string()];
        row(cells(&head, "delta_cp", (Some(c.delta.value), c.delta.u95), c.verdict.word()));
        let pa = (Some(c.delta.value * r.at_q_pa), c.delta.u95.map(|u| u * r.at_q_pa));
        row(cells(&head, "delta_pa_at", pa, c.verdict.word()));
        row(cells(&head, "p_adjusted", (c.p_adjusted, None), c.verdict.word()));
        row(cells(&head, "passes_needed", (c.passes_needed.map(f64::from), None), c.verdict.word()));
    }
    for (head, quantity, e) in meanings(r) {
        row(cells(&head, &quantity, (Some(e.value), e.u95), ""));
    }
    for w in &r.wind {
        let head = ["wind".to_string(), String::new(), String::new(), w.target_kmh.to_string()];
        row(cells(&head, "k", (Some(w.k), None), &format!("at {:.0} s", w.t_s)));
        row(cells(&head, "head_wind_out_kmh", (Some(w.head_wind_out_kmh), None), &format!("at {:.0} s", w.t_s)));
    }
    for d in &r.drift {
        let head = ["drift".to_string(), d.channel.clone(), String::new(), String::new()];
        row(cells(
            &head,
            "change_pa",
            (Some(d.change_pa), Some(2.0 * d.u_pa)),
            &format!("from {:.0} s to {:.0} s", d.from_s, d.to_s),
        ));
    }
    for flag in &r.flags {
        let head = ["flags".to_string(), String::new(), String::new(), String::new()];
        row(cells(&head, "flag", (None, None), flag));
    }
    out.into_inner().expect("writing to memory cannot fail")
}

fn cells(head: &[String; 4], quantity: &str, (value, u95): (Option<f64>, Option<f64>), note: &str) -> [String; 8] {
    let number = |x: Option<f64>| x.filter(|x| x.is_finite()).map(|x| x.to_string()).unwrap_or_default();
    let [table, tap, configuration, target] = head.clone();
    [table, tap, configuration, target, quantity.to_string(), number(value), number(u95), note.to_string()]
}

/// A cell that a spreadsheet would take for a formula gets an apostrophe in front; a number does not.
fn guarded(cell: &str) -> String {
    let risky = cell.starts_with(['=', '+', '-', '@', '\t', '\r']) && cell.parse::<f64>().is_err();
    if risky { format!("'{cell}") } else { cell.to_string() }
}

/// Forces, axles, base, cores and contour as (table, place, configuration, target), quantity, value.
fn meanings(r: &Reduction) -> Vec<([String; 4], String, Estimate)> {
    let mut all = Vec::new();
    let mut add = |table: &str,
                   place: &str,
                   (configuration, target, difference): (&str, f64, bool),
                   quantity: &str,
                   e: Estimate| {
        let quantity = if difference { format!("delta_{quantity}") } else { quantity.to_string() };
        all.push(([table.to_string(), place.to_string(), configuration.to_string(), target.to_string()], quantity, e));
    };
    for f in &r.forces {
        let place = f.group.as_deref().unwrap_or("all");
        add(
            "forces",
            place,
            (&f.configuration, f.target_kmh, f.difference),
            &format!("{}_n", f.component.word()),
            f.newton,
        );
    }
    for a in &r.balance {
        let at = (a.configuration.as_str(), a.target_kmh, a.difference);
        for (axle, taps, height) in [("front", a.taps[0], a.ride_height[0]), ("rear", a.taps[1], a.ride_height[1])] {
            add("balance", axle, at, "lift_n", taps);
            height.into_iter().for_each(|h| add("balance", axle, at, "lift_by_ride_height_n", h));
        }
    }
    for b in &r.base_drag {
        let at = (b.configuration.as_str(), b.target_kmh, b.difference);
        add("base_drag", "base", at, "mean_cp", b.mean_cp);
        add("base_drag", "base", at, "cd_base_contribution", b.cd);
        add("base_drag", "base", at, "power_w", b.power_w);
    }
    for c in &r.cores {
        let at = (c.configuration.as_str(), c.target_kmh, c.difference);
        add("cores", &c.core, at, "velocity_ratio", c.ratio);
        add("cores", &c.core, at, "velocity_m_s", c.velocity_m_s);
    }
    for c in &r.contour {
        let at = (c.configuration.as_str(), c.target_kmh, c.difference);
        for (quantity, e) in ["section_cd", "section_cl", "section_cm"].into_iter().zip(c.coefficients) {
            add("contour", "", at, quantity, e);
        }
    }
    all
}
