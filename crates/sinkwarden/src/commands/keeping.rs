//! A rehearsal's record: the same as a run's, on virtual time.

use std::fs;
use std::path::Path;

use anyhow::{Context as _, Result};
use daemon::view::EndingView;
use journal::{
    ClockKind, Ended, Entry, FORMAT, JournalError, Manifest, Options, SequenceText, Writer,
};
use quantity::HostTime;
use sequence::plan::Plan;
use sequencer::event::Ending;
use sink::bench::SinkEntry;
use uuid::Uuid;
use wire::Description;

use crate::exit::hinted;
use crate::sequence_file::Submission;

/// Entries between two flushes: nothing is lost with a rehearsal that can be had again.
const FLUSH_EVERY: u32 = 50_000;

/// A record that is being kept.
pub(super) struct Keeping {
    writer: Writer,
    unflushed: u32,
    description: Option<Description>,
}

impl Keeping {
    /// Creates the record's folder.
    ///
    /// # Errors
    /// A folder that exists already, and what the disk says.
    pub(super) fn begin(
        folder: &Path,
        submission: &Submission,
        entry: &SinkEntry,
        plan: &Plan,
        start: HostTime,
    ) -> Result<Self> {
        let parent = folder
            .parent()
            .filter(|parent| !parent.as_os_str().is_empty());
        fs::create_dir_all(parent.unwrap_or(Path::new(".")))
            .with_context(|| format!("cannot make the folder of {}", folder.display()))?;
        // A name alone has no parent that could be flushed.
        let place = match parent {
            Some(_) => folder.to_owned(),
            None => Path::new(".").join(folder),
        };
        let manifest = Manifest {
            format: FORMAT,
            record: Uuid::now_v7().to_string(),
            created: rfc3339(start),
            host: daemon::host_name(),
            software: concat!("sinkwarden ", env!("CARGO_PKG_VERSION")).to_owned(),
            sink: entry.name.clone(),
            clock: ClockKind::Virtual,
            bench: serde_json::to_value(entry)?,
            sequence: SequenceText {
                text: submission.file.text.clone(),
                files: submission.file.files.clone(),
            },
            plan: plan.clone(),
            certificate: submission.certificate.clone(),
            description: None,
            resumed: Vec::new(),
            ended: None,
        };
        let writer = Writer::create(&place, manifest, Options::default()).map_err(|error| {
            hinted(
                format!("the record of the rehearsal cannot be kept: {error}"),
                "give --keep a folder that does not exist yet",
            )
        })?;
        Ok(Self {
            writer,
            unflushed: 0,
            description: None,
        })
    }

    /// How the sink described itself, for the manifest.
    pub(super) fn describe(&mut self, description: Description) {
        self.description.get_or_insert(description);
    }

    /// Takes an entry.
    ///
    /// # Errors
    /// What the disk says.
    pub(super) fn take(&mut self, entry: &Entry) -> Result<(), JournalError> {
        self.writer.append(entry)?;
        self.unflushed += 1;
        if self.unflushed >= FLUSH_EVERY {
            self.unflushed = 0;
            self.writer.commit()?;
        }
        Ok(())
    }

    /// Ends the record, puts it under its seal, and leaves a sketch beside it as the daemon does.
    ///
    /// # Errors
    /// What the disk says.
    pub(super) fn seal(mut self, how: &Ending, view: &EndingView) -> Result<()> {
        let description = self.description;
        let folder = self.writer.folder().to_path_buf();
        self.writer
            .update_manifest(|manifest| manifest.description = description)?;
        self.writer.seal(Ended {
            how: how.clone(),
            at: view.at.clone(),
            reason: view.reason.clone(),
        })?;
        daemon::keep_sketch(&folder).map_err(|why| anyhow::anyhow!("no sketch for plots: {why}"))
    }
}

/// An instant as RFC 3339 text, in UTC.
pub(super) fn rfc3339(at: HostTime) -> String {
    jiff::Timestamp::from_microsecond(at.micros())
        .map_or_else(|_| at.micros().to_string(), |stamp| stamp.to_string())
}
