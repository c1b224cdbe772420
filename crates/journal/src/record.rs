//! A record opened for reading only.
//!
//! Works on a record that is being written, that was cut off, that is sealed. Segments are read
//! one at a time, so memory stays small however long the run was. In the last segment of an
//! unsealed record an end that does not hold is what a crash or a writer at work leaves; it is
//! no error, and [`Entries::tail`] tells it. Anywhere else it is one.

use std::path::{Path, PathBuf};

use crate::packed::Extract;
use crate::segment::{self, Expected, Reader};
use crate::{
    Damage, Disk, Entry, JournalError, LineFault, Manifest, Seal, Storage as _, checked, layout,
};

/// A record opened for reading.
#[derive(Debug, Clone)]
pub struct Record {
    folder: PathBuf,
    manifest: Manifest,
    segments: Vec<u32>,
    sealed: bool,
}

impl Record {
    /// Opens a record's folder. Nothing in it is changed.
    ///
    /// # Errors
    /// [`JournalError::NoRecord`], [`JournalError::Manifest`], [`JournalError::Version`],
    /// [`JournalError::MissingSegment`] and what the disk says. A whole record is not read
    /// here: [`crate::verify`] does that.
    pub fn open(folder: &Path) -> Result<Self, JournalError> {
        let manifest = Manifest::load(&Disk, folder)?;
        let segments = segment::list(&Disk, &layout::journal(folder))?;
        for (wanted, &found) in (1..).zip(&segments) {
            if found != wanted {
                return Err(JournalError::MissingSegment {
                    path: folder.to_path_buf(),
                    segment: wanted,
                });
            }
        }
        let sealed = folder.join(layout::SEAL).exists();
        Ok(Self {
            folder: folder.to_path_buf(),
            manifest,
            segments,
            sealed,
        })
    }

    /// The record's folder.
    pub fn folder(&self) -> &Path {
        &self.folder
    }

    /// The manifest.
    pub fn manifest(&self) -> &Manifest {
        &self.manifest
    }

    /// Whether it is sealed; whether the seal holds is for [`crate::verify`] to say.
    pub fn is_sealed(&self) -> bool {
        self.sealed
    }

    /// The seal, once its own checksum held; `None` in an unsealed record. Whether what it
    /// seals is still as it was is for [`crate::verify`] to say.
    ///
    /// # Errors
    /// [`JournalError::Manifest`] if the seal's file is damaged, and what the disk says.
    pub fn seal(&self) -> Result<Option<Seal>, JournalError> {
        if !self.sealed {
            return Ok(None);
        }
        let path = self.folder.join(layout::SEAL);
        let bytes = Disk
            .read(&path)
            .map_err(|error| JournalError::io("reading", &path, error))?;
        match checked::from_bytes(&bytes) {
            Ok(seal) => Ok(Some(seal)),
            Err(detail) => Err(JournalError::Manifest { path, detail }),
        }
    }

    /// How many segments nothing will be added to any more.
    pub fn segments_complete(&self) -> usize {
        let open = usize::from(!self.sealed);
        self.segments.len().saturating_sub(open)
    }

    /// The segments' numbers.
    pub(crate) fn segments(&self) -> &[u32] {
        &self.segments
    }

    /// All entries in order.
    pub fn entries(&self) -> Entries {
        Entries {
            journal: layout::journal(&self.folder),
            record: self.manifest.record.clone(),
            segments: self.segments.clone(),
            open_ended: !self.sealed,
            next_segment: 0,
            next_number: Some(1),
            waiting: Vec::new().into_iter(),
            ended: false,
            tail: None,
        }
    }
}

/// Entries in order, read segment by segment. After an error there is nothing more.
#[derive(Debug)]
pub struct Entries {
    journal: PathBuf,
    record: String,
    segments: Vec<u32>,
    open_ended: bool,
    next_segment: usize,
    next_number: Option<u64>,
    waiting: std::vec::IntoIter<Entry>,
    ended: bool,
    tail: Option<Damage>,
}

impl Entries {
    /// Where and why the last segment could not be read to its end, once all was read: a torn
    /// line after a crash, or a writer at work.
    pub fn tail(&self) -> Option<&Damage> {
        self.tail.as_ref()
    }

