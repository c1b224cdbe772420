//! Is the record as it was written? If not, what is altered, and where?
//!
//! Reads every byte: checksum, number and form of each line, the chain of the segments, the
//! manifest's checksum, and, if there is a seal, every hash under it. Whatever differs is named
//! with its file, line and byte. Works on unsealed records, too; then the last segment rests on
//! its lines' checksums alone, since nothing after it holds its hash yet.
//!
//! All findings are collected; nothing is changed and nothing is repaired.

use std::collections::{BTreeMap, BTreeSet};
use std::fmt;
use std::path::Path;

use serde::Serialize;

use crate::layout::{self, Named};
use crate::manifest::Manifest;
use crate::seal::{Seal, link};
use crate::{Damage, Disk, JournalError, LineFault, Storage, checked, checksum};

mod inspection;
mod parallel;

use inspection::{Inspection, inspect};

/// What `verify` found.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct VerifyReport {
    /// The record's identity, if its manifest or seal could be read.
    pub record: Option<String>,
    /// Whether there is a seal.
    pub sealed: bool,
    /// The record's hash, as its manifest and journal give it now.
    pub hash: String,
    /// Segments read.
    pub segments: u64,
    /// Entries whose checksum holds.
    pub entries: u64,
    /// Torn ends that earlier recoveries had set aside: no finding.
    pub set_aside: Vec<String>,
    /// Files that no check covers: derived from the record, or foreign.
    pub not_covered: Vec<String>,
    /// What is not as it was written. Empty: the record is intact.
    pub findings: Vec<Finding>,
}

impl VerifyReport {
    /// Whether nothing was found.
    pub fn is_intact(&self) -> bool {
        self.findings.is_empty()
    }
}

/// One thing that is not as it was written.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Finding {
    /// What kind of thing.
    pub kind: FindingKind,
    /// Where.
    pub place: Place,
    /// What differs, in words.
    pub detail: String,
}

/// Where something was found.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Place {
    /// The file, from the record's folder.
    pub file: String,
    /// The line, from 1, in the plain text.
    pub line: Option<u64>,
    /// The line's first byte in the plain text, from 0.
    pub offset: Option<u64>,
}

/// Kinds of findings.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum FindingKind {
    /// The manifest is missing, damaged, or not the one that was sealed.
    Manifest,
    /// The seal is damaged or contradicts itself.
    Seal,
    /// A segment that must be there is not.
    SegmentMissing,
    /// A segment that the seal does not know.
    SegmentExtra,
    /// A line whose checksum or form does not hold.
    Line,
    /// Numbers that do not follow on: lines are missing, doubled or out of order.
    Numbers,
    /// The lines hold, but the whole is not what the next segment or the seal says.
    SegmentHash,
    /// The compressed file is not as it was written, or cannot be read.
    Compressed,
    /// An unsealed record's end is cut off: a crash, or a writer at work.
    TornEnd,
    /// A torn end that was set aside is missing or altered.
    SetAside,
    /// A file that was never put in place: a writer died, or is at work.
    Unfinished,
}

impl fmt::Display for Finding {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.place.file)?;
        if let Some(line) = self.place.line {
            write!(f, ", line {line}")?;
        }
        if let Some(offset) = self.place.offset {
            write!(f, ", byte {offset}")?;
        }
        write!(f, ": {}", self.detail)
    }
}

impl Finding {
    pub(crate) fn of_file(kind: FindingKind, file: &str, detail: impl Into<String>) -> Self {
        let place = Place {
            file: file.to_owned(),
            line: None,
            offset: None,
        };
        Self {
            kind,
            place,
            detail: detail.into(),
        }
    }

    fn of_damage(kind: FindingKind, damage: &Damage) -> Self {
        let place = Place {
            file: in_journal(&damage.file),
            line: Some(damage.line),
            offset: Some(damage.offset),
        };
        Self {
            kind,
            place,
            detail: damage.fault.to_string(),
        }
    }
}

fn in_journal(file: &str) -> String {
    format!("{}/{file}", layout::JOURNAL)
}

