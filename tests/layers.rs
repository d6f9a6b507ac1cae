//! The house has no arrow upward and no circle: each room imports only rooms of lower layers, by the table in `src/lib.rs`.

use std::path::{Path, PathBuf};

/// Rooms from the ground up; `screen`, `simulate` and `sound` observe and are imported by the shell and the command line alone.
const LAYERS: [&[&str]; 12] = [
    &["units", "pneumatics", "text"],
    &["config"],
    &["session"],
    &["stream"],
    &["signal"],
    &["hold"],
    &["reduction"],
    &["report"],
    &["pipeline"],
    &["screen", "simulate", "sound"],
    &["shell"],
    &["cli"],
];

fn sources(directory: &Path, into: &mut Vec<PathBuf>) {
    for entry in std::fs::read_dir(directory).expect("a directory of the source") {
        let path = entry.expect("an entry").path();
        if path.is_dir() {
            sources(&path, into);
        } else if path.extension().is_some_and(|e| e == "rs") {
            into.push(path);
        }
    }
}

fn layer(room: &str) -> Option<usize> {
    LAYERS.iter().position(|rooms| rooms.contains(&room))
}

#[test]
fn no_room_imports_a_higher_one() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut files = Vec::new();
    sources(&root, &mut files);
    let mut wrong = Vec::new();
    let mut edges = 0;
    for file in files {
        let inside = file.strip_prefix(&root).expect("a file of the source");
        let first = inside.iter().next().expect("a name").to_string_lossy();
        let room = first.trim_end_matches(".rs").to_string();
        let Some(at) = layer(&room) else { continue };
        let text = std::fs::read_to_string(&file).expect("a source file");
        let code = text.lines().filter(|l| !l.trim_start().starts_with("//")).collect::<Vec<_>>().join("\n");
        assert!(
            !code.contains("crate::{"),
            "{} imports several rooms at once, which hides them here",
            inside.display()
        );
        for other in code.split("crate::").skip(1) {
            let other: String = other.chars().take_while(|c| c.is_alphanumeric() || *c == '_').collect();
            let Some(to) = layer(&other).filter(|_| other != room) else { continue };
            edges += 1;
            if to >= at {
                wrong.push(format!("{} imports {other}", inside.display()));
            }
        }
    }
    wrong.sort();
    wrong.dedup();
    assert!(wrong.is_empty(), "upward edges:\n{}", wrong.join("\n"));
    assert!(edges > 50, "the test sees no imports");
}

#[test]
fn every_room_stands_in_the_table() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let library = std::fs::read_to_string(root.join("lib.rs")).expect("the library");
    for line in library.lines().filter_map(|l| l.strip_prefix("pub mod ")) {
        let room = line.trim_end_matches(';');
        assert!(layer(room).is_some(), "{room} has no layer");
        assert!(library.contains(&format!("[`{room}`]")), "{room} is not in the library's table");
    }
}

#[test]
fn nothing_is_left_to_do() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let mut files = Vec::new();
    sources(&root.join("src"), &mut files);
    sources(&root.join("tests"), &mut files);
    for file in files.iter().filter(|f| !f.ends_with("layers.rs")) {
        let text = std::fs::read_to_string(file).expect("a source file");
        for word in ["todo!(", "unimplemented!(", "#[ignore"] {
            assert!(!text.contains(word), "{} holds {word}", file.display());
        }
    }
}
