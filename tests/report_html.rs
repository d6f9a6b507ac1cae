//! The page says what the JSON says, to the last digit, and nothing that is not known; whatever stands in names is text; poor sessions give a page that
//! says so. The vans and their figures are invented.

use crate::reduction_meaning::outing;
use crate::reduction_outings::{Day, Step, plan, tap};
use crate::reduction_poor_inputs::day;
use proptest::prelude::*;
use serde_json::Value;
use std::collections::BTreeSet;
use steadytap::reduction::{Options, Reduction, reduce};
use steadytap::report::{self, Input, Inputs};
use steadytap::session::{Direction, Entry, Session, Void};
use steadytap::units::StreamTime;

const BOTH: [Direction; 2] = [Direction::Out, Direction::Back];

fn inputs(sessions: &[Session]) -> Inputs {
    let input = |(i, s): (usize, &Session)| Input {
        file: format!("outing-{i}.session"),
        sum: 0xE306_9283,
        header: s.header.clone(),
        damage: Vec::new(),
    };
    Inputs { version: "0.1.0".to_string(), sessions: sessions.iter().enumerate().map(input).collect() }
}

/// The page of sessions; it is well formed, finite, and asks for nothing from elsewhere.
#[track_caller]
fn page(sessions: &[Session]) -> (Reduction, String) {
    let (made, html) = whole(sessions);
    for word in words(&html) {
        assert!(!matches!(word.to_ascii_lowercase().as_str(), "nan" | "inf" | "infinity"), "{word}");
    }
    (made, html)
}

/// The page of the day on which everything can be said.
pub fn demo_page() -> String {
    page(&[outing()]).1
}

/// As [`page`], whatever words its names hold.
#[track_caller]
fn whole(sessions: &[Session]) -> (Reduction, String) {
    let made = reduce(sessions, &Options::default()).expect("they reduce");
    let html = report::html(&made, &inputs(sessions));
    balanced(&html);
    for foreign in ["<script", "<link", "<img", "<iframe", "<object", "@import", "url("] {
        assert!(!html.contains(foreign), "{foreign}");
    }
    for tag in html.split('<').filter_map(|t| t.split_once('>')).map(|(inside, _)| inside) {
        assert!(!tag.starts_with("a ") && !tag.contains(" src=") && !tag.contains(" href="), "{tag}");
    }
    (made, html)
}

fn words(text: &str) -> impl Iterator<Item = &str> {
    text.split(|c: char| !c.is_ascii_alphanumeric())
}

/// Every element that opens closes in order, but for those that HTML has no end tag for.
#[track_caller]
fn balanced(html: &str) {
    assert!(html.starts_with("<!DOCTYPE html><html lang=\"en\"><head>"));
    let mut open: Vec<&str> = Vec::new();
    for tag in html.split('<').skip(2) {
        let (inside, _) = tag.split_once('>').unwrap_or_else(|| panic!("no end of {tag}"));
        let name = inside.split_whitespace().next().unwrap_or_default();
        match name.strip_prefix('/') {
            Some(name) => assert_eq!(open.pop(), Some(name), "an end tag that does not fit"),
            None if matches!(name, "meta" | "br") => {}
            None => open.push(name),
        }
        assert_eq!(inside.matches('"').count() % 2, 0, "quotes of {inside}");
    }
    assert!(open.is_empty(), "still open: {open:?}");
}

/// One number of the page.
struct Figure<'a> {
    value: &'a str,
    u95: Option<&'a str>,
    place: &'a str,
    shown: &'a str,
}

fn figures(html: &str) -> Vec<Figure<'_>> {
    let of = |element: &'_ str| -> Option<(usize, usize)> { Some((element.find('>')?, element.find("</data>")?)) };
    html.split("<data ")
        .skip(1)
        .map(|element| {
            let (head, end) = of(element).expect("a whole element");
            let attribute = |name: &str| {
                let rest = element[..head].split_once(&format!("{name}=\""))?.1;
                rest.split('"').next()
            };
            Figure {
                value: attribute("value").expect("a value"),
                u95: attribute("data-u95"),
                place: attribute("data-json").expect("a place"),
                shown: &element[head + 1..end],
            }
        })
        .collect()
}

/// The number at the head of what is shown, and the one after ±.
fn read(shown: &str) -> (f64, Option<f64>, usize) {
    let plain = shown.replace('−', "-");
    let number = |text: &str| text.split_whitespace().next().map(str::to_string);
    let first = number(&plain).expect("a number");
    let decimals = first.split_once('.').map_or(0, |(_, d)| d.len());
    let half = plain.split_once("± ").and_then(|(_, rest)| number(rest)).map(|u| u.parse().expect("a half-width"));
    (first.parse().unwrap_or_else(|_| panic!("{shown}")), half, decimals)
}

