//! A reduction → text for the terminal, CSV, JSON and a page of HTML; nothing is worked out here that the reduction does not know.

mod html;
mod json;
mod side;
mod tables;
mod text;

pub use html::{Input, Inputs, html};
pub use json::json;
pub use side::{WHEEL_M, outline};
pub use tables::csv;
pub use text::{next_pass, text};
