//! The promise: whatever is typed, the program answers with its result or with one clear error that has a place and a
//! remedy; the exit status says which; what cannot be done leaves nothing half-written behind.

use crate::same_bytes_same_session::{arrivals, drive, program, segments, short, van};
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::process::Stdio;
use steadytap::config::Setup;
use steadytap::session::codec;

/// A directory with the van's three files, its short outing driven (`van.session`, `van.record`), and what is no use.
struct Desk(tempfile::TempDir);

impl Desk {
    fn new() -> Self {
        let dir = tempfile::tempdir().unwrap();
        for name in ["van-outing.toml", "van-rig.toml", "van.toml"] {
            let from = Path::new(env!("CARGO_MANIFEST_DIR")).join("configs").join(name);
            std::fs::copy(from, dir.path().join(name)).unwrap();
        }
        Self(dir)
    }

    fn driven() -> Self {
        let desk = Self::new();
        drive(&van(), &desk.path("van.session"), arrivals(&van(), short(), usize::MAX));
        desk
    }

    fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    /// Puts `to` in place of `from`, which must stand in the file once.
    fn change(&self, name: &str, from: &str, to: &str) {
        let text = std::fs::read_to_string(self.path(name)).unwrap();
        assert_eq!(text.matches(from).count(), 1, "`{from}` in {name}");
        std::fs::write(self.path(name), text.replacen(from, to, 1)).unwrap();
    }

    fn write(&self, name: &str, bytes: &[u8]) {
        std::fs::write(self.path(name), bytes).unwrap();
    }

    /// Names and contents of everything in it.
    fn contents(&self) -> BTreeMap<String, Vec<u8>> {
        let files = std::fs::read_dir(self.0.path()).unwrap().map(|e| e.unwrap());
        files.map(|e| (e.file_name().into_string().unwrap(), std::fs::read(e.path()).unwrap_or_default())).collect()
    }

    /// Runs the program in here.
    fn run(&self, words: &str) -> Answer {
        let output = program().args(words.split_whitespace()).current_dir(self.0.path()).output().unwrap();
        Answer {
            status: output.status.code(),
            out: String::from_utf8(output.stdout).unwrap(),
            err: String::from_utf8(output.stderr).unwrap(),
        }
    }

    /// The words are refused: this status, one error with these words in it and a remedy, nothing on standard output,
    /// and every file as it was.
    fn refuses(&self, words: &str, status: i32, said: &[&str]) {
        let before = self.contents();
        let answer = self.run(words);
        assert_eq!(answer.status, Some(status), "{words}\n{}", answer.err);
        assert_eq!(answer.out, "", "{words}");
        assert_eq!(answer.err.matches("error:").count(), 1, "{words}\n{}", answer.err);
        let remedy =
            ["hint:", "--help", "is wanted", "it must be", "expected"].iter().any(|word| answer.err.contains(word));
        assert!(remedy, "no remedy: {words}\n{}", answer.err);
        for word in said {
            assert!(answer.err.contains(word), "`{word}` is not said: {words}\n{}", answer.err);
        }
        let after = self.contents();
        assert!(before.keys().eq(after.keys()), "{words}\nleft {:?}", after.keys());
        assert!(before == after, "{words}\nchanged a file");
    }
}

struct Answer {
    status: Option<i32>,
    out: String,
    err: String,
}

/// Line and column, from 1, where `text` begins in a file, as an error gives them.
fn place_of(desk: &Desk, name: &str, text: &str) -> String {
    let file = std::fs::read_to_string(desk.path(name)).unwrap();
    let at = file.find(text).unwrap();
    let line = file[..at].matches('\n').count() + 1;
    let column = file[..at].chars().rev().take_while(|c| *c != '\n').count() + 1;
    format!("{name}:{line}:{column}")
}

