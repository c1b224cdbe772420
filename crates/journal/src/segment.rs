//! A segment: one file of the journal, its first line about itself, the others entries.
//!
//! A journal is cut into segments so that a long record can be compressed while it grows, read
//! on several cores, and damage kept to one file. Each segment's first line names the record,
//! its own number, the number of its first entry, the time its readbacks count from, and the
//! hash of the whole segment before it, so that the segments are chained from the start.
//! This module reads and writes bytes of one segment; it moves no files about but for
//! [`compress`].

use std::fs::File;
use std::io::{self, BufRead, BufReader, Read};
use std::path::Path;

use quantity::HostTime;
use serde::{Deserialize, Serialize};

use crate::layout::{self, Named};
use crate::packed::{self, Extract};
use crate::storage::{Storage, replace};
use crate::{Damage, Entry, FORMAT, JournalError, LineFault, compact, line};

/// No first line is longer.
const HEADER_BYTES_MAX: u64 = 1 << 16;

/// A segment's first line.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub(crate) struct Header {
    /// The format's version.
    pub(crate) journal: u32,
    /// The record it belongs to.
    pub(crate) record: String,
    /// Its number: 1, 2, 3, ...
    pub(crate) segment: u32,
    /// The number of its first entry.
    pub(crate) first: u64,
    /// What the readbacks' times count from.
    pub(crate) at: HostTime,
    /// SHA-256 of the plain bytes of the segment before it.
    pub(crate) before: Option<String>,
    /// The readbacks' columns.
    pub(crate) columns: Vec<String>,
    /// What the numbers in their state column mean.
    pub(crate) states: Vec<String>,
    #[serde(skip_serializing, default, rename = "crc")]
    _crc: String,
}

impl Header {
    pub(crate) fn new(
        record: &str,
        segment: u32,
        first: u64,
        at: HostTime,
        before: Option<String>,
    ) -> Self {
        Self {
            journal: FORMAT,
            record: record.to_owned(),
            segment,
            first,
            at,
            before,
            columns: compact::COLUMN_NAMES.map(String::from).to_vec(),
            states: compact::STATES.map(|(_, name)| name.to_owned()).to_vec(),
            _crc: String::new(),
        }
    }

    pub(crate) fn encode(&self, buffer: &mut Vec<u8>) {
        line::encode_object(buffer, self);
    }

    fn decode(line: &[u8]) -> Result<Self, LineFault> {
        let header: Self = line::decode_object(line)?;
        if header.journal != FORMAT {
            return Err(LineFault::Form(format!(
                "it has format {}, this version reads format {FORMAT}: use a newer version",
                header.journal
            )));
        }
        if header.columns != compact::COLUMN_NAMES
            || !header
                .states
                .iter()
                .map(String::as_str)
                .eq(compact::STATES.map(|(_, name)| name))
        {
            return Err(LineFault::Form(
                "its columns or states are not those of this format".into(),
            ));
        }
        Ok(header)
    }
}

/// What a segment must be, from those before it. `None` where nothing is known.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Expected<'a> {
    pub(crate) record: Option<&'a str>,
    pub(crate) segment: u32,
    pub(crate) first: Option<u64>,
}

/// Reads a segment's entries one after the other, believing nothing unchecked.
#[derive(Debug)]
pub(crate) struct Reader<'a> {
    file: &'a str,
    lines: Lines<'a>,
    header: Header,
    next_number: u64,
}

impl<'a> Reader<'a> {
    /// Reads and checks the first line.
    pub(crate) fn open(
        file: &'a str,
        bytes: &'a [u8],
        expected: &Expected<'_>,
    ) -> Result<Self, Damage> {
        let mut lines = Lines::new(bytes);
        let first = lines.next().unwrap_or(Line {
            bytes: b"",
            whole: false,
            number: 1,
            offset: 0,
        });
        let header = if first.whole {
            Header::decode(first.bytes)
        } else {
            Err(LineFault::Unfinished)
        }
        .and_then(|header| check_header(header, expected))
        .map_err(|fault| first.damage(file, fault))?;
        let next_number = header.first;
        Ok(Self {
            file,
            lines,
            header,
            next_number,
        })
    }

    pub(crate) fn header(&self) -> &Header {
        &self.header
    }

    /// The number the next entry must have.
    pub(crate) fn next_number(&self) -> u64 {
        self.next_number
    }

