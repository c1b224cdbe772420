//! Taking up a record whose writer has died.
//!
//! After a killed process, a power cut or a full disk the last segment may end in a torn line,
//! or in bytes that never reached the disk. All from the first line that does not hold is set
//! aside under a name of its own, never deleted; then the segment is cut to what holds.
//! Everything that was ever reported durable lies before that point, unless the disk itself has
//! lost it: then later lines still hold, which [`SetAside::whole_lines`] tells.
//!
//! Each step can be cut off by the next power cut and done again: the copy is durable before
//! the cut is made.

use std::io;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use quantity::HostTime;
use sha2::{Digest, Sha256};

use crate::layout::{self, Named};
use crate::segment::{self, Expected, Reader, Stored};
use crate::storage::{Storage, replace};
use crate::writer::{self, OpenSegment, Resumption};
use crate::{Damage, Disk, JournalError, Manifest, Options, Writer};

/// What a recovery found.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Recovery {
    /// The last entry that survived; 0 if none did.
    pub last_number: u64,
    /// Its time, from which the gap counts.
    pub last_at: Option<HostTime>,
    /// What was set aside, and why.
    pub set_aside: Option<SetAside>,
}

/// The torn end of a segment, kept in a file of its own.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct SetAside {
    /// The file, in the journal's folder.
    pub file: String,
    /// How many bytes.
    pub bytes: u64,
    /// Lines among them that are whole. More than none means that the disk lost something
    /// before them: not a torn end but damage, and no sound ground to go on from.
    pub whole_lines: u64,
    /// Where and why the first line does not hold.
    pub why: Damage,
}

impl Writer {
    /// Takes up a record whose writer has died: locks it, sets a torn end aside, and goes on
    /// after the last entry that survived.
    ///
    /// # Errors
    /// [`JournalError::Locked`] if its writer lives; [`JournalError::Sealed`];
    /// [`JournalError::Damaged`] or [`JournalError::MissingSegment`] if a closed segment is not
    /// as it was written; what the disk says.
    pub fn recover(folder: &Path, options: Options) -> Result<(Self, Recovery), JournalError> {
        Self::recover_on(Arc::new(Disk), folder, options)
    }

    /// As [`Writer::recover`], on any storage.
    ///
    /// # Errors
    /// As [`Writer::recover`].
    pub fn recover_on(
        storage: Arc<dyn Storage>,
        folder: &Path,
        options: Options,
    ) -> Result<(Self, Recovery), JournalError> {
        let manifest = Manifest::load(&*storage, folder)?;
        let lock = writer::lock(&*storage, folder)?;
        if exists(&*storage, &folder.join(layout::SEAL))? {
            return Err(JournalError::Sealed {
                path: folder.to_path_buf(),
            });
        }
        let journal = layout::journal(folder);
        clear_unfinished(&*storage, folder)?;
        clear_unfinished(&*storage, &journal)?;
        drop_doubles(&*storage, &journal)?;
        let (from, found) = take_up(&*storage, folder, &manifest.record)?;
        Ok((
            Self::resume(storage, folder, manifest, options, lock, from),
            found,
        ))
    }
}

fn exists(storage: &dyn Storage, path: &Path) -> Result<bool, JournalError> {
    match storage.read(path) {
        Ok(_) => Ok(true),
        Err(error) if error.kind() == io::ErrorKind::NotFound => Ok(false),
        Err(error) => Err(JournalError::io("reading", path, error)),
    }
}

fn names(storage: &dyn Storage, folder: &Path) -> Result<Vec<String>, JournalError> {
    storage
        .names(folder)
        .map_err(|error| JournalError::io("listing", folder, error))
}

fn remove(storage: &dyn Storage, path: &Path) -> Result<(), JournalError> {
    storage
        .remove(path)
        .map_err(|error| JournalError::io("removing", path, error))
}

/// Files that were never put in place hold nothing that is not elsewhere.
fn clear_unfinished(storage: &dyn Storage, folder: &Path) -> Result<(), JournalError> {
    for name in names(storage, folder)? {
        if layout::named(&name) == Named::Unfinished {
            remove(storage, &folder.join(name))?;
        }
    }
    Ok(())
}

/// Where a segment lies both plain and compressed, its writer died between making the copy and
/// removing the original. The original stays.
fn drop_doubles(storage: &dyn Storage, journal: &Path) -> Result<(), JournalError> {
    let names = names(storage, journal)?;
    for name in &names {
        if let Named::Compressed(segment) = layout::named(name)
            && names.contains(&layout::plain_name(segment))
        {
            remove(storage, &journal.join(name))?;
        }
    }
    Ok(())
}

/// What is known after reading a closed segment.
struct Closed {
    next_number: u64,
    last_at: Option<HostTime>,
    hash: String,
}

fn take_up(
    storage: &dyn Storage,
    folder: &Path,
    record: &str,
) -> Result<(Resumption, Recovery), JournalError> {
    let journal = layout::journal(folder);
    let segments = segment::list(storage, &journal)?;
    let mut closed = Closed {
        next_number: 1,
        last_at: None,
        hash: String::new(),
    };
    let mut wanted = 1;
    for (index, &number) in segments.iter().enumerate() {
        if number != wanted {
            return Err(JournalError::MissingSegment {
                path: folder.to_path_buf(),
                segment: wanted,
            });
        }
        let loaded = segment::load(storage, &journal, number)?;
        let is_last = index + 1 == segments.len();
        if is_last && loaded.stored == Stored::Plain {
            let path = journal.join(&loaded.file);
            return last_segment(storage, &journal, path, &loaded, number, record, &closed);
        }
        closed = read_closed(&loaded, number, record, &closed)?;
        wanted += 1;
    }
    let from = Resumption {
        open: None,
        segment: wanted - 1,
        before: (wanted > 1).then_some(closed.hash),
        last: closed.next_number - 1,
    };
    let found = Recovery {
        last_number: from.last,
        last_at: closed.last_at,
        set_aside: None,
    };
    Ok((from, found))
}

