//! The hold rule, exact: scenario files in `holds/` (a new case needs no Rust), and random drives against a slow,
//! plain re-statement of the rule.

use proptest::prelude::*;
use steadytap::config::{self, Setup, Source};
use steadytap::hold::State;
use steadytap::pipeline::{Event, Input, Pipeline, What};
use steadytap::session::Entry;
use steadytap::stream::command::Command;
use steadytap::units::{StreamTime, micros};

/// What a scenario may change about the small rig and its outing.
#[derive(Clone, Debug, serde::Deserialize)]
#[serde(default, deny_unknown_fields)]
struct Rule {
    targets: Vec<f64>,
    tolerance: f64,
    settle: f64,
    dwell: f64,
    slope: Option<f64>,
    speed_stale: f64,
    speed_lag: f64,
    p_lag: f64,
}

impl Default for Rule {
    fn default() -> Self {
        Self {
            targets: vec![100.0],
            tolerance: 2.0,
            settle: 2.0,
            dwell: 4.0,
            slope: None,
            speed_stale: 2.5,
            speed_lag: 0.0,
            p_lag: 0.0,
        }
    }
}

#[derive(Debug, serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct Case {
    /// What the case claims.
    claim: String,
    #[serde(default)]
    rule: Rule,
    /// [from, to (exclusive), every, km/h at from, km/h per s].
    speed: Vec<[f64; 5]>,
    /// [from, to (exclusive), every, Pa].
    #[serde(default)]
    p: Vec<[f64; 4]>,
    /// [from, to (exclusive), every, degrees].
    #[serde(default)]
    track: Vec<[f64; 4]>,
    /// "seconds words".
    #[serde(default)]
    commands: Vec<String>,
    /// What arrives first of one moment: speed, unless it says "p".
    #[serde(default)]
    first: String,
    /// What comes of it, line by line.
    expect: Vec<String>,
}

#[derive(Debug, serde::Deserialize)]
struct File {
    case: Vec<Case>,
}

fn setup(rule: &Rule) -> Setup {
    let source = |path: &str, text: String| Source::new(path, text);
    let rig = format!(
        "steadytap = \"rig 1\"\n\
         [[port]]\nname = \"v\"\ndevice = \"/dev/v\"\nbaud = 9600\nformat = \"columns\"\ncolumns = [\"kmh\"]\n\
         [[port]]\nname = \"g\"\ndevice = \"/dev/g\"\nbaud = 9600\nformat = \"columns\"\ncolumns = [\"p\"]\n\
         [[port]]\nname = \"c\"\ndevice = \"/dev/c\"\nbaud = 9600\nformat = \"columns\"\ncolumns = [\"deg\"]\n\
         [[channel]]\nname = \"speed\"\nfrom = \"v.kmh\"\nquantity = \"speed\"\nunit = \"km/h\"\nstale_s = {}\nlag_s = {}\n\
         [[channel]]\nname = \"p\"\nfrom = \"g.p\"\nquantity = \"pressure\"\nunit = \"Pa\"\nrange = [-500.0, 500.0]\nstale_s = 0.5\nlag_s = {}\n\
         [[channel]]\nname = \"track\"\nfrom = \"c.deg\"\nquantity = \"track\"\nunit = \"deg\"\n",
        rule.speed_stale, rule.speed_lag, rule.p_lag
    );
    let car = "steadytap = \"car 1\"\nname = \"Box\"\nreference_area_m2 = 1.0\nwheelbase_m = 2.0\n\
               [[tap]]\nname = \"t1\"\nat = [0.0, 0.0, 1.0]\nnormal = [0.0, 0.0, 1.0]\n\
               [[tap]]\nname = \"t2\"\nat = [1.0, 0.0, 1.0]\nnormal = [0.0, 0.0, 1.0]\n";
    let slope = rule.slope.map_or(String::new(), |s| format!("slope = {s:?}\n"));
    let outing = format!(
        "steadytap = \"outing 1\"\ntitle = \"Rule\"\nrig = \"r\"\ncar = \"c\"\ntargets_kmh = {:?}\ntolerance_kmh = {:?}\n\
         settle_s = {:?}\ndwell_s = {:?}\n{slope}out_track_deg = 90.0\nresolve_pa = 5.0\n\
         [[configuration]]\nletter = \"A\"\nbaseline = true\n[[configuration]]\nletter = \"B\"\n[taps]\np = \"t1\"\n",
        rule.targets, rule.tolerance, rule.settle, rule.dwell
    );
    let read = config::setup(&source("outing", outing), &source("rig", rig), &source("car", car.to_string()));
    read.expect("the small rig is good").setup
}

/// One input: when, the order among equals, and what.
type Moment = (i64, usize, Result<(usize, String), Command>);

