//! A calibration written back into the rig file: one `convert` changes, every comment and every other line stays.

use super::{Trouble, files};
use crate::config::Convert;
use std::path::Path;
use toml_edit::{Array, DocumentMut, InlineTable, Item, Table, Value};

/// Puts a channel's `convert` into the rig file.
///
/// # Errors
/// [`Trouble`] when the file cannot be read, has no such channel, or cannot be written; then it is as it was.
pub fn write(path: &Path, channel: &str, convert: &Convert) -> Result<(), Trouble> {
    let source = files::source(path)?;
    let text = changed(&source.text, channel, convert).map_err(|what| Trouble::new(what).at(path.display()))?;
    files::write(path, text.as_bytes())
}

/// The text with that channel's `convert`.
fn changed(text: &str, channel: &str, convert: &Convert) -> Result<String, String> {
    let mut document: DocumentMut = text.parse().map_err(|e| format!("the rig file cannot be read: {e}"))?;
    let channels = document.get_mut("channel").and_then(Item::as_array_of_tables_mut);
    let named = |table: &&mut Table| table.get("name").and_then(Item::as_str) == Some(channel);
    let found = channels.and_then(|tables| tables.iter_mut().find(named));
    let table = found.ok_or_else(|| format!("the rig file has no channel `{channel}`"))?;
    match table.get_mut("convert").and_then(Item::as_value_mut) {
        // The blanks before it and the comment behind it stay.
        Some(old) => {
            let decor = old.decor().clone();
            *old = value(convert);
            *old.decor_mut() = decor;
        }
        None => {
            table.insert("convert", Item::Value(value(convert)));
        }
    }
    Ok(document.to_string())
}

fn value(convert: &Convert) -> Value {
    let mut table = InlineTable::new();
    match convert {
        Convert::Linear { gain, offset } => {
            table.insert("gain", (*gain).into());
            table.insert("offset", (*offset).into());
        }
        Convert::Points(points) => {
            let pairs = points.iter().map(|pair| Value::Array(pair.iter().copied().collect::<Array>()));
            table.insert("points", Value::Array(pairs.collect()));
        }
        Convert::Ratiometric { supply, zero, span, full } => {
            let mut inner = InlineTable::new();
            for (name, x) in [("supply", supply), ("zero", zero), ("span", span), ("full", full)] {
                inner.insert(name, (*x).into());
            }
            table.insert("ratiometric", Value::InlineTable(inner));
        }
    }
    Value::InlineTable(table)
}
