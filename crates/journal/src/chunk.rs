//! Reading back fast: readbacks in columns, a segment at a time, on several cores.
//!
//! Each segment is read, decompressed and decoded by one of a few threads; the chunks come out
//! in order. A thread works at most two segments ahead, so memory stays bounded whatever the
//! length of the record. Every line's checksum and number is checked on the way.

use std::ops::Range;
use std::sync::mpsc::{self, Receiver, SyncSender};
use std::thread;

use quantity::{Current, HostTime, SinkTime, Voltage};
use sequencer::event::Happening;
use wire::{Counters, Readback, Reading, SinkState, TemperatureReading};

use crate::record::ReadSegment;
use crate::segment::{self, Expected, Reader};
use crate::{Body, Damage, Entry, JournalError, LineFault, Record, compact, layout, line, packed};

/// Segments a thread may have ready before they are taken.
const AHEAD: usize = 1;

/// Readbacks in columns; the same index in each belongs to the same readback. All nominal.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Readings {
    /// The entries' numbers.
    pub number: Vec<u64>,
    /// Host time at which each arrived.
    pub at: Vec<HostTime>,
    /// The pairs' numbers on the wire.
    pub readback: Vec<u16>,
    /// Sink time.
    pub time: Vec<SinkTime>,
    /// Mean current.
    pub current: Vec<Current>,
    /// Least current.
    pub current_min: Vec<Current>,
    /// Largest current.
    pub current_max: Vec<Current>,
    /// Mean voltage.
    pub voltage: Vec<Voltage>,
    /// Least voltage.
    pub voltage_min: Vec<Voltage>,
    /// Largest voltage.
    pub voltage_max: Vec<Voltage>,
    /// Heat sink temperature or its sensor's fault.
    pub temperature: Vec<TemperatureReading>,
    /// What the sink was doing.
    pub state: Vec<SinkState>,
    /// Counters, where their line was not lost.
    pub counters: Vec<Option<Counters>>,
    /// Pairs lost before each.
    pub lost: Vec<u16>,
}

/// What one segment holds: its readbacks in columns and its other entries.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Chunk {
    /// The readbacks.
    pub readings: Readings,
    /// All other entries, in order; their numbers say where between the readbacks they belong.
    pub others: Vec<Entry>,
    /// Where and why the last segment of an unsealed record could not be read to its end.
    pub tail: Option<Damage>,
}

impl Readings {
    /// How many.
    pub fn len(&self) -> usize {
        self.number.len()
    }

    /// Whether there is none.
    pub fn is_empty(&self) -> bool {
        self.number.is_empty()
    }

    /// The readback at an index, as it was received.
    pub fn get(&self, index: usize) -> Option<Reading> {
        let values = Readback {
            current: *self.current.get(index)?,
            current_min: *self.current_min.get(index)?,
            current_max: *self.current_max.get(index)?,
            voltage: *self.voltage.get(index)?,
            voltage_min: *self.voltage_min.get(index)?,
            voltage_max: *self.voltage_max.get(index)?,
            temperature: *self.temperature.get(index)?,
            state: *self.state.get(index)?,
        };
        Some(Reading {
            readback: *self.readback.get(index)?,
            time: *self.time.get(index)?,
            values,
            counters: *self.counters.get(index)?,
            lost: *self.lost.get(index)?,
        })
    }

    fn with_capacity(rows: usize) -> Self {
        Self {
            number: Vec::with_capacity(rows),
            at: Vec::with_capacity(rows),
            readback: Vec::with_capacity(rows),
            time: Vec::with_capacity(rows),
            current: Vec::with_capacity(rows),
            current_min: Vec::with_capacity(rows),
            current_max: Vec::with_capacity(rows),
            voltage: Vec::with_capacity(rows),
            voltage_min: Vec::with_capacity(rows),
            voltage_max: Vec::with_capacity(rows),
            temperature: Vec::with_capacity(rows),
            state: Vec::with_capacity(rows),
            counters: Vec::with_capacity(rows),
            lost: Vec::with_capacity(rows),
        }
    }

    #[inline]
    fn push(&mut self, number: u64, at: HostTime, reading: &Reading) {
        let values = &reading.values;
        self.number.push(number);
        self.at.push(at);
        self.readback.push(reading.readback);
        self.time.push(reading.time);
        self.current.push(values.current);
        self.current_min.push(values.current_min);
        self.current_max.push(values.current_max);
        self.voltage.push(values.voltage);
        self.voltage_min.push(values.voltage_min);
        self.voltage_max.push(values.voltage_max);
        self.temperature.push(values.temperature);
        self.state.push(values.state);
        self.counters.push(reading.counters);
        self.lost.push(reading.lost);
    }
}

