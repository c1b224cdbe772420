//! What a rehearsal draws from. Never hardware: a real sink's entry gets a simulated source.

use std::fs;
use std::num::NonZeroU32;
use std::path::Path;

use anyhow::Result;
use serde_json::{Map, Value, json};
use simulator::cell::{MODEL_FORMAT, specimen, specimens};
use sink::bench::{Link, SinkEntry};

use crate::exit::hinted;

/// The entry with the source to rehearse against: the one asked for, else the simulated cell of
/// the label given with the rehearsal, else the sink's own simulated source, else the simulated
/// cell of the sequence's label.
///
/// # Errors
/// A source file that cannot be read, a label no simulated cell has, or nothing to go by.
pub(crate) fn simulated(
    entry: &SinkEntry,
    source: Option<&str>,
    dut: Option<&str>,
    sequence_label: &str,
) -> Result<SinkEntry> {
    let own = match &entry.link {
        Link::Simulated { source, .. } => Some(source),
        Link::Serial { .. } | Link::Tcp { .. } => None,
    };
    let is_cell = |label: &&str| specimen(label).is_ok();
    let chosen = match (source, dut.filter(is_cell), own) {
        (Some(source), _, _) => asked_for(source, own)?,
        (None, Some(label), _) => with_cell(own, label),
        (None, None, Some(own)) => own.clone(),
        (None, None, None) => match Some(sequence_label).filter(is_cell) {
            Some(label) => with_cell(None, label),
            None => return Err(nothing_to_go_by(entry, dut.unwrap_or(sequence_label))),
        },
    };
    let mut entry = entry.clone();
    entry.link = Link::Simulated {
        source: chosen,
        time_factor: NonZeroU32::MIN,
    };
    Ok(entry)
}

/// The source that a label or a file names.
///
/// # Errors
/// A label no simulated cell has and a file that cannot be read.
pub(crate) fn asked_for(source: &str, own: Option<&Value>) -> Result<Value> {
    if specimen(source).is_ok() {
        return Ok(with_cell(own, source));
    }
    let path = Path::new(source);
    let text = fs::read_to_string(path).map_err(|error| {
        hinted(
            format!("`{source}` is no simulated cell, and no file that can be read: {error}"),
            format!(
                "give --source a JSON file or one of: {}",
                specimens().join(", ")
            ),
        )
    })?;
    let found: Value = serde_json::from_str(&text).map_err(|error| {
        hinted(
            format!("{}: {error}", path.display()),
            "a source is a JSON object in the words of the bench file, such as {\"cell\": \"K-01\"}",
        )
    })?;
    Ok(if is_cell_model(&found) {
        with_model(own, found)
    } else {
        found
    })
}

/// Whether this is a cell model's file, and no source.
fn is_cell_model(value: &Value) -> bool {
    value.get("format").and_then(Value::as_str) == Some(MODEL_FORMAT)
}

/// The sink's own source with a cell model in it.
pub(crate) fn with_model(own: Option<&Value>, model: Value) -> Value {
    let mut source = with_cell(own, "");
    if let Some(source) = source.as_object_mut() {
        source.remove("cell");
        source.insert("model".to_owned(), model);
    }
    source
}

/// The sink's own source with another cell in it, so that its errors and temperature stay.
fn with_cell(own: Option<&Value>, label: &str) -> Value {
    let mut source = own
        .and_then(Value::as_object)
        .cloned()
        .unwrap_or_else(Map::new);
    source.remove("model");
    source.remove("supply");
    source.insert("cell".to_owned(), json!(label));
    Value::Object(source)
}

fn nothing_to_go_by(entry: &SinkEntry, label: &str) -> anyhow::Error {
    hinted(
        format!(
            "sink `{}` is a real one, a rehearsal never touches it, and `{label}` is no simulated cell",
            entry.name
        ),
        format!(
            "give --source a JSON file with a source, or one of: {}",
            specimens().join(", ")
        ),
    )
}

#[cfg(test)]
mod tests;
