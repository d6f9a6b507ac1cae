//! The promise: a bad rig, car or outing is refused with file, line, column and remedy, every problem at
//! once; a good one is read without a word; and no text makes the reader fall over.
//!
//! `bad_configs/*.toml` holds one file a rule. Its first lines say what is expected, in the order of the file:
//! `# expect: LINE:COLUMN part of the message | part of the hint`, with `warning` after the place for a warning.
//! The file's name begins with its kind; it is read with the van's other two. A new case needs no Rust.

use proptest::prelude::*;
use std::path::PathBuf;
use steadytap::config::{self, ProbeFactor, Problem, Source, Watch};
use steadytap::units::Quantity;

const OUTING: &str = include_str!("good_configs/van-outing.toml");
const RIG: &str = include_str!("good_configs/van-rig.toml");
const CAR: &str = include_str!("good_configs/van.toml");

/// The van's files: outing, rig, car.
fn van() -> [Source; 3] {
    [Source::new("van-outing.toml", OUTING), Source::new("van-rig.toml", RIG), Source::new("van.toml", CAR)]
}

fn read([outing, rig, car]: &[Source; 3]) -> Result<config::Checked, Vec<Problem>> {
    config::setup(outing, rig, car)
}

fn problems(files: &[Source; 3]) -> Vec<Problem> {
    read(files).map_or_else(|problems| problems, |checked| checked.warnings)
}

