//! Bytes of a port or a record → frames, rejected lines, commands.
//!
//! Nothing here depends on how the bytes were cut into reads, and nothing that came in is ever guessed at: a
//! line either parses whole or is rejected with a reason.

pub mod command;
