//! A rehearsal's record: the same folder that a night would leave, marked as virtual time.

use std::collections::BTreeMap;
use std::path::Path;

use journal::{
    ClockKind, Ended, Entry, JournalError, Manifest, Options, Seal, SequenceText, Writer,
};
use sequence::plan::Plan;
use sequencer::event::Ending;
use sink::bench::SinkEntry;

use crate::rehearse::Observer;

/// What a manifest says of a rehearsal beside its plan and its sink.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct About {
    /// The record's identity.
    pub record: String,
    /// When it was made (RFC 3339).
    pub created: String,
    /// The host's name.
    pub host: String,
    /// The sequence's text.
    pub sequence: String,
    /// The files it names.
    pub files: BTreeMap<String, String>,
}

/// Writes what a rehearsal would record.
#[derive(Debug)]
pub struct Recording {
    writer: Writer,
    failed: Option<JournalError>,
}

impl Recording {
    /// Makes the record's folder.
    ///
    /// # Errors
    /// What the disk says, or a sink's entry that JSON cannot hold.
    pub fn create(
        folder: &Path,
        about: About,
        plan: &Plan,
        entry: &SinkEntry,
    ) -> Result<Self, JournalError> {
        let manifest = Manifest {
            format: journal::FORMAT,
            record: about.record,
            created: about.created,
            host: about.host,
            software: concat!("sinkwarden ", env!("CARGO_PKG_VERSION")).to_owned(),
            sink: entry.name.clone(),
            clock: ClockKind::Virtual,
            bench: serde_json::to_value(entry).unwrap_or_default(),
            sequence: SequenceText {
                text: about.sequence,
                files: about.files,
            },
            plan: plan.clone(),
            certificate: None,
            description: None,
            resumed: Vec::new(),
            ended: None,
        };
        let writer = Writer::create(folder, manifest, Options::default())?;
        Ok(Self {
            writer,
            failed: None,
        })
    }

    /// Seals the record of a rehearsal that ended so at the time `at` (RFC 3339).
    ///
    /// # Errors
    /// The first thing that went wrong while writing.
    pub fn seal(self, how: Ending, at: String) -> Result<Seal, JournalError> {
        if let Some(failed) = self.failed {
            return Err(failed);
        }
        self.writer.seal(Ended {
            how,
            at,
            reason: None,
        })
    }
}

impl Observer for Recording {
    fn entry(&mut self, entry: &Entry) {
        if self.failed.is_none()
            && let Err(error) = self.writer.append(entry)
        {
            self.failed = Some(error);
        }
    }
}
