//! Bytes of a port or a record → frames, rejected lines, commands.
//!
//! Nothing here depends on how the bytes were cut into reads, and nothing that came in is ever guessed at: a
//! line either parses whole or is rejected with a reason. A line that has not ended yet is *incomplete* and
//! waits; a line that does not parse is *rejected* and counted; a record line whose head does not parse is *damage*.

pub mod command;
pub mod decoder;
pub mod nmea;
pub mod number;
pub mod record;
pub mod splitter;

pub use decoder::{Decoder, Reject};
pub use splitter::Splitter;