    /// The next line whose checksum holds, its content not yet looked into.
    #[inline]
    pub(crate) fn next_line(&mut self) -> Option<Line<'a>> {
        self.lines.next()
    }

    /// The next entry, or why it is not believed. After damage the reader may be asked on; it
    /// then says whether later lines stand, but their numbers no longer fit.
    pub(crate) fn next_entry(&mut self) -> Option<Result<Entry, Damage>> {
        let line = self.lines.next()?;
        Some(
            self.entry(&line)
                .map_err(|fault| line.damage(self.file, fault)),
        )
    }

    /// As [`Reader::next_entry`], for an extract: readbacks are missing between the lines.
    pub(crate) fn next_extracted(&mut self) -> Option<Result<Entry, Damage>> {
        let line = self.lines.next()?;
        let entry = line::decode(line.bytes, self.header.at).and_then(|entry| {
            self.next_number = self.next_number.max(entry.number);
            self.count(entry.number)?;
            Ok(entry)
        });
        Some(entry.map_err(|fault| line.damage(self.file, fault)))
    }

    fn entry(&mut self, line: &Line<'_>) -> Result<Entry, LineFault> {
        if !line.whole {
            return Err(LineFault::Unfinished);
        }
        let entry = line::decode(line.bytes, self.header.at)?;
        self.count(entry.number)?;
        Ok(entry)
    }

    /// Checks that a number is the one that must come, and counts it.
    #[inline]
    pub(crate) fn count(&mut self, found: u64) -> Result<(), LineFault> {
        if found == self.next_number {
            self.next_number += 1;
            Ok(())
        } else {
            Err(LineFault::Number {
                expected: self.next_number,
                found,
            })
        }
    }

    /// Takes a number for read, whatever had to come: for a check that reads past damage.
    pub(crate) fn go_on_after(&mut self, number: u64) {
        self.next_number = number.saturating_add(1);
    }

    /// The line that comes next and its first byte's place.
    pub(crate) fn place(&self) -> (u64, u64) {
        (self.lines.number + 1, self.lines.offset)
    }

    pub(crate) fn file(&self) -> &'a str {
        self.file
    }

    /// How many of the lines left are whole, with a checksum that holds.
    pub(crate) fn whole_lines_left(&mut self) -> u64 {
        let mut whole = 0;
        for line in self.lines.by_ref() {
            if line.whole && line::check(line.bytes).is_ok() {
                whole += 1;
            }
        }
        whole
    }
}

fn check_header(header: Header, expected: &Expected<'_>) -> Result<Header, LineFault> {
    if let Some(record) = expected.record
        && header.record != record
    {
        return Err(LineFault::Form(format!(
            "it belongs to record {}, not to {record}",
            header.record
        )));
    }
    if header.segment != expected.segment {
        return Err(LineFault::Form(format!(
            "it says it is segment {}, its name says {}",
            header.segment, expected.segment
        )));
    }
    if let Some(first) = expected.first
        && header.first != first
    {
        return Err(LineFault::Number {
            expected: first,
            found: header.first,
        });
    }
    Ok(header)
}

/// A line of a segment, not yet checked.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Line<'a> {
    /// Its bytes without the line end.
    pub(crate) bytes: &'a [u8],
    /// Whether it had a line end.
    pub(crate) whole: bool,
    /// Its number in the file, from 1.
    pub(crate) number: u64,
    /// Its first byte's place in the file, from 0.
    pub(crate) offset: u64,
}

impl Line<'_> {
    pub(crate) fn damage(&self, file: &str, fault: LineFault) -> Damage {
        Damage {
            file: file.to_owned(),
            line: self.number,
            offset: self.offset,
            fault,
        }
    }
}

/// Cuts bytes into lines.
#[derive(Debug)]
struct Lines<'a> {
    rest: &'a [u8],
    number: u64,
    offset: u64,
}

impl<'a> Lines<'a> {
    fn new(bytes: &'a [u8]) -> Self {
        Self {
            rest: bytes,
            number: 0,
            offset: 0,
        }
    }
}

impl<'a> Iterator for Lines<'a> {
    type Item = Line<'a>;

    #[inline]
    fn next(&mut self) -> Option<Line<'a>> {
        if self.rest.is_empty() {
            return None;
        }
        let end = memchr::memchr(b'\n', self.rest);
        let (bytes, after) = match end {
            Some(end) => {
                let (line, rest) = self.rest.split_at_checked(end)?;
                (line, rest.get(1..)?)
            }
            None => (self.rest, &[][..]),
        };
        let offset = self.offset;
        self.offset += (self.rest.len() - after.len()) as u64;
        self.number += 1;
        self.rest = after;
        Some(Line {
            bytes,
            whole: end.is_some(),
            number: self.number,
            offset,
        })
    }
}

/// How a segment lies on disk.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Stored {
    Plain,
    Compressed,
}

impl Stored {
    pub(crate) fn name(self, segment: u32) -> String {
        match self {
            Self::Plain => layout::plain_name(segment),
            Self::Compressed => layout::compressed_name(segment),
        }
    }
}

/// A segment's plain bytes and what they were read from.
#[derive(Debug)]
pub(crate) struct Loaded {
    pub(crate) file: String,
    pub(crate) stored: Stored,
    pub(crate) plain: Vec<u8>,
    /// The file's bytes, if they are not the plain ones.
    pub(crate) compressed: Option<Vec<u8>>,
    /// Why the compressed file could not be read to its end; `plain` is what came before.
    pub(crate) unreadable: Option<String>,
}

