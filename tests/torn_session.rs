//! A session file that was cut or damaged anywhere is read as far as it can be believed, and no further.

use steadytap::session::codec::{self, encode, read};
use steadytap::session::{DamageKind, Entry};

/// The lines of the sample outing's session.
fn session(of_each: usize) -> Vec<u8> {
    let bytes = crate::samples_and_readme::driven_session();
    // A few entries of every kind are enough to cut at every byte.
    let text = String::from_utf8(bytes).expect("a session is UTF-8");
    let mut seen = std::collections::BTreeMap::<&str, usize>::new();
    let few = text.split_inclusive('\n').filter(|line| {
        let count = seen.entry(&line[..line.find(',').unwrap_or(0)]).or_default();
        *count += 1;
        *count <= of_each
    });
    few.collect::<String>().into_bytes()
}

fn originals(bytes: &[u8]) -> Vec<Entry> {
    let whole = read(bytes);
    assert!(whole.damage.is_empty() && whole.header.is_some() && whole.entries.len() >= 4, "the sample is whole");
    whole.entries
}

/// Every entry read is one of the originals, in their order.
fn believed(entries: &[Entry], originals: &[Entry]) -> bool {
    let mut rest = originals.iter();
    entries.iter().all(|e| rest.any(|o| o == e))
}

#[test]
fn an_entry_reads_back_equal() {
    for entry in originals(&session(3)) {
        let line = encode(&entry);
        assert_eq!(codec::decode(line.trim_end().as_bytes()).as_ref(), Ok(&entry));
        assert!(line.starts_with("{\"kind\":\""), "kind stands first");
    }
}

#[test]
fn cut_at_every_byte_all_whole_lines_are_read() {
    let bytes = session(1);
    let originals = originals(&bytes);
    for cut in 0..bytes.len() {
        let part = &bytes[..cut];
        let contents = read(part);
        let whole = part.iter().filter(|c| **c == b'\n').count();
        let entries = contents.entries.len() + usize::from(contents.header.is_some());
        // A line that lacks only its end is whole all the same.
        assert_eq!(entries, whole + usize::from(contents.end_missing), "cut at {cut}");
        assert!(believed(&contents.entries, &originals), "cut at {cut}");
        let torn = !part.is_empty() && part.last() != Some(&b'\n') && !contents.end_missing;
        let told = contents.damage.iter().any(|d| d.what == DamageKind::Torn);
        assert_eq!(torn, told, "cut at {cut}: a torn end is told");
    }
}

#[test]
fn a_flipped_byte_is_never_believed_and_costs_one_line() {
    let bytes = session(1);
    let originals = originals(&bytes);
    for at in 0..bytes.len() {
        let mask = [0x01u8, 0x20, 0x80][at % 3];
        let mut damaged = bytes.clone();
        damaged[at] ^= mask;
        let contents = read(&damaged);
        assert!(believed(&contents.entries, &originals), "byte {at} ^ {mask:#x} is believed");
        // The line is lost; where its end was hit, the one behind it too.
        let lost = originals.len() + 1 - contents.entries.len() - usize::from(contents.header.is_some());
        assert!((1..=2).contains(&lost), "byte {at} ^ {mask:#x} costs {lost} lines");
        assert!(!contents.damage.is_empty(), "byte {at} ^ {mask:#x} is not told");
    }
}
