//! The manifest: what was tested, on what, with what, from which sequence, and how it ended.
//!
//! One JSON file, always replaced whole. Its last member is a checksum over the bytes before it,
//! so that damage shows even before the record is sealed. Calendar times are text (RFC 3339),
//! given in by the caller: this crate reads no calendar clock.

use std::collections::BTreeMap;
use std::path::Path;

use sequence::plan::Plan;
use sequencer::event::Ending;
use serde::{Deserialize, Serialize};
use serde_json::Value;
use wire::Description;

use crate::storage::{Storage, replace};
use crate::{FORMAT, JournalError, checked, layout};

/// Everything about a run that is not an entry of its journal.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Manifest {
    /// The format's version: [`FORMAT`].
    pub format: u32,
    /// The record's identity; every segment names it too.
    pub record: String,
    /// When the run was started (RFC 3339).
    pub created: String,
    /// The host's name.
    pub host: String,
    /// The name and version of the program that wrote it.
    pub software: String,
    /// The sink's name in the bench file.
    pub sink: String,
    /// Whose time the run was on.
    pub clock: ClockKind,
    /// The sink's entry in the bench file, as it stood.
    pub bench: Value,
    /// The sequence as it was submitted.
    pub sequence: SequenceText,
    /// What the sequence was compiled to; the device under test is in it.
    pub plan: Plan,
    /// The calibration certificate, if there was one.
    pub certificate: Option<Value>,
    /// How the sink described itself when it was first connected.
    pub description: Option<Description>,
    /// When the run was taken up again after the host had died (RFC 3339).
    pub resumed: Vec<String>,
    /// How it ended; `None` while it runs, and if the host died.
    pub ended: Option<Ended>,
}

/// Whose time a run was on.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum ClockKind {
    /// A real sink's.
    Real,
    /// A simulated sink's, faster than real time by a factor.
    TimeLapse,
    /// A simulated sink's, as fast as it can.
    Virtual,
}

/// A sequence as it was submitted.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SequenceText {
    /// The sequence file's text.
    pub text: String,
    /// The files it names (profiles), by their names in it.
    pub files: BTreeMap<String, String>,
}

/// How a run ended.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Ended {
    /// In which of the ways.
    pub how: Ending,
    /// When (RFC 3339).
    pub at: String,
    /// What a person should know about it, in a sentence.
    pub reason: Option<String>,
}

impl Manifest {
    /// The manifest as its file's bytes, checksum included.
    pub(crate) fn to_bytes(&self) -> Vec<u8> {
        checked::to_bytes(self)
    }

    /// Reads a manifest's bytes; the checksum and the format's version are checked first.
    pub(crate) fn from_bytes(path: &Path, bytes: &[u8]) -> Result<Self, JournalError> {
        let bad = |detail: String| JournalError::Manifest {
            path: path.to_path_buf(),
            detail,
        };
        let text = checked::content(bytes).map_err(bad)?;
        let version: Version =
            serde_json::from_slice(&text).map_err(|error| bad(error.to_string()))?;
        if version.format != FORMAT {
            return Err(JournalError::Version {
                path: path.to_path_buf(),
                found: version.format,
                known: FORMAT,
            });
        }
        serde_json::from_slice(&text).map_err(|error| bad(error.to_string()))
    }

    /// Reads the manifest of a record's folder.
    pub(crate) fn load(storage: &dyn Storage, record: &Path) -> Result<Self, JournalError> {
        let path = record.join(layout::MANIFEST);
        match storage.read(&path) {
            Ok(bytes) => Self::from_bytes(&path, &bytes),
            Err(error) if error.kind() == std::io::ErrorKind::NotFound => {
                Err(JournalError::NoRecord {
                    path: record.to_path_buf(),
                })
            }
            Err(error) => Err(JournalError::io("reading", &path, error)),
        }
    }

    /// Puts the manifest in place in one stroke.
    pub(crate) fn store(&self, storage: &dyn Storage, record: &Path) -> Result<(), JournalError> {
        let path = record.join(layout::MANIFEST);
        replace(storage, &path, &self.to_bytes())
            .map_err(|error| JournalError::io("writing", &path, error))
    }
}

/// The one member that every version of the format has.
#[derive(Deserialize)]
struct Version {
    format: u32,
}
