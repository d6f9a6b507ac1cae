//! Keys, read on a thread of its own that asks first whether the terminal is still there.
//!
//! The reader of the terminal library spins for ever on a terminal that has gone, so nothing is read after a hang-up: the channel
//! closes instead.

use crossterm::event::{self, Event};
use std::time::Duration;
use tokio::sync::mpsc::{UnboundedReceiver, unbounded_channel};

/// Longest wait for a key before the terminal is looked at again; a new size is seen after it at the latest.
const WAIT: Duration = Duration::from_millis(50);

/// Starts to read. The channel closes when the terminal has gone.
pub fn start() -> UnboundedReceiver<Event> {
    let (send, keys) = unbounded_channel();
    std::thread::spawn(move || {
        while there() {
            let waiting = event::poll(Duration::ZERO);
            let Ok(waiting) = waiting else { return };
            if waiting {
                let Ok(event) = event::read() else { return };
                if send.send(event).is_err() {
                    return;
                }
            } else if send.is_closed() {
                return;
            }
        }
    });
    keys
}

/// Waits for input; false when the terminal has gone.
#[cfg(unix)]
fn there() -> bool {
    use rustix::event::{PollFd, PollFlags, Timespec, poll};
    let stdin = std::io::stdin();
    let mut watched = [PollFd::new(&stdin, PollFlags::IN)];
    let wait = Timespec { tv_sec: 0, tv_nsec: WAIT.subsec_nanos().into() };
    match poll(&mut watched, Some(&wait)) {
        Ok(_) => !watched[0].revents().intersects(PollFlags::HUP | PollFlags::ERR | PollFlags::NVAL),
        Err(error) => error == rustix::io::Errno::INTR,
    }
}

#[cfg(not(unix))]
fn there() -> bool {
    event::poll(WAIT).is_ok()
}
