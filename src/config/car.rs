//! The car file: taps, areas, references.

use super::problem::{Kind, Source};
use super::reader::{Item, Problems, Table, nearest, shown, unique};
use super::{AxleHeight, Car, Core, Probe, ProbeFactor, ProbeModel, RideHeight, Tap};

/// How far a normal's length may be from 1 before it is worth a word.
const NORMAL_WITHIN: f64 = 0.01;

/// Reads a car; every problem goes to `problems`.
pub fn read(problems: &Problems<'_>) -> Option<Car> {
    problems.read(Kind::Car, |top| {
        let name = top.need_text("name");
        let reference_area_m2 = top.need_positive("reference_area_m2", 100.0, "m²");
        let wheelbase_m = top.need_positive("wheelbase_m", 30.0, "m");
        let tables = top.tables("tap");
        let taps: Vec<Option<(Item<String>, Tap)>> = tables.iter().map(tap).collect();
        if tables.is_empty() {
            problems.error(&(0..0), "the car has no [[tap]]", "add one [[tap]] or more");
        }
        unique(problems, "the tap", taps.iter().flatten().map(|(name, _)| name));
        let names: Vec<&str> = taps.iter().flatten().map(|(name, _)| name.value.as_str()).collect();
        let cores: Vec<Option<Core>> = top.tables("core").iter().map(|t| core(t, &names)).collect();
        let contour = top.table("contour").map_or(Some(Vec::new()), |t| contour(&t, &names));
        let probe = top.table("probe").map_or(Some(UNCORRECTED), |t| probe(&t));
        let ride_height =
            top.table("ride_height").map(|t| RideHeight { front: axle(&t, "front"), rear: axle(&t, "rear") });
        Some(Car {
            name: name?.value,
            reference_area_m2: reference_area_m2?,
            wheelbase_m: wheelbase_m?,
            taps: taps.into_iter().map(|t| Some(t?.1)).collect::<Option<_>>()?,
            cores: cores.into_iter().collect::<Option<_>>()?,
            contour: contour?,
            probe: probe?,
            ride_height,
        })
    })
}

const UNCORRECTED: Probe = Probe { model: ProbeModel::Static, factor: ProbeFactor::Stated(1.0) };

/// Checks a car file alone.
pub fn check(source: &Source) -> Vec<super::Problem> {
    let problems = Problems::of(source);
    read(&problems);
    problems.into_list()
}

fn tap(t: &Table<'_, '_>) -> Option<(Item<String>, Tap)> {
    let name = t.need_name("name");
    for key in ["at", "normal"] {
        t.know(key);
    }
    let at = need_vector(t, "at");
    let normal = need_vector(t, "normal").and_then(|item| unit_vector(t, &item));
    let area_m2 = t.positive("area_m2", 100.0, "m²");
    let group = t.text("group").map(|g| g.value);
    let tap = Tap { name: name.as_ref()?.value.clone(), at: at?.value, normal: normal?, area_m2, group };
    Some((name?, tap))
}

fn need_vector(t: &Table<'_, '_>, key: &'static str) -> Option<Item<[f64; 3]>> {
    if !t.has(key) {
        t.problems.error(
            &t.span,
            format!("the tap has no `{key}`"),
            format!("add `{key} = [x, y, z]`: x aft of the front axle, y right, z up"),
        );
    }
    t.array::<3>(key)
}

fn unit_vector(t: &Table<'_, '_>, item: &Item<[f64; 3]>) -> Option<[f64; 3]> {
    let length = item.value.iter().map(|x| x * x).sum::<f64>().sqrt();
    if length < 1e-9 {
        t.problems.error(
            &item.span,
            "a normal without a length points nowhere",
            "write the direction out of the body, such as [1.0, 0.0, 0.0]",
        );
        return None;
    }
    if (length - 1.0).abs() > NORMAL_WITHIN {
        t.problems.warn(&item.span, format!("the normal has length {length:.3}; its direction is used"), "");
    }
    Some(item.value.map(|x| x / length))
}

/// A tap name that the car has.
fn known_tap(t: &Table<'_, '_>, item: Item<String>, taps: &[&str]) -> Option<String> {
    if taps.contains(&item.value.as_str()) {
        return Some(item.value);
    }
    let hint = nearest(&item.value, taps.iter().copied());
    t.problems.error(&item.span, format!("the car has no tap `{}`", shown(&item.value)), hint);
    None
}

fn core(t: &Table<'_, '_>, taps: &[&str]) -> Option<Core> {
    let name = t.need_name("name");
    let front = t.need_text("front").and_then(|item| known_tap(t, item, taps));
    let rear = t.need_text("rear").and_then(|item| known_tap(t, item, taps));
    let bench = t.rising_pairs("bench", 2);
    if !t.has("bench") {
        t.problems.error(
            &t.span,
            "the core has no `bench` curve",
            "add `bench = [[face velocity m/s, pressure drop Pa], …]`",
        );
    }
    let bench = bench.filter(|b| {
        let good = b.value.iter().all(|p| p[0] > 0.0 && p[1] > 0.0) && b.value.windows(2).all(|w| w[1][1] > w[0][1]);
        if !good {
            t.problems.error(&b.span, "the bench curve must rise, and all its numbers be above 0", "");
        }
        good
    });
    Some(Core { name: name?.value, front: front?, rear: rear?, bench: bench?.value })
}

fn contour(t: &Table<'_, '_>, taps: &[&str]) -> Option<Vec<String>> {
    let list = t.texts("taps").unwrap_or_default();
    if list.len() < 3 {
        t.problems.error(&t.span, "a contour needs three taps or more, in order round the section", "");
        return None;
    }
    unique(t.problems, "the contour's tap", &list);
    list.into_iter().map(|item| known_tap(t, item, taps)).collect()
}

fn probe(t: &Table<'_, '_>) -> Option<Probe> {
    let model = match t.text("model") {
        None => Some(ProbeModel::Static),
        Some(item) => match item.value.as_str() {
            "static" => Some(ProbeModel::Static),
            "gain" => Some(ProbeModel::Gain),
            other => {
                t.problems.error(&item.span, format!("unknown probe model `{}`", shown(other)), "static or gain");
                None
            }
        },
    };
    let factor = match t.text_or_number("factor") {
        None => Some(ProbeFactor::Stated(1.0)),
        Some(item) => match item.value {
            Ok(k) if (0.5..=2.0).contains(&k) => Some(ProbeFactor::Stated(k)),
            Err(word) if word == "pairs" => Some(ProbeFactor::Pairs),
            _ => {
                t.problems.error(
                    &item.span,
                    "the probe factor is neither 0.5 to 2 nor \"pairs\"",
                    "1.0 is a probe without error",
                );
                None
            }
        },
    };
    Some(Probe { model: model?, factor: factor? })
}

fn axle(t: &Table<'_, '_>, key: &'static str) -> Option<AxleHeight> {
    let t = t.table(key)?;
    let channel = t.need_name("channel");
    let rate = t.need_positive("wheel_rate_n_per_mm", 1e5, "N/mm");
    Some(AxleHeight { channel: channel?.value, wheel_rate_n_per_mm: rate? })
}
