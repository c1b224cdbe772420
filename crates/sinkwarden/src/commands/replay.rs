//! `replay`: the record's events into a fresh sequencer, every output compared.

use std::cell::{Cell, RefCell};

use anyhow::Result;
use journal::{JournalError, Record};
use sequencer::replay::{Recorded, ReplayError, ReplaySummary, replay};
use serde::Serialize;

use super::against;
use crate::arguments::Replay;
use crate::exit::{Exit, hinted};
use crate::output::Output;
use crate::print;
use crate::progress::Progress;
use crate::record_folder;

/// Entries between two updates of the progress.
const UPDATE_EVERY: u64 = 4096;

/// What a replay gave.
#[derive(Debug, Serialize)]
#[serde(rename_all = "snake_case")]
pub(crate) enum ReplayAnswer {
    /// Every output is the recorded one.
    Same(ReplaySummary),
    /// The first output that is not.
    Different {
        /// The journal's entry.
        entry: u64,
        /// What the sequencer gives; `None`: nothing more.
        expected: Option<String>,
        /// What the record has; `None`: an event where an output was due.
        found: Option<String>,
    },
}

pub(super) fn carry_out(arguments: &Replay, output: Output) -> Result<Exit> {
    let record = record_folder::open(&arguments.of)?;
    if let Some(source) = &arguments.against {
        return against::carry_out(&record, source, output);
    }
    let answer = replayed(&record)?;
    output.give(&answer, print::replay)?;
    Ok(match answer {
        ReplayAnswer::Same(_) => Exit::Done,
        ReplayAnswer::Different { .. } => Exit::Altered,
    })
}

fn replayed(record: &Record) -> Result<ReplayAnswer> {
    let progress = RefCell::new(Progress::open_ended());
    let number = Cell::new(0);
    let failure: Cell<Option<JournalError>> = Cell::new(None);
    // Notes are beside the run: the sequencer neither saw nor gave them.
    let entries = record
        .entries()
        .map_while(|entry| entry.map_err(|error| failure.set(Some(error))).ok())
        .filter_map(|entry| {
            let recorded = entry
                .event()
                .map(Recorded::Event)
                .or_else(|| entry.output().map(Recorded::Output))?;
            number.set(entry.number);
            if entry.number.is_multiple_of(UPDATE_EVERY) {
                let text = format!("{} entries replayed", print::count(entry.number));
                progress.borrow_mut().at(entry.number, text);
            }
            Some(recorded)
        });
    let result = replay(record.manifest().plan.clone(), entries);
    progress.borrow().finish();
    if let Some(error) = failure.take() {
        return Err(hinted(
            format!("the record cannot be read to its end: {error}"),
            "`sinkwarden verify` says where it was altered",
        ));
    }
    match result {
        Ok(summary) => Ok(ReplayAnswer::Same(summary)),
        Err(ReplayError::Difference(difference)) => Ok(ReplayAnswer::Different {
            entry: number.get(),
            expected: difference.expected.map(|output| format!("{output:?}")),
            found: difference.found.map(|output| format!("{output:?}")),
        }),
        Err(error @ ReplayError::Plan(_)) => Err(error.into()),
    }
}
