//! Bytes of one port → its lines, however the reads cut them.
//!
//! A line ends at LF; one CR before it is dropped. A line longer than [`LONGEST_LINE`] is cut there, and the
//! rest up to its LF is passed over, so that memory stays bounded whatever a port sends.

/// Longest line, bytes without its terminator.
pub const LONGEST_LINE: usize = 64 * 1024;

/// What the splitter found.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Piece<'a> {
    /// A whole line.
    Line(&'a [u8]),
    /// The first [`LONGEST_LINE`] bytes of a line that went on.
    Cut(&'a [u8]),
}

/// Holds the unfinished line of one port.
#[derive(Debug, Default)]
pub struct Splitter {
    pending: Vec<u8>,
    passing_over: bool,
}

impl Splitter {
    /// Hands every line that ends in `bytes` to `piece`, in order.
    pub fn push(&mut self, mut bytes: &[u8], mut piece: impl FnMut(Piece<'_>)) {
        while let Some(end) = memchr::memchr(b'\n', bytes) {
            let (head, rest) = (&bytes[..end], &bytes[end + 1..]);
            bytes = rest;
            if self.passing_over {
                self.passing_over = false;
            } else if self.pending.is_empty() && head.len() <= LONGEST_LINE {
                piece(Piece::Line(without_cr(head)));
            } else {
                self.collect(head, &mut piece);
                if !std::mem::take(&mut self.passing_over) {
                    piece(Piece::Line(without_cr(&self.pending)));
                }
                self.pending.clear();
            }
        }
        if !self.passing_over {
            self.collect(bytes, &mut piece);
        }
    }

    /// Adds to the unfinished line; when that grows too long, hands out its head and passes over the rest.
    fn collect(&mut self, bytes: &[u8], piece: &mut impl FnMut(Piece<'_>)) {
        // One byte more than a line may have: it could be the CR of a line of just the longest length.
        let room = LONGEST_LINE + 1 - self.pending.len();
        self.pending.extend_from_slice(&bytes[..bytes.len().min(room)]);
        if self.pending.len() > LONGEST_LINE && (bytes.len() > room || self.pending.last() != Some(&b'\r')) {
            piece(Piece::Cut(&self.pending[..LONGEST_LINE]));
            self.pending.clear();
            self.passing_over = true;
        }
    }

    /// Forgets the unfinished line: the port was lost in the middle of it.
    pub fn reset(&mut self) {
        self.pending.clear();
        self.passing_over = false;
    }

    /// Passes over everything up to the next LF: a port that has just come back may be in mid-line.
    pub fn skip_to_line_end(&mut self) {
        self.pending.clear();
        self.passing_over = true;
    }
}

fn without_cr(line: &[u8]) -> &[u8] {
    line.strip_suffix(b"\r").unwrap_or(line)
}
