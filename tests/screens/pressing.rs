//! Guards the promise that every printed key acts, that leaving and voiding ask once, and that one press takes once.

use super::{scenes, text};
use crossterm::event::{KeyCode, KeyEvent, KeyEventKind, KeyModifiers};
use scenes::{face, with};
use steadytap::screen::keys::{Action, Bindings, KeyRow, Place, TABLE, look, paste, press};
use steadytap::screen::layby::Pane;
use steadytap::screen::{Face, Kept, Overlay, Prompt, PromptKind, Spot, View};
use steadytap::session::Direction;
use steadytap::stream::command::{Command, DirectionWord, LONGEST_TEXT};
use steadytap::units::StreamTime;

fn key(code: KeyCode, control: bool) -> KeyEvent {
    KeyEvent::new(code, if control { KeyModifiers::CONTROL } else { KeyModifiers::NONE })
}

fn tap(view: &View, face: &mut Face, code: KeyCode) -> Option<Action> {
    press(view, face, key(code, false))
}

fn letter(view: &View, face: &mut Face, c: char) -> Option<Action> {
    tap(view, face, KeyCode::Char(c))
}

fn command(command: Command) -> Option<Action> {
    Some(Action::Command(command))
}

fn later(view: &View, seconds: i64) -> View {
    View { now: view.now.plus(seconds * 1_000_000), ..view.clone() }
}

fn prompt(kind: PromptKind, text: &str) -> Overlay {
    Overlay::Prompt(Prompt { kind, text: text.into(), complaint: None })
}

fn face_at(place: Place) -> Face {
    let mut face = with(match place {
        Place::Bench | Place::Drive | Place::Layby => Overlay::None,
        Place::Help => Overlay::Help,
        Place::Quit => Overlay::Quit,
        Place::Void => Overlay::Void(12),
        Place::Away => Overlay::Away(Spot::Layby),
        Place::Configuration => Overlay::Configuration(0),
        Place::Segment => Overlay::Segment(7),
        Place::Correct => Overlay::Correct(7, 0),
        Place::Calibration => scenes::calibration(),
        Place::Leak => Overlay::Leak(None),
        Place::Step => Overlay::Step(None),
        Place::Prompt => prompt(PromptKind::Note, "gust"),
    });
    face.spot = match place {
        Place::Bench | Place::Calibration | Place::Leak | Place::Step => Spot::Bench,
        Place::Layby | Place::Segment | Place::Correct => Spot::Layby,
        _ => Spot::Drive,
    };
    face.layby.pane = Pane::Segments;
    (face.layby.segment, face.bench.channel) = (3, 2);
    face
}

#[test]
fn every_row_of_the_key_table_acts_in_every_place_it_names() {
    let view = View { last_segment: Some(12), ..scenes::bench() };
    for row in TABLE {
        for place in row.places {
            for (code, control) in row.keys {
                let before = Face { solo: row.name == "guidance", ..face_at(*place) };
                let mut after = before.clone();
                let action = press(&view, &mut after, key(*code, *control));
                after.last_key = None;
                assert!(action.is_some() || after != before, "`{}` {} in {place:?} does nothing", row.name, row.does);
            }
        }
    }
}

#[test]
fn no_key_stands_twice_in_one_place() {
    for (i, row) in TABLE.iter().enumerate() {
        for other in &TABLE[i + 1..] {
            let both = row.places.iter().any(|p| other.places.contains(p));
            assert!(!(both && row.keys.iter().any(|k| other.keys.contains(k))), "{} and {}", row.does, other.does);
        }
    }
}

