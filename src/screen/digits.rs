//! Large letters and digits out of half blocks.
//!
//! Two sets of dots: seven high for the state and the speed (four rows), five high for held values (three rows). A dot is
//! half a cell, so strokes are square. `▀ ▄ █` stand in every console font, which quadrants and sextants do not; where only
//! ASCII is drawn a dot pair becomes `" . #`. A word with an unknown letter or too long for its place is drawn as
//! plain text, never cut.

use super::canvas::Canvas;
use super::theme::Role;
use ratatui::layout::Rect;

/// Size of large signs.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Size {
    /// Four rows.
    Large,
    /// Three rows.
    Middle,
}

/// Dots of a sign, one string a dot row, `#` for a dot.
type Dots = &'static [&'static str];

/// Draws `text` right-aligned (or left-aligned) in `area`, or as ordinary text in its last row if it does not fit.
pub(super) fn draw(canvas: &mut Canvas, area: Rect, text: &str, (size, right): (Size, bool), role: Role) {
    let Some(signs) = text.chars().map(|c| dots(size, c)).collect::<Option<Vec<_>>>().filter(|s| fits(s, area)) else {
        let at = area.bottom().saturating_sub(1);
        if right {
            canvas.text_right((area.right(), at), area.width, text, role);
        } else {
            canvas.text((area.left(), at), area.width, text, role);
        }
        return;
    };
    let mut x = if right { area.right() - columns(&signs) } else { area.left() };
    for sign in signs {
        draw_sign(canvas, (x, area.top()), sign, role);
        x += sign_columns(sign) + 1;
    }
}

fn fits(signs: &[Dots], area: Rect) -> bool {
    let rows = signs.iter().map(|s| s.len().div_ceil(2)).max().unwrap_or(0);
    columns(signs) <= area.width && rows <= usize::from(area.height)
}

fn columns(signs: &[Dots]) -> u16 {
    signs.iter().map(|s| sign_columns(s).saturating_add(1)).fold(0u16, u16::saturating_add).saturating_sub(1)
}

fn sign_columns(sign: Dots) -> u16 {
    u16::try_from(sign.first().map_or(0, |row| row.len())).unwrap_or(u16::MAX)
}

fn draw_sign(canvas: &mut Canvas, (x, y): (u16, u16), sign: Dots, role: Role) {
    for (row, pair) in (y..).zip(sign.chunks(2)) {
        let lower = pair.get(1).copied().unwrap_or("").as_bytes();
        for (column, (i, upper)) in (x..).zip(pair[0].bytes().enumerate()) {
            let block = match (upper == b'#', lower.get(i) == Some(&b'#')) {
                (true, true) => canvas.sign('█', '#'),
                (true, false) => canvas.sign('▀', '"'),
                (false, true) => canvas.sign('▄', '.'),
                (false, false) => continue,
            };
            canvas.put((column, row), block, role);
        }
    }
}

fn dots(size: Size, sign: char) -> Option<Dots> {
    match size {
        Size::Large => large(sign),
        Size::Middle => middle(sign),
    }
}

#[rustfmt::skip]
fn large(sign: char) -> Option<Dots> {
    Some(match sign {
        '0' => &[" ### ", "#   #", "#   #", "#   #", "#   #", "#   #", " ### "],
        '1' => &["  #  ", " ##  ", "  #  ", "  #  ", "  #  ", "  #  ", " ### "],
        '2' => &[" ### ", "#   #", "    #", "   # ", "  #  ", " #   ", "#####"],
        '3' => &["#### ", "    #", "    #", " ### ", "    #", "    #", "#### "],
        '4' => &["   # ", "  ## ", " # # ", "#  # ", "#####", "   # ", "   # "],
        '5' => &["#####", "#    ", "#### ", "    #", "    #", "#   #", " ### "],
        '6' => &[" ### ", "#    ", "#    ", "#### ", "#   #", "#   #", " ### "],
        '7' => &["#####", "    #", "   # ", "  #  ", " #   ", " #   ", " #   "],
        '8' => &[" ### ", "#   #", "#   #", " ### ", "#   #", "#   #", " ### "],
        '9' => &[" ### ", "#   #", "#   #", " ####", "    #", "    #", " ### "],
        'A' => &[" ### ", "#   #", "#   #", "#####", "#   #", "#   #", "#   #"],
        'C' => &[" ### ", "#   #", "#    ", "#    ", "#    ", "#   #", " ### "],
        'D' => &["#### ", "#   #", "#   #", "#   #", "#   #", "#   #", "#### "],
        'E' => &["#####", "#    ", "#    ", "#### ", "#    ", "#    ", "#####"],
        'F' => &["#####", "#    ", "#    ", "#### ", "#    ", "#    ", "#    "],
        'G' => &[" ### ", "#   #", "#    ", "# ###", "#   #", "#   #", " ### "],
        'H' => &["#   #", "#   #", "#   #", "#####", "#   #", "#   #", "#   #"],
        'I' => &["###", " # ", " # ", " # ", " # ", " # ", "###"],
        'K' => &["#   #", "#  # ", "# #  ", "##   ", "# #  ", "#  # ", "#   #"],
        'L' => &["#    ", "#    ", "#    ", "#    ", "#    ", "#    ", "#####"],
        'N' => &["#   #", "##  #", "# # #", "#  ##", "#   #", "#   #", "#   #"],
        'O' => &[" ### ", "#   #", "#   #", "#   #", "#   #", "#   #", " ### "],
        'P' => &["#### ", "#   #", "#   #", "#### ", "#    ", "#    ", "#    "],
        'R' => &["#### ", "#   #", "#   #", "#### ", "# #  ", "#  # ", "#   #"],
        'S' => &[" ####", "#    ", "#    ", " ### ", "    #", "    #", "#### "],
        'T' => &["#####", "  #  ", "  #  ", "  #  ", "  #  ", "  #  ", "  #  "],
        'U' => &["#   #", "#   #", "#   #", "#   #", "#   #", "#   #", " ### "],
        'W' => &["#   #", "#   #", "#   #", "# # #", "# # #", "## ##", "#   #"],
        'Y' => &["#   #", "#   #", " # # ", "  #  ", "  #  ", "  #  ", "  #  "],
        '-' => &["     ", "     ", "     ", "#####", "     ", "     ", "     "],
        '.' => &[" ", " ", " ", " ", " ", " ", "#"],
        ' ' => &["   ", "   ", "   ", "   ", "   ", "   ", "   "],
        _ => return None,
    })
}

#[rustfmt::skip]
fn middle(sign: char) -> Option<Dots> {
    Some(match sign {
        '0' => &["###", "# #", "# #", "# #", "###"],
        '1' => &[" # ", "## ", " # ", " # ", "###"],
        '2' => &["###", "  #", "###", "#  ", "###"],
        '3' => &["###", "  #", "###", "  #", "###"],
        '4' => &["# #", "# #", "###", "  #", "  #"],
        '5' => &["###", "#  ", "###", "  #", "###"],
        '6' => &["###", "#  ", "###", "# #", "###"],
        '7' => &["###", "  #", "  #", "  #", "  #"],
        '8' => &["###", "# #", "###", "# #", "###"],
        '9' => &["###", "# #", "###", "  #", "###"],
        '-' => &["  ", "  ", "##", "  ", "  "],
        '.' => &[" ", " ", " ", " ", "#"],
        ' ' => &["   ", "   ", "   ", "   ", "   "],
        _ => return None,
    })
}