impl Record {
    /// All that the record holds, a segment at a time in order, decoded on as many threads as
    /// the machine has cores.
    ///
    /// # Errors
    /// What the operating system says when it refuses a thread. Damage comes out of the
    /// iterator, and ends it.
    pub fn chunks(&self) -> Result<Chunks, JournalError> {
        self.chunks_of(0..self.segments().len())
    }

    /// All entries in order but the readbacks, which are passed over; on as many threads as the
    /// machine has cores. A torn end of an unsealed record is no error.
    ///
    /// # Errors
    /// As [`Record::chunks`], or the damage.
    pub fn others(&self) -> Result<Vec<Entry>, JournalError> {
        let mut others = Vec::new();
        for chunk in self.lanes(0..self.segments().len(), others_of)? {
            others.extend(chunk?.others);
        }
        Ok(others)
    }

    /// As [`Record::chunks`], from a segment on, counted from 0.
    ///
    /// # Errors
    /// As [`Record::chunks`].
    pub fn chunks_from(&self, segment: usize) -> Result<Chunks, JournalError> {
        self.chunks_of(segment..self.segments().len())
    }

    /// As [`Record::chunks`], for some of the segments.
    pub(crate) fn chunks_of(&self, range: Range<usize>) -> Result<Chunks, JournalError> {
        self.lanes(range, decode)
    }

    fn lanes(&self, range: Range<usize>, work: Work) -> Result<Chunks, JournalError> {
        let last = self.segments().last().copied();
        let jobs: Vec<Job> = self
            .segments()
            .get(range)
            .unwrap_or_default()
            .iter()
            .map(|&segment| Job {
                segment,
                open_ended: !self.is_sealed() && Some(segment) == last,
            })
            .collect();
        let cores = thread::available_parallelism().map_or(1, usize::from);
        let threads = cores.min(jobs.len());
        let mut lanes = Vec::with_capacity(threads);
        for lane in 0..threads {
            let mine: Vec<Job> = jobs.iter().skip(lane).step_by(threads).copied().collect();
            let (sender, receiver) = mpsc::sync_channel(AHEAD);
            let record = self.clone();
            thread::Builder::new()
                .name("record-reader".into())
                .spawn(move || work_lane(&record, &mine, work, &sender))
                .map_err(|error| {
                    JournalError::io("starting a thread to read", self.folder(), error)
                })?;
            lanes.push(receiver);
        }
        Ok(Chunks {
            lanes,
            turn: 0,
            next_number: None,
            ended: false,
        })
    }
}

/// Chunks in order. Dropping it ends the threads behind it.
#[derive(Debug)]
pub struct Chunks {
    lanes: Vec<Receiver<Result<Decoded, JournalError>>>,
    turn: usize,
    next_number: Option<u64>,
    ended: bool,
}

impl Iterator for Chunks {
    type Item = Result<Chunk, JournalError>;

    fn next(&mut self) -> Option<Self::Item> {
        if self.ended {
            return None;
        }
        let lane = self.lanes.get(self.turn)?;
        let Ok(decoded) = lane.recv() else {
            self.ended = true;
            return None;
        };
        self.turn = (self.turn + 1) % self.lanes.len();
        let chunk = decoded.and_then(|decoded| self.join(decoded));
        self.ended = chunk.is_err();
        Some(chunk)
    }
}

impl Chunks {
    /// Checks that a segment goes on where the one before it ended.
    fn join(&mut self, decoded: Decoded) -> Result<Chunk, JournalError> {
        if let Some(expected) = self.next_number
            && let Some(first) = decoded.first
            && first != expected
        {
            return Err(JournalError::Damaged(Damage {
                file: decoded.file,
                line: 1,
                offset: 0,
                fault: LineFault::Number {
                    expected,
                    found: first,
                },
            }));
        }
        self.next_number = decoded.next_number;
        Ok(decoded.chunk)
    }
}

#[derive(Debug, Clone, Copy)]
struct Job {
    segment: u32,
    open_ended: bool,
}

#[derive(Debug)]
struct Decoded {
    file: String,
    /// The number of its first entry; unknown if not even its first line held.
    first: Option<u64>,
    /// The number that the next segment must begin with; unknown where only an extract was read.
    next_number: Option<u64>,
    chunk: Chunk,
}