#[test]
fn a_mistake_in_a_file_is_told_with_line_column_and_remedy_by_every_command() {
    // File, what stands there, what is written instead, where the error points, what it says.
    let mistakes = [
        ("van-outing.toml", "out_track_deg = 90.0", "out_trak_deg = 90.0", "out_trak_deg", "out_track_deg"),
        ("van-outing.toml", "p1 = \"base-high\"", "p1 = \"base-hgih\"", "\"base-hgih\"", "base-high"),
        ("van-outing.toml", "p2 = \"base-low\"", "p9 = \"base-low\"", "p9", "p9"),
        ("van-outing.toml", "rig = \"van-rig.toml\"", "rig = 7", "7", "rig"),
        ("van-outing.toml", "watch = \"speed\"", "watch = \"sped\"", "\"sped\"", "speed"),
        ("van-outing.toml", "dwell_s = 6.0 ", "dwell_s = -6.0 ", "-6.0", "dwell_s"),
        ("van-rig.toml", "unit = \"hPa\"", "unit = \"kW\"", "\"kW\"", "hPa"),
        ("van-rig.toml", "range = [-100.0, 1000.0]", "range = [1000.0, -100.0]", "[1000.0, -100.0]", "range"),
        ("van-rig.toml", "name = \"altitude\"", "name = \"track\"", "", "a second channel `track`"),
        ("van-rig.toml", "steadytap = \"rig 1\"", "steadytap = \"rig 2\"", "\"rig 2\"", "rig 1"),
        ("van.toml", "area_m2 = 1.2\n", "area_m2 = -1.2\n", "-1.2", "area"),
        ("van.toml", "wheelbase_m = 3.2", "wheelbase_m = 3,2", "", ""),
    ];
    for (file, from, to, points_at, says) in mistakes {
        let desk = Desk::new();
        desk.change(file, from, to);
        desk.write("some.record", b"1.000000 gauge 1\n");
        let mut said = vec![says];
        let place = match points_at {
            "" => format!("{file}:"),
            text => place_of(&desk, file, text),
        };
        said.push(&place);
        if file == "van-outing.toml" || !points_at.is_empty() {
            desk.refuses(&format!("check {file}"), 1, &said);
        }
        desk.refuses("check van-outing.toml", 1, &said);
        desk.refuses("drive van-outing.toml --unattended --session x.session", 1, &said);
        desk.refuses("drive van-outing.toml --stream some.record --unattended --session x.session", 1, &said);
        desk.refuses("rehold some.record van-outing.toml --session x.session --csv x.csv", 1, &said);
    }
}

#[test]
fn every_mistake_of_a_file_is_told_at_once() {
    let desk = Desk::new();
    desk.change("van-outing.toml", "tolerance_kmh = 2.0", "tolerence_kmh = 2.0");
    desk.change("van-outing.toml", "p1 = \"base-high\"", "p1 = \"base-hgih\"");
    let answer = desk.run("check van-outing.toml van.toml nothing.toml");
    assert_eq!(answer.status, Some(1));
    assert_eq!(answer.out, "van.toml: good car\n");
    for word in ["tolerence_kmh", "base-hgih", "nothing.toml"] {
        assert!(answer.err.contains(word), "{word}\n{}", answer.err);
    }
}

