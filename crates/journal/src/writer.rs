//! The writer of a record: the only thing that ever adds to one.
//!
//! Invariants:
//! - Entries reach the disk in the order of their numbers; an entry with another number than
//!   the next is refused and ends the writing.
//! - [`Writer::durable`] only grows, and only after the disk has said so.
//! - After any error of the disk nothing more is taken. A failed flush leaves unknown what
//!   reached the disk; what had been durable before stays so.
//! - A segment is compressed only after the next one has begun.

use std::io;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use quantity::HostTime;
use sha2::{Digest, Sha256};

use crate::checksum::hex;
use crate::segment::{self, Header};
use crate::storage::{Lock, Storage, StoredFile, write_all};
use crate::{Disk, Ended, Entry, Failure, JournalError, Manifest, Seal, layout, line};

/// How a record is written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Options {
    /// Plain bytes after which a segment is closed and the next begun.
    pub segment_bytes: u64,
}

impl Default for Options {
    /// 16 MiB: some 130 000 readbacks, which one core reads back in a fraction of a second.
    fn default() -> Self {
        Self {
            segment_bytes: 16 << 20,
        }
    }
}

/// Writes a record, and holds its lock while it lives.
#[derive(Debug)]
pub struct Writer {
    storage: Arc<dyn Storage>,
    folder: PathBuf,
    options: Options,
    manifest: Manifest,
    open: Option<OpenSegment>,
    /// The number of the last segment begun; 0 before the first.
    segment: u32,
    /// The hash of the last segment closed.
    before: Option<String>,
    /// Lines not yet handed to the operating system; they belong to `open`.
    buffer: Vec<u8>,
    last: u64,
    durable: u64,
    failure: Option<Failure>,
    _lock: Box<dyn Lock>,
}

/// The segment that is being written.
#[derive(Debug)]
pub(crate) struct OpenSegment {
    pub(crate) file: Box<dyn StoredFile>,
    pub(crate) path: PathBuf,
    pub(crate) base: HostTime,
    /// Bytes handed to the operating system.
    pub(crate) bytes: u64,
    pub(crate) hash: Sha256,
}

/// Where a writer goes on after a recovery.
#[derive(Debug)]
pub(crate) struct Resumption {
    pub(crate) open: Option<OpenSegment>,
    pub(crate) segment: u32,
    pub(crate) before: Option<String>,
    pub(crate) last: u64,
}

impl Writer {
    /// Creates a record's folder, which must not exist; its parent must.
    ///
    /// # Errors
    /// [`JournalError::Exists`], [`JournalError::DiskFull`] and what else the disk says.
    pub fn create(
        folder: &Path,
        manifest: Manifest,
        options: Options,
    ) -> Result<Self, JournalError> {
        Self::create_on(Arc::new(Disk), folder, manifest, options)
    }

    /// As [`Writer::create`], on any storage.
    ///
    /// # Errors
    /// As [`Writer::create`].
    pub fn create_on(
        storage: Arc<dyn Storage>,
        folder: &Path,
        manifest: Manifest,
        options: Options,
    ) -> Result<Self, JournalError> {
        let journal = layout::journal(folder);
        storage.create_folder(folder).map_err(|error| {
            if error.kind() == io::ErrorKind::AlreadyExists {
                JournalError::Exists {
                    path: folder.to_path_buf(),
                }
            } else {
                JournalError::io("creating", folder, error)
            }
        })?;
        storage
            .create_folder(&journal)
            .map_err(|error| JournalError::io("creating", &journal, error))?;
        let lock = lock(&*storage, folder)?;
        manifest.store(&*storage, folder)?;
        if let Some(parent) = folder.parent() {
            storage
                .sync_folder(parent)
                .map_err(|error| JournalError::io("flushing", parent, error))?;
        }
        let start = Resumption {
            open: None,
            segment: 0,
            before: None,
            last: 0,
        };
        Ok(Self::resume(
            storage, folder, manifest, options, lock, start,
        ))
    }

    pub(crate) fn resume(
        storage: Arc<dyn Storage>,
        folder: &Path,
        manifest: Manifest,
        options: Options,
        lock: Box<dyn Lock>,
        from: Resumption,
    ) -> Self {
        Self {
            storage,
            folder: folder.to_path_buf(),
            options,
            manifest,
            open: from.open,
            segment: from.segment,
            before: from.before,
            buffer: Vec::new(),
            last: from.last,
            durable: from.last,
            failure: None,
            _lock: lock,
        }
    }

    /// The record's folder.
    pub fn folder(&self) -> &Path {
        &self.folder
    }

    /// The manifest as it is on disk.
    pub fn manifest(&self) -> &Manifest {
        &self.manifest
    }

    /// The number the next entry must have.
    pub fn next_number(&self) -> u64 {
        self.last + 1
    }

    /// The highest number that is on stable storage; 0 if none is.
    pub fn durable(&self) -> u64 {
        self.durable
    }

    /// Why nothing more is taken, if so.
    pub fn failure(&self) -> Option<&Failure> {
        self.failure.as_ref()
    }

    /// Takes an entry, without waiting for the disk unless a segment is full.
    ///
    /// # Errors
    /// [`JournalError::OutOfOrder`] for any number but the next,
    /// [`JournalError::Poisoned`] after an earlier error, and what the disk says when a segment
    /// has to be closed. Any error ends the writing.
    pub fn append(&mut self, entry: &Entry) -> Result<(), JournalError> {
        self.guarded(|writer| {
            let expected = writer.next_number();
            if entry.number != expected {
                return Err(JournalError::OutOfOrder {
                    expected,
                    given: entry.number,
                });
            }
            let base = writer.segment_for(entry)?;
            line::encode(&mut writer.buffer, base, entry);
            writer.last = entry.number;
            Ok(())
        })
    }