/// What a thread does with a segment.
type Work = fn(&Record, Job) -> Result<Decoded, JournalError>;

fn work_lane(
    record: &Record,
    jobs: &[Job],
    work: Work,
    sender: &SyncSender<Result<Decoded, JournalError>>,
) {
    for job in jobs {
        let decoded = work(record, *job);
        let failed = decoded.is_err();
        // Nobody wants more when the receiver is gone.
        if sender.send(decoded).is_err() || failed {
            return;
        }
    }
}

fn decode(record: &Record, job: Job) -> Result<Decoded, JournalError> {
    let segment = ReadSegment::load(&layout::journal(record.folder()), job.segment)?;
    let expected = segment.expected(&record.manifest().record, None);
    let mut reader = match segment.reader(&expected) {
        Ok(reader) => reader,
        Err(why) if job.open_ended && why.is_cut_off() => {
            let chunk = Chunk {
                tail: Some(why),
                ..Chunk::default()
            };
            return Ok(Decoded {
                file: String::new(),
                first: None,
                next_number: None,
                chunk,
            });
        }
        Err(why) => return Err(JournalError::Damaged(why)),
    };
    let first = Some(reader.header().first);
    let mut chunk = Chunk {
        readings: Readings::with_capacity(segment.plain_len() / 100),
        ..Chunk::default()
    };
    let base = reader.header().at;
    let mut extracted = segment.first_line().to_vec();
    while let Some(line) = reader.next_line() {
        if packed::is_extracted(line.bytes) {
            extracted.extend_from_slice(line.bytes);
            extracted.push(b'\n');
        }
        if let Err(fault) = take(&mut reader, line, base, &mut chunk) {
            let why = line.damage(reader.file(), fault);
            if job.open_ended && reader.whole_lines_left() == 0 {
                chunk.tail = Some(why);
                break;
            }
            return Err(JournalError::Damaged(why));
        }
    }
    segment.check_extract(&extracted)?;
    let next_number = Some(reader.next_number());
    Ok(Decoded {
        file: reader.file().to_owned(),
        first,
        next_number,
        chunk,
    })
}

/// The same without the readbacks: from the extract where there is one.
fn others_of(record: &Record, job: Job) -> Result<Decoded, JournalError> {
    if let Some(decoded) = others_of_extract(record, job)? {
        return Ok(decoded);
    }
    let mut decoded = decode(record, job)?;
    decoded.chunk.readings = Readings::default();
    Ok(decoded)
}

/// `None` where the whole text has to be read. What is missing from an extract is found by whoever
/// reads the text.
fn others_of_extract(record: &Record, job: Job) -> Result<Option<Decoded>, JournalError> {
    let journal = layout::journal(record.folder());
    let Some((file, lines)) = segment::load_extract(&journal, job.segment)? else {
        return Ok(None);
    };
    let expected = Expected {
        record: Some(&record.manifest().record),
        segment: job.segment,
        first: None,
    };
    let Ok(mut reader) = Reader::open(&file, &lines, &expected) else {
        return Ok(None);
    };
    let first = Some(reader.header().first);
    let mut chunk = Chunk::default();
    while let Some(entry) = reader.next_extracted() {
        let Ok(entry) = entry else { return Ok(None) };
        if entry.reading().is_none() {
            chunk.others.push(entry);
        }
    }
    Ok(Some(Decoded {
        file,
        first,
        next_number: None,
        chunk,
    }))
}

/// Takes one line into the chunk.
#[inline]
fn take(
    reader: &mut Reader<'_>,
    line: segment::Line<'_>,
    base: HostTime,
    chunk: &mut Chunk,
) -> Result<(), LineFault> {
    if !line.whole {
        return Err(LineFault::Unfinished);
    }
    if line.bytes.first() == Some(&b'[') {
        let content = line::check(line.bytes)?;
        let (number, at, reading) = compact::decode(content, base)
            .ok_or_else(|| LineFault::Form("the array is no readback".into()))?;
        reader.count(number)?;
        chunk.readings.push(number, at, &reading);
        return Ok(());
    }
    let entry = line::decode(line.bytes, base)?;
    reader.count(entry.number)?;
    match entry.body {
        // A reading that its compact form could not hold.
        Body::Event(Happening::Reading(reading)) => {
            chunk.readings.push(entry.number, entry.at, &reading);
        }
        Body::Event(_)
        | Body::Order { .. }
        | Body::Off
        | Body::Finding(_)
        | Body::Ended(_)
        | Body::Note(_) => chunk.others.push(entry),
    }
    Ok(())
}