/// The numbers of the segments in a journal's folder, in order, each once.
pub(crate) fn list(storage: &dyn Storage, journal: &Path) -> Result<Vec<u32>, JournalError> {
    let names = storage
        .names(journal)
        .map_err(|error| JournalError::io("listing", journal, error))?;
    let mut segments: Vec<u32> = names
        .iter()
        .filter_map(|name| match layout::named(name) {
            Named::Plain(segment) | Named::Compressed(segment) => Some(segment),
            Named::Torn | Named::Unfinished | Named::Lock | Named::Foreign => None,
        })
        .collect();
    segments.sort_unstable();
    segments.dedup();
    Ok(segments)
}

/// Reads a segment, the plain file before the compressed one: while both are there, the plain
/// one is the original.
pub(crate) fn load(
    storage: &dyn Storage,
    journal: &Path,
    segment: u32,
) -> Result<Loaded, JournalError> {
    let mut missing = None;
    for stored in [Stored::Plain, Stored::Compressed] {
        let file = stored.name(segment);
        let path = journal.join(&file);
        match storage.read(&path) {
            Ok(plain) if stored == Stored::Plain => {
                return Ok(Loaded {
                    file,
                    stored,
                    plain,
                    compressed: None,
                    unreadable: None,
                });
            }
            Ok(compressed) => {
                let (plain, unreadable) = packed::unpack(&compressed);
                return Ok(Loaded {
                    file,
                    stored,
                    plain,
                    compressed: Some(compressed),
                    unreadable,
                });
            }
            Err(error) if error.kind() == io::ErrorKind::NotFound => missing = Some((path, error)),
            Err(error) => return Err(JournalError::io("reading", &path, error)),
        }
    }
    let (path, error) = missing.unwrap_or((journal.to_path_buf(), io::ErrorKind::NotFound.into()));
    Err(JournalError::io("reading", &path, error))
}

/// A compressed segment's file and the lines in it that are no readbacks, without reading the
/// others; `None` where there is no extract that holds, and the whole text has to be read.
pub(crate) fn load_extract(
    journal: &Path,
    segment: u32,
) -> Result<Option<(String, Vec<u8>)>, JournalError> {
    // While both files are there, the plain one is the original.
    if journal.join(Stored::Plain.name(segment)).exists() {
        return Ok(None);
    }
    let file = Stored::Compressed.name(segment);
    let path = journal.join(&file);
    match Extract::load(&path) {
        Ok(Extract::Lines(lines)) => Ok(Some((file, lines))),
        Ok(Extract::Absent | Extract::Damaged) => Ok(None),
        Err(error) if error.kind() == io::ErrorKind::NotFound => Ok(None),
        Err(error) => Err(JournalError::io("reading", &path, error)),
    }
}

/// Reads only a segment's first line; `None` if it does not hold.
pub(crate) fn peek(journal: &Path, segment: u32) -> Result<Option<Header>, JournalError> {
    for stored in [Stored::Plain, Stored::Compressed] {
        let path = journal.join(stored.name(segment));
        let file = match File::open(&path) {
            Ok(file) => file,
            Err(error) if error.kind() == io::ErrorKind::NotFound => continue,
            Err(error) => return Err(JournalError::io("reading", &path, error)),
        };
        let mut first = Vec::new();
        let read = match stored {
            Stored::Plain => BufReader::new(file)
                .take(HEADER_BYTES_MAX)
                .read_until(b'\n', &mut first),
            Stored::Compressed => zstd::stream::read::Decoder::new(file).and_then(|plain| {
                BufReader::new(plain)
                    .take(HEADER_BYTES_MAX)
                    .read_until(b'\n', &mut first)
            }),
        };
        let line = read.ok().and_then(|_| first.strip_suffix(b"\n"));
        return Ok(line.and_then(|line| Header::decode(line).ok()));
    }
    Ok(None)
}

/// Compresses a closed segment: the compressed file is made durable and read back to the same
/// bytes before the plain one goes.
pub(crate) fn compress(
    storage: &dyn Storage,
    journal: &Path,
    segment: u32,
) -> Result<(), JournalError> {
    let plain_path = journal.join(layout::plain_name(segment));
    let compressed_path = journal.join(layout::compressed_name(segment));
    let plain = storage
        .read(&plain_path)
        .map_err(|error| JournalError::io("reading", &plain_path, error))?;
    let failed = |error| JournalError::io("compressing", &compressed_path, error);
    let compressed = packed::pack(&plain).map_err(failed)?;
    replace(storage, &compressed_path, &compressed).map_err(failed)?;
    let back = storage.read(&compressed_path).map_err(failed)?;
    if !Extract::of(&back).agrees_with(&packed::extract_of(&plain))
        || packed::unpack(&back) != (plain, None)
    {
        return Err(failed(io::Error::new(
            io::ErrorKind::InvalidData,
            "what was written does not read back as the same bytes",
        )));
    }
    storage
        .remove(&plain_path)
        .map_err(|error| JournalError::io("removing", &plain_path, error))?;
    storage
        .sync_folder(journal)
        .map_err(|error| JournalError::io("flushing", journal, error))
}
