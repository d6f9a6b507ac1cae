//! A driver alone does a whole outing without a look at the screen and without a key but the remote's.
//!
//! The drive is that of the starting points (invented), its commands taken out; the remote's forward key is pressed when the ear is told of another
//! configuration at a stop.

use crate::starting_points::{hand, record};
use steadytap::config::Setup;
use steadytap::pipeline::{Event, Input, Pipeline};
use steadytap::session::{Direction, Entry};
use steadytap::shell::files;
use steadytap::shell::solo::Solo;
use steadytap::sound::Cue;
use steadytap::stream::command::Command;
use steadytap::stream::record::{Reader, Told};
use steadytap::units::StreamTime;

fn setup() -> Setup {
    let path = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("configs/hand-outing.toml");
    let mut setup = files::setup_and_warnings(&path).expect("a good outing").0;
    setup.outing.passes = 1;
    setup
}

/// What came of an outing alone: entries, cues with their times, commands that solo gave.
#[derive(Default)]
struct Outcome {
    entries: Vec<Entry>,
    cues: Vec<(f64, Cue)>,
    commands: Vec<(f64, Command)>,
}

/// Plays the lines of a record from a moment on.
fn alone(from_s: f64) -> Outcome {
    let setup = setup();
    let mut pipeline = Pipeline::new(&setup, None, true);
    let mut solo = Solo::default();
    let (mut events, mut made) = (Vec::new(), Outcome::default());
    let text = record(hand);
    let mut reader = Reader::new(Some(&setup.rig.ports));
    reader.push(text.as_bytes(), &mut |told| {
        let Told::Line { at, port, line } = told else { return };
        if at.seconds() < from_s {
            return;
        }
        pipeline.step(Input::Line { port, at, line: &line }, &mut events);
        let wanted = solo.look(&pipeline, at);
        let mut commands = wanted.commands;
        for cue in &wanted.cues {
            // The remote: on, once the car stands and another letter is asked for.
            if let Cue::Next { configuration_index, .. } = cue
                && pipeline.logbook().stood_s(at).is_some()
            {
                let letter = &setup.outing.configurations[*configuration_index].letter;
                if letter != pipeline.logbook().configuration() {
                    commands.push(Command::Configuration(letter.clone()));
                }
            }
        }
        made.cues.extend(wanted.cues.iter().map(|cue| (at.seconds(), *cue)));
        for command in commands {
            made.commands.push((at.seconds(), command.clone()));
            pipeline.step(Input::Command { at, command }, &mut events);
        }
    });
    pipeline.finish(&mut events);
    made.entries = events.iter().filter_map(Event::entry).cloned().collect();
    made
}

#[test]
fn alone_every_held_dwell_is_kept_stops_are_zeros_and_the_plan_is_said() {
    let made = alone(0.0);
    assert_eq!(made.commands[0].1, Command::TakeEvery);
    let zeros = made.entries.iter().filter(|e| matches!(e, Entry::Zero(_))).count();
    assert_eq!(zeros, 5, "one at every stop of 14 s");
    let segments: Vec<(String, Direction)> = made
        .entries
        .iter()
        .filter_map(|e| if let Entry::Segment(s) = e { Some((s.configuration.clone(), s.direction)) } else { None })
        .collect();
    assert!(segments.len() >= 8, "{segments:?}");
    assert_eq!(segments[0], ("A".to_string(), Direction::Out));
    let said: Vec<Cue> = made.cues.iter().map(|c| c.1).collect();
    let next = |configuration_index, direction| Cue::Next { configuration_index, direction };
    // B is said when A is done, asked for at the stop, and said again as the answer to the remote.
    let (out, back) = (Direction::Out, Direction::Back);
    let expected = [next(0, out), next(0, back), next(1, out), next(1, out), next(1, out), next(1, back), Cue::AllDone];
    assert_eq!(said, expected);
}

#[test]
fn alone_nothing_begins_before_the_car_was_seen_parked() {
    // The record from the middle of the first run: 14 s of standing, 8 s of gathering speed.
    let made = alone(20.0);
    let (begun, first) = &made.commands[0];
    assert_eq!(*first, Command::TakeEvery);
    assert!(*begun > 37.0, "begun at {begun} s, on the move");
    let kept_before =
        made.entries.iter().any(|e| matches!(e, Entry::Segment(s) if s.t1 < StreamTime::from_micros(37_000_000)));
    assert!(!kept_before);
}
