//! The records folder: names, the list, finding one.
//!
//! A record is a folder of the name `DATE-TIME-SINK-DUT-ID`, so that a person finds it with a
//! file manager. What is known of sealed records is kept in memory; nothing else is: the folder
//! may be changed by anyone at any time.

use std::collections::BTreeMap;
use std::fs::{self, File, TryLockError};
use std::io;
use std::path::{Path, PathBuf};
use std::sync::{Arc, Mutex, PoisonError};
use std::time::SystemTime;

use journal::{Ended, JournalError, Manifest, Record};
use quantity::HostTime;
use sequencer::event::Ending;
use uuid::Uuid;

use crate::error::DaemonError;
use crate::view::{DamageView, EndingView, EndingWord, RecordList, RecordSummary};

/// The file that one daemon holds while it uses the folder.
const LOCK: &str = ".lock";
/// Characters of the id in a folder's name: its random end.
const SHORT_ID: usize = 12;
/// Longest part of a folder's name that comes from a label.
const PART_CHARS_MAX: usize = 32;

/// The records folder, held by this daemon alone.
#[derive(Debug)]
pub(crate) struct Records {
    folder: PathBuf,
    known: Mutex<BTreeMap<String, Known>>,
    lock: File,
}

/// A record in short, and by what it is seen whether that still holds.
#[derive(Debug, Clone)]
struct Known {
    changed: Option<SystemTime>,
    summary: Arc<RecordSummary>,
}

impl Drop for Records {
    /// A program that is just being started holds a copy of the file until then: closing it
    /// would not do.
    fn drop(&mut self) {
        let _ = self.lock.unlock();
    }
}

impl Records {
    /// Takes the folder, creating it if it is not there.
    pub(crate) fn take(folder: &Path) -> Result<Self, DaemonError> {
        let trouble = |source| DaemonError::Records {
            path: folder.to_path_buf(),
            source,
        };
        fs::create_dir_all(folder).map_err(trouble)?;
        let lock = File::create(folder.join(LOCK)).map_err(trouble)?;
        match lock.try_lock() {
            Ok(()) => {}
            Err(TryLockError::WouldBlock) => {
                return Err(DaemonError::RecordsInUse {
                    path: folder.to_path_buf(),
                });
            }
            Err(TryLockError::Error(source)) => return Err(trouble(source)),
        }
        Ok(Self {
            folder: folder.to_path_buf(),
            known: Mutex::default(),
            lock,
        })
    }

    /// The folder itself.
    pub(crate) fn folder(&self) -> &Path {
        &self.folder
    }

    /// The path of a record's folder.
    pub(crate) fn path(&self, name: &str) -> PathBuf {
        self.folder.join(name)
    }

    /// The names of all folders that may be records, sorted by name: the oldest first.
    pub(crate) fn names(&self) -> io::Result<Vec<String>> {
        let mut names = Vec::new();
        for entry in fs::read_dir(&self.folder)? {
            let entry = entry?;
            if entry.file_type()?.is_dir()
                && let Ok(name) = entry.file_name().into_string()
                && !name.starts_with('.')
            {
                names.push(name);
            }
        }
        names.sort_unstable();
        Ok(names)
    }

    /// Every record in short, the latest first.
    pub(crate) fn list(&self) -> io::Result<RecordList> {
        let mut list = RecordList {
            records: Vec::new(),
            unreadable: Vec::new(),
        };
        for name in self.names()? {
            match self.summary(&name) {
                Ok(summary) => list.records.push(RecordSummary::clone(&summary)),
                Err(error) => list.unreadable.push(DamageView {
                    folder: name,
                    reason: error.to_string(),
                }),
            }
        }
        list.records
            .sort_by(|a, b| (&b.started, b.id).cmp(&(&a.started, a.id)));
        Ok(list)
    }

    /// Opens the record of an id; `None` if there is none.
    pub(crate) fn find(&self, id: Uuid) -> Result<Option<Record>, JournalError> {
        let short = short_id(id);
        let names = self.names().unwrap_or_default();
        // The name is a help, not the truth: a folder may have been renamed.
        let (likely, others): (Vec<_>, Vec<_>) =
            names.into_iter().partition(|name| name.ends_with(&short));
        for name in likely.iter().chain(&others) {
            if let Ok(summary) = self.summary(name)
                && summary.id == id
            {
                return Record::open(&self.path(name)).map(Some);
            }
        }
        Ok(None)
    }