#[test]
fn each_bad_config_gives_just_the_expected_problems() {
    let directory = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("tests/bad_configs");
    let mut paths: Vec<_> = std::fs::read_dir(directory).unwrap().map(|entry| entry.unwrap().path()).collect();
    paths.sort();
    assert!(paths.len() > 60, "only {} cases found", paths.len());
    let wrong: Vec<_> = paths.iter().filter_map(|path| case(path).err()).collect();
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

fn case(path: &std::path::Path) -> Result<(), String> {
    let name = path.file_name().unwrap().to_str().unwrap();
    let text = std::fs::read_to_string(path).unwrap();
    let expected: Vec<_> = text.lines().map_while(|line| line.strip_prefix("# expect: ")).collect();
    let place = ["outing-", "rig-", "car-"].iter().position(|kind| name.starts_with(kind)).unwrap();
    let mut files = van();
    files[place] = Source::new(name, text.clone());
    let found: Vec<_> = problems(&files).into_iter().filter(|p| p.place.file == name).collect();
    let as_expected = found.len() == expected.len() && found.iter().zip(&expected).all(|(p, e)| meets(p, e));
    if as_expected && !expected.is_empty() {
        return Ok(());
    }
    let found: String = found.iter().map(|p| format!("  found    {p:#}\n")).collect();
    let expected: String = expected.iter().map(|e| format!("  expected {e}\n")).collect();
    Err(format!("{name}:\n{expected}{found}"))
}

fn meets(problem: &Problem, expected: &str) -> bool {
    let (place, says) = expected.split_once(' ').unwrap();
    let (warning, says) = says.strip_prefix("warning ").map_or((false, says), |says| (true, says));
    let mut parts = says.split(" | ");
    place == format!("{}:{}", problem.place.line, problem.place.column)
        && problem.is_error() != warning
        && problem.what.contains(parts.next().unwrap())
        && parts.all(|part| problem.hint.contains(part))
        && !problem.hint.is_empty()
}

#[test]
fn the_van_is_read_without_a_word_and_as_written() {
    let checked = read(&van()).unwrap();
    assert_eq!(checked.warnings, []);
    let config::Setup { rig, car, outing } = checked.setup;
    assert_eq!((rig.ports.len(), rig.channels.len()), (2, 12));
    assert_eq!(rig.channels[5].quantity, Quantity::DynamicPressure);
    assert_eq!(rig.channels[0].range, Some([-500.0, 500.0]));
    assert_eq!(car.taps.len(), 5);
    assert_eq!(car.probe.factor, ProbeFactor::Pairs);
    assert_eq!(car.contour, ["bonnet-edge", "roof-rear", "base-high", "base-low"]);
    assert_eq!(outing.watch, Watch::Channel("speed".into()));
    assert_eq!(outing.targets_kmh, [100.0, 80.0]);
    assert_eq!((outing.passes, outing.resolve_pa, outing.air_stated), (4, 4.0, true));
    assert_eq!(outing.baseline(), "A");
    assert_eq!(outing.taps["p5"], "bonnet-edge");
}

#[test]
fn what_is_left_out_has_its_default() {
    let [outing, rig, car] = van();
    let rig = Source::new("rig", rig.text.replace("stale_s = 0.5", ""));
    let cut = |text: &str, from: &str, to: &str| {
        let (head, tail) = text.split_once(from).unwrap();
        format!("{head}{to}{}", tail.split_once(to).unwrap().1)
    };
    let text = cut(&cut(&outing.text, "[show]", "[air]"), "[air]", "[[configuration]]").replace("passes = 4", "");
    let outing = Source::new("outing", text.replace("watch = \"speed\"", "").replace("out_track_deg = 90.0", ""));
    let car = Source::new("car", car.text.split_once("[probe]").unwrap().0);
    let config::Setup { rig, car, outing } = config::setup(&outing, &rig, &car).unwrap().setup;
    let stale: Vec<_> = rig.channels.iter().map(|c| c.stale_s).collect();
    assert_eq!(stale, [0.5, 0.5, 0.5, 0.5, 0.5, 0.5, 60.0, 60.0, 60.0, 2.5, 2.5, 5.0]);
    assert_eq!(rig.channels[1].convert, config::Convert::Linear { gain: 1.0, offset: 0.0 });
    assert_eq!((rig.channels[6].lag_s, rig.channels[6].damping_s, rig.ports[0].dtr), (0.0, 0.8, true));
    assert_eq!((outing.passes, outing.air, outing.air_stated), (4, config::Air::STANDARD, false));
    assert_eq!((outing.show.speed.as_str(), outing.show.pressure.as_str()), ("km/h", "Pa"));
    assert_eq!((outing.watch, outing.out_track_deg), (Watch::Channel("speed".into()), None));
    assert_eq!(car.probe.factor, ProbeFactor::Stated(1.0));
}

#[test]
fn a_normal_of_another_length_is_brought_to_one_with_a_warning() {
    let [outing, rig, car] = van();
    let car = Source::new("c", car.text.replace("[-0.6, 0.0, 0.8]", "[-3.0, 0.0, 4.0]"));
    let checked = read(&[outing, rig, car]).unwrap();
    assert_eq!(checked.setup.car.taps[4].normal, [-0.6, 0.0, 0.8]);
    let told: Vec<_> = checked.warnings.iter().map(|p| p.to_string()).collect();
    assert_eq!(told, ["warning: `normal` has length 5.000 (c:37:10)"]);
}

#[test]
fn problems_of_all_three_files_come_at_once() {
    let [outing, rig, car] = van();
    let files = [
        Source::new("o", outing.text.replace("dwell_s = 6.0", "dwell_s = 0").replace("p3 =", "p9 =")),
        Source::new("r", rig.text.replace("baud = 38400", "bauds = 38400").replace("\"hPa\"", "\"hpa\"")),
        Source::new("c", car.text.replace("wheelbase_m = 3.2", "wheelbase_m = \"3.2\"")),
    ];
    let told: Vec<_> = problems(&files).iter().map(|p| format!("{}: {}", p.place.file, p.what)).collect();
    let expected = [
        "o: `dwell_s` is 0",
        "o: no channel `p9`",
        "r: [[port]] has no `baud`",
        "r: unknown key `bauds` in [[port]]",
        "r: `unit` is \"hpa\"",
        "c: `wheelbase_m` is a string, not a number",
    ];
    assert_eq!(told, expected);
}

#[test]
fn an_outing_is_held_against_the_quantities_of_its_rig() {
    let [outing, rig, car] = van();
    let told = |from: &str, to: &str, watch: &str| {
        let outing = outing.text.replace("watch = \"speed\"", watch);
        let files = [Source::new("o", outing), Source::new("r", rig.text.replace(from, to)), car.clone()];
        problems(&files).iter().map(ToString::to_string).collect::<Vec<_>>()
    };
    let no_speed = told("quantity = \"speed\"\nunit = \"km/h\"", "quantity = \"other\"", "watch = \"speed\"");
    assert_eq!(no_speed, ["error: nothing to watch: the rig has no channel of quantity speed (o:8:9)"]);
    let no_track = told("quantity = \"track\"", "quantity = \"other\"", "watch = \"speed\"");
    assert_eq!(no_track.len(), 1);
    assert!(no_track[0].starts_with("warning: `out_track_deg` is of no use"), "{no_track:?}");
    let no_q = told("quantity = \"dynamic-pressure\"", "quantity = \"pressure\"", "watch = \"q\"");
    assert_eq!(no_q, ["error: nothing to watch: the rig has no channel of quantity dynamic-pressure (o:8:9)"]);
}

#[test]
fn a_rig_or_car_that_cannot_be_read_raises_no_false_alarm_elsewhere() {
    let [outing, rig, car] = van();
    let broken = |source: &Source| Source::new("broken", source.text.replace("name = \"", "name = "));
    let told = problems(&[outing.clone(), broken(&rig), broken(&car)]);
    assert!(!told.is_empty() && told.iter().all(|p| p.place.file == "broken"), "{told:?}");
    let nameless = Source::new("r", rig.text.replace("name = \"p1\"\n", ""));
    let told: Vec<_> = problems(&[outing, nameless, car]).iter().map(ToString::to_string).collect();
    assert_eq!(told, ["error: [[channel]] has no `name` (r:27:1)"]);
}

#[test]
fn what_is_watched_may_be_named_by_channel_or_by_quantity() {
    let [outing, rig, car] = van();
    let rig = Source::new(
        "r",
        rig.text.replace("name = \"q\"", "name = \"mast\"").replace("name = \"speed\"", "name = \"gps_kmh\""),
    );
    let watched = |word: &str| {
        let outing = Source::new("o", outing.text.replace("watch = \"speed\"", &format!("watch = \"{word}\"")));
        config::setup(&outing, &rig, &car).unwrap().setup.outing.watch
    };
    assert_eq!(watched("speed"), Watch::Channel("gps_kmh".into()));
    assert_eq!(watched("gps_kmh"), Watch::Channel("gps_kmh".into()));
    assert_eq!(watched("q"), Watch::Airspeed("mast".into()));
    assert_eq!(watched("mast"), Watch::Airspeed("mast".into()));
}

#[test]
fn a_problem_reads_as_one_line_and_a_hint() {
    let [outing, rig, car] = van();
    let rig = Source::new("rig.toml", rig.text.replace("baud = 115200", "buad = 115200"));
    let told = problems(&[outing, rig, car]);
    assert_eq!(told[1].to_string(), "error: unknown key `buad` in [[port]] (rig.toml:13:1)");
    let hint = "hint: did you mean `baud`? known here: name, device, usb, baud, format, columns, dtr";
    assert_eq!(format!("{:#}", told[1]), format!("{}\n\n{hint}", told[1]));
}

#[test]
fn nothing_from_a_file_reaches_the_terminal_unescaped() {
    let [outing, rig, car] = van();
    let evil = outing.text.replace("\"Rear flaps\"", "\"\\u001b]0;x\\u0007 \\u202e\"");
    let files =
        [Source::new("\u{1b}[2J.toml", evil.replace("[taps]", "[taps]\n\"\\u001b[31m\" = \"\\u200b\"")), rig, car];
    let told = problems(&files);
    assert_eq!(told.len(), 3, "{told:?}");
    let all: String = told.iter().map(|p| format!("{p:#}").replace('\n', " ")).collect();
    assert!(all.chars().all(|c| !c.is_control() && !('\u{200b}'..='\u{202e}').contains(&c)), "{all}");
}

#[test]
fn columns_count_characters_and_lines_end_either_way() {
    let [outing, rig, car] = van();
    let oops = Source::new("c", car.text.replace("\"High-roof van\"", "\"Hochdach-Kübel 🚐\"  oops"));
    let told = problems(&[outing.clone(), rig.clone(), oops]);
    assert_eq!((told[0].place.line, told[0].place.column), (4, 28), "{told:?}");
    let windows = |s: &Source| Source::new(s.path.clone(), s.text.replace('\n', "\r\n"));
    let broken = Source::new("o", outing.text.replace("dwell_s = 6.0", "dwell_s = 0"));
    let place = |outing| problems(&[outing, windows(&rig), windows(&car)])[0].place.clone();
    assert_eq!(place(windows(&broken)), place(broken));
    assert!(read(&[windows(&outing), rig.clone(), car.clone()]).is_ok());
}

#[test]
fn the_head_of_an_outing_names_its_files_whatever_the_rest() {
    let text = "steadytap = \"outing 1\"\nrig = \"../r.toml\"\ncar = \"/abs/c.toml\"\nnonsense = 1\n";
    let head = config::outing_head(&Source::new("o", text)).unwrap();
    assert_eq!((head.rig.as_str(), head.car.as_str()), ("../r.toml", "/abs/c.toml"));
    assert_eq!((head.car_place.line, head.car_place.column), (3, 7));
    let told = config::outing_head(&Source::new("o", "steadytap = \"outing 1\"\nrig = \"a\\u0000b\"\n")).unwrap_err();
    assert_eq!(told.len(), 2, "{told:?}");
}

#[test]
fn a_file_alone_is_known_by_its_first_key_and_checked() {
    let [outing, rig, car] = van();
    let kinds = [&outing, &rig, &car].map(config::kind);
    assert_eq!(kinds, [Some(config::Kind::Outing), Some(config::Kind::Rig), Some(config::Kind::Car)]);
    assert_eq!(config::kind(&Source::new("x", "steadytap = \"rig 99\"\n[broken")), Some(config::Kind::Rig));
    assert_eq!(config::kind(&Source::new("x", "title = 1")), None);
    assert_eq!(
        [config::check_outing(&outing), config::check_rig(&rig), config::check_car(&car)],
        [vec![], vec![], vec![]]
    );
}

#[test]
fn too_large_too_deep_and_too_many_are_refused_briefly() {
    let [outing, rig, car] = van();
    let large = Source::new("r", rig.text.clone() + &" ".repeat(config::LARGEST));
    let told = config::check_rig(&large);
    assert_eq!(told.len(), 1);
    assert!(told[0].what.contains("more than the 4194304"), "{told:?}");
    assert_eq!(config::kind(&large), None);
    let deep = Source::new("r", format!("x = {}", "[".repeat(100_000)));
    assert!(config::check_rig(&deep).iter().any(Problem::is_error));
    let many: String = (0..10_000).map(|n| format!("k{n} = 1\n")).collect();
    let told = problems(&[Source::new("o", many + &outing.text), rig, car]);
    assert_eq!(told.len(), 201);
}

/// One wilful change to a text: what is cut, where, and what is put there.
fn change() -> impl Strategy<Value = (prop::sample::Index, usize, String)> {
    let bits = prop::sample::select(vec![
        "",
        "\"",
        "[",
        "]",
        "[[",
        "{",
        "}",
        "=",
        "\n",
        "#",
        ".",
        ",",
        "-1",
        "0",
        "1e999",
        "nan",
        "inf",
        "true",
        "'",
        "\\u0000",
        "é",
        "\u{202e}",
        "port",
        "tap",
        "[x]\n",
        "p1",
        "gauge.",
        "9999999999999999999",
        "name = \"q\"\n",
        "[[channel]]\n",
        "[]",
        "1979-05-27",
    ]);
    (any::<prop::sample::Index>(), 0..40usize, bits.prop_map(String::from))
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(600))]

    #[test]
    fn no_mutated_van_makes_it_panic_or_fail_in_silence(which in 0..3usize, changes in prop::collection::vec(change(), 1..6)) {
        let mut files = van();
        for (index, cut, put) in changes {
            let text = &mut files[which].text;
            let from = text.floor_char_boundary(index.index(text.len() + 1));
            let to = text.floor_char_boundary((from + cut).min(text.len())).max(from);
            text.replace_range(from..to, &put);
        }
        match read(&files) {
            Ok(checked) => prop_assert!(!checked.warnings.iter().any(Problem::is_error)),
            Err(told) => prop_assert!(told.iter().any(Problem::is_error), "refused without a reason: {:?}", told),
        }
        let lines = files[which].text.lines().count() + 1;
        for problem in problems(&files).iter().filter(|p| p.place.file == files[which].path) {
            prop_assert!(problem.place.line <= lines && !problem.hint.is_empty(), "{:?}", problem);
        }
    }

    #[test]
    fn no_text_at_all_makes_it_panic(text in "\\PC{0,200}", head in prop::sample::select(vec!["rig", "car", "outing"])) {
        let source = Source::new("x", format!("steadytap = \"{head} 1\"\n{text}"));
        let _ = (config::kind(&source), config::outing_head(&source).is_ok());
        let _ = (config::check_rig(&source), config::check_car(&source), config::check_outing(&source));
    }
}
