//! The record: every line that came in, with its time, and what the person did.
//!
//! Codec of single lines (both ways) and a [`Reader`] over chunks of a file. A line whose head does not parse, or
//! whose time goes back, is damage: counted, passed over, told, never fatal.

use super::splitter::LONGEST_LINE;
use crate::units::StreamTime;
use std::borrow::Cow;
use std::io::Write;

/// First line of a record.
pub const FIRST_LINE: &str = "# steadytap record 1";

/// One good line of a record.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Line<'a> {
    /// A line of a port, still escaped.
    Port {
        /// When its terminator was read.
        at: StreamTime,
        /// The port's name.
        port: &'a [u8],
        /// What it sent, escaped.
        escaped: &'a [u8],
    },
    /// Something happened to a port.
    Event {
        /// When.
        at: StreamTime,
        /// The port's name.
        port: &'a [u8],
        /// What: `lost`, `found`, `long-line`.
        word: Cow<'a, str>,
    },
    /// The person did something.
    Command {
        /// When.
        at: StreamTime,
        /// The words, unescaped.
        words: Cow<'a, str>,
    },
    /// `# started` with its instant.
    Started(&'a str),
    /// `# steadytap record N`.
    Version(&'a str),
    /// Any other comment, or a blank line.
    Comment,
}

/// Reads one line of a record, without its line end; `None` is damage.
#[inline(always)]
pub fn parse(line: &[u8]) -> Option<Line<'_>> {
    if line.is_empty() {
        return Some(Line::Comment);
    }
    if line[0] == b'#' {
        return Some(comment(line));
    }
    let (at, rest) = head(line)?;
    match rest.first()? {
        b'!' => {
            let (port, word) = split_word(&rest[1..]);
            (!port.is_empty()).then(|| Line::Event { at, port, word: words(word) })
        }
        b'@' => Some(Line::Command { at, words: words(&rest[1..]) }),
        b' ' => None,
        _ => {
            let (port, escaped) = split_word(rest);
            Some(Line::Port { at, port, escaped })
        }
    }
}

/// The time of a line, and what stands behind it.
#[inline(always)]
fn head(line: &[u8]) -> Option<(StreamTime, &[u8])> {
    let (at, blank) = StreamTime::leading(line)?;
    Some((at, line.get(blank + 1..)?))
}

#[inline(always)]
fn split_word(text: &[u8]) -> (&[u8], &[u8]) {
    // Port names are short: a search by blocks would cost more.
    match text.iter().position(|c| *c == b' ') {
        Some(blank) => (&text[..blank], &text[blank + 1..]),
        None => (text, b""),
    }
}

fn words(escaped: &[u8]) -> Cow<'_, str> {
    match unescape(escaped) {
        Cow::Borrowed(bytes) => String::from_utf8_lossy(bytes),
        Cow::Owned(bytes) => Cow::Owned(String::from_utf8_lossy(&bytes).into_owned()),
    }
}

fn comment(line: &[u8]) -> Line<'_> {
    let text = std::str::from_utf8(line).unwrap_or("").trim_end();
    if let Some(instant) = text.strip_prefix("# started ") {
        Line::Started(instant)
    } else if let Some(version) = text.strip_prefix("# steadytap record ") {
        Line::Version(version)
    } else {
        Line::Comment
    }
}

/// Appends `line` with every byte outside 0x20..0x7E and the backslash escaped.
pub fn escape_into(out: &mut Vec<u8>, line: &[u8]) {
    for &byte in line {
        match byte {
            b'\\' => out.extend_from_slice(b"\\\\"),
            0x20..=0x7E => out.push(byte),
            _ => write!(out, "\\x{byte:02X}").expect("writing to memory cannot fail"),
        }
    }
}

