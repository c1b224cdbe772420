//! Tables without lines, and lists of a name and a value.

use std::io::{self, Write};

use comfy_table::presets::NOTHING;
use comfy_table::{ContentArrangement, Table};

/// A table with a header; cells are never broken, so that columns can be cut out by programs.
pub(super) fn table(header: &[&str]) -> Table {
    let mut table = Table::new();
    table
        .load_style(NOTHING)
        .set_content_arrangement(ContentArrangement::Disabled)
        .set_header(header.iter().copied());
    table
}

/// Writes a table, indented by a space.
pub(super) fn write(out: &mut dyn Write, table: &Table) -> io::Result<()> {
    for line in table.lines() {
        writeln!(out, " {}", line.trim_end())?;
    }
    Ok(())
}

/// Writes names and values, the values under each other.
pub(super) fn list(out: &mut dyn Write, rows: &[(&str, String)]) -> io::Result<()> {
    let width = rows
        .iter()
        .map(|(name, _)| name.chars().count())
        .max()
        .unwrap_or(0);
    for (name, value) in rows {
        writeln!(out, "  {name:width$}  {value}")?;
    }
    Ok(())
}
