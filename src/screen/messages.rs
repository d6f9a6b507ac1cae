//! What happened, in words for the person beside the driver: what, and what to do.

use super::{Message, Weight, text};
use crate::pipeline::{Event, What};
use crate::session::{Correction, Entry};

/// The words for an event, if it is worth words. `on_disk`: its line is on a disk.
pub fn message(event: &Event, on_disk: bool) -> Option<Message> {
    let (weight, words) = match &event.what {
        What::Entry(entry) => of_entry(entry, on_disk)?,
        What::Refused(why) => (Weight::Refused, why.to_string()),
        What::Armed => (Weight::Quiet, "the next full dwell will be kept".to_string()),
        What::Target(kmh) => (Weight::Quiet, format!("target {kmh} km/h")),
        What::SpanBegun => (Weight::Quiet, "a span by hand begins".to_string()),
        What::Window(_) | What::Dwell { .. } => return None,
    };
    Some(Message { at: event.at, weight, text: text::safe(&words) })
}

fn of_entry(entry: &Entry, on_disk: bool) -> Option<(Weight, String)> {
    Some(match entry {
        Entry::Segment(s) if on_disk => {
            let what = s.target_kmh.map_or("span".to_string(), |kmh| format!("{kmh} km/h"));
            (Weight::Good, format!("kept {}: {} {} {what}", s.id, s.configuration, s.direction.word()))
        }
        Entry::Segment(s) => (Weight::Trouble, format!("segment {} is NOT on the disk: free some space", s.id)),
        Entry::Rejected(r) => (Weight::Refused, format!("dwell not held: {}", remedy(&r.why))),
        Entry::Zero(z) => (Weight::Good, format!("zero {} taken", z.id)),
        Entry::Void(v) => (Weight::Good, format!("segment {} is void", v.segment)),
        Entry::Restore(v) => (Weight::Good, format!("segment {} counts again", v.segment)),
        Entry::Correct(c) => (Weight::Good, format!("segment {} is corrected: {}", c.segment, corrected(c))),
        Entry::Mark(m) => (Weight::Quiet, format!("mark {}", m.text)),
        Entry::Note(m) => (Weight::Quiet, format!("note: {}", m.text)),
        Entry::Configuration(c) => (Weight::Good, format!("configuration {}", c.to)),
        Entry::Direction(d) if d.to == "auto" => (Weight::Quiet, "direction by track".to_string()),
        Entry::Direction(d) => (Weight::Quiet, format!("direction {} by hand", d.to)),
        Entry::Taps(_) => (Weight::Good, "hoses moved".to_string()),
        Entry::Air(_) => (Weight::Good, "air noted".to_string()),
        Entry::Fault(f) if f.what == "lost" => (Weight::Trouble, format!("port {} lost: check its cable", f.place)),
        Entry::Fault(f) if f.what == "found" => (Weight::Good, format!("port {} is back", f.place)),
        Entry::Fault(f) if f.place == "record" && f.what == "stopped" => {
            (Weight::Trouble, "the record stopped; segments are kept all the same".to_string())
        }
        Entry::Fault(f) if f.place == "record" => (Weight::Good, "a new record begins".to_string()),
        Entry::Fault(f) if f.what == "suspended" => {
            (Weight::Refused, format!("the program slept; port {} was not read meanwhile", f.place))
        }
        Entry::Fault(f) => (Weight::Refused, format!("port {}: {}", f.place, f.what)),
        Entry::Session(_) | Entry::End(_) => return None,
    })
}

fn corrected(c: &Correction) -> String {
    let configuration = c.configuration.as_ref().map(|letter| format!("configuration {letter}"));
    let direction = c.direction.map(|way| format!("direction {}", way.word()));
    configuration.into_iter().chain(direction).collect::<Vec<_>>().join(", ")
}

/// Why a dwell was rejected, and what to do about it.
fn remedy(why: &[String]) -> String {
    let words = why.iter().map(|word| match word.split_once(':') {
        Some(("saturated", channel)) => format!("{channel} at the end of its range, use a wider sensor"),
        Some(("stale", channel)) => format!("{channel} was silent, check its cable"),
        _ => "the speed drifted, hold it steadier".to_string(),
    });
    words.collect::<Vec<_>>().join("; ")
}
