//! The sequence file and the files it names, for a sink of the bench.

use std::fs;
use std::path::Path;

use anyhow::Result;
use journal::{Disk, Storage as _};
use sequence::{Calibration, Compiled, Files, Options, Refused, compile, files_wanted};
use sink::bench::SinkEntry;
use sink::calibration::Certificate;
use sink::correction::Correction;

use crate::arguments::SequenceOn;
use crate::bench_file;
use crate::exit::hinted;

/// A sequence's text with the files it names.
pub(crate) struct SequenceFile {
    pub(crate) text: String,
    pub(crate) files: Files,
}

impl SequenceFile {
    /// Reads a sequence, and beside it the files it names. A named file that is not there is
    /// left to the check, which knows the place that names it.
    ///
    /// # Errors
    /// What the operating system says of the sequence itself.
    pub(crate) fn load(path: &Path) -> Result<Self> {
        let text = fs::read_to_string(path).map_err(|error| {
            hinted(
                format!("cannot read the sequence {}: {error}", path.display()),
                "give the path of a sequence file; ready ones are in sequences/",
            )
        })?;
        let folder = path.parent().unwrap_or(Path::new("."));
        let files = files_wanted(&text)
            .into_iter()
            .filter_map(|name| {
                // What is no text is left to the check, too: it says what it cannot read.
                let bytes = fs::read(folder.join(&name)).ok()?;
                Some((name, String::from_utf8_lossy(&bytes).into_owned()))
            })
            .collect();
        Ok(Self { text, files })
    }
}

/// All that a check of a sequence needs.
pub(crate) struct Submission {
    pub(crate) file: SequenceFile,
    pub(crate) entry: SinkEntry,
    pub(crate) dut: Option<String>,
    pub(crate) correction: Correction,
    pub(crate) certificate: Option<serde_json::Value>,
    disk_free_bytes: Option<u64>,
}

impl Submission {
    /// Reads bench and sequence.
    ///
    /// # Errors
    /// What cannot be read, and a bench file that cannot be used.
    pub(crate) fn load(on: &SequenceOn) -> Result<Self> {
        let bench = bench_file::load(&on.bench)?;
        let entry = bench_file::sink(&bench, &on.bench, &on.sink)?;
        let file = SequenceFile::load(&on.sequence)?;
        let (correction, certificate) = bench_file::calibration(&entry, &on.bench)?;
        // The folder of the records may not exist yet; the bench file's own is on its disk.
        let folder = on.bench.parent().unwrap_or(Path::new("."));
        let records = folder.join(&bench.records);
        let on_disk = if records.is_dir() {
            records.as_path()
        } else {
            folder
        };
        let disk_free_bytes = Disk.free_bytes(on_disk).ok().flatten();
        Ok(Self {
            file,
            entry,
            dut: on.dut.clone(),
            correction,
            certificate,
            disk_free_bytes,
        })
    }

    /// Checks the sequence and makes the plan.
    ///
    /// # Errors
    /// [`Refused`] with every finding.
    pub(crate) fn compile(&self) -> Result<Compiled, Refused> {
        // The file was computed again from its points when it was read.
        let certificate = self
            .certificate
            .as_ref()
            .and_then(|value| Certificate::from_json(&value.to_string()).ok());
        let now_unix_s = jiff::Timestamp::now().as_second();
        let options = Options {
            calibration: Calibration::of(certificate.as_ref(), now_unix_s),
            dut_label: self.dut.clone(),
            correction: self.correction,
            disk_free_bytes: self.disk_free_bytes,
            ..Options::default()
        };
        compile(&self.file.text, &self.entry, &self.file.files, &options)
    }
}
