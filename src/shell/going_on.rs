//! A run goes on without its terminal, and ends in order when one of its threads breaks.

use super::engine::Arrival;
use super::feed::Sender;
use super::{Trouble, terminal};
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

/// Whether the terminal has gone; shared by whoever may find out.
#[derive(Clone, Debug, Default)]
pub struct Gone(Arc<AtomicBool>);

impl Gone {
    /// It has gone.
    pub fn say(&self) {
        self.0.store(true, Ordering::SeqCst);
    }
    /// Nobody looks any more.
    pub fn is_so(&self) -> bool {
        self.0.load(Ordering::SeqCst)
    }
}

/// Why the screen was left.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Left {
    /// Somebody wants to leave, or the run is over.
    Asked,
    /// The terminal has gone: the run goes on without it.
    TerminalGone,
}

/// Runs the screen. It ends the run when it is left or breaks, not when the terminal has gone.
///
/// # Errors
/// [`Trouble`] when the screen broke or could not begin.
pub fn with_screen(to: &Sender, gone: &Gone, screen: impl FnOnce() -> Result<Left, Trouble>) -> Result<(), Trouble> {
    let ended = catch_unwind(AssertUnwindSafe(|| terminal::guarded(screen)));
    terminal::restore();
    if let Ok(Ok(Left::TerminalGone)) = ended {
        gone.say();
        return Ok(());
    }
    to.send(Arrival::Stop);
    match ended {
        Ok(left) => left.map(|_| ()),
        Err(_) => Err(Trouble::new("the screen broke; everything that was kept is on the disk")
            .hint("start again with the same --session")),
    }
}

/// Ends the run when the thread that holds it breaks.
pub struct EndsRun(pub Sender);

impl Drop for EndsRun {
    fn drop(&mut self) {
        if std::thread::panicking() {
            self.0.send(Arrival::Stop);
        }
    }
}
