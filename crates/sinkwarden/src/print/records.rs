//! A folder's records.

use std::io::{self, Write};

use daemon::view::RecordList;

use super::table::{table, write};
use super::unit::words;

/// Writes the records, the latest last, and folders that hold none that can be read.
pub(crate) fn records(out: &mut dyn Write, list: &RecordList) -> io::Result<()> {
    if list.records.is_empty() {
        writeln!(out, "no records")?;
    } else {
        let mut rows = table(&["record", "sink", "dut", "ending", "seal", "title"]);
        for record in &list.records {
            let ending = record
                .ending
                .as_ref()
                .map_or("open", |ending| ending.how.text());
            let by = record.ending.as_ref().and_then(|ending| ending.interlock);
            let by = by.map_or_else(String::new, |interlock| {
                format!(" by {}", words(&interlock))
            });
            let seal = if record.sealed { "sealed" } else { "-" };
            rows.add_row([
                record.folder.clone(),
                record.sink.clone(),
                record.dut.clone(),
                format!("{ending}{by}"),
                seal.to_owned(),
                record.title.clone(),
            ]);
        }
        write(out, &rows)?;
    }
    for damaged in &list.unreadable {
        writeln!(out, "unreadable: {}: {}", damaged.folder, damaged.reason)?;
    }
    Ok(())
}
