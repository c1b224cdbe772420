//! The record on disk: durable append, recovery, seal, verify, reading back, export.
//!
//! A record is one folder that holds all a run left behind: `manifest.json`, the journal in
//! segments under `journal/`, later the seal and what others derive from it (figures, report).
//! The journal is the truth; `docs/records.md` describes every line of it for users.
//!
//! Invariants:
//! - Entries are numbered 1, 2, 3, ... without a gap, in the order in which they were appended.
//!   What is on disk is always a prefix of what was appended.
//! - What [`Writer::commit`] has returned as durable survives a killed process, a power cut and
//!   a full disk. After any error of the disk the writer takes nothing more: a failed flush
//!   leaves unknown what reached the disk, and trying again would only hide it.
//! - Every line carries a checksum, every segment the hash of the one before it. Nothing that
//!   was read from disk is believed before its checksum held.
//! - A torn end is set aside under a name of its own, never deleted.
//! - One writer a record, held by a lock of the operating system.
//!
//! What this crate deliberately does not do: it decides nothing about a run, computes no figure,
//! reads no calendar clock (times come in; only [`WriterThread`] measures how long an entry has
//! waited), and knows neither transport nor daemon.

mod account;
mod checked;
mod checksum;
mod chunk;
mod columns;
mod compact;
mod entry;
mod error;
mod export;
mod grain;
mod layout;
mod line;
mod manifest;
mod near;
mod packed;
mod record;
mod recovery;
mod seal;
mod segment;
mod storage;
mod thin;
mod thread;
mod verify;
mod writer;

pub use chunk::{Chunk, Chunks, Readings};
pub use columns::{COLUMNS, Cell, Column, Kind, Row};
pub use entry::{Body, ClockAlignment, Entry, Note, Side};
pub use error::{Damage, Failure, JournalError};
pub use export::{Progress, export_csv, for_each_row};
pub use grain::{GRAIN, Grain, Grains, gather};
pub use line::LineFault;
pub use manifest::{ClockKind, Ended, Manifest, SequenceText};
pub use near::Near;
pub use record::{Entries, Record};
pub use recovery::{Recovery, SetAside};
pub use seal::{Seal, SealedFile, SealedSegment, seal};
pub use storage::{Disk, Storage, StoredFile};
pub use thin::{Bucket, Extremes, thin};
pub use thread::{JournalNews, NotTaken, Timing, WriterThread};
pub use verify::{Finding, FindingKind, Place, VerifyReport, verify};
pub use writer::{Options, Writer};

/// The version of the record's format this crate writes and reads.
pub const FORMAT: u32 = 1;

#[cfg(test)]
mod tests;