/// The bytes that [`escape_into`] was given. An escape that it would not have written stays as it stands.
pub fn unescape(escaped: &[u8]) -> Cow<'_, [u8]> {
    let Some(first) = memchr::memchr(b'\\', escaped) else { return Cow::Borrowed(escaped) };
    let mut out = escaped[..first].to_vec();
    let mut rest = &escaped[first..];
    while let Some((&byte, tail)) = rest.split_first() {
        let (value, after) = match (byte, tail) {
            (b'\\', [b'\\', after @ ..]) => (b'\\', after),
            (b'\\', [b'x', high, low, after @ ..]) => match (hex(*high), hex(*low)) {
                (Some(high), Some(low)) => (high * 16 + low, after),
                _ => (byte, tail),
            },
            _ => (byte, tail),
        };
        out.push(value);
        rest = after;
    }
    Cow::Owned(out)
}

fn hex(digit: u8) -> Option<u8> {
    char::from(digit).to_digit(16).and_then(|d| u8::try_from(d).ok())
}

/// Appends the header lines; without a known instant there is no second one.
pub fn write_header(out: &mut Vec<u8>, started: Option<&str>) {
    writeln!(out, "{FIRST_LINE}").expect("writing to memory cannot fail");
    if let Some(started) = started {
        writeln!(out, "# started {started}").expect("writing to memory cannot fail");
    }
}

/// Appends the record line of a port's line.
pub fn write_line(out: &mut Vec<u8>, at: StreamTime, port: &str, line: &[u8]) {
    write!(out, "{at} {port} ").expect("writing to memory cannot fail");
    escape_into(out, line);
    out.push(b'\n');
}

/// Appends the record line of a port's event.
pub fn write_event(out: &mut Vec<u8>, at: StreamTime, port: &str, word: &str) {
    writeln!(out, "{at} !{port} {word}").expect("writing to memory cannot fail");
}

/// Appends the record line of a command.
pub fn write_command(out: &mut Vec<u8>, at: StreamTime, command: &super::command::Command) {
    write!(out, "{at} @").expect("writing to memory cannot fail");
    escape_into(out, command.to_string().as_bytes());
    out.push(b'\n');
}

/// A line that concerns the rig.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Told<'a> {
    /// A line of the port at this index.
    Line {
        /// When.
        at: StreamTime,
        /// Index of the port.
        port: usize,
        /// What it sent.
        line: Cow<'a, [u8]>,
    },
    /// Something happened to the port at this index.
    Event {
        /// When.
        at: StreamTime,
        /// Index of the port.
        port: usize,
        /// What.
        word: Cow<'a, str>,
    },
    /// The person did something.
    Command {
        /// When.
        at: StreamTime,
        /// The words.
        words: Cow<'a, str>,
    },
}

/// Reads a record from chunks of any size.
#[derive(Debug)]
pub struct Reader {
    /// Names of the rig's ports; none: any name will do, and all are port 0.
    ports: Option<Vec<Vec<u8>>>,
    pending: Vec<u8>,
    overlong: bool,
    last: StreamTime,
    /// What was read so far.
    pub tally: Tally,
}

/// Counts of a record's lines.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Tally {
    /// Lines, all of them.
    pub lines: u64,
    /// Lines whose head parsed.
    pub good: u64,
    /// Of these: lines and events of ports that the rig does not name, passed over.
    pub unknown_port: u64,
    /// Of these: commands that whoever reads the record does not understand, counted by him.
    pub unknown_command: u64,
    /// Lines passed over as damage.
    pub damaged: u64,
    /// The first of these, from 1, and what was wrong.
    pub first_damage: Option<(u64, &'static str)>,
    /// The version that the record says it has.
    pub version: Option<String>,
    /// UTC of stream time 0, as the record says.
    pub started: Option<String>,
}

impl Reader {
    /// Reads what concerns these ports, or all ports.
    pub fn new(ports: Option<&[crate::config::Port]>) -> Self {
        let ports = ports.map(|list| list.iter().map(|p| p.name.clone().into_bytes()).collect());
        Self { ports, pending: Vec::new(), overlong: false, last: StreamTime::ZERO, tally: Tally::default() }
    }

