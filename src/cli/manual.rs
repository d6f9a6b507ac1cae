//! What the command line says about itself: its version, the man page, the completions of shells.
//!
//! The commands and their options come from the one definition of the words, the keys from the one key table.

use crate::screen::keys;
use clap::{Arg, Command};
use clap_complete::Shell;
use clap_mangen::Man;
use clap_mangen::roff::{Inline, Roff, bold, italic, roman};
use std::sync::OnceLock;

/// The version, with the commit where whoever built it named one in `STEADYTAP_COMMIT`.
pub fn version() -> &'static str {
    static VERSION: OnceLock<String> = OnceLock::new();
    VERSION.get_or_init(|| match option_env!("STEADYTAP_COMMIT") {
        Some(commit) => format!("{} ({commit})", env!("CARGO_PKG_VERSION")),
        None => env!("CARGO_PKG_VERSION").to_string(),
    })
}

/// What a shell reads to complete the words.
pub fn completions(mut words: Command, shell: Shell) -> String {
    let mut out = Vec::new();
    clap_complete::generate(shell, &mut words, "steadytap", &mut out);
    String::from_utf8_lossy(&out).into_owned()
}

/// The man page, for `man -l -` or `/usr/share/man/man1/steadytap.1`.
pub fn page(words: Command) -> String {
    let words = words.disable_help_subcommand(true);
    let man = Man::new(words.clone()).manual("steadytap manual");
    let mut out = Vec::new();
    man.render_title(&mut out)
        .and_then(|()| man.render_name_section(&mut out))
        .and_then(|()| man.render_synopsis_section(&mut out))
        .and_then(|()| sections(&words).to_writer(&mut out))
        .expect("writing to memory cannot fail");
    String::from_utf8_lossy(&out).into_owned()
}

fn sections(words: &Command) -> Roff {
    let mut roff = Roff::new();
    roff.control("SH", ["DESCRIPTION"]);
    roff.text([roman(DESCRIPTION)]);
    roff.control("SH", ["COMMANDS"]);
    words.get_subcommands().for_each(|command| described(&mut roff, command));
    roff.control("SH", ["KEYS"]);
    for row in keys::TABLE.iter().filter(|row| !row.does.is_empty()) {
        let places: Vec<String> = row.places.iter().map(|place| format!("{place:?}")).collect();
        let name = if row.name.is_empty() { String::new() } else { format!("; its name in keys.toml is {}", row.name) };
        let places = if places.len() > 6 { "everywhere".to_string() } else { places.join(", ") };
        entry(&mut roff, vec![bold(keys::Bindings::default().shown(row))], &format!("{} ({places}{name})", row.does));
    }
    for (title, rows) in [("FILES", FILES), ("EXIT STATUS", STATUS)] {
        roff.control("SH", [title]);
        rows.iter().for_each(|(name, text)| entry(&mut roff, vec![bold(*name)], text));
    }
    roff.control("SH", ["SAFETY"]);
    for text in SAFETY {
        roff.text([roman(*text)]);
        roff.control("PP", []);
    }
    roff
}

/// One command: what it does, its arguments and options.
fn described(roff: &mut Roff, command: &Command) {
    roff.control("SS", [command.get_name()]);
    roff.text([roman(command.get_about().map(ToString::to_string).unwrap_or_default())]);
    for argument in command.get_arguments() {
        let help = argument.get_help().map(ToString::to_string).unwrap_or_default();
        entry(roff, called(argument), &help);
    }
}

/// The argument as it is typed.
fn called(argument: &Arg) -> Vec<Inline> {
    let mut words: Vec<Inline> = argument.get_long().map(|long| bold(format!("--{long}"))).into_iter().collect();
    if argument.get_action().takes_values() {
        for value in argument.get_value_names().unwrap_or_default() {
            words.push(roman(if words.is_empty() { "" } else { " " }));
            words.push(italic(value.as_str()));
        }
    }
    words
}

fn entry(roff: &mut Roff, name: Vec<Inline>, text: &str) {
    roff.control("TP", []);
    roff.text(name);
    roff.text([roman(text)]);
}

const DESCRIPTION: &str = "Watches a vehicle's speed and the pressures of taps on its body, averages only while the speed is truly \
    steady, keeps every average with all that it depends on, and says at the roadside what the passes prove.";

const FILES: &[(&str, &str)] = &[
    ("rig.toml", "What is plugged in: ports, line formats, channels, their scaling, ranges and lags."),
    ("car.toml", "Where the taps are: positions, normals, areas; cores, contour, probe."),
    ("outing.toml", "The test: rig, car, configurations, which channel sits on which tap, speeds, wanted passes."),
    ("*.session", "Append-only JSON Lines, a checksum a line, rig, car and outing in its first: it reduces by itself."),
    ("*.record", "Every line that came in with its time, and every key: it replays to the same session."),
    ("*.torn", "The torn tail of a session that a power cut left, moved here when it was opened."),
    ("$XDG_DATA_HOME/steadytap", "New sessions, where no name was given (elsewhere the platform's own place)."),
];

const STATUS: &[(&str, &str)] = &[
    ("0", "Done."),
    ("1", "The work found a problem in its input; nothing was left half-written."),
    ("2", "Wrong usage."),
    ("3", "Finished, but something was degraded: a port lost, more than 1 % of lines rejected, a torn tail repaired."),
];

const SAFETY: &[&str] = &[
    "The driver drives and touches nothing; the passenger works the laptop. Alone: start and stop it only when parked.",
    "Obey the law and the conditions of the road; a test on a public road gives way to everybody.",
    "Secure laptop, hoses and mast so that nothing can come loose or hide the driver's view; keep clear of airbags; keep \
     hoses off hot and moving parts.",
    "The figures are test results, not approval of a part: structural strength, road legality and handling are for \
     licensed people and local rules.",
];
