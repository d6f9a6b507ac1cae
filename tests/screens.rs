//! Guards the promise that the Drive screen tells the state at one glance, at every size, and that no foreign string reaches
//! the terminal unescaped. Snapshots are text; colours are tested on the buffer. All data are invented.

mod contrast;
mod pressing;
pub mod scenes;

use proptest::prelude::*;
use ratatui::buffer::Buffer;
use ratatui::layout::Rect;
use scenes::{face, with};
use steadytap::screen::layby::Pane;
use steadytap::screen::{Face, Kept, Overlay, Prompt, PromptKind, Spot, Theme, View, WindowState, render};
use steadytap::units::StreamTime;

/// A frame as text, one line a row, blanks at the ends left out.
pub fn text(view: &View, face: &Face, (columns, rows): (u16, u16)) -> String {
    let mut buffer = Buffer::empty(Rect::new(0, 0, columns, rows));
    render(view, face, &mut buffer);
    lines(&buffer).join("\n")
}

fn lines(buffer: &Buffer) -> Vec<String> {
    let area = buffer.area;
    (0..area.height)
        .map(|y| {
            let mut line = String::new();
            let mut skip = 0;
            for x in 0..area.width {
                let symbol = buffer[(x, y)].symbol();
                if skip == 0 {
                    line.push_str(symbol);
                    skip = ratatui::text::Span::raw(symbol).width().max(1);
                }
                skip -= 1;
            }
            line.trim_end().to_string()
        })
        .collect()
}

const SIZES: [((u16, u16), &str); 3] = [((80, 24), "80x24"), ((120, 40), "120x40"), ((40, 8), "small")];

fn snapshot(name: &str, view: &View, face: &Face, sizes: &[((u16, u16), &str)]) {
    insta::with_settings!({ snapshot_path => "screens/snapshots", prepend_module_to_snapshot => false, omit_expression => true }, {
        for &(size, word) in sizes {
            insta::assert_snapshot!(format!("{name}-{word}"), text(view, face, size));
        }
    });
}

fn at(spot: Spot, pane: Pane) -> Face {
    let mut face = Face { spot, ..face() };
    face.layby.pane = pane;
    face
}

fn with_tool(overlay: Overlay) -> Face {
    Face { overlay, ..at(Spot::Bench, Pane::Warnings) }
}

macro_rules! snapshots {
    ($($claim:ident: $name:literal, $view:expr, $face:expr;)*) => { $(
        #[test]
        fn $claim() {
            snapshot($name, &$view, &$face, &SIZES);
        }
    )* };
}

