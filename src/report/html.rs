//! The reduction as one page of HTML that needs nothing else: no script, no picture, no font from elsewhere.
//!
//! Reduction and what it was made of → the page. Same inputs, same bytes. The verdicts stand first, in words for whoever owns the car; then the
//! pictures, the tables, and how all of it came about. Every foreign string goes through [`crate::text::safe`], and maud escapes it. Numbers carry
//! their place in the JSON (`data-json`), so that the two can be held against each other.

mod car;
mod curves;
mod differences;
mod figure;
mod method;
mod passes;
mod setup;
mod sheet;
mod svg;
mod tables;
mod verdicts;

use crate::reduction::Reduction;
use crate::session::Header;
use crate::text::safe;
use crate::units::PRESSURES;
use maud::{DOCTYPE, PreEscaped, html};
use sheet::Sheet;

const STYLE: &str = include_str!("html/style.css");

/// What a reduction was made of.
#[derive(Clone, Debug, PartialEq)]
pub struct Inputs {
    /// Version of the program that reduces.
    pub version: String,
    /// Session files in the order of the reduction.
    pub sessions: Vec<Input>,
}

/// One session file.
#[derive(Clone, Debug, PartialEq)]
pub struct Input {
    /// Its name, without directories.
    pub file: String,
    /// CRC-32C of its bytes.
    pub sum: u32,
    /// Its first line: version that wrote it, start, resolved set-up.
    pub header: Header,
    /// Lines that could not be believed and were left out, in words.
    pub damage: Vec<String>,
}

/// The whole page.
pub fn html(r: &Reduction, input: &Inputs) -> String {
    let unit = input.sessions.first().map_or(PRESSURES[0], |s| s.header.setup.outing.show.pressure_unit());
    let sheet = Sheet { r, input, unit };
    let title = safe(&format!("{} · {}", r.title, r.car));
    let page = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                meta name="color-scheme" content="light dark";
                title { (title) }
                style { (PreEscaped(STYLE)) }
            }
            body {
                header {
                    h1 { (safe(&r.title)) }
                    p.soft { (safe(&r.car)) " · baseline " (sheet.fitted(&r.baseline)) " · pressures " (sheet.at()) }
                }
                main {
                    (verdicts::section(&sheet))
                    (differences::section(&sheet))
                    (car::section(&sheet))
                    (passes::section(&sheet))
                    (curves::sweeps(&sheet))
                    (tables::section(&sheet))
                    (curves::contour(&sheet))
                    (method::section(&sheet))
                    (setup::section(&sheet))
                }
                footer { p.soft { "Made by steadytap " (safe(&input.version)) "." } }
            }
        }
    };
    let mut text = page.into_string();
    text.push('\n');
    text
}