#[test]
fn a_file_that_is_not_there_or_not_what_it_should_be_is_refused() {
    let desk = Desk::driven();
    desk.write("empty.record", b"");
    desk.write("head.record", b"# steadytap record 1\n# started 2026-06-14T09:12:00Z\n");
    desk.write("two.record", b"# steadytap record 2\n1.000000 gauge 1\n");
    desk.write(
        "binary.record",
        &(0..400_000_u32).map(|i| (i.wrapping_mul(2_654_435_761) >> 13) as u8).collect::<Vec<_>>(),
    );
    std::fs::create_dir(desk.path("folder")).unwrap();
    let not_utf8 = desk.path("latin.toml");
    std::fs::write(not_utf8, b"steadytap = \"outing 1\"\ntitle = \"H\xF6he\"\n").unwrap();
    for (record, said) in [
        ("none.record", "no such file"),
        ("empty.record", "the record is empty"),
        ("head.record", "the record is empty"),
        ("two.record", "version 2"),
        ("binary.record", "no record"),
        ("folder", "directory"),
        ("van.session", "no record"),
        ("van.toml", "no record"),
    ] {
        let place = record;
        for command in [
            format!("drive van-outing.toml --stream {record} --unattended --session x.session --fast max"),
            format!("rehold {record} van-outing.toml --session x.session"),
            format!("rehold {record} van-outing.toml --csv x.csv"),
            format!("rehold {record} van-outing.toml --csv -"),
        ] {
            desk.refuses(&command, 1, &[said, place]);
        }
    }
    for command in ["drive {}", "rehold van.record {} --csv -"] {
        for (outing, said) in [
            ("none.toml", "no such file"),
            ("folder", "directory"),
            ("latin.toml", "not UTF-8"),
            ("binary.record", "UTF-8"),
        ] {
            desk.refuses(&command.replace("{}", outing), 1, &[said, outing]);
        }
    }
    desk.refuses("check latin.toml", 1, &["latin.toml:2", "UTF-8"]);
    for (file, said) in [
        ("van.record", "no session"),
        ("van.toml", "no session"),
        ("empty.record", "empty"),
        ("none", "no such file"),
        ("folder", "directory"),
    ] {
        desk.refuses(&format!("reduce {file}"), 1, &[said, file]);
        desk.refuses(&format!("reduce {file} --csv x.csv --json x.json"), 1, &[said, file]);
    }
    for (file, said) in
        [("none", "no such file"), ("folder", "directory"), ("empty.record", "empty"), ("two.record", "version 2")]
    {
        desk.refuses(&format!("check {file}"), 1, &[said, file]);
    }
}

#[test]
fn a_pipe_that_brings_no_record_is_refused_too() {
    let desk = Desk::new();
    let mut child = program()
        .args(["rehold", "-", "van-outing.toml", "--csv", "-"])
        .current_dir(desk.0.path())
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    std::io::Write::write_all(&mut child.stdin.take().unwrap(), b"milk\nbread\n").unwrap();
    let output = child.wait_with_output().unwrap();
    assert_eq!((output.status.code(), output.stdout.len()), (Some(1), 0));
    assert!(String::from_utf8_lossy(&output.stderr).contains("no record"));
}

#[test]
fn nothing_is_overwritten_and_nothing_half_written() {
    let desk = Desk::driven();
    desk.refuses("rehold van.record van-outing.toml --session van.session", 1, &["exists already", "van.session"]);
    desk.refuses("rehold van.record van-outing.toml --csv - --session van.session", 1, &["exists already"]);
    desk.refuses("rehold van.record van-outing.toml --csv van.record", 1, &["overwrite", "van.record"]);
    desk.refuses("rehold van.record van-outing.toml --csv ./van.record --session x.session", 1, &["overwrite"]);
    desk.refuses("reduce van.session --csv van.session", 1, &["overwrite", "van.session"]);
    desk.refuses("reduce van.session --json ./van.session", 1, &["overwrite"]);
    desk.refuses("reduce van.session --report ./van.session", 1, &["overwrite"]);
    desk.refuses("reduce van.session --csv x.csv --json x.json --report nowhere/x.html", 1, &["nowhere/x.html"]);
    desk.refuses("reduce van.session --csv x --report x", 1, &["two outputs have this name"]);
    desk.refuses("rehold van.record van-outing.toml --csv nowhere/x.csv", 1, &["nowhere/x.csv"]);
    desk.refuses("rehold van.record van-outing.toml --session nowhere/x.session", 1, &["nowhere/x.session"]);
    desk.change("van-outing.toml", "tolerance_kmh = 2.0", "tolerance_kmh = 2.5");
    let goes_on = "drive van-outing.toml --stream van.record --unattended --fast max --session van.session";
    desk.refuses(goes_on, 1, &["another rig, car or outing", "van.session"]);
    desk.refuses(&goes_on.replace("--session van.session", "--session van.toml"), 1, &["no session", "van.toml"]);
}

