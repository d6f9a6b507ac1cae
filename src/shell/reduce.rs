//! `reduce`: sessions in, the reduction out as text, CSV and JSON.

use super::{Trouble, files};
use crate::config::Show;
use crate::reduction::{self, Options, Reduction, ReductionError};
use crate::report;
use crate::session::Session;
use std::path::PathBuf;

/// What to reduce, and where the results go.
#[derive(Clone, Debug, Default)]
pub struct Task {
    /// Session files, one or more.
    pub sessions: Vec<PathBuf>,
    /// Where the tables go.
    pub csv: Option<PathBuf>,
    /// Where the JSON goes.
    pub json: Option<PathBuf>,
    /// Speed at which pressures and forces are stated, km/h.
    pub at_kmh: Option<f64>,
    /// Another baseline than the outing's.
    pub baseline: Option<String>,
}

/// The reduction of sessions as text.
///
/// # Errors
/// [`ReductionError`] when nothing can be reduced.
pub fn text(sessions: &[Session], show: &Show) -> Result<String, ReductionError> {
    let reduction = reduction::reduce(sessions, &Options::default())?;
    Ok(report::text(&reduction, show))
}

/// Reduces; the words of what was degraded come back.
///
/// # Errors
/// [`Trouble`] when a session cannot be read, they do not belong together, or an output cannot be written.
pub fn reduce(task: &Task) -> Result<Vec<String>, Trouble> {
    files::spares(task.csv.as_deref(), &task.sessions)?;
    files::spares(task.json.as_deref(), &task.sessions)?;
    let mut degraded = Vec::new();
    let mut sessions = Vec::new();
    for path in &task.sessions {
        let session = files::session(path)?;
        for damage in &session.damage {
            degraded.push(format!("{}:{}: left out: {}", path.display(), damage.line, damage.what));
        }
        sessions.push(session);
    }
    let options = Options { at_kmh: task.at_kmh, baseline: task.baseline.clone() };
    let reduction = reduction::reduce(&sessions, &options).map_err(|e| explain(&e, task))?;
    write(task, &reduction, &sessions[0].header.setup.outing.show)?;
    Ok(degraded)
}

fn explain(error: &ReductionError, task: &Task) -> Trouble {
    let names: Vec<String> = task.sessions.iter().map(|p| p.display().to_string()).collect();
    Trouble::new(error.to_string()).at(names.join(", "))
}

/// The table goes to standard output unless one of the others does.
fn write(task: &Task, reduction: &Reduction, show: &Show) -> Result<(), Trouble> {
    let to_stdout = |path: &Option<PathBuf>| path.as_deref() == Some(std::path::Path::new("-"));
    if !to_stdout(&task.csv) && !to_stdout(&task.json) {
        files::write(std::path::Path::new("-"), report::text(reduction, show).as_bytes())?;
    }
    if let Some(path) = &task.csv {
        files::write(path, &report::csv(reduction))?;
    }
    if let Some(path) = &task.json {
        files::write(path, report::json(reduction).as_bytes())?;
    }
    Ok(())
}