/// Checks a whole record.
///
/// # Errors
/// [`JournalError::NoRecord`] if the folder has neither manifest nor journal, and what the disk
/// says. Whatever is wrong with the record itself is in the report.
pub fn verify(folder: &Path) -> Result<VerifyReport, JournalError> {
    let names = list(folder)?;
    if !names
        .iter()
        .any(|name| name == layout::MANIFEST || name == layout::JOURNAL)
    {
        return Err(JournalError::NoRecord {
            path: folder.to_path_buf(),
        });
    }
    let mut check = Check::default();
    let manifest = check.manifest(folder)?;
    let seal = check.seal(folder)?;
    check.compare_manifest(seal.as_ref());
    let record = manifest
        .map(|manifest| manifest.record)
        .or_else(|| seal.as_ref().map(|seal| seal.record.clone()));

    let journal = layout::journal(folder);
    let in_journal = if names.iter().any(|name| name == layout::JOURNAL) {
        list(&journal)?
    } else {
        Vec::new()
    };
    let numbers = segment_numbers(&in_journal);
    let inspections = parallel::in_order(&numbers, |&number| {
        inspect(&journal, number, record.as_deref())
    })?;
    check.segments(inspections, seal.as_ref());
    check.set_aside(&journal, &in_journal, seal.as_ref())?;
    check.other_files(&names, &in_journal);
    if let Some(seal) = &seal
        && seal.hash != check.hash
        && check.findings.is_empty()
    {
        let detail = format!(
            "it says the record's hash is {}, it is {}",
            seal.hash, check.hash
        );
        check.find(FindingKind::Seal, layout::SEAL, detail);
    }
    Ok(VerifyReport {
        record,
        sealed: check.sealed,
        hash: check.hash,
        segments: numbers.len() as u64,
        entries: check.entries,
        set_aside: check.torn,
        not_covered: check.not_covered,
        findings: check.findings,
    })
}

fn list(folder: &Path) -> Result<Vec<String>, JournalError> {
    Disk.names(folder)
        .map_err(|error| JournalError::io("listing", folder, error))
}

fn read(path: &Path) -> Result<Option<Vec<u8>>, JournalError> {
    match Disk.read(path) {
        Ok(bytes) => Ok(Some(bytes)),
        Err(error) if error.kind() == std::io::ErrorKind::NotFound => Ok(None),
        Err(error) => Err(JournalError::io("reading", path, error)),
    }
}

fn segment_numbers(names: &[String]) -> Vec<u32> {
    let numbers: BTreeSet<u32> = names
        .iter()
        .filter_map(|name| match layout::named(name) {
            Named::Plain(number) | Named::Compressed(number) => Some(number),
            Named::Torn | Named::Unfinished | Named::Lock | Named::Foreign => None,
        })
        .collect();
    numbers.into_iter().collect()
}

/// A check in progress.
#[derive(Default)]
struct Check {
    sealed: bool,
    manifest_sha256: Option<String>,
    hash: String,
    entries: u64,
    torn: Vec<String>,
    not_covered: Vec<String>,
    findings: Vec<Finding>,
}

impl Check {
    fn find(&mut self, kind: FindingKind, file: &str, detail: impl Into<String>) {
        self.findings.push(Finding::of_file(kind, file, detail));
    }

    fn manifest(&mut self, folder: &Path) -> Result<Option<Manifest>, JournalError> {
        let path = folder.join(layout::MANIFEST);
        let Some(bytes) = read(&path)? else {
            self.find(FindingKind::Manifest, layout::MANIFEST, "it is missing");
            return Ok(None);
        };
        let hash = checksum::sha256(&bytes);
        self.hash.clone_from(&hash);
        self.manifest_sha256 = Some(hash);
        match Manifest::from_bytes(&path, &bytes) {
            Ok(manifest) => Ok(Some(manifest)),
            Err(error) => {
                self.find(FindingKind::Manifest, layout::MANIFEST, error.to_string());
                Ok(None)
            }
        }
    }

    fn seal(&mut self, folder: &Path) -> Result<Option<Seal>, JournalError> {
        let Some(bytes) = read(&folder.join(layout::SEAL))? else {
            return Ok(None);
        };
        self.sealed = true;
        match checked::from_bytes::<Seal>(&bytes) {
            Ok(seal) => Ok(Some(seal)),
            Err(detail) => {
                self.find(FindingKind::Seal, layout::SEAL, detail);
                Ok(None)
            }
        }
    }

    fn compare_manifest(&mut self, seal: Option<&Seal>) {
        if let (Some(seal), Some(found)) = (seal, &self.manifest_sha256)
            && seal.manifest_sha256 != *found
            && self.findings.is_empty()
        {
            let detail = "it is not the manifest that was sealed";
            self.find(FindingKind::Manifest, layout::MANIFEST, detail);
        }
    }

    /// Puts together what was found in each segment, and what holds between them.
    fn segments(&mut self, inspections: Vec<Inspection>, seal: Option<&Seal>) {
        let mut wanted_number = 1;
        let mut wanted_first = Some(1);
        let mut before: Option<Inspection> = None;
        let last = inspections.len();
        for (index, mut seen) in inspections.into_iter().enumerate() {
            for missing in wanted_number..seen.number {
                let file = in_journal(&layout::compressed_name(missing));
                self.find(FindingKind::SegmentMissing, &file, "the segment is missing");
                wanted_first = None;
            }
            wanted_number = seen.number + 1;
            if index + 1 == last && !self.sealed {
                seen.last_of_unsealed();
            }
            let clean = seen.findings.is_empty();
            self.findings.append(&mut seen.findings);
            self.follows(&seen, wanted_first, before.as_ref());
            self.compare_segment(&seen, clean, seal);
            self.hash = link(&self.hash, &seen.plain_sha256);
            self.entries += seen.entries;
            wanted_first = if clean { seen.next_number } else { None };
            before = Some(seen);
        }
        let Some(seal) = seal else { return };
        for sealed in &seal.segments {
            if let Named::Plain(number) | Named::Compressed(number) = layout::named(&sealed.file)
                && number >= wanted_number
            {
                let file = in_journal(&sealed.file);
                self.find(FindingKind::SegmentMissing, &file, "the segment is missing");
            }
        }
    }