    fn load(&mut self, segment: u32) -> Result<Vec<Entry>, JournalError> {
        let is_last = self.next_segment == self.segments.len();
        let segment = ReadSegment::load(&self.journal, segment)?;
        let expected = segment.expected(&self.record, self.next_number);
        let open_ended = self.open_ended && is_last;
        let mut entries = Vec::new();
        let read = segment.read(&expected, open_ended, |entry| entries.push(entry))?;
        self.next_number = Some(read.next_number);
        self.tail = read.tail;
        Ok(entries)
    }
}

impl Iterator for Entries {
    type Item = Result<Entry, JournalError>;

    fn next(&mut self) -> Option<Self::Item> {
        loop {
            if let Some(entry) = self.waiting.next() {
                return Some(Ok(entry));
            }
            if self.ended {
                return None;
            }
            let segment = *self.segments.get(self.next_segment)?;
            self.next_segment += 1;
            match self.load(segment) {
                Ok(entries) => self.waiting = entries.into_iter(),
                Err(error) => {
                    self.ended = true;
                    return Some(Err(error));
                }
            }
        }
    }
}

/// A segment read from disk for a reader.
pub(crate) struct ReadSegment {
    number: u32,
    loaded: segment::Loaded,
}

/// What is known after a segment was read.
pub(crate) struct ReadEnd {
    pub(crate) next_number: u64,
    pub(crate) tail: Option<Damage>,
}

impl ReadSegment {
    pub(crate) fn load(journal: &Path, number: u32) -> Result<Self, JournalError> {
        let loaded = segment::load(&Disk, journal, number)?;
        if let Some(why) = &loaded.unreadable {
            let unreadable = std::io::Error::new(std::io::ErrorKind::InvalidData, why.clone());
            return Err(JournalError::io(
                "reading",
                &journal.join(&loaded.file),
                unreadable,
            ));
        }
        Ok(Self { number, loaded })
    }

    pub(crate) fn expected<'a>(&self, record: &'a str, first: Option<u64>) -> Expected<'a> {
        Expected {
            record: Some(record),
            segment: self.number,
            first,
        }
    }

    /// Hands on the entries up to the first line that does not hold. In an open end that is the
    /// end, provided no whole line comes after it; else it is an error.
    pub(crate) fn read(
        &self,
        expected: &Expected<'_>,
        open_ended: bool,
        mut take: impl FnMut(Entry),
    ) -> Result<ReadEnd, JournalError> {
        let (file, plain) = (self.loaded.file.as_str(), &self.loaded.plain);
        let mut reader = match Reader::open(file, plain, expected) {
            Ok(reader) => reader,
            Err(why) if open_ended && why.is_cut_off() => {
                let next_number = expected.first.unwrap_or(1);
                return Ok(ReadEnd {
                    next_number,
                    tail: Some(why),
                });
            }
            Err(why) => return Err(JournalError::Damaged(why)),
        };
        loop {
            match reader.next_entry() {
                None => {
                    return Ok(ReadEnd {
                        next_number: reader.next_number(),
                        tail: None,
                    });
                }
                Some(Ok(entry)) => take(entry),
                Some(Err(why)) if open_ended && reader.whole_lines_left() == 0 => {
                    return Ok(ReadEnd {
                        next_number: reader.next_number(),
                        tail: Some(why),
                    });
                }
                Some(Err(why)) => return Err(JournalError::Damaged(why)),
            }
        }
    }

    /// The text's first line, with its line end.
    pub(crate) fn first_line(&self) -> &[u8] {
        let mut lines = self.loaded.plain.split_inclusive(|byte| *byte == b'\n');
        lines.next().unwrap_or_default()
    }

    /// Holds the extract against the lines of the text that belong into it.
    pub(crate) fn check_extract(&self, lines: &[u8]) -> Result<(), JournalError> {
        let holds = self.loaded.compressed.as_deref();
        if holds.is_none_or(|packed| Extract::of(packed).agrees_with(lines)) {
            return Ok(());
        }
        Err(JournalError::Damaged(Damage {
            file: self.loaded.file.clone(),
            line: 1,
            offset: 0,
            fault: LineFault::Extract,
        }))
    }

    pub(crate) fn plain_len(&self) -> usize {
        self.loaded.plain.len()
    }

    pub(crate) fn reader<'a>(&'a self, expected: &Expected<'_>) -> Result<Reader<'a>, Damage> {
        Reader::open(&self.loaded.file, &self.loaded.plain, expected)
    }
}