/// A pipe or a device that is named as an output is written to; putting a new file in its place would destroy it.
#[cfg(unix)]
#[test]
fn a_pipe_given_as_output_is_written_to_and_not_replaced() {
    use std::os::unix::fs::FileTypeExt;
    let desk = Desk::driven();
    let pipe = desk.path("pipe.csv");
    assert!(std::process::Command::new("mkfifo").arg(&pipe).status().unwrap().success());
    let from = pipe.clone();
    // The writer opens both ways in, so that a program that never opens the pipe cannot hang the test.
    let open = std::fs::OpenOptions::new().read(true).write(true).open(&from).unwrap();
    let reader = std::thread::spawn(move || {
        let mut head = [0; 7];
        std::io::Read::read_exact(&mut &open, &mut head).map(|()| (head, open))
    });
    std::fs::write(desk.path("few.record"), b"1.000000 gauge 1\n").unwrap();
    let answer = desk.run("rehold few.record van-outing.toml --csv pipe.csv");
    assert_eq!(answer.status, Some(3), "its one line does not parse: {}", answer.err);
    assert!(std::fs::symlink_metadata(&pipe).unwrap().file_type().is_fifo(), "the pipe was replaced by a file");
    assert_eq!(&reader.join().unwrap().unwrap().0, b"stretch");
}

/// Re-holding tells how much it read on standard error, so two outputs that belong together are tried apart from the rest.
#[test]
fn of_two_outputs_there_are_both_or_none() {
    let desk = Desk::driven();
    let before: Vec<String> = desk.contents().into_keys().collect();
    let answer = desk.run("rehold van.record van-outing.toml --session x.session --csv nowhere/x.csv");
    assert_eq!(answer.status, Some(1), "{}", answer.err);
    assert!(desk.contents().keys().eq(&before), "{:?}", desk.contents().keys());
}

#[test]
fn without_a_terminal_the_screen_is_refused_before_anything_is_made() {
    let desk = Desk::driven();
    desk.refuses("rehearse --session x.session", 1, &["terminal", "--unattended"]);
    desk.refuses("drive van-outing.toml --stream van.record --session x.session", 1, &["terminal", "--unattended"]);
}

#[test]
fn wrong_usage_is_status_two_and_says_what_would_be_right() {
    let desk = Desk::driven();
    for (words, said) in [
        ("--nonsense", "--nonsense"),
        ("nonsense", "nonsense"),
        ("rehold", "<RECORD>"),
        ("rehold van.record van-outing.toml", "--csv"),
        ("rehold van.record van-outing.toml --csv - --dwell 0", "above 0"),
        ("rehold van.record van-outing.toml --csv - --dwell nan", "nan"),
        ("rehold van.record van-outing.toml --csv - --settle=-1", "below 0"),
        ("rehold van.record van-outing.toml --csv - --target 100,x", "x"),
        ("rehold van.record van-outing.toml --csv - --tolerance 1e400", "1e400"),
        ("drive", "<OUTING>"),
        ("drive van-outing.toml --fast 0", "max"),
        ("drive van-outing.toml --for -1", "-1"),
        ("rehearse --seed x", "x"),
        ("check", "<FILES>"),
        ("reduce", "<SESSIONS>"),
        ("reduce van.session --at 0", "above 0"),
    ] {
        desk.refuses(words, 2, &[said]);
    }
}

#[test]
fn help_and_version_fit_a_screen() {
    let desk = Desk::new();
    let short = desk.run("-h");
    assert_eq!((short.status, short.err.as_str()), (Some(0), ""));
    assert!(short.out.lines().count() <= 24, "{} lines", short.out.lines().count());
    for command in ["rehearse", "drive", "listen", "check", "rehold", "reduce"] {
        assert!(short.out.contains(&format!("  {command}")), "{command}");
        for help in [format!("{command} -h"), format!("{command} --help"), format!("help {command}")] {
            let answer = desk.run(&help);
            assert_eq!((answer.status, answer.err.as_str()), (Some(0), ""), "{help}");
            assert!(answer.out.contains("Usage: steadytap"), "{help}\n{}", answer.out);
            assert!(help.ends_with("--help") || answer.out.lines().count() <= 40, "{help}");
        }
    }
    assert_eq!(desk.run("--help").status, Some(0));
    let version = desk.run("--version");
    assert_eq!((version.status, version.out), (Some(0), format!("steadytap {}\n", env!("CARGO_PKG_VERSION"))));
    assert!(desk.contents().len() == 3, "nothing was made");
}