    /// Whether a segment goes on where the one before it ended.
    fn follows(&mut self, seen: &Inspection, first: Option<u64>, before: Option<&Inspection>) {
        let file = in_journal(&seen.file);
        if let (Some(expected), Some(found)) = (first, seen.first)
            && expected != found
        {
            let detail = LineFault::Number { expected, found }.to_string();
            self.find(FindingKind::Numbers, &file, detail);
        }
        if let (Some(before), Some(claimed)) = (before, &seen.before)
            && before.number + 1 == seen.number
            && before.clean
            && before.plain_sha256 != *claimed
        {
            let detail = format!(
                "its lines hold, but segment {} was written after another text: its hash is {}, \
                 and was {claimed}",
                seen.number, before.plain_sha256
            );
            let file = in_journal(&before.file);
            self.find(FindingKind::SegmentHash, &file, detail);
        }
    }

    fn compare_segment(&mut self, seen: &Inspection, clean: bool, seal: Option<&Seal>) {
        let Some(seal) = seal else { return };
        let file = in_journal(&seen.file);
        let sealed = seal.segments.iter().find(|sealed| {
            matches!(
                layout::named(&sealed.file),
                Named::Plain(number) | Named::Compressed(number) if number == seen.number
            )
        });
        let Some(sealed) = sealed else {
            self.find(
                FindingKind::SegmentExtra,
                &file,
                "the seal does not know this segment",
            );
            return;
        };
        if !clean {
            return;
        }
        if sealed.plain_sha256 != seen.plain_sha256 {
            let detail = format!(
                "its lines hold, but it is not the text that was sealed: its hash is {}, the \
                 seal says {}",
                seen.plain_sha256, sealed.plain_sha256
            );
            self.find(FindingKind::SegmentHash, &file, detail);
        } else if sealed.file == seen.file && sealed.file_sha256 != seen.file_sha256 {
            let detail = "the compressed file is not the one that was sealed, though it holds the \
                          same text";
            self.find(FindingKind::Compressed, &file, detail);
        }
    }

    fn set_aside(
        &mut self,
        journal: &Path,
        names: &[String],
        seal: Option<&Seal>,
    ) -> Result<(), JournalError> {
        let mut known: BTreeMap<&str, &str> = seal
            .map(|seal| &seal.set_aside[..])
            .unwrap_or_default()
            .iter()
            .map(|sealed| (sealed.file.as_str(), sealed.sha256.as_str()))
            .collect();
        for name in names
            .iter()
            .filter(|name| layout::named(name) == Named::Torn)
        {
            let found = checksum::sha256(&read(&journal.join(name))?.unwrap_or_default());
            self.hash = link(&self.hash, &found);
            self.torn.push(in_journal(name));
            match known.remove(name.as_str()) {
                Some(sealed) if sealed == found => {}
                Some(_) => {
                    let detail = "it is not the torn end that was sealed";
                    self.find(FindingKind::SetAside, &in_journal(name), detail);
                }
                None if seal.is_some() => {
                    let detail = "the seal does not know this torn end";
                    self.find(FindingKind::SetAside, &in_journal(name), detail);
                }
                None => {}
            }
        }
        for missing in known.into_keys() {
            let detail = "the torn end that had been set aside is missing";
            self.find(FindingKind::SetAside, &in_journal(missing), detail);
        }
        Ok(())
    }

    fn other_files(&mut self, names: &[String], in_journal_names: &[String]) {
        for name in names {
            if name.ends_with(layout::UNFINISHED) {
                self.find(FindingKind::Unfinished, name, UNFINISHED);
            } else if ![layout::MANIFEST, layout::SEAL, layout::JOURNAL].contains(&name.as_str()) {
                self.not_covered.push(name.clone());
            }
        }
        for name in in_journal_names {
            match layout::named(name) {
                Named::Unfinished => {
                    self.find(FindingKind::Unfinished, &in_journal(name), UNFINISHED);
                }
                Named::Foreign => self.not_covered.push(in_journal(name)),
                Named::Plain(number)
                    if self.sealed
                        && in_journal_names.contains(&layout::compressed_name(number)) =>
                {
                    let detail = "the segment is there twice, plain and compressed";
                    self.find(FindingKind::SegmentExtra, &in_journal(name), detail);
                }
                Named::Plain(_) | Named::Compressed(_) | Named::Torn | Named::Lock => {}
            }
        }
    }
}

const UNFINISHED: &str = "the file was never put in place: its writer died or is at work";
