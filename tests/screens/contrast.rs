//! Guards the promise that every sign on the screen keeps 4.5 : 1 against its ground.

use super::scenes;
use ratatui::buffer::Buffer;
use ratatui::layout::Rect;
use ratatui::style::{Color, Modifier};
use steadytap::screen::{Face, Kept, Overlay, Theme, render};

/// Red, green, blue of an indexed colour: the 6×6×6 cube and grey ramp that xterm's 256colres.pl defines (from memory).
fn rgb(colour: Color) -> [f64; 3] {
    let Color::Indexed(index @ 16..) = colour else { panic!("{colour:?} is not out of the fixed part of the palette") };
    if index >= 232 {
        return [f64::from(8 + 10 * u32::from(index - 232)); 3];
    }
    let cube = u32::from(index - 16);
    [cube / 36, cube / 6 % 6, cube % 6].map(|step| if step == 0 { 0.0 } else { f64::from(55 + 40 * step) })
}

/// Relative luminance as WCAG 2.2 defines it (from memory, with the sRGB knee 0.04045).
pub fn luminance(colour: Color) -> f64 {
    let linear = rgb(colour).map(|part| {
        let part = part / 255.0;
        if part <= 0.04045 { part / 12.92 } else { ((part + 0.055) / 1.055).powf(2.4) }
    });
    0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]
}

fn contrast(one: Color, other: Color) -> f64 {
    let (a, b) = (luminance(one), luminance(other));
    (a.max(b) + 0.05) / (a.min(b) + 0.05)
}

#[test]
fn the_contrast_formula_gives_the_published_ends() {
    // WCAG 2.2: black on white is 21 : 1; #767676 is the lightest grey at 4.5 : 1 on white, and 243 is exactly that grey.
    assert!((contrast(Color::Indexed(16), Color::Indexed(231)) - 21.0).abs() < 1e-9);
    assert!((contrast(Color::Indexed(243), Color::Indexed(231)) - 4.54).abs() < 0.01);
}

#[test]
fn every_sign_has_contrast_by_day_and_by_night() {
    let overlays = [Overlay::None, Overlay::Help, Overlay::Quit, Overlay::Configuration(0), scenes::note()];
    for theme in [Theme::Day, Theme::Night] {
        for (view, overlay) in scenes::all().iter().flat_map(|v| overlays.iter().map(move |o| (v, o.clone()))) {
            let mut buffer = Buffer::empty(Rect::new(0, 0, 120, 40));
            render(view, &Face { theme, overlay, ..Face::default() }, &mut buffer);
            for cell in buffer.content() {
                let ratio = contrast(cell.fg, cell.bg);
                assert!(ratio >= 4.5, "{:?} {theme:?}: {ratio:.2} of {:?} on {:?}", cell.symbol(), cell.fg, cell.bg);
            }
        }
    }
}

#[test]
fn without_colour_no_colour_is_used_and_kept_is_still_filled() {
    let mut buffer = Buffer::empty(Rect::new(0, 0, 80, 24));
    render(&scenes::held(Kept::OnDisk(12)), &Face { theme: Theme::NoColour, ..Face::default() }, &mut buffer);
    assert!(buffer.content().iter().all(|c| (c.fg, c.bg) == (Color::Reset, Color::Reset)));
    assert!(buffer[(3, 2)].modifier.contains(Modifier::REVERSED));
}
