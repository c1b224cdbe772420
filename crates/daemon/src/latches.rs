//! What latched a sink outlives the daemon: its last record says how its run ended.
//!
//! Nothing is written when an interlock trips, since nothing may stand between a trip and *off*:
//! the record has it already. A reset is what is written, as the id of the record it was for.
//! In doubt (a mark that cannot be read) the sink counts as latched.

use std::fs;
use std::io;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use sequencer::event::Interlock;

use crate::records::Records;
use crate::view::RecordSummary;

/// The folder in the records folder: one file a sink, with the id of the record reset last.
const FOLDER: &str = ".resets";

/// The interlock that tripped a sink's last run, unless it has been reset since.
pub(crate) fn latched_by(records: &Records, sink: &str) -> Option<Interlock> {
    let last = last_record(records, sink)?;
    let interlock = last.ending.as_ref()?.interlock?;
    let reset = fs::read_to_string(mark(records.folder(), sink)).unwrap_or_default();
    (reset.trim() != last.id.to_string()).then_some(interlock)
}

/// Notes that a sink has been reset after its last run.
pub(crate) fn note_reset(records: &Records, sink: &str) -> io::Result<()> {
    let Some(last) = last_record(records, sink) else {
        return Ok(());
    };
    let mark = mark(records.folder(), sink);
    fs::create_dir_all(records.folder().join(FOLDER))?;
    // Renamed into place: a mark is whole or not there.
    let new = mark.with_extension("new");
    fs::write(&new, format!("{}\n", last.id))?;
    fs::rename(&new, &mark)
}

fn mark(records: &Path, sink: &str) -> PathBuf {
    records.join(FOLDER).join(sink)
}

/// The names of the folders begin with the time at which they were created.
fn last_record(records: &Records, sink: &str) -> Option<Arc<RecordSummary>> {
    let names = records.names().ok()?;
    names
        .iter()
        .rev()
        .filter_map(|name| records.summary(name).ok())
        .find(|summary| summary.sink == sink)
}