#[test]
fn every_printed_key_stands_where_it_acts() {
    let view = scenes::bench();
    let shown = |row: &KeyRow| Bindings::default().shown(row);
    for size in [(60, 20), (80, 24), (120, 40)] {
        for row in TABLE.iter().filter(|row| !row.does.is_empty()) {
            for place in row.places {
                let mut face = face_at(*place);
                if matches!(place, Place::Bench | Place::Drive | Place::Layby) {
                    face.overlay = Overlay::Help;
                } else if row.places.contains(&Place::Drive) {
                    continue;
                }
                // A box may fold between words, and has other things beside it.
                let frame = text(&view, &face, size);
                let inside = |line: &str| match (line.find('│'), line.rfind('│')) {
                    (Some(a), Some(b)) => Some(line[a..b].to_string()),
                    _ => line.contains('┌').then(|| line.to_string()),
                };
                let words: Vec<String> = frame.lines().filter_map(inside).collect();
                let joined = words.join(" ").replace('│', " ").split_whitespace().collect::<Vec<_>>().join(" ");
                assert!(
                    joined.contains(&format!("{} {}", shown(row), row.does)),
                    "{size:?} {place:?} misses {} {}\n{frame}",
                    shown(row),
                    row.does
                );
            }
        }
    }
}

#[test]
fn help_and_leave_stand_in_the_line_of_keys_at_every_width() {
    for columns in 60..200 {
        let text = text(&scenes::steady(), &super::face(), (columns, 24));
        let line = text.lines().last().expect("a line of keys");
        assert!(line.contains("Space take") && line.ends_with("? help  q leave"), "{columns}: {line}");
    }
}

#[test]
fn one_press_takes_once_however_the_terminal_repeats_it() {
    let view = scenes::held(Kept::No);
    let mut face = face();
    assert_eq!(letter(&view, &mut face, ' '), command(Command::Take));
    for i in 1..50 {
        let soon = View { now: view.now.plus(i * 100_000), ..view.clone() };
        assert_eq!(letter(&soon, &mut face, ' '), None, "event {i} of a held key");
    }
    assert_eq!(letter(&later(&view, 7), &mut face, ' '), command(Command::Take));
}

#[test]
fn releases_and_repeats_take_nothing() {
    let view = scenes::held(Kept::No);
    for kind in [KeyEventKind::Release, KeyEventKind::Repeat] {
        for code in [KeyCode::Char(' '), KeyCode::PageDown, KeyCode::Char('z')] {
            assert_eq!(press(&view, &mut face(), KeyEvent { kind, ..key(code, false) }), None);
        }
    }
}

#[test]
fn voiding_asks_once_and_two_presses_of_a_remote_do_it() {
    let view = scenes::held(Kept::OnDisk(12));
    let mut face = face();
    assert_eq!(tap(&view, &mut face, KeyCode::PageUp), None);
    assert_eq!(face.overlay, Overlay::Void(12));
    assert_eq!(tap(&view, &mut face, KeyCode::PageUp), None, "the same press, held");
    assert_eq!(tap(&later(&view, 1), &mut face, KeyCode::PageUp), command(Command::Void(12)));
    assert_eq!(face.overlay, Overlay::None);
}

#[test]
fn escape_keeps_a_segment_and_so_does_taking() {
    let view = scenes::held(Kept::OnDisk(12));
    let mut escaped = with(Overlay::Void(12));
    assert_eq!((tap(&view, &mut escaped, KeyCode::Esc), &escaped.overlay), (None, &Overlay::None));
    let mut taken = with(Overlay::Void(12));
    assert_eq!(tap(&view, &mut taken, KeyCode::PageDown), command(Command::Take));
    assert_eq!(taken.overlay, Overlay::None);
}

#[test]
fn caps_lock_makes_no_other_key_and_alt_gr_types() {
    let view = scenes::steady();
    assert_eq!(letter(&view, &mut face(), 'Z'), command(Command::Zero));
    let mut note = with(prompt(PromptKind::Note, "Q"));
    assert_eq!(letter(&view, &mut note, 'Z'), None);
    let alt_gr = KeyEvent::new(KeyCode::Char('@'), KeyModifiers::CONTROL | KeyModifiers::ALT);
    assert_eq!(press(&view, &mut note, alt_gr), None);
    assert_eq!(note.overlay, prompt(PromptKind::Note, "QZ@"));
    let alt = KeyEvent::new(KeyCode::Char('z'), KeyModifiers::ALT);
    assert_eq!(press(&view, &mut face(), alt), None);
}