#[test]
fn a_reader_that_goes_away_is_no_crash() {
    let desk = Desk::driven();
    for words in
        ["check van.toml van-rig.toml", "rehold van.record van-outing.toml --csv -", "-h", "reduce van.session"]
    {
        let mut child = program()
            .args(words.split_whitespace())
            .current_dir(desk.0.path())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap();
        drop(child.stdout.take());
        let output = child.wait_with_output().unwrap();
        let err = String::from_utf8_lossy(&output.stderr);
        assert!(!err.contains("panicked"), "{words}\n{err}");
        assert!(output.status.code().is_some_and(|c| c != 101), "{words}");
    }
}

#[cfg(target_os = "linux")]
#[test]
fn a_full_standard_output_is_told() {
    let desk = Desk::driven();
    let full = std::fs::OpenOptions::new().write(true).open("/dev/full").unwrap();
    let output = program()
        .args(["rehold", "van.record", "van-outing.toml", "--csv", "-"])
        .current_dir(desk.0.path())
        .stdout(full)
        .output()
        .unwrap();
    assert_eq!(output.status.code(), Some(1));
    assert!(String::from_utf8_lossy(&output.stderr).contains("standard output cannot be written"));
}

// ---------------------------------------------------------------- ports

#[test]
fn a_port_that_is_not_there_is_told_with_its_name_and_device() {
    let desk = Desk::new();
    desk.change("van-rig.toml", "/dev/ttyACM0", "/nowhere/tty-a");
    desk.change("van-rig.toml", "/dev/ttyUSB0", "/nowhere/tty-b");
    let before = desk.contents();
    let answer = desk.run("drive van-outing.toml --unattended --session x.session");
    assert_eq!((answer.status, answer.out.as_str()), (Some(1), ""));
    assert_eq!(answer.err.matches("there is no such port").count(), 2, "both at once\n{}", answer.err);
    for word in ["port gauge, /nowhere/tty-a", "port gps, /nowhere/tty-b", "steadytap listen"] {
        assert!(answer.err.contains(word), "{word}\n{}", answer.err);
    }
    assert!(desk.contents() == before);
    desk.refuses("listen /nowhere/tty-a", 1, &["no such port", "/nowhere/tty-a"]);
}

#[test]
fn a_file_is_no_port() {
    let desk = Desk::new();
    let file = desk.path("van.toml").display().to_string();
    desk.refuses(&format!("listen {file}"), 1, &["no serial port", &file]);
}

#[cfg(unix)]
#[test]
fn a_port_that_is_busy_is_told_as_busy() {
    use serialport::{SerialPort, TTYPort};
    let desk = Desk::new();
    let (_master, slave) = TTYPort::pair().unwrap();
    let device = slave.name().unwrap();
    drop(slave);
    let _holder = serialport::new(&device, 9600).open().unwrap();
    desk.refuses(&format!("listen {device}"), 1, &["busy", &device, "close the other program"]);
}

// ---------------------------------------------------------------- the table of a re-hold

/// Columns as FORMATS says; the figures are those of the segments that the same re-hold keeps.
#[test]
fn the_rehold_table_has_a_row_a_dwell_and_channel_with_the_figures_of_the_session() {
    let desk = Desk::driven();
    let answer = desk.run("rehold van.record van-outing.toml --csv - --session again.session");
    assert_eq!(answer.status, Some(0), "{}", answer.err);
    let mut lines = answer.out.lines();
    assert_eq!(lines.next(), Some("stretch,target_kmh,dwell,t_start,t_end,channel,n,mean,sd,min,max,flags"));
    let rows: Vec<Vec<&str>> = lines.map(|line| line.split(',').collect()).collect();
    let session = codec::read(&std::fs::read(desk.path("again.session")).unwrap()).session().unwrap();
    let Setup { rig, .. } = van();
    let mut expected = Vec::new();
    for s in segments(&session) {
        for (name, c) in rig.channels.iter().filter_map(|c| Some((&c.name, s.channels.get(&c.name)?))) {
            let sd = c.sd.map_or(String::new(), |sd| sd.to_string());
            expected.push([
                s.stretch.to_string(),
                s.target_kmh.unwrap().to_string(),
                s.dwell.to_string(),
                s.t0.to_string(),
                s.t1.to_string(),
                name.clone(),
                c.n.to_string(),
                c.mean.to_string(),
                sd,
                c.min.to_string(),
                c.max.to_string(),
            ]);
        }
    }
    assert!(expected.len() >= 4 * rig.channels.len(), "{} rows", expected.len());
    assert_eq!(rows.len(), expected.len());
    for (row, expected) in rows.iter().zip(&expected) {
        assert_eq!(row[..11], expected[..]);
        assert_eq!(row.len(), 12);
        let six = |t: &str| t.split_once('.').is_some_and(|(_, decimals)| decimals.len() == 6);
        assert!(six(row[3]) && six(row[4]), "{row:?}");
        let length = row[4].parse::<f64>().unwrap() - row[3].parse::<f64>().unwrap();
        assert!((length - 6.0).abs() < 1e-9, "a dwell of the outing lasts 6 s");
    }
    // Another window by option: twice as many short dwells at least, and the same through standard input.
    let short = desk.run("rehold van.record van-outing.toml --csv - --dwell 2 --settle 0.5 --tolerance 3 --target 100");
    assert!(short.out.lines().count() > 2 * answer.out.lines().count());
    assert_eq!(segments(&session)[0].stretch, 1, "stretches that gave a dwell count from 1");
}