snapshots! {
    without_a_speed_it_says_so: "no-speed", scenes::no_speed(), face();
    too_slow_says_how_much: "off-slow", scenes::off_slow(), face();
    too_fast_says_how_much: "off-fast", scenes::off_fast(), face();
    settling_counts_down: "settling", scenes::settling(), face();
    steady_counts_down_to_the_hold: "steady", scenes::steady(), face();
    held_shows_the_values_and_the_one_key: "held", scenes::held(Kept::No), face();
    held_and_writing_does_not_say_kept: "writing", scenes::held(Kept::Writing(12)), face();
    kept_says_so_and_its_number: "kept", scenes::held(Kept::OnDisk(12)), face();
    what_is_not_on_the_disk_is_said: "not-kept", scenes::not_kept(), face();
    lost_ports_and_saturated_taps_are_named: "trouble", scenes::trouble(), face();
    twenty_channels_all_have_a_place: "twenty", scenes::twenty(), face();
    forty_channels_are_counted: "forty", scenes::many(40), face();
    hostile_names_stay_in_their_place: "hostile", scenes::hostile(), face();
    an_open_span_is_shown: "span", scenes::span(), face();
    help_prints_the_key_table: "help", scenes::steady(), with(Overlay::Help);
    leaving_is_asked: "quit", scenes::held(Kept::No), with(Overlay::Quit);
    voiding_is_asked: "void", scenes::held(Kept::OnDisk(12)), with(Overlay::Void(12));
    configurations_are_listed: "configuration", scenes::off_slow(), with(Overlay::Configuration(1));
    a_note_is_typed_below_the_state: "note", scenes::steady(), with(scenes::note());
    other_units_keep_their_columns: "mph", scenes::mph(), face();
    beside_the_road_the_decision_is_large: "layby", scenes::layby(), at(Spot::Layby, Pane::Warnings);
    beside_the_road_are_the_segments: "layby-segments", scenes::layby(), at(Spot::Layby, Pane::Segments);
    beside_the_road_is_the_picture: "layby-picture", scenes::layby(), at(Spot::Layby, Pane::Picture);
    beside_the_road_without_a_pass_it_says_so: "layby-nothing", scenes::no_speed(), at(Spot::Layby, Pane::Warnings);
    a_segment_is_looked_into: "segment", scenes::layby(), Face { overlay: Overlay::Segment(7), ..at(Spot::Layby, Pane::Segments) };
    beside_the_road_in_ascii: "layby-plain", scenes::layby(), Face { plain: true, ..at(Spot::Layby, Pane::Picture) };
    in_the_workshop_the_first_reason_stands_large: "bench", scenes::bench(), at(Spot::Bench, Pane::Warnings);
    a_calibration_tells_its_curve_and_how_good_it_is: "calibration", scenes::bench(), with_tool(scenes::calibration());
    a_leak_test_passes_or_fails_with_its_rate: "leak", scenes::bench(), with_tool(Overlay::Leak(Some(StreamTime::from_micros(729_000_000))));
    a_hose_is_set_beside_what_the_rig_says: "hose", scenes::bench(), with_tool(scenes::step());
    help_of_the_layby: "help-layby", scenes::layby(), Face { overlay: Overlay::Help, ..at(Spot::Layby, Pane::Warnings) };
    leaving_drive_on_the_move_is_asked: "away", scenes::steady(), with(Overlay::Away(Spot::Layby));
    alone_there_is_nothing_to_read: "solo", scenes::held(Kept::OnDisk(12)), Face { solo: true, ..face() };
    alone_verdicts_come_when_the_car_has_stood: "solo-parked", scenes::alone_parked(), Face { solo: true, ..face() };
    alone_trouble_is_still_said: "solo-trouble", scenes::trouble(), Face { solo: true, ..face() };
    plain_draws_ascii: "plain", scenes::held(Kept::OnDisk(12)), Face { plain: true, ..face() };
}

#[test]
fn at_the_smallest_size_everything_still_has_a_place() {
    snapshot("trouble", &scenes::trouble(), &face(), &[((60, 20), "60x20")]);
}

#[test]
fn one_glance_finds_state_speed_and_fate_in_the_top_half() {
    let cases = [
        (scenes::no_speed(), "no speed", "nothing held"),
        (scenes::off_slow(), "too slow", "KEPT on disk"),
        (scenes::off_fast(), "too fast", "KEPT on disk"),
        (scenes::steady(), "s to hold", "nothing held"),
        (scenes::held(Kept::No), "s to next", "NOT TAKEN"),
        (scenes::held(Kept::Writing(12)), "s to next", "writing"),
        (scenes::held(Kept::OnDisk(12)), "s to next", "12 KEPT on disk"),
        (scenes::not_kept(), "s to next", "12 NOT ON DISK"),
    ];
    let large = |text: &str| text.lines().skip(1).take(4).all(|l| !l.contains(|c: char| c.is_ascii_digit()));
    for (view, state, fate) in cases {
        let text = text(&view, &face(), (80, 24));
        assert!(large(&text), "a speed that is not large in\n{text}");
        let top: Vec<&str> = text.lines().take(12).collect();
        let top = top.join("\n");
        assert!(top.contains(state), "{state} in\n{top}");
        assert!(top.contains(fate), "{fate} in\n{top}");
    }
}

#[test]
fn every_state_has_a_title_rule_and_bar_of_its_own() {
    let views = [
        scenes::off_slow(),
        scenes::off_fast(),
        scenes::settling(),
        scenes::steady(),
        scenes::held(Kept::No),
        scenes::held(Kept::OnDisk(12)),
        scenes::not_kept(),
    ];
    for plain in [false, true] {
        let mut seen = std::collections::BTreeSet::new();
        for view in &views {
            let text = text(view, &Face { plain, ..face() }, (80, 24));
            let mut lines = text.lines();
            let rule = lines.next().and_then(|l| l.chars().next());
            let bar = lines.next().and_then(|l| l.chars().next());
            assert!(seen.insert((rule, bar)), "{rule:?} {bar:?} twice");
        }
    }
}