#[test]
fn nothing_kept_means_nothing_to_void() {
    let mut face = face();
    assert_eq!(tap(&scenes::no_speed(), &mut face, KeyCode::PageUp), None);
    assert_eq!(face.overlay, Overlay::None);
}

#[test]
fn leaving_asks_once() {
    let view = scenes::steady();
    for (first, second) in [
        ((KeyCode::Char('q'), false), (KeyCode::Char('q'), false)),
        ((KeyCode::Char('c'), true), (KeyCode::Char('c'), true)),
    ] {
        let mut face = face();
        assert_eq!(press(&view, &mut face, key(first.0, first.1)), None);
        assert_eq!(face.overlay, Overlay::Quit);
        assert_eq!(press(&view, &mut face.clone(), key(second.0, second.1)), Some(Action::Quit));
        assert_eq!((tap(&view, &mut face, KeyCode::Esc), face.overlay), (None, Overlay::None));
    }
}

#[test]
fn direction_goes_by_track_out_back_other_and_round() {
    let mut view = scenes::steady();
    let expected = [
        DirectionWord::By(Direction::Out),
        DirectionWord::By(Direction::Back),
        DirectionWord::By(Direction::Other),
        DirectionWord::Auto,
    ];
    for word in expected {
        assert_eq!(letter(&view, &mut face(), 'd'), command(Command::Direction(word)));
        match word {
            DirectionWord::By(way) => (view.tag.by_hand, view.tag.direction) = (true, way.word()),
            DirectionWord::Auto => view.tag.by_hand = false,
        }
    }
}

#[test]
fn the_target_goes_round_and_a_single_one_stays() {
    let mut view = scenes::steady();
    assert_eq!(letter(&view, &mut face(), 't'), command(Command::Target(80.0)));
    view.window.target_kmh = 80.0;
    assert_eq!(letter(&view, &mut face(), 't'), command(Command::Target(100.0)));
    view.targets_kmh = vec![80.0];
    assert_eq!(letter(&view, &mut face(), 't'), None);
    view.targets_kmh = vec![];
    assert_eq!(letter(&view, &mut face(), 't'), None);
}

#[test]
fn a_configuration_is_chosen_by_letter_number_or_arrows() {
    let view = scenes::steady();
    for choose in ['a', 'A', '1'] {
        let mut face = face();
        assert_eq!(letter(&view, &mut face, 'c'), None);
        assert_eq!(letter(&view, &mut face, choose), command(Command::Configuration("A".into())), "{choose}");
        assert_eq!(face.overlay, Overlay::None);
    }
    let mut face = face();
    letter(&view, &mut face, 'c');
    tap(&view, &mut face, KeyCode::Down);
    assert_eq!(tap(&view, &mut face, KeyCode::Enter), command(Command::Configuration("A".into())));
    letter(&view, &mut face, 'c');
    assert_eq!(letter(&view, &mut face, '7'), None);
    assert_eq!(face.overlay, Overlay::Configuration(1), "an unknown letter changes nothing");
}

#[test]
fn a_span_begins_and_ends_with_one_key() {
    assert_eq!(letter(&scenes::steady(), &mut face(), 's'), command(Command::SpanBegin));
    assert_eq!(letter(&scenes::span(), &mut face(), 's'), command(Command::SpanEnd));
}

#[test]
fn a_note_may_hold_every_letter_that_is_a_key_and_a_pasted_line() {
    let view = scenes::steady();
    let mut face = face();
    letter(&view, &mut face, 'n');
    "q ? z ".chars().for_each(|c| drop(letter(&view, &mut face, c)));
    paste(&mut face, "pasted\r\n\x1b[31m text");
    assert_eq!(tap(&view, &mut face, KeyCode::Enter), command(Command::Note("q ? z pasted[31m text".into())));
    assert_eq!(face.overlay, Overlay::None);
}

#[test]
fn a_remote_takes_while_a_note_is_typed() {
    let mut face = with(prompt(PromptKind::Note, "gu"));
    assert_eq!(tap(&scenes::steady(), &mut face, KeyCode::PageDown), command(Command::Take));
    assert_eq!(face.overlay, prompt(PromptKind::Note, "gu"));
}

