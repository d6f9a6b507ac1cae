//! `reduce`: sessions in, the reduction out as text, CSV, JSON and HTML.

use super::{Trouble, files};
use crate::config::Show;
use crate::reduction::{self, Options, Reduction, ReductionError};
use crate::report::{self, Inputs};
use crate::session::Session;
use std::path::{Path, PathBuf};

/// What to reduce, and where the results go.
#[derive(Clone, Debug, Default)]
pub struct Task {
    /// Session files, one or more.
    pub sessions: Vec<PathBuf>,
    /// Where the page of HTML goes.
    pub report: Option<PathBuf>,
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
    for output in [&task.report, &task.csv, &task.json] {
        files::spares(output.as_deref(), &task.sessions)?;
    }
    let to_stdout = [&task.report, &task.csv, &task.json].into_iter().flatten().filter(|p| *p == Path::new("-"));
    if to_stdout.count() > 1 {
        let hint = "give one of them a file name";
        return Err(Trouble::new("two outputs would be mixed on standard output").hint(hint));
    }
    let mut degraded = Vec::new();
    let (mut sessions, mut inputs) = (Vec::new(), Vec::new());
    for path in &task.sessions {
        let (session, sum) = files::session_and_sum(path)?;
        let damage: Vec<String> = session.damage.iter().map(|d| format!("{}: left out: {}", d.line, d.what)).collect();
        degraded.extend(damage.iter().map(|damage| format!("{}:{damage}", path.display())));
        let file = path.file_name().unwrap_or_default().to_string_lossy().into_owned();
        inputs.push(report::Input { file, sum, header: session.header.clone(), damage });
        sessions.push(session);
    }
    let options = Options { at_kmh: task.at_kmh, baseline: task.baseline.clone() };
    let reduction = reduction::reduce(&sessions, &options).map_err(|e| explain(&e, task))?;
    let inputs = report::Inputs { version: env!("CARGO_PKG_VERSION").to_string(), sessions: inputs };
    files::write_all(&outputs(task, &reduction, &inputs))?;
    Ok(degraded)
}

fn explain(error: &ReductionError, task: &Task) -> Trouble {
    let names: Vec<String> = task.sessions.iter().map(|p| p.display().to_string()).collect();
    Trouble::new(error.to_string()).at(names.join(", "))
}

/// What goes where. The table goes to standard output unless one of the others does.
fn outputs<'a>(task: &'a Task, reduction: &Reduction, inputs: &Inputs) -> Vec<(&'a Path, Vec<u8>)> {
    let mut all: Vec<(&Path, Vec<u8>)> = Vec::new();
    if let Some(path) = &task.csv {
        all.push((path, report::csv(reduction)));
    }
    if let Some(path) = &task.json {
        all.push((path, report::json(reduction).into_bytes()));
    }
    if let Some(path) = &task.report {
        all.push((path, report::html(reduction, inputs).into_bytes()));
    }
    if !all.iter().any(|(path, _)| *path == Path::new("-")) {
        let show = &inputs.sessions[0].header.setup.outing.show;
        all.push((Path::new("-"), report::text(reduction, show).into_bytes()));
    }
    all
}
