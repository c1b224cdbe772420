//! What can go wrong with a record, told apart by what a person can do about it.

use std::io;
use std::path::{Path, PathBuf};

use crate::LineFault;

/// Why a record cannot be written, read, recovered or sealed.
#[derive(Debug, thiserror::Error)]
pub enum JournalError {
    /// The disk, a quota or a file size limit is exhausted.
    #[error("no space left while {doing} {}: free some disk space, then start again", path.display())]
    DiskFull {
        /// What was being done.
        doing: &'static str,
        /// To which file.
        path: PathBuf,
        /// What the operating system said.
        source: io::Error,
    },
    /// Any other error of the operating system.
    #[error("{doing} {} failed: {source}", path.display())]
    Io {
        /// What was being done.
        doing: &'static str,
        /// To which file.
        path: PathBuf,
        /// What the operating system said.
        source: io::Error,
    },
    /// An earlier error ended the writing; the record holds what was durable before it.
    #[error("the record takes nothing more since an earlier failure: {0}")]
    Poisoned(Failure),
    /// An entry came out of order: a broken invariant of the caller.
    #[error(
        "entry {given} was given where {expected} must come: entries are numbered without a gap"
    )]
    OutOfOrder {
        /// The number that must come.
        expected: u64,
        /// The number that came.
        given: u64,
    },
    /// Another process writes this record.
    #[error("the record {} is being written by another process: end that one first", path.display())]
    Locked {
        /// The record's folder.
        path: PathBuf,
    },
    /// The record is sealed: nothing may be added.
    #[error("the record {} is sealed: nothing can be added to it", path.display())]
    Sealed {
        /// The record's folder.
        path: PathBuf,
    },
    /// There is something already where a record was to be created.
    #[error("{} exists already: choose another name for the record", path.display())]
    Exists {
        /// The record's folder.
        path: PathBuf,
    },
    /// The folder holds no record.
    #[error("{} holds no record: it has no manifest.json", path.display())]
    NoRecord {
        /// The folder.
        path: PathBuf,
    },
    /// The manifest cannot be believed.
    #[error("{} cannot be read: {detail}", path.display())]
    Manifest {
        /// The file.
        path: PathBuf,
        /// Why.
        detail: String,
    },
    /// The record was written by a newer version.
    #[error("{} has format {found}, this version reads format {known}: use a newer version", path.display())]
    Version {
        /// The file.
        path: PathBuf,
        /// The format found.
        found: u32,
        /// The format known.
        known: u32,
    },
    /// A segment is damaged.
    #[error("the journal is damaged: {0}")]
    Damaged(Damage),
    /// A segment is not there.
    #[error("segment {segment} of {} is missing: restore it from a copy", path.display())]
    MissingSegment {
        /// The record's folder.
        path: PathBuf,
        /// Which.
        segment: u32,
    },
    /// The export's target could not be written.
    #[error("writing the export failed: {0}")]
    Export(#[source] io::Error),
}

/// Where a journal is damaged, and how.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("{file}, line {line}, byte {offset}: {fault}")]
pub struct Damage {
    /// The segment's file name.
    pub file: String,
    /// The line, counted from 1 (the segment's own first line).
    pub line: u64,
    /// The first byte of that line in the segment's plain text, counted from 0.
    pub offset: u64,
    /// What is wrong with it.
    pub fault: LineFault,
}

impl Damage {
    /// Whether the line is what a crash or a writer at work leaves, rather than whole and wrong.
    pub(crate) fn is_cut_off(&self) -> bool {
        match self.fault {
            LineFault::Unfinished | LineFault::Checksum { .. } => true,
            LineFault::Form(_) | LineFault::Number { .. } | LineFault::Extract => false,
        }
    }
}

/// Why a writer stopped taking entries; what [`JournalError`] says, kept for later.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum Failure {
    /// The disk, a quota or a file size limit is exhausted.
    #[error("no space left ({0})")]
    DiskFull(String),
    /// Anything else the operating system refused.
    #[error("{0}")]
    Io(String),
    /// An entry came out of order.
    #[error("{0}")]
    OutOfOrder(String),
}

impl JournalError {
    /// Wraps an error of the operating system, a full disk told apart.
    pub(crate) fn io(doing: &'static str, path: &Path, source: io::Error) -> Self {
        let path = path.to_path_buf();
        // FileTooLarge is what a file size limit of the process gives; for a record it is the
        // same trouble with the same mend.
        if matches!(
            source.kind(),
            io::ErrorKind::StorageFull | io::ErrorKind::QuotaExceeded | io::ErrorKind::FileTooLarge
        ) {
            Self::DiskFull {
                doing,
                path,
                source,
            }
        } else {
            Self::Io {
                doing,
                path,
                source,
            }
        }
    }

    /// The lasting form of the error, for a writer that it has ended.
    pub fn failure(&self) -> Failure {
        match self {
            Self::DiskFull { .. } => Failure::DiskFull(self.to_string()),
            Self::Poisoned(failure) => failure.clone(),
            Self::OutOfOrder { .. } => Failure::OutOfOrder(self.to_string()),
            Self::Io { .. }
            | Self::Locked { .. }
            | Self::Sealed { .. }
            | Self::Exists { .. }
            | Self::NoRecord { .. }
            | Self::Manifest { .. }
            | Self::Version { .. }
            | Self::Damaged(_)
            | Self::MissingSegment { .. }
            | Self::Export(_) => Failure::Io(self.to_string()),
        }
    }
}