#[test]
fn a_hundred_kilobytes_pasted_are_cut_and_outside_a_prompt_nothing() {
    let mut face = with(prompt(PromptKind::Note, ""));
    paste(&mut face, &"ä".repeat(100_000));
    assert_eq!(face.overlay, prompt(PromptKind::Note, &"ä".repeat(LONGEST_TEXT)));
    let mut drive = super::face();
    paste(&mut drive, "q q q");
    assert_eq!(drive, super::face());
}

#[test]
fn what_a_prompt_cannot_read_stays_with_a_complaint() {
    let view = scenes::steady();
    let mut face = with(prompt(PromptKind::Air, "18.5 1011"));
    assert_eq!(tap(&view, &mut face, KeyCode::Enter), None);
    let Overlay::Prompt(Prompt { complaint: Some(complaint), .. }) = &face.overlay else { panic!("{face:?}") };
    assert!(complaint.contains("humidity"), "{complaint}");
    " 60".chars().for_each(|c| drop(letter(&view, &mut face, c)));
    let air = steadytap::config::Air { temperature_c: 18.5, pressure_hpa: 1011.0, humidity_pct: 60.0 };
    assert_eq!(tap(&view, &mut face, KeyCode::Enter), command(Command::Air(air)));
}

#[test]
fn stream_time_that_stands_still_at_the_end_blocks_no_key() {
    let view = View { ended: true, now: StreamTime::ZERO, ..scenes::held(Kept::OnDisk(12)) };
    let mut face = face();
    tap(&view, &mut face, KeyCode::PageUp);
    assert_eq!(tap(&view, &mut face, KeyCode::PageUp), command(Command::Void(12)));
}

#[test]
fn any_key_closes_the_cautions_and_acts_all_the_same() {
    let view = scenes::off_slow();
    let mut face = with(Overlay::Safety);
    assert_eq!(letter(&view, &mut face, 'z'), command(Command::Zero));
    assert_eq!(face.overlay, Overlay::None);
    let mut face = with(Overlay::Safety);
    assert_eq!(letter(&view, &mut face, 'x'), None);
    assert_eq!(face.overlay, Overlay::None);
}

#[test]
fn drive_is_left_on_the_move_only_when_asked_twice_and_alone_never() {
    let moving = scenes::steady();
    let mut face = face();
    tap(&moving, &mut face, KeyCode::Tab);
    assert_eq!((face.spot, &face.overlay), (Spot::Drive, &Overlay::Away(Spot::Layby)));
    tap(&moving, &mut face, KeyCode::Tab);
    assert_eq!((face.spot, &face.overlay), (Spot::Layby, &Overlay::None));
    let mut alone = Face { solo: true, ..super::face() };
    tap(&moving, &mut alone, KeyCode::Tab);
    assert_eq!((alone.spot, &alone.overlay), (Spot::Drive, &Overlay::None));
    let mut parked = super::face();
    tap(&scenes::layby(), &mut parked, KeyCode::Tab);
    assert_eq!(parked.spot, Spot::Layby);
    tap(&scenes::layby(), &mut parked, KeyCode::BackTab);
    assert_eq!(parked.spot, Spot::Drive);
}

#[test]
fn a_segment_is_corrected_voided_restored_and_noted_on() {
    let view = scenes::layby();
    let at = || face_at(Place::Segment);
    let mut face = at();
    letter(&view, &mut face, 'c');
    assert_eq!(letter(&view, &mut face, 'b'), command(Command::CorrectConfiguration(7, "B".into())));
    let way = view.findings.as_ref().unwrap().segments[6].direction;
    assert_eq!(way, Direction::Out);
    assert_eq!(letter(&view, &mut at(), 'd'), command(Command::CorrectDirection(7, Direction::Back)));
    assert_eq!(letter(&view, &mut at(), 'u'), command(Command::Restore(7)));
    let mut face = at();
    letter(&view, &mut face, 'x');
    assert_eq!(tap(&view, &mut face, KeyCode::Enter), command(Command::Void(7)));
    let mut face = at();
    letter(&view, &mut face, 'n');
    "loose".chars().for_each(|c| drop(letter(&view, &mut face, c)));
    assert_eq!(tap(&view, &mut face, KeyCode::Enter), command(Command::Note("segment 7: loose".into())));
}

