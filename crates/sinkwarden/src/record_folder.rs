//! Records on disk, as the command line names them: by folder, by the beginning of a name or id,
//! or as `latest`.

use std::fs;
use std::path::{Path, PathBuf};

use anyhow::Result;
use daemon::view::{DamageView, EndingView, EndingWord, RecordList, RecordSummary};
use journal::Record;
use sequencer::event::Ending;
use uuid::Uuid;

use crate::arguments::RecordOf;
use crate::exit::hinted;

/// The word for the record that was begun last.
const LATEST: &str = "latest";

/// Finds the folder of a record.
///
/// # Errors
/// None, or more than one, that fits.
pub(crate) fn find(of: &RecordOf) -> Result<PathBuf> {
    let path = Path::new(&of.record);
    if path.is_dir() {
        return Ok(path.to_owned());
    }
    let list = list(&of.records)?;
    let fitting: Vec<&RecordSummary> = if of.record == LATEST {
        list.records.last().into_iter().collect()
    } else {
        let fits = |record: &&RecordSummary| {
            record.folder.starts_with(&of.record) || record.id.to_string().starts_with(&of.record)
        };
        list.records.iter().filter(fits).collect()
    };
    match fitting.as_slice() {
        [one] => Ok(of.records.join(&one.folder)),
        [] => Err(hinted(
            format!(
                "no record `{}`: no such folder, and none in {}",
                of.record,
                of.records.display()
            ),
            "list them with `sinkwarden records`, or name another folder with --records",
        )),
        several => {
            let names: Vec<&str> = several.iter().map(|one| one.folder.as_str()).collect();
            Err(hinted(
                format!(
                    "`{}` fits {} records: {}",
                    of.record,
                    several.len(),
                    names.join(", ")
                ),
                "give more of the name",
            ))
        }
    }
}

/// Opens a record.
///
/// # Errors
/// As [`find`], and what keeps the record from being read.
pub(crate) fn open(of: &RecordOf) -> Result<Record> {
    Ok(Record::open(&find(of)?)?)
}

/// The records in a folder, in the order in which they were begun.
///
/// # Errors
/// A folder that cannot be read.
pub(crate) fn list(folder: &Path) -> Result<RecordList> {
    let unreadable = |error: std::io::Error| {
        hinted(
            format!(
                "cannot read the records folder {}: {error}",
                folder.display()
            ),
            "name the folder with --records",
        )
    };
    let mut records = Vec::new();
    let mut damaged = Vec::new();
    for entry in fs::read_dir(folder).map_err(unreadable)? {
        let path = entry.map_err(unreadable)?.path();
        if !path.join("manifest.json").is_file() {
            continue;
        }
        match Record::open(&path)
            .map_err(|error| error.to_string())
            .and_then(|record| summary(&record))
        {
            Ok(summary) => records.push(summary),
            Err(reason) => damaged.push(DamageView {
                folder: name(&path),
                reason,
            }),
        }
    }
    // Ids carry the calendar time of their making (RFC 9562, version 7); a run's own clock may
    // have been a simulated one that ran ahead.
    records.sort_by_key(|record| record.id);
    damaged.sort_by(|a, b| a.folder.cmp(&b.folder));
    Ok(RecordList {
        records,
        unreadable: damaged,
    })
}

/// A record in short.
fn summary(record: &Record) -> Result<RecordSummary, String> {
    let manifest = record.manifest();
    let id = manifest.record.parse::<Uuid>();
    Ok(RecordSummary {
        id: id.map_err(|error| format!("the record's identity {}: {error}", manifest.record))?,
        folder: name(record.folder()),
        sink: manifest.sink.clone(),
        dut: manifest.plan.dut.label.clone(),
        title: manifest.plan.title.clone(),
        started: manifest.created.clone(),
        clock: manifest.clock.into(),
        labels: manifest.plan.labels.clone(),
        ending: manifest.ended.as_ref().map(|ended| EndingView {
            how: EndingWord::of(&ended.how),
            interlock: match &ended.how {
                Ending::Tripped(interlock) => Some(*interlock),
                Ending::Finished | Ending::Stopped | Ending::Interrupted => None,
            },
            at: ended.at.clone(),
            reason: ended.reason.clone(),
        }),
        sealed: record.is_sealed(),
        resumed: manifest.resumed.clone(),
    })
}

fn name(path: &Path) -> String {
    path.file_name()
        .unwrap_or_default()
        .to_string_lossy()
        .into_owned()
}