#[test]
fn a_record_with_more_than_one_line_in_a_hundred_lost_is_status_three() {
    let desk = Desk::driven();
    let mut text = std::fs::read_to_string(desk.path("van.record")).unwrap();
    assert_eq!(desk.run("rehold van.record van-outing.toml --csv x.csv").status, Some(0));
    let lines = text.lines().count();
    for _ in 0..lines / 50 {
        text.push_str("damage\n");
    }
    desk.write("bad.record", text.as_bytes());
    let answer = desk.run("rehold bad.record van-outing.toml --csv y.csv");
    assert_eq!(answer.status, Some(3), "{}", answer.err);
    assert!(answer.err.contains("degraded"));
    assert_eq!(desk.contents()["x.csv"], desk.contents()["y.csv"], "damage at the end costs no dwell");
    let answer =
        desk.run("drive van-outing.toml --stream bad.record --unattended --fast max --no-record --session y.session");
    assert_eq!(answer.status, Some(3), "{}", answer.err);
    assert!(answer.out.contains(" kept ") && answer.out.contains(" end\n"));
}

#[test]
fn a_command_of_a_record_that_is_not_understood_is_told() {
    let desk = Desk::driven();
    let text = std::fs::read_to_string(desk.path("van.record")).unwrap();
    desk.write("odd.record", (text + "900.000000 @tkae\n900.000000 @void one\n").as_bytes());
    let said = "2 commands of the record are not understood";
    let answer = desk.run("rehold odd.record van-outing.toml --csv -");
    assert!(answer.err.contains(said), "{}", answer.err);
    let answer =
        desk.run("drive van-outing.toml --stream odd.record --unattended --fast max --no-record --session y.session");
    assert!(answer.err.contains(said), "{}", answer.err);
    let answer = desk.run("check odd.record");
    assert_eq!(answer.status, Some(1), "{}", answer.err);
    assert!(answer.err.contains("unknown command `tkae`") && answer.err.contains("`void` needs"), "{}", answer.err);
}

#[test]
fn a_session_with_a_torn_tail_is_repaired_with_status_three() {
    let desk = Desk::driven();
    let whole = std::fs::read(desk.path("van.session")).unwrap();
    desk.write("van.session", &whole[..whole.len() - 9]);
    let answer = desk.run("drive van-outing.toml --stream van.record --unattended --fast max --session van.session");
    assert_eq!(answer.status, Some(3), "{}", answer.err);
    assert!(answer.err.contains("van.session.torn"), "{}", answer.err);
    let all = codec::read(&std::fs::read(desk.path("van.session")).unwrap());
    assert_eq!(all.damage, []);
    assert!(desk.contents().contains_key("van.2.record"), "the second run has a record of its own");
}

