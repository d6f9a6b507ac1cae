//! The terminal: entered once, always given back, whatever breaks.

use super::Trouble;
use crate::screen::keys::Bindings;
use crate::screen::{Face, Overlay, Theme, View, render};
use crossterm::event::{DisableBracketedPaste, EnableBracketedPaste};
use crossterm::terminal::{
    BeginSynchronizedUpdate, Clear, ClearType, EndSynchronizedUpdate, EnterAlternateScreen, LeaveAlternateScreen,
    disable_raw_mode, enable_raw_mode,
};
use crossterm::{cursor, execute, queue};
use ratatui::Terminal;
use ratatui::backend::CrosstermBackend;
use std::io::{self, BufWriter, IsTerminal, Stdout, Write};
use std::mem::ManuallyDrop;
use std::sync::atomic::{AtomicBool, Ordering};

static ENTERED: AtomicBool = AtomicBool::new(false);
static ABANDONED: AtomicBool = AtomicBool::new(false);

/// There is a terminal to draw on.
///
/// # Errors
/// [`Trouble`] with the way to do without.
pub fn require() -> Result<(), Trouble> {
    if io::stdin().is_terminal() && io::stdout().is_terminal() {
        return Ok(());
    }
    Err(Trouble::new("the live screen needs a terminal").hint("without one, run with --unattended"))
}

/// A terminal in our hands.
pub struct Screen {
    /// Never dropped: that would tell on standard error what it cannot write, and panic where that has gone as well.
    terminal: ManuallyDrop<Terminal<CrosstermBackend<BufWriter<Stdout>>>>,
}

/// Takes the terminal.
///
/// # Errors
/// When it cannot be set up.
pub fn enter() -> io::Result<Screen> {
    ENTERED.store(true, Ordering::SeqCst);
    enable_raw_mode()?;
    execute!(io::stdout(), EnterAlternateScreen, Clear(ClearType::All), EnableBracketedPaste, cursor::Hide)?;
    let backend = CrosstermBackend::new(BufWriter::with_capacity(64 * 1024, io::stdout()));
    Ok(Screen { terminal: ManuallyDrop::new(Terminal::new(backend)?) })
}

/// Gives the terminal back; does nothing when it was not taken.
pub fn restore() {
    if ENTERED.swap(false, Ordering::SeqCst) {
        let _ = disable_raw_mode();
        let _ = execute!(io::stdout(), DisableBracketedPaste, LeaveAlternateScreen, cursor::Show);
    }
}

/// Gives up a terminal that takes nothing any more: only its mode is put back, since whatever is written to it waits for ever.
pub fn abandon() {
    ABANDONED.store(true, Ordering::SeqCst);
    if ENTERED.swap(false, Ordering::SeqCst) {
        let _ = disable_raw_mode();
    }
}

/// The terminal was given up.
pub fn abandoned() -> bool {
    ABANDONED.load(Ordering::SeqCst)
}

/// Runs the screen and gives the terminal back however it ends, before a panic is told.
pub fn guarded<T>(work: impl FnOnce() -> T) -> T {
    let told = std::panic::take_hook();
    let this = std::thread::current().id();
    std::panic::set_hook(Box::new(move |info| {
        if std::thread::current().id() == this {
            restore();
        }
        told(info);
    }));
    let result = work();
    restore();
    result
}

/// The face that plan, a person's own keys and the environment ask for.
pub fn face(plan: &super::outing::Plan, bindings: Bindings) -> Face {
    let plain_locale = ["LC_ALL", "LC_CTYPE", "LANG"]
        .iter()
        .find_map(|name| std::env::var(name).ok().filter(|v| !v.is_empty()))
        .is_some_and(|v| !v.to_ascii_lowercase().replace('-', "").contains("utf8"));
    let dumb = std::env::var("TERM").is_ok_and(|t| t == "dumb");
    let no_colour = dumb || std::env::var("NO_COLOR").is_ok_and(|v| !v.is_empty());
    let theme = if no_colour { Theme::NoColour } else { Theme::default() };
    // Alone they are shown every time.
    let overlay = if first_start() || plan.solo { Overlay::Safety } else { Overlay::None };
    let plain = plan.plain || plain_locale || dumb;
    Face { theme, plain, overlay, bindings, solo: plan.solo, ..Face::default() }
}

/// Nobody has seen the cautions yet; from now on somebody has.
fn first_start() -> bool {
    let Some(directory) = super::files::data_directory() else { return true };
    let seen = directory.join("cautions-seen");
    let first = !seen.exists();
    if first {
        let _ = std::fs::create_dir_all(&directory).and_then(|()| std::fs::write(&seen, ""));
    }
    first
}

impl Screen {
    /// Draws one frame, in one synchronized update.
    ///
    /// # Errors
    /// When the terminal is gone.
    pub fn draw(&mut self, view: &View, face: &Face) -> io::Result<()> {
        queue!(self.terminal.backend_mut(), BeginSynchronizedUpdate)?;
        self.terminal.draw(|frame| render(view, face, frame.buffer_mut()))?;
        queue!(self.terminal.backend_mut(), EndSynchronizedUpdate)?;
        Write::flush(self.terminal.backend_mut())
    }

    /// Gives the terminal back to the shell's job control and takes it again when the job goes on.
    ///
    /// # Errors
    /// When the terminal is gone.
    pub fn suspend(&mut self) -> io::Result<()> {
        restore();
        stop_myself();
        // A new one draws all its cells; clearing the old one would ask the terminal for its cursor and wait for the answer.
        *self = enter()?;
        Ok(())
    }
}

/// Stops this process until it is continued; the engine stops with it, and the gap ends the stretch.
#[cfg(unix)]
fn stop_myself() {
    let me = std::process::id().to_string();
    let _ = std::process::Command::new("kill").args(["-STOP", &me]).status();
}

#[cfg(not(unix))]
fn stop_myself() {}
