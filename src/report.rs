//! A reduction → text for the terminal, CSV and JSON; nothing is worked out here that the reduction does not know.

mod json;
mod tables;
mod text;

pub use json::json;
pub use tables::csv;
pub use text::{next_pass, text};