#[test]
fn what_changes_stands_still() {
    let columns = |live: f64| {
        let mut view = scenes::held(Kept::No);
        view.rows[0].live = Some(live);
        let text = text(&view, &face(), (80, 24));
        let line = text.lines().find(|l| l.contains("live")).expect("a live value").to_string();
        line.chars().take(20).collect::<String>().find('.')
    };
    let at = columns(-102.5);
    assert!(at.is_some());
    for live in [0.0, -0.04, 7.0, -7.0, 99.96, 1234.5, -1234.5] {
        assert_eq!(columns(live), at, "point of {live}");
    }
}

#[test]
fn a_value_that_rounds_to_nothing_has_no_minus() {
    let mut view = scenes::many(1);
    view.rows[0].live = Some(-0.04);
    let text = text(&view, &face(), (80, 24));
    let live = text.lines().find(|l| l.contains("live")).expect("a live value");
    assert!(live.contains("0.0") && !live.contains('-'), "{live}");
}

#[test]
fn missing_is_a_dash_and_never_a_nought() {
    let mut view = scenes::many(1);
    (view.rows[0].live, view.rows[0].held, view.rows[0].fluctuation) = (None, None, None);
    view.held = None;
    let text = text(&view, &face(), (80, 24));
    assert!(text.lines().any(|l| l.contains("live") && l.contains('—')), "{text}");
}

#[test]
fn plain_is_ascii_alone() {
    for view in scenes::all() {
        for (spot, pane) in [
            (Spot::Drive, Pane::Warnings),
            (Spot::Layby, Pane::Picture),
            (Spot::Layby, Pane::Segments),
            (Spot::Bench, Pane::Warnings),
        ] {
            let text = text(&view, &Face { plain: true, ..at(spot, pane) }, (100, 30));
            assert!(text.is_ascii(), "{text}");
        }
    }
}

#[test]
fn wrong_baud_is_told_in_full_words_at_every_size() {
    for view in [scenes::wrong_baud(3), scenes::wrong_baud(16)] {
        for size in [(80, 24), (120, 40)] {
            let text = text(&view, &face(), size);
            assert!(text.contains("bytes arrive but no line parses: check baud"), "{text}");
        }
    }
}

#[test]
fn disk_trouble_has_a_line_of_its_own_at_every_size() {
    for channels in [1, 6, 20, 40] {
        for size in [(60, 20), (80, 24), (120, 40)] {
            let mut view = scenes::many(channels);
            view.journal.trouble = Some("no space left".into());
            let text = text(&view, &face(), size);
            assert!(text.contains("DISK: no space left"), "{size:?} {text}");
        }
    }
}

fn word() -> impl Strategy<Value = String> {
    prop_oneof![
        any::<String>(),
        Just("\x1b]0;x\x07\u{202e}\u{200b}漢字e\u{301}👩\u{200d}🔧".to_string()),
        "[a-z-]{1,40}"
    ]
}

fn number() -> impl Strategy<Value = Option<f64>> {
    proptest::option::of(prop_oneof![any::<f64>(), -2000.0..2000.0])
}

prop_compose! {
    fn any_view()(
        base in 0..scenes::all().len(),
        words in proptest::collection::vec(word(), 8),
        numbers in proptest::collection::vec(number(), 8),
        copies in 0usize..60,
        state in 0usize..6,
        id in any::<u32>(),
    ) -> View {
        use WindowState::*;
        let mut view = scenes::all()[base].clone();
        view.window.state = [NoSpeed, TooSlow, TooFast, Settling, Steady, Held][state];
        view.window.speed_kmh = numbers[0];
        view.window.target_kmh = numbers[1].unwrap_or(100.0);
        view.window.tolerance_kmh = numbers[2].unwrap_or(2.0);
        view.window.progress = numbers[3].unwrap_or(0.5);
        view.window.left_s = numbers[4].unwrap_or(1.0);
        view.title = words[0].clone();
        view.tag.name = words[1].clone();
        view.tag.configuration = words[2].clone();
        view.journal.file = words[3].clone();
        view.journal.trouble = Some(words[3].clone());
        view.zero_age_s = numbers[7];
        for port in &mut view.ports {
            port.name = words[4].clone();
            port.last_bad = Some((words[5].clone(), words[6].clone()));
            port.lines_per_s = numbers[5].unwrap_or(0.0);
            port.rejected_share = numbers[6].unwrap_or(0.0);
        }
        for message in &mut view.messages {
            message.text = words[6].clone();
        }
        view.configurations = vec![(words[2].clone(), words[1].clone()); copies % 30];
        if let Some(mut row) = view.rows.first().cloned() {
            row.label = words[7].clone();
            (row.live, row.held, row.fluctuation) = (numbers[5], numbers[6], numbers[7]);
            row.trace = numbers.clone();
            view.rows = vec![row; copies];
        }
        view.kept = id;
        view
    }
}

