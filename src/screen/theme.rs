//! Colours by role: day, night without light areas, and none.
//!
//! Indexed colours out of the fixed part (16–255) of the 256-colour palette, because terminals that know no RGB
//! still know these, and the first sixteen are whatever the person's own palette makes of them. Every pair keeps a contrast
//! of at least 4.5 : 1 (WCAG 2.2, 1.4.3); word and shape carry the meaning first, then blue against orange.

use ratatui::style::{Color, Modifier, Style};

/// Which colours.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Theme {
    /// Dark on white, for sunlight.
    #[default]
    Day,
    /// Dim on black, for the dark.
    Night,
    /// The terminal's own two colours.
    NoColour,
}

impl Theme {
    /// The next one, round and round.
    pub const fn next(self) -> Self {
        match self {
            Self::Day => Self::Night,
            Self::Night => Self::NoColour,
            Self::NoColour => Self::Day,
        }
    }
}

/// What a piece of the screen is, as far as its colour goes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Role {
    /// Ordinary text.
    Base,
    /// Text that should not draw the eye.
    Quiet,
    /// Text that should.
    Strong,
    /// Outside the window.
    Off,
    /// Inside, too young.
    Settling,
    /// Averaging.
    Steady,
    /// Held and not yet kept.
    Held,
    /// On the disk: a filled area.
    Kept,
    /// Broken: a filled area.
    Trouble,
}

/// Style of a role in a theme.
pub(super) fn style(theme: Theme, role: Role) -> Style {
    let bold = !matches!(role, Role::Base | Role::Quiet);
    let modifier = if bold { Modifier::BOLD } else { Modifier::empty() };
    let (fg, bg) = match theme {
        Theme::Day => day(role),
        Theme::Night => night(role),
        Theme::NoColour => return no_colour(role).add_modifier(modifier),
    };
    Style::new().fg(Color::Indexed(fg)).bg(Color::Indexed(bg)).add_modifier(modifier)
}

const fn day(role: Role) -> (u8, u8) {
    const WHITE: u8 = 231;
    match role {
        Role::Base | Role::Strong => (16, WHITE),
        Role::Quiet => (240, WHITE),
        Role::Off => (130, WHITE),
        Role::Settling => (94, WHITE),
        Role::Steady => (25, WHITE),
        Role::Held => (19, WHITE),
        Role::Kept => (WHITE, 19),
        Role::Trouble => (WHITE, 124),
    }
}

const fn night(role: Role) -> (u8, u8) {
    const BLACK: u8 = 16;
    match role {
        Role::Base => (250, BLACK),
        Role::Quiet => (245, BLACK),
        Role::Strong => (253, BLACK),
        Role::Off => (208, BLACK),
        Role::Settling => (179, BLACK),
        Role::Steady => (74, BLACK),
        Role::Held => (117, BLACK),
        Role::Kept => (117, 17),
        Role::Trouble => (215, 52),
    }
}

fn no_colour(role: Role) -> Style {
    let plain = Style::new().fg(Color::Reset).bg(Color::Reset);
    match role {
        Role::Kept | Role::Trouble => plain.add_modifier(Modifier::REVERSED),
        _ => plain,
    }
}