#[track_caller]
fn says_what_the_json_says(sessions: &[Session], unit_pa: f64) -> usize {
    let (made, html) = page(sessions);
    let json: Value = serde_json::from_str(&report::json(&made)).expect("it parses");
    let all = figures(&html);
    for f in &all {
        let at = |place: &str| json.pointer(place).and_then(Value::as_f64);
        let value = at(f.place).unwrap_or_else(|| panic!("{} is not in the JSON", f.place));
        assert_eq!(f.value.parse(), Ok(value), "{}", f.place);
        let half = match f.place.strip_suffix("change_pa") {
            Some(drift) => at(&format!("{drift}u_pa")).map(|u| 2.0 * u),
            None => at(&format!("{}_u95", f.place)),
        };
        assert_eq!(f.u95.map(|u| u.parse().expect("a number")), half, "half-width of {}", f.place);
        let scale = if f.place.contains("pa_at") { unit_pa } else { 1.0 };
        let (shown, shown_half, decimals) = read(f.shown);
        let step = 0.5 * 10f64.powi(-(decimals as i32)) + 1e-9;
        assert!((shown - value / scale).abs() <= step, "{} shows {}, is {value}", f.place, f.shown);
        match (shown_half, half) {
            (Some(a), Some(b)) => assert!((a - b / scale).abs() <= step, "{} shows {}, is ± {b}", f.place, f.shown),
            (None, None) => assert!(f.shown.contains("(no interval: "), "{}", f.shown),
            other => panic!("{}: {other:?}", f.place),
        }
    }
    let shown: BTreeSet<&str> = all.iter().map(|f| f.place).collect();
    // And nothing of these tables is missing on the page.
    for (table, keys) in [
        ("/taps", &["pa_at", "cp"][..]),
        ("/comparisons", &["delta_pa_at", "delta_cp"]),
        ("/drift", &["change_pa"]),
        ("/forces", &["force_n", "force_kgf"]),
        ("/balance/axles", &["front_lift_n", "rear_lift_n"]),
        ("/base_drag", &["mean_cp", "cd_base_contribution", "power_w"]),
        ("/cores", &["velocity_ratio", "velocity_m_s"]),
        ("/contour", &["section_cd", "section_cl", "section_cm"]),
    ] {
        let rows = json.pointer(table).and_then(Value::as_array).expect("a table").len();
        for place in (0..rows).flat_map(|i| keys.iter().map(move |key| format!("{table}/{i}/{key}"))) {
            assert!(shown.contains(place.as_str()), "{place} is not on the page");
        }
    }
    for c in &made.comparisons {
        assert!(html.contains(&format!("<li class=\"{}\">", c.verdict.word())));
    }
    all.len()
}

#[test]
fn the_report_says_what_the_json_says() {
    assert!(says_what_the_json_says(&[outing()], 1.0) > 300);
    assert!(says_what_the_json_says(&[day().outing(), Day { seed: 43, ..day() }.outing()], 1.0) > 30);
    let mut other = day().outing();
    other.header.setup.outing.show.pressure = "mmH2O".to_string();
    assert!(says_what_the_json_says(&[other], 9.80665) > 30); // conventional millimetre of water, NIST SP 811
}

#[test]
fn the_same_sessions_give_the_same_bytes() {
    assert_eq!(page(&[outing()]).1, page(&[outing()]).1);
}

/// Verdicts in words, the next pass, the pictures, the methods: each where it belongs.
#[test]
fn the_report_has_its_parts_in_order() {
    let (made, html) = page(&[outing()]);
    let heads = ["verdict", "differences", "car", "passes", "sweep", "meaning", "contour", "method", "inputs"];
    let places: Vec<usize> =
        heads.iter().map(|id| html.find(&format!("<h2 id=\"{id}\"")).unwrap_or_else(|| panic!("no {id}"))).collect();
    assert!(places.is_sorted(), "{places:?}");
    for words in [
        "not approval of a part",
        "Holm, Scand. J. Statist. 6, 1979, 65",
        "CIPM-2007",
        "Fieller",
        "e3069283",
        "outing-0.session",
        "Next: ",
        "2.70 m² of 2 taps", // 1.5 + 1.2 of the base
        "reference area 3.4 m²",
    ] {
        assert!(html.contains(words), "{words}");
    }
    let pictures = html.matches("<svg ").count();
    assert_eq!(html.matches(" role=\"img\" aria-label=").count(), pictures);
    let titled = html.split("<svg ").skip(1).filter(|s| s.split_once('>').is_some_and(|s| s.1.starts_with("<title>")));
    assert_eq!(titled.count(), pictures);
    // A baseline and four others, each with its differences and its arrows; sweeps of six taps; passes, wind, drift; six taps; one contour.
    assert_eq!(pictures, 4 + 5 + 6 + 3 + 6 + 1);
    assert_eq!(made.sweeps.len(), 6);
}

