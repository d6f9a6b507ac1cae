//! The reduction beside the engine: every entry that is kept goes to a thread of its own, which reduces the session as soon as it can.
//!
//! The engine never waits for it; several entries that came meanwhile are reduced once.

use crate::screen::findings::Findings;
use crate::session::{Entry, Header, Session};
use std::sync::Arc;
use std::sync::mpsc::{Sender, channel};
use tokio::sync::watch;

/// What the session says so far, as it grows.
pub struct Reducer {
    entries: Sender<Entry>,
    findings: watch::Receiver<Option<Arc<Findings>>>,
}

impl Reducer {
    /// Starts with what an earlier run left.
    pub fn start(header: Header, before: Vec<Entry>) -> Self {
        let (entries, arriving) = channel::<Entry>();
        let (publish, findings) = watch::channel(None);
        std::thread::spawn(move || {
            let mut session = Session { header, entries: before, damage: Vec::new() };
            let mut number = 0;
            loop {
                if session.entries.iter().any(|e| matches!(e, Entry::Segment(_))) {
                    number += 1;
                    publish.send_replace(Some(Arc::new(Findings::of(&session, number))));
                }
                let Ok(first) = arriving.recv() else { return };
                session.entries.extend(std::iter::once(first).chain(arriving.try_iter()));
            }
        });
        Self { entries, findings }
    }

    /// An entry was kept.
    pub fn kept(&self, entry: &Entry) {
        let matters =
            !matches!(entry, Entry::Rejected(_) | Entry::Mark(_) | Entry::Note(_) | Entry::Fault(_) | Entry::End(_));
        if matters {
            let _ = self.entries.send(entry.clone());
        }
    }

    /// The newest findings.
    pub fn findings(&self) -> Option<Arc<Findings>> {
        self.findings.borrow().clone()
    }
}