fn any_overlay() -> impl Strategy<Value = Overlay> {
    prop_oneof![
        Just(Overlay::None),
        Just(Overlay::Help),
        Just(Overlay::Quit),
        any::<u32>().prop_map(Overlay::Void),
        any::<u8>().prop_map(|at| Overlay::Configuration(at.into())),
        any::<u8>().prop_map(|at| Overlay::Correct(at.into(), at.into())),
        any::<u8>().prop_map(|id| Overlay::Segment(id.into())),
        Just(scenes::calibration()),
        Just(scenes::step()),
        Just(Overlay::Leak(Some(StreamTime::ZERO))),
        Just(Overlay::Away(Spot::Bench)),
        (word(), proptest::option::of(word()))
            .prop_map(|(text, complaint)| { Overlay::Prompt(Prompt { kind: PromptKind::Note, text, complaint }) }),
    ]
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 400, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn any_view_at_any_size_draws_without_control_characters(
        view in any_view(),
        overlay in any_overlay(),
        size in prop_oneof![(1u16..130, 1u16..50), Just((1, 1)), Just((500, 200)), Just((60, 20)), Just((80, 24))],
        (plain, solo) in any::<(bool, bool)>(),
        (spot, pane, turned) in (0usize..3, 0usize..3, any::<usize>()),
        origin in prop_oneof![Just((0u16, 0u16)), (0u16..9, 0u16..9)],
    ) {
        let mut buffer = Buffer::empty(Rect::new(origin.0, origin.1, size.0, size.1));
        let mut face = Face { plain, solo, spot: [Spot::Bench, Spot::Drive, Spot::Layby][spot], ..with(overlay) };
        face.layby.pane = [Pane::Warnings, Pane::Segments, Pane::Picture][pane];
        (face.layby.configuration, face.layby.segment, face.layby.warning, face.bench.channel) = (turned, turned, turned, turned);
        render(&view, &face, &mut buffer);
        for (i, cell) in buffer.content().iter().enumerate() {
            if ratatui::text::Span::raw(cell.symbol()).width() > 1 {
                prop_assert!((i + 1) % usize::from(size.0) != 0, "a wide sign in the last column");
                prop_assert_eq!(buffer.content()[i + 1].symbol(), " ", "half of a wide sign is covered");
            }
            for c in cell.symbol().chars() {
                prop_assert!(!c.is_control(), "control character {c:?}");
                prop_assert!(!matches!(c, '\u{200b}'..='\u{200f}' | '\u{2028}'..='\u{202e}' | '\u{2066}'..='\u{2069}'), "{c:?}");
            }
        }
    }

    #[test]
    fn making_safe_twice_is_making_safe_once(text in word()) {
        let once = steadytap::screen::text::safe(&text);
        prop_assert_eq!(&steadytap::screen::text::safe(&once), &once);
    }
}

#[test]
fn a_frame_leaves_no_light_area_at_night() {
    for view in scenes::all() {
        for spot in [Spot::Bench, Spot::Drive, Spot::Layby] {
            let mut buffer = Buffer::empty(Rect::new(0, 0, 80, 24));
            render(&view, &Face { theme: Theme::Night, ..at(spot, Pane::Picture) }, &mut buffer);
            for cell in buffer.content() {
                assert!(contrast::luminance(cell.bg) < 0.05, "ground {:?} under {:?}", cell.bg, cell.symbol());
            }
        }
    }
}