/// The bar of a difference ends where its half-width does: the scale is told by the edges of the band.
#[test]
fn a_bar_is_as_long_as_its_interval() {
    let (made, html) = page(&[outing()]);
    let picture = html.split("<svg ").find(|s| s.contains("Pressure differences with their intervals")).expect("one");
    let attribute = |element: &str, name: &str| -> f64 {
        element
            .split_once(&format!("{name}=\""))
            .expect(name)
            .1
            .split('"')
            .next()
            .expect(name)
            .parse()
            .expect("a number")
    };
    let edges: Vec<f64> = picture
        .split("<line ")
        .filter(|l| l.contains("class=\"edge\""))
        .map(|l| attribute(l, " x2").max(attribute(l, "x1")))
        .collect();
    let per_pa = (edges[1] - edges[0]) / (2.0 * made.resolve.0);
    let bar = picture.split("<line ").find(|l| l.contains("class=\"whisker\"")).expect("a bar");
    let c = &made.comparisons[0];
    let half = c.delta.u95.expect("it has one") * made.at_q_pa;
    let (x1, x2) = (attribute(bar, "x1"), attribute(bar, " x2"));
    // Coordinates have two decimals.
    assert!((x2 - x1 - 2.0 * half * per_pa).abs() < 0.03, "{} {}", x2 - x1, 2.0 * half * per_pa);
    let middle = f64::midpoint(edges[0], edges[1]) + c.delta.value * made.at_q_pa * per_pa;
    assert!((f64::midpoint(x1, x2) - middle).abs() < 0.03);
}

/// Suction points away from the body, pressure onto it: base and roof suck, the bonnet does not.
#[test]
fn arrows_point_as_the_pressure_does() {
    let (_, html) = page(&[outing()]);
    let picture =
        html.split("<svg ").find(|s| s.starts_with("viewBox") && s.contains("A state A: pressures")).expect("one");
    for (tap, class, tip_is_outside) in
        [("1 tap-1", "blue", true), ("3 tap-3", "blue", true), ("4 tap-4", "orange", false)]
    {
        let group = picture.split("<g class=").find(|g| g.contains(&format!("<title>{tap}: "))).expect(tap);
        assert!(group.starts_with(&format!("\"{class}\"")), "{tap}");
        let after =
            |element: &str, name: &str| group.split_once(element).and_then(|(_, r)| r.split_once(name)).expect(tap).1;
        let number =
            |text: &str| text.split(['"', ',', ' ']).next().expect("a number").parse::<f64>().expect("a number");
        let body = [number(after("<circle", "cx=\"")), number(after("<circle", "cy=\""))];
        let corners = after("<polygon", "points=\"");
        let tip = [number(corners), number(corners.split_once(',').expect("a pair").1)];
        let apart = (tip[0] - body[0]).hypot(tip[1] - body[1]);
        assert_eq!(apart > 3.0, tip_is_outside, "{tap}: {apart}");
    }
}

#[test]
fn no_figure_without_interval_or_reason() {
    let steps = vec![Step::Zero, Step::Pass(0, Direction::Out), Step::Pass(1, Direction::Out), Step::Zero];
    let (made, html) = page(&[Day { plan: steps, ..day() }.outing()]);
    let bare: Vec<Figure<'_>> = figures(&html).into_iter().filter(|f| f.u95.is_none()).collect();
    assert!(bare.iter().filter(|f| f.place.starts_with("/taps")).count() >= 2 * made.levels.len());
    assert!(bare.iter().all(|f| f.shown.contains("(no interval: one pass)")), "{}", bare[0].shown);
    assert!(!html.contains("◆ tap") && !html.contains("● tap"), "a verdict without an interval");
    assert!(html.contains("too few passes for any interval") && html.contains("has no interval yet"));
}

fn of(steps: Vec<Step>) -> Session {
    Day { plan: steps, ..day() }.outing()
}

fn without(names: &[&str]) -> Session {
    let mut made = day().outing();
    for entry in &mut made.entries {
        if let Entry::Segment(s) = entry {
            names.iter().for_each(|n| drop(s.channels.remove(*n)));
        }
    }
    made
}

