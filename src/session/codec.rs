//! [`Entry`] ↔ one line: compact JSON whose last member is the CRC-32C of the bytes before its comma.
//!
//! Reading never fails and never believes: what has a right sum is taken, everything else is told as [`Damage`].

use super::{Damage, DamageKind, Entry, Header, SCHEMA, Session};
use crc::{CRC_32_ISCSI, Crc};

/// CRC-32C (Castagnoli), as iSCSI uses it (RFC 3720).
const CASTAGNOLI: Crc<u32> = Crc::<u32>::new(&CRC_32_ISCSI);
/// What stands before the eight hexadecimal digits of a sum, and after them.
const SUM_HEAD: &str = ",\"sum\":\"";
const SUM_TAIL: &str = "\"}";
const SUM_LENGTH: usize = SUM_HEAD.len() + 8 + SUM_TAIL.len();

/// CRC-32C of some bytes.
///
/// ```
/// assert_eq!(steadytap::session::codec::sum(b"123456789"), 0xE306_9283); // check value of the CRC catalogue
/// ```
pub fn sum(bytes: &[u8]) -> u32 {
    CASTAGNOLI.checksum(bytes)
}

/// The line of an entry, its LF included.
pub fn encode(entry: &Entry) -> String {
    let mut line = serde_json::to_string(entry).expect("an entry has string keys and finite numbers only");
    let closing = line.pop();
    debug_assert_eq!(closing, Some('}'));
    let sum = sum(line.as_bytes());
    line.push_str(&format!("{SUM_HEAD}{sum:08x}{SUM_TAIL}\n"));
    line
}

/// Reads one line without its LF.
///
/// # Errors
/// [`DamageKind`] when the line cannot be believed.
pub fn decode(line: &[u8]) -> Result<Entry, DamageKind> {
    let body = line.len().checked_sub(SUM_LENGTH).ok_or(DamageKind::NoSum)?;
    let tail = std::str::from_utf8(&line[body..]).map_err(|_| DamageKind::NoSum)?;
    let digits = tail.strip_prefix(SUM_HEAD).and_then(|t| t.strip_suffix(SUM_TAIL)).ok_or(DamageKind::NoSum)?;
    let lower = digits.bytes().all(|c| matches!(c, b'0'..=b'9' | b'a'..=b'f'));
    let want = u32::from_str_radix(digits, 16).ok().filter(|_| lower).ok_or(DamageKind::NoSum)?;
    if sum(&line[..body]) != want {
        return Err(DamageKind::Sum);
    }
    serde_json::from_slice(line).map_err(|e| DamageKind::Entry(e.to_string()))
}

/// What the bytes of a session file hold.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Contents {
    /// The first line, if it is a header that can be believed.
    pub header: Option<Header>,
    /// Every other entry with a right sum, in file order.
    pub entries: Vec<Entry>,
    /// What could not be believed.
    pub damage: Vec<Damage>,
    /// Length of the part that ends with a whole line; what is behind it is a torn tail.
    pub whole_length: usize,
    /// The last line is whole but for its LF.
    pub end_missing: bool,
}

/// Reads a whole file.
pub fn read(bytes: &[u8]) -> Contents {
    let mut contents = Contents::default();
    let mut at = 0;
    let mut number = 0;
    while at < bytes.len() {
        number += 1;
        let rest = &bytes[at..];
        let end = memchr::memchr(b'\n', rest);
        let line = &rest[..end.unwrap_or(rest.len())];
        let read = decode(line);
        if end.is_none() && read.is_err() {
            contents.damage.push(Damage { line: number, what: DamageKind::Torn });
            return contents;
        }
        at += line.len() + usize::from(end.is_some());
        contents.end_missing = end.is_none();
        contents.whole_length = at;
        contents.take(number, read);
    }
    contents
}

impl Contents {
    fn take(&mut self, line: usize, read: Result<Entry, DamageKind>) {
        let what = match read {
            Ok(Entry::Session(header)) if line == 1 && header.schema == SCHEMA => {
                self.header = Some(*header);
                return;
            }
            Ok(Entry::Session(header)) if line == 1 => {
                DamageKind::Entry(format!("schema `{}`, this program reads `{SCHEMA}`", header.schema))
            }
            Ok(Entry::Session(_)) => DamageKind::Entry("a second header".to_string()),
            Ok(entry) => {
                self.entries.push(entry);
                return;
            }
            Err(what) => what,
        };
        self.damage.push(Damage { line, what });
    }

    /// The session, if its header can be believed.
    pub fn session(self) -> Option<Session> {
        Some(Session { header: self.header?, entries: self.entries, damage: self.damage })
    }
}