#[cfg(unix)]
#[test]
fn a_link_given_as_output_stays_a_link() {
    // What is no plain file, a device above all, is written to and never replaced.
    let home = tempfile::tempdir().unwrap();
    let (file, link) = (home.path().join("table.csv"), home.path().join("link.csv"));
    std::fs::write(&file, "a longer old table").unwrap();
    std::os::unix::fs::symlink(&file, &link).unwrap();
    steadytap::shell::files::write(&link, b"table").unwrap();
    assert!(std::fs::symlink_metadata(&link).unwrap().is_symlink());
    assert_eq!(std::fs::read(&file).unwrap(), b"table");
}

/// Time constants of a capillary and volume by the Hagen–Poiseuille resistance (the check `tub-lumped`); a stiff tube has its resonance beyond
/// what is searched.
#[test]
fn hose_tells_delay_bandwidth_and_settling() {
    let desk = Desk::new();
    let answer = desk.run("hose --length 2 --bore 1 --volume 0.5");
    assert_eq!(answer.status, Some(0), "{}", answer.err);
    for line in ["delay               16.4 ms", "settle at least     below 0.1 s", "none: the tube is narrow enough"] {
        assert!(answer.out.contains(line), "`{line}` in\n{}", answer.out);
    }
    let stiff = desk.run("hose --length 0.1 --bore 4 --volume 0.05");
    assert!(stiff.out.contains("resonance           above 400 Hz"), "{}", stiff.out);
    let slow = desk.run("hose --length 3 --bore 0.4 --volume 2");
    assert!(
        slow.out.contains("delay               1363.5 ms") && slow.out.contains("settle at least     6.28 s"),
        "{}",
        slow.out
    );
    assert_eq!(desk.run("hose --length 2 --bore 1").status, Some(2));
    assert_eq!(desk.run("hose --length 2000 --bore 1 --volume 1").status, Some(1));
}

/// The outing settles 2 s; that tube has a time constant of 1.36 s (above) and needs 4.605 of them to be within 1 %.
#[test]
fn check_warns_of_a_tube_slower_than_the_outing_settles() {
    let desk = Desk::new();
    let lag = "lag_s = 0.05                      # hose and sensor; taken off a sample's time";
    desk.change("van-rig.toml", lag, "tube = { length_m = 3.0, bore_mm = 0.4, volume_cm3 = 2.0 }");
    let answer = desk.run("check van-outing.toml");
    assert_eq!(answer.status, Some(0), "{}", answer.err);
    assert!(answer.err.contains("channel `p1` asks for 6.28 s"), "{}{}", answer.out, answer.err);
}

#[test]
fn a_file_of_keys_is_checked_with_line_and_remedy() {
    let desk = Desk::new();
    let said = |text: &str| {
        desk.write("keys.toml", text.as_bytes());
        let answer = desk.run("check keys.toml");
        (answer.status, answer.err)
    };
    let head = "steadytap = \"keys 1\"\n";
    assert_eq!(said(&format!("{head}[keys]\ntake = [\"Space\", \"F5\"]\nmark = \"x\"\n")).0, Some(0));
    for (text, told) in [
        (format!("{head}[keys]\nmark = \"x\"\nmrk = \"y\"\n"), "no key named `mrk`|keys.toml:4:7"),
        (format!("{head}[keys]\ntake = \"z\"\n"), "both `take` and `zero`|keys.toml:3:8"),
        (format!("{head}[keys]\ntake = \"Hyper\"\n"), "`Hyper` is no key|keys.toml:3:8"),
        (format!("{head}[sounds]\nkep = \"a.wav\"\n"), "there is no cue `kep`|window, steady, held, kept"),
        (format!("{head}[kees]\n"), "unknown field|keys.toml:2"),
        ("steadytap = \"keys 2\"\n".to_string(), "no file of keys that this program reads|keys.toml:1:1"),
    ] {
        let (status, err) = said(&text);
        assert_eq!(status, Some(1), "{text}");
        told.split('|').for_each(|part| assert!(err.contains(part), "`{part}` in {err}"));
    }
}

#[test]
fn two_outputs_are_not_mixed_on_standard_output() {
    let desk = Desk::driven();
    let answer = desk.run("reduce van.session --csv - --json -");
    assert_eq!((answer.status, answer.out.as_str()), (Some(1), ""));
    assert!(answer.err.contains("mixed on standard output"), "{}", answer.err);
}