#[test]
fn a_calibration_waits_until_the_average_stands_still() {
    let mut face = Face { bench: steadytap::screen::bench::BenchFace { channel: 0 }, ..face_at(Place::Calibration) };
    let early = View { now: StreamTime::from_micros(749_000_000), ..scenes::bench() };
    let mut view = early.clone();
    view.bench.as_mut().unwrap().fine.truncate(100);
    assert_eq!(tap(&early, &mut face, KeyCode::Enter), None);
    let points = |face: &Face| match &face.overlay {
        Overlay::Calibration(c) => (c.points.len(), c.points.last().map(|p| (p.raw.round(), p.reference))),
        other => panic!("{other:?}"),
    };
    look(&view, &mut face);
    assert_eq!(points(&face).0, 4, "a second is no average");
    let mut moving = early.clone();
    moving.bench.as_mut().unwrap().fine.iter_mut().enumerate().for_each(|(i, s)| s[1] += i as f64);
    look(&moving, &mut face);
    assert_eq!(points(&face).0, 4, "a figure that moves is no average");
    look(&early, &mut face);
    assert_eq!(points(&face), (5, Some((2048.0, 490.0))));
    letter(&early, &mut face, 'x');
    assert!(matches!(letter(&early, &mut face, 'w'), Some(Action::Calibrate { channel, .. }) if channel == "p1"));
}

#[test]
fn keys_can_be_put_elsewhere_and_clashes_are_told() {
    let own = Bindings::new([("take", vec!["F5", "Ctrl-t"]), ("mark", vec!["x"])]).expect("good keys");
    let mut face = Face { bindings: own, ..face() };
    let view = scenes::held(Kept::No);
    assert_eq!(letter(&view, &mut face, ' '), None);
    assert_eq!(tap(&view, &mut face, KeyCode::F(5)), command(Command::Take));
    assert_eq!(press(&view, &mut face, key(KeyCode::Char('t'), true)), command(Command::Take));
    assert_eq!(letter(&view, &mut face, 'x'), command(Command::Mark(String::new())));
    let line = text(&view, &face, (80, 24));
    assert!(line.lines().last().unwrap().contains("F5 take"), "{line}");
    let wrong = |name: &str, key: &str| Bindings::new([(name, vec![key])]).unwrap_err().to_string();
    assert!(wrong("tkae", "x").contains("there is no key named `tkae`"));
    assert!(wrong("take", "Hyper").contains("`Hyper` is no key"));
    assert!(wrong("take", "z").contains("both `take` and `zero`"));
}

#[test]
fn alone_the_remote_confirms_the_part_when_parked_and_voids_at_once() {
    let mut alone = Face { solo: true, ..face() };
    let driving = scenes::held(Kept::OnDisk(12));
    assert_eq!(tap(&driving, &mut alone, KeyCode::PageDown), None, "every dwell is kept anyway");
    assert_eq!(tap(&driving, &mut alone, KeyCode::PageUp), command(Command::Void(12)));
    let parked = scenes::alone_parked();
    let parked = later(&parked, 60);
    assert_eq!(tap(&parked, &mut alone, KeyCode::PageDown), command(Command::Configuration("C".into())));
    assert_eq!(letter(&later(&parked, 2), &mut alone, ' '), command(Command::Configuration("C".into())));
    assert_eq!(letter(&driving, &mut alone, 'g'), Some(Action::Guidance));
    assert_eq!((letter(&driving, &mut alone, 'q'), &alone.overlay), (None, &Overlay::None), "not on the move");
    letter(&parked, &mut alone, 'q');
    assert_eq!(alone.overlay, Overlay::Quit);
}
