//! The figures of a record: worked out from the record alone, kept beside it.
//!
//! What it deliberately does not do: compute anything from the daemon's memory.

use std::fs;
use std::path::Path;

use figures::{Figures, work_out};
use journal::Record;

/// The file in the record's folder.
const FILE: &str = "figures.json";

/// Works the figures of a record out and writes them into its folder.
pub(crate) fn write(folder: &Path) -> Result<(), String> {
    let record = Record::open(folder).map_err(|error| error.to_string())?;
    let figures = work_out(&record).map_err(|error| error.to_string())?;
    let text = serde_json::to_vec_pretty(&figures).map_err(|error| error.to_string())?;
    let path = folder.join(FILE);
    fs::write(&path, text).map_err(|error| format!("writing {}: {error}", path.display()))
}

/// The figures of a record as they stand in its folder; worked out anew where there are none, or
/// where the record still grows.
pub(crate) fn read(record: &Record) -> Result<Figures, String> {
    let path = record.folder().join(FILE);
    if record.is_sealed()
        && let Ok(text) = fs::read(&path)
        && let Ok(figures) = serde_json::from_slice(&text)
    {
        return Ok(figures);
    }
    work_out(record).map_err(|error| error.to_string())
}