fn moments(case: &Case) -> Vec<Moment> {
    let mut all: Vec<Moment> = Vec::new();
    let mut series = |port: usize, from: f64, to: f64, every: f64, value: &dyn Fn(f64) -> f64| {
        for n in 0.. {
            let t = from + f64::from(n) * every;
            if t >= to - 1e-9 {
                break;
            }
            all.push((micros(t), port, Ok((port, format!("{:.4}", value(t - from))))));
        }
    };
    for [from, to, every, kmh, slope] in &case.speed {
        series(0, *from, *to, *every, &|t| kmh + slope * t);
    }
    case.p.iter().for_each(|[from, to, every, pa]| series(1, *from, *to, *every, &|_| *pa));
    case.track.iter().for_each(|[from, to, every, deg]| series(2, *from, *to, *every, &|_| *deg));
    for words in &case.commands {
        let (t, words) = words.split_once(' ').expect("seconds, a blank, words");
        let command = Command::parse(words).expect("a command");
        all.push((micros(t.parse().expect("seconds")), 3, Err(command)));
    }
    let place = |order: usize| if case.first == "p" && order == 1 { 0 } else { order + 1 };
    all.sort_by_key(|(t, order, _)| (*t, place(*order)));
    all
}

fn drive(setup: &Setup, moments: &[Moment]) -> Vec<Event> {
    let mut pipeline = Pipeline::new(setup, None, false);
    let mut events = Vec::new();
    for (t, _, what) in moments {
        let at = StreamTime::from_micros(*t);
        match what {
            Ok((port, line)) => pipeline.step(Input::Line { port: *port, at, line: line.as_bytes() }, &mut events),
            Err(command) => pipeline.step(Input::Command { at, command: command.clone() }, &mut events),
        }
    }
    pipeline.finish(&mut events);
    events
}

fn seconds(t: StreamTime) -> String {
    let text = t.to_string();
    text.trim_end_matches('0').trim_end_matches('.').to_string()
}

/// An event in the words of the scenario files.
fn words(event: &Event) -> Option<String> {
    let what = match &event.what {
        What::Window(State::Off) => "off".to_string(),
        What::Window(State::Settling(_)) => "settling".to_string(),
        What::Window(State::Steady(_)) => "steady".to_string(),
        What::Window(State::Held(_)) => "held".to_string(),
        What::Dwell { dwell, target_kmh, .. } => {
            let p = dwell.interval.channels[1].finish();
            let p = p.map_or("none".to_string(), |p| format!("n {} mean {}", p.n, p.mean));
            let (start, end) = (seconds(dwell.interval.start), seconds(dwell.interval.end));
            format!("dwell {}.{} at {target_kmh}: {start} to {end}, p {p}", dwell.stretch, dwell.k + 1)
        }
        What::Armed => "armed".to_string(),
        What::Refused(why) => format!("refused: {why}"),
        What::Target(_) | What::SpanBegun => return None,
        What::Entry(entry) => match &**entry {
            Entry::Segment(s) => {
                let flags = if s.flags.is_empty() { String::new() } else { format!(" [{}]", s.flags.join(" ")) };
                format!(
                    "kept {} {} {} {} to {}{flags}",
                    s.id,
                    s.configuration,
                    s.direction.word(),
                    seconds(s.t0),
                    seconds(s.t1)
                )
            }
            Entry::Rejected(r) => format!("rejected {}", r.why.join(" ")),
            Entry::Void(v) => format!("void {}", v.segment),
            Entry::Zero(z) => {
                format!("zero {}: {} to {}, p n {}", z.id, seconds(z.t0), seconds(z.t1), z.channels["p"].n)
            }
            Entry::End(_) => return None,
            Entry::Configuration(c) => format!("configuration {}", c.to),
            Entry::Direction(d) => format!("direction {}", d.to),
            Entry::Taps(_) => "taps".to_string(),
            Entry::Mark(_) => "mark".to_string(),
            _ => "other".to_string(),
        },
    };
    Some(format!("{} {what}", seconds(event.at)))
}

