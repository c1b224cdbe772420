//! The seal: hashes over the manifest and every segment, chained into one.
//!
//! The record's hash, printed in a report or kept elsewhere, stands for every byte of the
//! manifest and of the journal. Link 0 of the chain is the manifest's SHA-256; each further
//! link is the SHA-256 of the text of the link before it followed by the text of the segment's
//! own SHA-256 (over its plain bytes); torn ends that were set aside come last, in the order of
//! their names. `sha256sum` alone can recompute it.
//!
//! What it deliberately does not do: it is no signature. Someone who rewrites the whole record
//! can write a new seal, too; the hash kept elsewhere is what gives that away. Files derived
//! from the record (figures, report) are not under it, since they can be recomputed.

use std::path::Path;

use serde::{Deserialize, Serialize};

use crate::checksum::sha256;
use crate::layout::{self, Named};
use crate::segment::{self, Expected, Loaded, Reader};
use crate::storage::{Storage, replace};
use crate::writer::{self, compress_closed};
use crate::{Disk, FORMAT, JournalError, Manifest, checked};

/// A record's seal.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Seal {
    /// The format's version.
    pub format: u32,
    /// The record's identity.
    pub record: String,
    /// Entries in the journal.
    pub entries: u64,
    /// SHA-256 of the manifest's file.
    pub manifest_sha256: String,
    /// The segments in order.
    pub segments: Vec<SealedSegment>,
    /// Torn ends that were set aside.
    pub set_aside: Vec<SealedFile>,
    /// The last link of the chain: the record's hash.
    pub hash: String,
}

/// A segment under the seal.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SealedSegment {
    /// Its file in the journal's folder.
    pub file: String,
    /// SHA-256 of that file's bytes.
    pub file_sha256: String,
    /// The number of its first entry.
    pub first: u64,
    /// The number of its last entry.
    pub last: u64,
    /// Length of its plain text in bytes.
    pub plain_bytes: u64,
    /// SHA-256 of its plain text.
    pub plain_sha256: String,
    /// The chain's link.
    pub link: String,
}

/// A torn end under the seal.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SealedFile {
    /// Its file in the journal's folder.
    pub file: String,
    /// SHA-256 of its bytes.
    pub sha256: String,
    /// The chain's link.
    pub link: String,
}

/// The chain's next link.
pub(crate) fn link(before: &str, hash: &str) -> String {
    sha256(format!("{before}{hash}").as_bytes())
}

/// Seals a record that has ended but was not sealed: whose writer died while sealing, or whose
/// disk had been full. Whole segments are compressed first.
///
/// # Errors
/// [`JournalError::Locked`] if its writer lives; [`JournalError::Sealed`];
/// [`JournalError::Damaged`] if it is not as it was written (recover it first); what the disk
/// says.
pub fn seal(folder: &Path) -> Result<Seal, JournalError> {
    let _lock = writer::lock(&Disk, folder)?;
    if folder.join(layout::SEAL).exists() {
        return Err(JournalError::Sealed {
            path: folder.to_path_buf(),
        });
    }
    compress_closed(&Disk, folder, u32::MAX)?;
    seal_on(&Disk, folder)
}

/// Reads everything back from the disk, checks it, and puts the seal in place. The caller
/// holds the lock.
pub(crate) fn seal_on(storage: &dyn Storage, folder: &Path) -> Result<Seal, JournalError> {
    let manifest_path = folder.join(layout::MANIFEST);
    let manifest_bytes = storage
        .read(&manifest_path)
        .map_err(|error| JournalError::io("reading", &manifest_path, error))?;
    let record = Manifest::from_bytes(&manifest_path, &manifest_bytes)?.record;
    let manifest_sha256 = sha256(&manifest_bytes);
    let journal = layout::journal(folder);
    let mut hash = manifest_sha256.clone();
    let mut segments = Vec::new();
    let mut next_number = 1;
    for number in segment::list(storage, &journal)? {
        let loaded = segment::load(storage, &journal, number)?;
        let sealed = sealed_segment(&loaded, &record, number, next_number, &hash)?;
        hash.clone_from(&sealed.link);
        next_number = sealed.last + 1;
        segments.push(sealed);
    }
    let mut set_aside = Vec::new();
    for file in torn_files(storage, &journal)? {
        let path = journal.join(&file);
        let bytes = storage
            .read(&path)
            .map_err(|error| JournalError::io("reading", &path, error))?;
        let sha256 = sha256(&bytes);
        hash = link(&hash, &sha256);
        set_aside.push(SealedFile {
            file,
            sha256,
            link: hash.clone(),
        });
    }
    let entries = next_number - 1;
    let seal = Seal {
        format: FORMAT,
        record,
        entries,
        manifest_sha256,
        segments,
        set_aside,
        hash,
    };
    let path = folder.join(layout::SEAL);
    replace(storage, &path, &checked::to_bytes(&seal))
        .map_err(|error| JournalError::io("writing", &path, error))?;
    Ok(seal)
}

fn sealed_segment(
    loaded: &Loaded,
    record: &str,
    number: u32,
    first: u64,
    before: &str,
) -> Result<SealedSegment, JournalError> {
    let expected = Expected {
        record: Some(record),
        segment: number,
        first: Some(first),
    };
    let mut reader =
        Reader::open(&loaded.file, &loaded.plain, &expected).map_err(JournalError::Damaged)?;
    while let Some(entry) = reader.next_entry() {
        entry.map_err(JournalError::Damaged)?;
    }
    let plain_sha256 = sha256(&loaded.plain);
    Ok(SealedSegment {
        file: loaded.file.clone(),
        file_sha256: loaded
            .compressed
            .as_deref()
            .map_or_else(|| plain_sha256.clone(), sha256),
        first,
        last: reader.next_number() - 1,
        plain_bytes: loaded.plain.len() as u64,
        link: link(before, &plain_sha256),
        plain_sha256,
    })
}

/// The torn ends that were set aside, in the order of their names.
pub(crate) fn torn_files(
    storage: &dyn Storage,
    journal: &Path,
) -> Result<Vec<String>, JournalError> {
    let mut names = storage
        .names(journal)
        .map_err(|error| JournalError::io("listing", journal, error))?;
    names.retain(|name| layout::named(name) == Named::Torn);
    Ok(names)
}