fn read_closed(
    loaded: &segment::Loaded,
    number: u32,
    record: &str,
    before: &Closed,
) -> Result<Closed, JournalError> {
    let expected = Expected {
        record: Some(record),
        segment: number,
        first: Some(before.next_number),
    };
    let mut reader =
        Reader::open(&loaded.file, &loaded.plain, &expected).map_err(JournalError::Damaged)?;
    let mut last_at = before.last_at;
    while let Some(entry) = reader.next_entry() {
        last_at = Some(entry.map_err(JournalError::Damaged)?.at);
    }
    if let Some(why) = &loaded.unreadable {
        return Err(JournalError::io(
            "reading",
            Path::new(&loaded.file),
            io::Error::new(io::ErrorKind::InvalidData, why.clone()),
        ));
    }
    Ok(Closed {
        next_number: reader.next_number(),
        last_at,
        hash: crate::checksum::sha256(&loaded.plain),
    })
}

fn last_segment(
    storage: &dyn Storage,
    journal: &Path,
    path: PathBuf,
    loaded: &segment::Loaded,
    number: u32,
    record: &str,
    before: &Closed,
) -> Result<(Resumption, Recovery), JournalError> {
    let expected = Expected {
        record: Some(record),
        segment: number,
        first: Some(before.next_number),
    };
    let before_hash = (number > 1).then(|| before.hash.clone());
    let mut reader = match Reader::open(&loaded.file, &loaded.plain, &expected) {
        Ok(reader) => reader,
        Err(why) => {
            // Not even its first line got to the disk whole: the segment was never begun.
            let set_aside = set_aside(storage, journal, number, &loaded.plain, 0, why)?;
            remove(storage, &path)?;
            sync(storage, journal)?;
            let last = before.next_number - 1;
            let from = Resumption {
                open: None,
                segment: number - 1,
                before: before_hash,
                last,
            };
            return Ok((
                from,
                Recovery {
                    last_number: last,
                    last_at: before.last_at,
                    set_aside,
                },
            ));
        }
    };
    let mut last_at = before.last_at;
    let mut torn = None;
    while let Some(entry) = reader.next_entry() {
        match entry {
            Ok(entry) => last_at = Some(entry.at),
            Err(why) => {
                torn = Some(why);
                break;
            }
        }
    }
    let (base, last) = (reader.header().at, reader.next_number() - 1);
    let length = torn
        .as_ref()
        .map_or(loaded.plain.len() as u64, |why| why.offset);
    let whole_lines = reader.whole_lines_left();
    let set_aside = match torn {
        Some(why) => set_aside(storage, journal, number, &loaded.plain, whole_lines, why)?,
        None => None,
    };
    // Flushed even if nothing was torn: what was read may still be in memory only.
    let mut file = storage
        .open_cut(&path, length)
        .map_err(|error| JournalError::io("opening", &path, error))?;
    file.sync()
        .map_err(|error| JournalError::io("flushing", &path, error))?;
    let kept = usize::try_from(length)
        .ok()
        .and_then(|length| loaded.plain.get(..length));
    let mut hash = Sha256::new();
    hash.update(kept.unwrap_or_default());
    let open = Some(OpenSegment {
        file,
        path,
        base,
        bytes: length,
        hash,
    });
    let from = Resumption {
        open,
        segment: number,
        before: before_hash,
        last,
    };
    Ok((
        from,
        Recovery {
            last_number: last,
            last_at,
            set_aside,
        },
    ))
}

fn sync(storage: &dyn Storage, folder: &Path) -> Result<(), JournalError> {
    storage
        .sync_folder(folder)
        .map_err(|error| JournalError::io("flushing", folder, error))
}

/// Copies the torn end into a file of its own, durable before this returns.
fn set_aside(
    storage: &dyn Storage,
    journal: &Path,
    segment: u32,
    plain: &[u8],
    whole_lines: u64,
    why: Damage,
) -> Result<Option<SetAside>, JournalError> {
    let torn = usize::try_from(why.offset)
        .ok()
        .and_then(|offset| plain.get(offset..));
    let Some(torn) = torn.filter(|torn| !torn.is_empty()) else {
        return Ok(None);
    };
    let mut copy = 1;
    let file = loop {
        let name = format!("{}{segment:06}-{:010}-{copy}.txt", layout::TORN, why.offset);
        let path = journal.join(&name);
        match storage.read(&path) {
            Err(error) if error.kind() == io::ErrorKind::NotFound => {
                replace(storage, &path, torn)
                    .map_err(|error| JournalError::io("writing", &path, error))?;
                break name;
            }
            Err(error) => return Err(JournalError::io("reading", &path, error)),
            // A recovery before this one was cut off after making the copy.
            Ok(kept) if kept == torn => {
                sync(storage, journal)?;
                break name;
            }
            Ok(_) => copy += 1,
        }
    };
    Ok(Some(SetAside {
        file,
        bytes: torn.len() as u64,
        whole_lines,
        why,
    }))
}