    /// Hands everything that ends in `chunk` and concerns the rig to `each`, in order.
    pub fn push(&mut self, mut chunk: &[u8], each: &mut impl FnMut(Told<'_>)) {
        if !self.pending.is_empty() || self.overlong {
            let Some(end) = memchr::memchr(b'\n', chunk) else { return self.keep(chunk) };
            self.keep(&chunk[..end]);
            chunk = &chunk[end + 1..];
            self.end_pending(each);
        }
        while let Some((end, escapes)) = line_end(chunk) {
            self.line(&chunk[..end], escapes, each);
            chunk = &chunk[end + 1..];
        }
        self.keep(chunk);
    }

    /// The file has ended: a last line without its end was torn, and is damage.
    pub fn finish(&mut self) {
        if !self.pending.is_empty() || self.overlong {
            self.damage("torn: the last line has no end");
            self.pending.clear();
            self.overlong = false;
        }
    }

    fn keep(&mut self, bytes: &[u8]) {
        let room = LONGEST_RECORD_LINE - self.pending.len();
        self.overlong |= bytes.len() > room;
        self.pending.extend_from_slice(&bytes[..bytes.len().min(room)]);
    }

    fn end_pending(&mut self, each: &mut impl FnMut(Told<'_>)) {
        let pending = std::mem::take(&mut self.pending);
        if std::mem::take(&mut self.overlong) {
            self.damage(OVERLONG);
        } else {
            self.line(&pending, true, each);
        }
        self.pending = pending;
        self.pending.clear();
    }

    /// `escapes`: there may be some in it.
    #[inline(always)]
    fn line(&mut self, line: &[u8], escapes: bool, each: &mut impl FnMut(Told<'_>)) {
        if line.len() > LONGEST_RECORD_LINE {
            return self.damage(OVERLONG);
        }
        let line = line.strip_suffix(b"\r").unwrap_or(line);
        let Some(parsed) = parse(line) else { return self.damage("no `seconds port line` head") };
        let told = match parsed {
            Line::Port { at, port, escaped } => self.port(port).map(|port| {
                let line = if escapes { unescape(escaped) } else { Cow::Borrowed(escaped) };
                (at, Told::Line { at, port, line })
            }),
            Line::Event { at, port, word } => self.port(port).map(|port| (at, Told::Event { at, port, word })),
            Line::Command { at, words } => Some((at, Told::Command { at, words })),
            header => {
                self.tally.lines += 1;
                return self.header(&header);
            }
        };
        let Some((at, told)) = told else {
            self.tally.lines += 1;
            self.tally.good += 1;
            self.tally.unknown_port += 1;
            return;
        };
        if at < self.last {
            return self.damage("its time goes back");
        }
        self.last = at;
        self.tally.lines += 1;
        self.tally.good += 1;
        each(told);
    }

    #[inline]
    fn port(&self, name: &[u8]) -> Option<usize> {
        match &self.ports {
            Some(ports) => ports.iter().position(|p| p == name),
            None => Some(0),
        }
    }

    #[cold]
    fn header(&mut self, line: &Line<'_>) {
        match line {
            Line::Started(instant) => {
                self.tally.started.get_or_insert_with(|| (*instant).to_string());
            }
            Line::Version(version) => {
                self.tally.version.get_or_insert_with(|| (*version).to_string());
            }
            _ => {}
        }
    }

    #[cold]
    fn damage(&mut self, what: &'static str) {
        self.tally.lines += 1;
        self.tally.damaged += 1;
        let line = self.tally.lines;
        self.tally.first_damage.get_or_insert((line, what));
    }
}

/// Where the first line of `text` ends, and whether an escape may stand in it.
#[inline(always)]
fn line_end(text: &[u8]) -> Option<(usize, bool)> {
    let at = memchr::memchr2(b'\n', b'\\', text)?;
    if text[at] == b'\n' {
        return Some((at, false));
    }
    memchr::memchr(b'\n', &text[at..]).map(|end| (at + end, true))
}

const OVERLONG: &str = "longer than a record line can be";
/// Longest line of a record file: the longest line of a port, all of it escaped, and its head.
const LONGEST_RECORD_LINE: usize = 4 * LONGEST_LINE + 256;