#[test]
fn every_scenario_goes_as_the_rule_says() {
    let directory = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/holds");
    let mut wrong = Vec::new();
    let mut count = 0;
    let mut files: Vec<_> =
        std::fs::read_dir(directory).expect("the scenarios").map(|f| f.expect("a file").path()).collect();
    files.sort();
    for path in files {
        let text = std::fs::read_to_string(&path).expect("a scenario file");
        let file: File = toml::from_str(&text).unwrap_or_else(|e| panic!("{}: {e}", path.display()));
        for case in &file.case {
            count += 1;
            let got: Vec<String> = drive(&setup(&case.rule), &moments(case)).iter().filter_map(words).collect();
            if got != case.expect {
                wrong.push(format!("{}\n  got      {got:#?}\n  expected {:#?}", case.claim, case.expect));
            }
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
    assert!(count >= 20, "scenarios were lost: {count}");
}

// ---------------------------------------------------------------- the rule again, slow and plain

/// Dwells of a drive by the rule's own words: (t0 of the stretch, k, target, n and sum of p).
fn by_the_words(rule: &Rule, speed: &[(i64, f64)], p: &[(i64, f64)]) -> Vec<(i64, f64, usize, f64)> {
    let target_of = |v: f64| {
        let inside = rule.targets.iter().filter(|t| (v - **t).abs() <= rule.tolerance);
        inside.copied().min_by(|a, b| (v - a).abs().total_cmp(&(v - b).abs()))
    };
    let (settle, dwell, stale) = (micros(rule.settle), micros(rule.dwell), micros(rule.speed_stale));
    let mut found = Vec::new();
    let mut i = 0;
    while i < speed.len() {
        let Some(target) = target_of(speed[i].1) else {
            i += 1;
            continue;
        };
        let t0 = speed[i].0;
        let mut last = i;
        while last + 1 < speed.len()
            && target_of(speed[last + 1].1) == Some(target)
            && speed[last + 1].0 - speed[last].0 <= stale
        {
            last += 1;
        }
        for k in 0.. {
            let (start, end) = (t0 + settle + k * dwell, t0 + settle + (k + 1) * dwell);
            if speed[last].0 < end {
                break;
            }
            let inside: Vec<f64> = p.iter().filter(|(t, _)| *t >= start && *t < end).map(|(_, x)| *x).collect();
            found.push((start, target, inside.len(), inside.iter().sum()));
        }
        i = last + 1;
    }
    found
}

prop_compose! {
    // On a grid of 0.1 s the exact edges of windows and gaps are met often. A lag of the speed is at most the settling time: the
    // outing's reader sees to that.
    fn a_drive()(
        steps in prop::collection::vec((1i64..1_500_000, -30i32..30), 20..200),
        gauge in prop::collection::vec((1i64..300_000, -400i32..400), 50..400),
        settle in 0u8..3, dwell in 1u8..4, lag in prop::sample::select(vec![0.0, 0.05, 0.7]),
        speed_lag in prop::sample::select(vec![0.0f64, 0.3, 1.0]), grid in prop::sample::select(vec![1i64, 100_000]),
    ) -> (Rule, Vec<(i64, f64)>, Vec<(i64, f64)>) {
        let rule = Rule { targets: vec![80.0, 83.0], tolerance: 2.0, settle: f64::from(settle), dwell: f64::from(dwell), speed_stale: 1.2, p_lag: lag, speed_lag: speed_lag.min(f64::from(settle)), ..Rule::default() };
        let mut t = 0;
        let mut v = 80.0;
        let speed = steps.iter().map(|(dt, dv)| { t += (dt + grid - 1) / grid * grid; v = (v + f64::from(*dv) / 20.0).clamp(76.0, 87.0); (t, (v * 1000.0_f64).round() / 1000.0) }).collect();
        let mut t = 0;
        let p = gauge.iter().map(|(dt, x)| { t += (dt + grid - 1) / grid * grid; (t, f64::from(*x)) }).collect();
        (rule, speed, p)
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 300, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn random_drives_give_the_dwells_of_the_rules_words((rule, speed, p) in a_drive()) {
        // Samples carry their own time; they arrive a lag later.
        let (lag, speed_lag) = (micros(rule.p_lag), micros(rule.speed_lag));
        let mut moments: Vec<Moment> = speed.iter().map(|(t, v)| (*t + speed_lag, 1, Ok((0, v.to_string())))).collect();
        moments.extend(p.iter().map(|(t, x)| (*t + lag, 0, Ok((1, x.to_string())))));
        moments.sort_by_key(|(t, order, _)| (*t, *order));
        let got: Vec<(i64, f64, usize, f64)> = drive(&setup(&rule), &moments).iter().filter_map(|e| match &e.what {
            What::Dwell { dwell, target_kmh, .. } => {
                let p = dwell.interval.channels[1].finish();
                let (n, sum) = p.map_or((0, 0.0), |p| (usize::try_from(p.n).unwrap(), p.mean * p.n as f64));
                Some((dwell.interval.start.micros(), *target_kmh, n, sum))
            }
            _ => None,
        }).collect();
        let want = by_the_words(&rule, &speed, &p);
        prop_assert_eq!(got.len(), want.len());
        for (g, w) in got.iter().zip(&want) {
            prop_assert_eq!((g.0, g.1, g.2), (w.0, w.1, w.2));
            prop_assert!((g.3 - w.3).abs() < 1e-6, "sum {} against {}", g.3, w.3);
        }
    }
}