#[test]
fn poor_sessions_give_a_report_that_says_so() {
    let (_, html) = page(&[steadytap::session::Session { entries: Vec::new(), ..day().outing() }]);
    assert!(
        html.contains("It cannot be decided")
            && html.contains("no pass to reduce")
            && html.contains("Next: drive the baseline A out and back")
    );
    let (_, html) = page(&[of(vec![Step::Zero, Step::Pass(0, Direction::Out)])]);
    assert!(
        html.contains("It cannot be decided")
            && html.contains("Next: drive B ")
            && html.contains("no interval: one pass")
    );
    let mut voided = day().outing();
    voided.entries.extend((1..=12).map(|segment| Entry::Void(Void { t: StreamTime::ZERO, segment })));
    let (_, html) = page(&[voided]);
    assert!(html.contains("It cannot be decided") && html.contains("void: withdrawn") && html.contains("1, 2, 3, 4"));
    let (_, html) = page(&[without(&["q", "speed"])]);
    assert!(html.contains("It cannot be decided") && html.contains("passes without q"));
    let (_, html) = page(&[without(&["q"])]);
    assert!(html.contains("no probe: a fallback") && html.contains("by ground speed"));
    let (_, html) = page(&[of(plan(&[0, 1, 0], 2, &BOTH).into_iter().filter(|s| *s != Step::Zero).collect())]);
    assert!(html.contains("never zeroed") && html.contains("Fewer than two zeros"));
    let (_, html) = page(&[of(plan(&[0, 1, 0], 3, &[Direction::Back]))]);
    assert!(html.contains("the wind is not known"));
    let many = Day { taps: 20, change: vec![vec![0.01; 20]], ..day() };
    let (made, html) = page(&[many.outing()]);
    assert!(made.comparisons.len() == 20 && html.contains(&tap(19)));
}

#[test]
fn values_beyond_sense_are_drawn_within_the_picture() {
    for huge in [1e300, -1e300, f64::MAX, 1e-300] {
        for channel in ["p1", "q", "speed"] {
            let mut poor = day().outing();
            for entry in &mut poor.entries {
                if let Entry::Segment(s) = entry
                    && s.id % 2 == 0
                {
                    let c = s.channels.get_mut(channel).expect("it is there");
                    (c.mean, c.min, c.max) = (huge, huge, huge);
                    c.bins.iter_mut().flatten().for_each(|b| *b = huge);
                    (c.sd, c.se) = (Some(huge.abs()), Some(huge.abs()));
                }
            }
            page(&[poor]);
        }
    }
}

/// A session whose every name is the same foreign text.
fn named(name: &str) -> Session {
    let mut made = outing();
    let setup = &mut made.header.setup;
    (setup.car.name, setup.outing.title) = (name.to_string(), name.to_string());
    for c in &mut setup.outing.configurations {
        c.name = name.to_string();
        if let Some(p) = &mut c.parameter {
            (p.name, p.unit) = (name.to_string(), name.to_string());
        }
    }
    let renamed = |old: &str| format!("{name}{old}");
    for t in &mut setup.car.taps {
        t.name = renamed(&t.name);
        t.group = t.group.as_ref().map(|_| name.to_string());
    }
    setup.car.contour.iter_mut().for_each(|t| *t = renamed(t));
    for core in &mut setup.car.cores {
        (core.name, core.front, core.rear) = (name.to_string(), renamed(&core.front), renamed(&core.rear));
    }
    setup.outing.taps.values_mut().for_each(|t| *t = renamed(t));
    for entry in &mut made.entries {
        if let Entry::Segment(s) = entry {
            s.taps.values_mut().for_each(|t| *t = renamed(t));
            s.flags.push(format!("stuck:{name}"));
        }
    }
    made
}

#[test]
fn markup_in_names_is_text() {
    let name = "<script>alert(1)</script><b title='x' onload=\"y\">&amp; \u{202E}\u{200B}\u{7}\"'>]]>--!>";
    let made = reduce(&[named(name)], &Options::default()).expect("it reduces");
    let mut inputs = inputs(&[named(name)]);
    (inputs.sessions[0].file, inputs.sessions[0].damage) = (name.to_string(), vec![name.to_string()]);
    inputs.sessions[0].header.started = Some(name.to_string());
    let html = report::html(&made, &inputs);
    balanced(&html);
    assert!(!html.contains("<script") && !html.contains("<b title"));
    assert!(html.contains("&lt;script&gt;alert(1)&lt;/script&gt;") && html.contains("\\u{202E}\\u{200B}\\x07"));
    assert!(!html.contains(|c: char| c != '\n' && (c.is_control() || "\u{202E}\u{200B}".contains(c))));
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(8))]
    #[test]
    fn any_name_leaves_the_page_whole(name in "\\PC{1,40}|[<>&\"'/=!\\-\\[\\]a-z \u{0}-\u{1f}\u{202a}-\u{202e}]{1,40}") {
        let (_, html) = whole(&[named(&name)]);
        prop_assert!(!html.contains(|c: char| c != '\n' && c.is_control()));
    }
}