    /// Whether there is a record of an id.
    pub(crate) fn has(&self, id: Uuid) -> bool {
        matches!(self.find(id), Ok(Some(_)))
    }

    /// A record in short.
    pub(crate) fn summary(&self, name: &str) -> Result<Arc<RecordSummary>, JournalError> {
        let path = self.path(name);
        let changed = last_change(&path);
        let known = self.known.lock().unwrap_or_else(PoisonError::into_inner);
        if let Some(known) = known.get(name)
            && known.changed.is_some()
            && known.changed == changed
        {
            return Ok(Arc::clone(&known.summary));
        }
        drop(known);
        let record = Record::open(&path)?;
        let summary = Arc::new(summary_of(name, &record));
        if record.is_sealed() {
            let known = Known {
                changed,
                summary: Arc::clone(&summary),
            };
            let mut all = self.known.lock().unwrap_or_else(PoisonError::into_inner);
            all.insert(name.to_owned(), known);
        }
        Ok(summary)
    }
}

/// When a record's folder or its manifest was last changed.
fn last_change(path: &Path) -> Option<SystemTime> {
    let of = |path: &Path| fs::metadata(path).and_then(|data| data.modified()).ok();
    of(path).max(of(&path.join("manifest.json")))
}

/// When a run was started, on its own clock.
pub(crate) fn started(record: &Record) -> HostTime {
    time_of(&record.manifest().created).unwrap_or(HostTime::ZERO)
}

/// An instant from RFC 3339 text.
pub(crate) fn time_of(text: &str) -> Option<HostTime> {
    let stamp: jiff::Timestamp = text.parse().ok()?;
    Some(HostTime::from_micros(stamp.as_microsecond()))
}

/// A record in short.
pub(crate) fn summary_of(name: &str, record: &Record) -> RecordSummary {
    let manifest: &Manifest = record.manifest();
    RecordSummary {
        id: Uuid::parse_str(&manifest.record).unwrap_or_default(),
        folder: name.to_owned(),
        sink: manifest.sink.clone(),
        dut: manifest.plan.dut.label.clone(),
        title: manifest.plan.title.clone(),
        started: manifest.created.clone(),
        clock: manifest.clock.into(),
        labels: manifest.plan.labels.clone(),
        ending: manifest.ended.as_ref().map(ending_view),
        sealed: record.is_sealed(),
        resumed: manifest.resumed.clone(),
    }
}

fn ending_view(ended: &Ended) -> EndingView {
    EndingView {
        how: EndingWord::of(&ended.how),
        interlock: match &ended.how {
            Ending::Tripped(interlock) => Some(*interlock),
            Ending::Finished | Ending::Stopped | Ending::Interrupted => None,
        },
        at: ended.at.clone(),
        reason: ended.reason.clone(),
    }
}

/// The end of an id, which is random.
fn short_id(id: Uuid) -> String {
    let text = id.simple().to_string();
    text.get(text.len() - SHORT_ID..)
        .unwrap_or_default()
        .to_owned()
}

/// The name of a record's folder: `2026-12-01-221500-left-K-01-9f3ac1d2e4b5`.
pub(crate) fn folder_name(at: HostTime, sink: &str, dut: &str, id: Uuid) -> String {
    let stamp = jiff::Timestamp::from_microsecond(at.micros())
        .map(|stamp| stamp.strftime("%Y-%m-%d-%H%M%S").to_string())
        .unwrap_or_default();
    format!(
        "{stamp}-{}-{}-{}",
        file_part(sink),
        file_part(dut),
        short_id(id)
    )
}

/// A label as part of a file name on any system.
fn file_part(label: &str) -> String {
    let safe = |c: char| {
        if c.is_ascii_alphanumeric() || matches!(c, '-' | '_') {
            c
        } else {
            '_'
        }
    };
    label.chars().take(PART_CHARS_MAX).map(safe).collect()
}

#[cfg(test)]
mod tests;