    /// Makes all that was appended durable; returns the highest durable number.
    ///
    /// # Errors
    /// [`JournalError::DiskFull`], [`JournalError::Io`], or [`JournalError::Poisoned`] after an
    /// earlier error. Any error ends the writing.
    pub fn commit(&mut self) -> Result<u64, JournalError> {
        self.guarded(Self::flush)?;
        Ok(self.durable)
    }

    /// Replaces the manifest, for what is learned while the run goes on.
    ///
    /// # Errors
    /// What the disk says. The journal's writing goes on: the old manifest still stands.
    pub fn update_manifest(
        &mut self,
        change: impl FnOnce(&mut Manifest),
    ) -> Result<(), JournalError> {
        let mut changed = self.manifest.clone();
        change(&mut changed);
        changed.store(&*self.storage, &self.folder)?;
        self.manifest = changed;
        Ok(())
    }

    /// Bytes free for the record; `None` where the platform cannot say.
    ///
    /// # Errors
    /// What the disk says.
    pub fn free_bytes(&self) -> Result<Option<u64>, JournalError> {
        self.storage
            .free_bytes(&self.folder)
            .map_err(|error| JournalError::io("measuring the free space of", &self.folder, error))
    }

    /// The segment that is being written; all before it are closed and can be compressed by
    /// [`compress_closed`]. 0 before the first.
    pub fn segment(&self) -> u32 {
        self.segment
    }

    /// The storage it writes to.
    pub(crate) fn storage(&self) -> &Arc<dyn Storage> {
        &self.storage
    }

    /// Ends the record: all durable, the ending in the manifest, every segment compressed, the
    /// seal over everything.
    ///
    /// # Errors
    /// What the disk says; [`JournalError::Damaged`] if what is on disk is not what was
    /// written. The record then stays unsealed and can be sealed later by [`crate::seal`].
    pub fn seal(mut self, ended: Ended) -> Result<Seal, JournalError> {
        self.commit()?;
        self.update_manifest(|manifest| manifest.ended = Some(ended))?;
        self.open = None;
        let end = self.segment.saturating_add(1);
        compress_closed(&*self.storage, &self.folder, end)?;
        crate::seal::seal_on(&*self.storage, &self.folder)
    }

    fn guarded<T>(
        &mut self,
        act: impl FnOnce(&mut Self) -> Result<T, JournalError>,
    ) -> Result<T, JournalError> {
        if let Some(failure) = &self.failure {
            return Err(JournalError::Poisoned(failure.clone()));
        }
        act(self).inspect_err(|error| {
            self.failure = Some(error.failure());
        })
    }

    /// Sees to it that there is a segment with room for the entry; returns its time.
    fn segment_for(&mut self, entry: &Entry) -> Result<HostTime, JournalError> {
        if let Some(open) = &self.open {
            if open.bytes + (self.buffer.len() as u64) < self.options.segment_bytes {
                return Ok(open.base);
            }
            self.flush()?;
        }
        if let Some(full) = self.open.take() {
            self.before = Some(hex(&full.hash.finalize()));
        }
        let segment = self.segment + 1;
        let journal = layout::journal(&self.folder);
        let path = journal.join(layout::plain_name(segment));
        let file = self
            .storage
            .create(&path)
            .map_err(|error| JournalError::io("creating", &path, error))?;
        self.storage
            .sync_folder(&journal)
            .map_err(|error| JournalError::io("flushing", &journal, error))?;
        let before = self.before.clone();
        Header::new(
            &self.manifest.record,
            segment,
            entry.number,
            entry.at,
            before,
        )
        .encode(&mut self.buffer);
        self.segment = segment;
        self.open = Some(OpenSegment {
            file,
            path,
            base: entry.at,
            bytes: 0,
            hash: Sha256::new(),
        });
        Ok(entry.at)
    }

    fn flush(&mut self) -> Result<(), JournalError> {
        let Some(open) = &mut self.open else {
            return Ok(());
        };
        if self.buffer.is_empty() {
            return Ok(());
        }
        write_all(&mut *open.file, &self.buffer)
            .map_err(|error| JournalError::io("writing", &open.path, error))?;
        open.hash.update(&self.buffer);
        open.bytes += self.buffer.len() as u64;
        self.buffer.clear();
        open.file
            .sync()
            .map_err(|error| JournalError::io("flushing", &open.path, error))?;
        self.durable = self.last;
        Ok(())
    }
}

/// Takes the record's lock.
pub(crate) fn lock(storage: &dyn Storage, folder: &Path) -> Result<Box<dyn Lock>, JournalError> {
    let path = layout::journal(folder).join(layout::LOCK);
    storage
        .lock(&path)
        .map_err(|error| JournalError::io("locking", &path, error))?
        .ok_or_else(|| JournalError::Locked {
            path: folder.to_path_buf(),
        })
}

/// Compresses every plain segment before the one with the given number.
pub(crate) fn compress_closed(
    storage: &dyn Storage,
    folder: &Path,
    open: u32,
) -> Result<(), JournalError> {
    let journal = layout::journal(folder);
    let names = storage
        .names(&journal)
        .map_err(|error| JournalError::io("listing", &journal, error))?;
    for name in names {
        if let layout::Named::Plain(segment) = layout::named(&name)
            && segment < open
        {
            segment::compress(storage, &journal, segment)?;
        }
    }
    Ok(())
}
