//! The pictures in the README are the real screens and a part of the real page, drawn here; `STEADYTAP_UPDATE=1` writes them anew.

use crate::report_html;
use crate::samples_and_readme;
use crate::screens::scenes;
use ratatui::buffer::Buffer;
use ratatui::layout::Rect;
use ratatui::style::{Color, Modifier};
use std::fmt::Write;
use steadytap::screen::layby::Pane;
use steadytap::screen::{Face, Spot, Theme, View, render};

/// Size of a cell, px.
const CELL: (usize, usize) = (9, 18);

fn is_as_made(name: &str, made: &str) {
    samples_and_readme::is_as_made(&format!("tests/pictures/{name}"), made.as_bytes());
}

/// A colour of the fixed part of the 256-colour palette (xterm's cube and grey ramp).
fn rgb(colour: Color) -> String {
    let Color::Indexed(i) = colour else { return "#000000".to_string() };
    let level = |n: u8| if n == 0 { 0 } else { 55 + 40 * n };
    let (r, g, b) = match i {
        16..=231 => (level((i - 16) / 36), level((i - 16) / 6 % 6), level((i - 16) % 6)),
        232..=255 => (8 + 10 * (i - 232), 8 + 10 * (i - 232), 8 + 10 * (i - 232)),
        _ => (0, 0, 0),
    };
    format!("#{r:02x}{g:02x}{b:02x}")
}

/// Blocks are drawn as rectangles, so that no font leaves gaps; the rest is text.
fn cell(out: &mut String, (x, y): (usize, usize), symbol: &str, (colour, bold): (&str, bool)) {
    let (w, h) = CELL;
    let rect = |out: &mut String, dx: usize, dy: usize, rw: usize, rh: usize| {
        writeln!(out, "<rect x='{}' y='{}' width='{rw}' height='{rh}' fill='{colour}'/>", x + dx, y + dy).unwrap();
    };
    match symbol {
        " " | "" => {}
        "█" => rect(out, 0, 0, w, h),
        "▀" => rect(out, 0, 0, w, h / 2),
        "▄" => rect(out, 0, h / 2, w, h / 2),
        _ => {
            let escaped = symbol.replace('&', "&amp;").replace('<', "&lt;");
            let weight = if bold { " font-weight='bold'" } else { "" };
            writeln!(out, "<text x='{x}' y='{}' fill='{colour}'{weight}>{escaped}</text>", y + h - 5).unwrap();
        }
    }
}

fn picture(view: &View, face: &Face, (columns, rows): (u16, u16), title: &str) -> String {
    let mut buffer = Buffer::empty(Rect::new(0, 0, columns, rows));
    render(view, face, &mut buffer);
    let (w, h) = (usize::from(columns) * CELL.0, usize::from(rows) * CELL.1);
    let mut out = format!(
        "<svg xmlns='http://www.w3.org/2000/svg' viewBox='0 0 {w} {h}' role='img' font-family='monospace' font-size='15' shape-rendering='crispEdges'>\n<title>{title}</title>\n"
    );
    for y in 0..rows {
        // One rectangle a run of cells with one ground.
        let mut x = 0;
        while x < columns {
            let ground = buffer[(x, y)].bg;
            let run = (x..columns).take_while(|x| buffer[(*x, y)].bg == ground).count();
            let (left, top) = (usize::from(x) * CELL.0, usize::from(y) * CELL.1);
            let (width, height) = (run * CELL.0, CELL.1);
            writeln!(out, "<rect x='{left}' y='{top}' width='{width}' height='{height}' fill='{}'/>", rgb(ground))
                .unwrap();
            x += u16::try_from(run).unwrap();
        }
    }
    for y in 0..rows {
        for x in 0..columns {
            let c = &buffer[(x, y)];
            let at = (usize::from(x) * CELL.0, usize::from(y) * CELL.1);
            cell(&mut out, at, c.symbol(), (&rgb(c.fg), c.modifier.contains(Modifier::BOLD)));
        }
    }
    out.push_str("</svg>\n");
    out
}

#[test]
fn the_pictures_of_the_screens_are_the_real_ones() {
    let at = |spot, pane| {
        let mut face = Face { spot, theme: Theme::Day, ..Face::default() };
        face.layby.pane = pane;
        face
    };
    let night = Face { theme: Theme::Night, ..at(Spot::Layby, Pane::Segments) };
    is_as_made("layby.svg", &picture(&scenes::layby(), &night, (120, 32), "Layby (invented data)"));
    is_as_made(
        "bench.svg",
        &picture(&scenes::bench(), &at(Spot::Bench, Pane::Warnings), (80, 24), "Bench (invented data)"),
    );
}

/// The first figure of the page, with the page's own style.
#[test]
fn the_picture_of_the_report_is_a_part_of_the_real_page() {
    let page = report_html::demo_page();
    let between = |from: &str, to: &str| {
        let start = page.find(from).unwrap_or_else(|| panic!("{from} on the page"));
        &page[start..start + page[start..].find(to).expect("its end") + to.len()]
    };
    let style = between("<style>", "</style>");
    let figure = between("<svg viewBox", "</svg>");
    let svg = figure.replacen("<svg ", "<svg xmlns=\"http://www.w3.org/2000/svg\" font-family=\"sans-serif\" ", 1);
    let end = svg.find('>').expect("the tag ends") + 1;
    is_as_made("report.svg", &format!("{}{style}{}\n", &svg[..end], &svg[end..]));
}
