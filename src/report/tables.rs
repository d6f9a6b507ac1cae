//! The reduction as CSV in long form: one value a row, so that every table has the same columns.

use crate::reduction::Reduction;

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
