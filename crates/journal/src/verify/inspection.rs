//! One segment by itself: every line, and the hashes of the whole.

use std::path::Path;

use super::{Finding, FindingKind, in_journal};
use crate::packed::{self, Extract};
use crate::segment::{self, Expected, Loaded, Reader};
use crate::{Disk, JournalError, LineFault, checksum};

/// Findings of one segment after which only their number is told.
const FINDINGS_MAX: usize = 50;

/// What one segment is by itself.
pub(super) struct Inspection {
    pub(super) number: u32,
    pub(super) file: String,
    pub(super) plain_sha256: String,
    pub(super) file_sha256: String,
    /// From its first line, if that holds: the number of its first entry.
    pub(super) first: Option<u64>,
    /// From its first line, if that holds and is not the first segment's: the hash of the
    /// segment before.
    pub(super) before: Option<String>,
    pub(super) next_number: Option<u64>,
    pub(super) entries: u64,
    pub(super) clean: bool,
    pub(super) findings: Vec<Finding>,
    /// Whether all that is wrong is at its end.
    only_the_end: bool,
}

impl Inspection {
    /// In the last segment of an unsealed record, an end that does not hold is a torn one.
    pub(super) fn last_of_unsealed(&mut self) {
        if let [finding] = self.findings.as_mut_slice()
            && self.only_the_end
            && finding.kind == FindingKind::Line
        {
            finding.kind = FindingKind::TornEnd;
        }
    }
}

/// Reads and checks one segment.
pub(super) fn inspect(
    journal: &Path,
    number: u32,
    record: Option<&str>,
) -> Result<Inspection, JournalError> {
    let loaded = segment::load(&Disk, journal, number)?;
    let plain_sha256 = checksum::sha256(&loaded.plain);
    let file_sha256 = match &loaded.compressed {
        Some(compressed) => checksum::sha256(compressed),
        None => plain_sha256.clone(),
    };
    let mut seen = Inspection {
        number,
        file: loaded.file.clone(),
        plain_sha256,
        file_sha256,
        first: None,
        before: None,
        next_number: None,
        entries: 0,
        clean: false,
        findings: Vec::new(),
        only_the_end: false,
    };
    seen.lines(&loaded, record);
    seen.clean = seen.findings.is_empty();
    Ok(seen)
}

impl Inspection {
    fn lines(&mut self, loaded: &Loaded, record: Option<&str>) {
        let expected = Expected {
            record,
            segment: self.number,
            first: None,
        };
        let mut reader = match Reader::open(&loaded.file, &loaded.plain, &expected) {
            Ok(reader) => reader,
            Err(damage) => {
                self.only_the_end = damage.is_cut_off() && !loaded.plain.contains(&b'\n');
                self.unreadable(loaded, 0, 1);
                if self.findings.is_empty() {
                    self.findings
                        .push(Finding::of_damage(FindingKind::Line, &damage));
                }
                return;
            }
        };
        self.first = Some(reader.header().first);
        self.before.clone_from(&reader.header().before);
        let mut untold = 0_usize;
        while let Some(entry) = reader.next_entry() {
            let Err(damage) = entry else {
                self.entries += 1;
                self.only_the_end = false;
                continue;
            };
            // One damaged byte of a compressed file damages many lines: the first says enough.
            if loaded.unreadable.is_some() {
                return self.unreadable(loaded, damage.offset, damage.line);
            }
            self.only_the_end = true;
            let kind = match damage.fault {
                // Read on from the number that stands here, or every line after would differ.
                LineFault::Number { found, .. } => {
                    reader.go_on_after(found);
                    FindingKind::Numbers
                }
                LineFault::Unfinished
                | LineFault::Checksum { .. }
                | LineFault::Form(_)
                | LineFault::Extract => {
                    reader.go_on_after(reader.next_number());
                    FindingKind::Line
                }
            };
            if self.findings.len() < FINDINGS_MAX {
                self.findings.push(Finding::of_damage(kind, &damage));
            } else {
                untold += 1;
            }
        }
        if untold > 0 {
            let file = in_journal(&self.file);
            let detail = format!("and {untold} more lines do not hold");
            self.findings
                .push(Finding::of_file(FindingKind::Line, &file, detail));
        }
        self.next_number = Some(reader.next_number());
        let (line, offset) = reader.place();
        self.unreadable(loaded, offset, line);
        self.extract(loaded);
    }

    /// Holds the extract of a compressed file against its text.
    fn extract(&mut self, loaded: &Loaded) {
        let agrees = loaded.compressed.as_deref().is_none_or(|packed| {
            Extract::of(packed).agrees_with(&packed::extract_of(&loaded.plain))
        });
        if !agrees && loaded.unreadable.is_none() {
            let file = in_journal(&self.file);
            let detail = LineFault::Extract.to_string();
            self.findings
                .push(Finding::of_file(FindingKind::Compressed, &file, detail));
        }
    }

    /// Tells where a compressed file could not be read on.
    fn unreadable(&mut self, loaded: &Loaded, offset: u64, line: u64) {
        if let Some(why) = &loaded.unreadable {
            let mut finding = Finding::of_file(
                FindingKind::Compressed,
                &in_journal(&self.file),
                why.clone(),
            );
            finding.place.line = Some(line);
            finding.place.offset = Some(offset);
            self.findings.push(finding);
        }
    }
}
