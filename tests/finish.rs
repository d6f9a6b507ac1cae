//! The promise: the program explains itself wherever a person looks for it (shell, man page), and a long season is no trouble.

#[path = "bench/material.rs"]
mod material;

use crate::same_bytes_same_session::program;
use steadytap::reduction::{Options, reduce};
use steadytap::screen::keys;

/// The commands of the program's own help.
fn commands() -> Vec<String> {
    let help = said(&["--help"]);
    let list = help.split("Commands:").nth(1).and_then(|t| t.split("Options:").next()).expect("a list of commands");
    let rows = list.lines().filter_map(|line| line.strip_prefix("  ")).filter(|row| !row.starts_with(' '));
    let named = rows.filter_map(|row| row.split(' ').next());
    let named: Vec<String> = named.filter(|word| *word != "help").map(str::to_string).collect();
    assert!(named.len() >= 9 && named.contains(&"rehold".to_string()), "{named:?}");
    named
}

fn said(words: &[&str]) -> String {
    let output = program().args(words).output().unwrap();
    assert!(output.status.success(), "{words:?}: {}", String::from_utf8_lossy(&output.stderr));
    String::from_utf8(output.stdout).unwrap()
}

#[test]
fn every_shell_completes_every_command() {
    for shell in ["bash", "zsh", "fish", "powershell"] {
        let script = said(&["completions", shell]);
        for command in commands() {
            assert!(script.contains(&command), "{shell} does not know {command}");
        }
    }
}

#[test]
fn the_manual_names_every_command_every_key_and_what_to_mind() {
    // Roff writes a hyphen as `\-`; the eye sees neither that nor the font changes.
    let page = said(&["manual"]).replace("\\-", "-").replace("\\fB", "").replace("\\fI", "").replace("\\fR", "");
    for command in commands() {
        assert!(page.contains(&format!(".SS {command}\n")), "no section on {command}");
    }
    for row in keys::TABLE.iter().filter(|row| !row.does.is_empty()) {
        let shown = keys::Bindings::default().shown(row);
        assert!(page.contains(&format!(".TP\n{shown}\n{} (", row.does)), "not the key {shown}");
        assert!(row.name.is_empty() || page.contains(row.name), "not the name {}", row.name);
    }
    for section in ["KEYS", "FILES", "\"EXIT STATUS\"", "SAFETY"] {
        assert!(page.contains(&format!(".SH {section}\n")), "no section {section}\n{page}");
    }
    for word in ["--as-driven", "--tolerance", "*.session", "The driver drives and touches nothing"] {
        assert!(page.contains(word), "`{word}` is not said");
    }
}

#[test]
fn the_version_is_that_of_the_package() {
    assert!(said(&["--version"]).starts_with(&format!("steadytap {}", env!("CARGO_PKG_VERSION"))));
}

#[test]
fn a_session_of_five_hundred_segments_reduces() {
    let session = material::session(500);
    let reduction = reduce(&[session], &Options::default()).expect("hundreds of passes");
    assert!(!reduction.comparisons.is_empty());
    let undecided = reduction.comparisons.iter().filter(|c| c.p_adjusted.is_none()).count();
    assert_eq!(undecided, 0, "with hundreds of passes every comparison has its test");
}
