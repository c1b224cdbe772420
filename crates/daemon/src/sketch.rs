//! Sketches of records: what a plot of a record is made from, held in memory for the records
//! that are looked at and kept beside those that are sealed.
//!
//! A sketch is derived from its record alone and can be deleted at any time. A record that is
//! being written is gone on with where it was left: only what is new is read.
//!
//! What it deliberately does not do: run on a thread that answers others. Whoever asks waits.

mod course;

use std::collections::VecDeque;
use std::fs;
use std::ops::Range;
use std::path::Path;
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};

use journal::{Grain, Grains, JournalError, Near, Record, gather};
use quantity::{Charge, HostTime, Span};
use serde::{Deserialize, Serialize};

use self::course::Course;
use crate::view::CourseView;

/// The file in a sealed record's folder.
const FILE: &str = "sketch";
/// Grains held in memory over all records: some 70 MB, the most of one 12 h record at 100 Hz
/// being a quarter of it. One record is always held.
const GRAINS_MAX: usize = 500_000;
/// Single readbacks held in memory over all records, some 50 MB: what was looked at closely last.
const POINTS_MAX: usize = 600_000;
/// Records held.
const RECORDS_MAX: usize = 32;

/// What a plot of a record is made from.
#[derive(Debug)]
pub(crate) struct Sketch {
    complete: Vec<Grain>,
    /// What a segment that still grows holds so far.
    growing: Vec<Grain>,
    course: CourseView,
}

impl Sketch {
    fn all(&self) -> impl Iterator<Item = &Grain> {
        self.complete.iter().chain(&self.growing)
    }

    /// When the last readback came.
    fn last_at(&self) -> Option<HostTime> {
        let last = self.growing.last().or(self.complete.last())?;
        Some(last.bucket.last_at)
    }

    /// How many grains begin in a stretch.
    fn grains_in(&self, stretch: &Range<HostTime>) -> usize {
        let before = |grains: &[Grain], at: HostTime| {
            grains.partition_point(|grain| grain.bucket.first_at < at)
        };
        [&self.complete, &self.growing]
            .into_iter()
            .map(|grains| before(grains, stretch.end) - before(grains, stretch.start))
            .sum()
    }

    /// A stretch in at most so many buckets.
    fn gather(&self, stretch: &Range<HostTime>, most: u32) -> Vec<Grain> {
        let within = |grains: &'_ [Grain]| -> Range<usize> {
            let before = |at: HostTime| grains.partition_point(|grain| grain.bucket.first_at < at);
            before(stretch.start)..before(stretch.end)
        };
        let parts = [&self.complete, &self.growing].map(|grains| {
            let within = within(grains);
            grains.get(within).unwrap_or_default()
        });
        gather(parts.into_iter().flatten().copied(), stretch, most)
    }

    /// The charge at an instant, between two grains by the straight line.
    fn charge_at(&self, at: HostTime) -> Option<Charge> {
        let grains = match self.growing.first() {
            Some(first) if first.bucket.first_at <= at => &self.growing,
            Some(_) | None => &self.complete,
        };
        let after = grains.partition_point(|grain| grain.bucket.first_at <= at);
        let before = grains.get(after.checked_sub(1)?)?;
        let Some(next) = grains.get(after) else {
            return Some(before.charge);
        };
        let micros = |from: HostTime, to: HostTime| i128::from(to.saturating_since(from).micros());
        let (from, to) = (before.bucket.first_at, next.bucket.first_at);
        let span = micros(from, to).max(1);
        let rise = i128::from(next.charge.microcoulombs() - before.charge.microcoulombs());
        let part = i64::try_from(rise * micros(from, at) / span).unwrap_or(0);
        Some(Charge::from_microcoulombs(
            before.charge.microcoulombs() + part,
        ))
    }
}

/// A sketch that is being made, and what is needed to go on with it.
#[derive(Debug)]
struct Making {
    sketch: Sketch,
    grains: Grains,
    course: Course,
    segments: usize,
    sealed: bool,
    near: Near,
}

/// A stretch of a record in few points.
#[derive(Debug)]
pub(crate) struct Look {
    /// From the start of the run to just behind the last readback.
    pub(crate) length: Span,
    /// The points.
    pub(crate) grains: Vec<Grain>,
    /// Its middle half, if a look at that will read the record itself.
    pub(crate) next: Option<Range<HostTime>>,
}

impl Making {
    fn new(record: &Record) -> Self {
        let start = crate::records::started(record);
        Self {
            sketch: Sketch {
                complete: Vec::new(),
                growing: Vec::new(),
                course: CourseView::default(),
            },
            grains: Grains::new(record.manifest().plan.correction),
            course: Course::new(start),
            segments: 0,
            sealed: false,
            near: Near::default(),
        }
    }

    /// A stretch in at most so many points.
    fn look(
        &mut self,
        record: &Record,
        stretch: &Range<Option<HostTime>>,
        points: u32,
    ) -> Result<Look, JournalError> {
        let start = crate::records::started(record);
        let last = self.sketch.last_at().unwrap_or(start);
        let end = last.saturating_add(Span::from_micros(1));
        let length = end.saturating_since(start);
        let stretch = stretch.start.unwrap_or(start)..stretch.end.unwrap_or(end);
        // Grains are fine enough while each point has two; where they are not, the stretch is
        // short, and the record itself is read.
        let fine = |stretch: &Range<HostTime>| {
            self.sketch.grains_in(stretch) as u64 >= u64::from(points) * 2
        };
        if fine(&stretch) {
            let quarter = stretch.end.saturating_since(stretch.start).micros() / 4;
            let at = |quarters| {
                let since = Span::from_micros(quarter * quarters);
                stretch.start.saturating_add(since)
            };
            let middle = at(1)..at(3);
            return Ok(Look {
                length,
                grains: self.sketch.gather(&stretch, points),
                next: (record.is_sealed() && !fine(&middle)).then_some(middle),
            });
        }
        let buckets = self.near.thin(record, &stretch, points)?;
        let charged = buckets.into_iter().map(|bucket| Grain {
            bucket,
            charge: self.sketch.charge_at(bucket.first_at).unwrap_or_default(),
        });
        Ok(Look {
            length,
            grains: charged.collect(),
            next: None,
        })
    }

    /// Reads what is new in the record.
    fn go_on(&mut self, record: &Record) -> Result<(), JournalError> {
        if self.sealed {
            return Ok(());
        }
        let plan = &record.manifest().plan;
        let complete = record.segments_complete();
        let mut chunks = record.chunks_from(self.segments)?;
        while self.segments < complete {
            let Some(chunk) = chunks.next() else { break };
            let chunk = chunk?;
            self.grains.take(&chunk.readings);
            for entry in &chunk.others {
                self.course.take(plan, entry);
            }
            self.segments += 1;
        }
        self.sketch.complete.extend(self.grains.take_full());
        // The segment that still grows is read again next time.
        let mut grains = self.grains.continued();
        let mut course = self.course.clone();
        for chunk in chunks {
            let chunk = chunk?;
            grains.take(&chunk.readings);
            for entry in &chunk.others {
                course.take(plan, entry);
            }
        }
        self.sketch.growing = grains.take_full();
        self.sketch.growing.extend(grains.last());
        if let Some(last) = self.sketch.last_at() {
            let length = last.saturating_since(crate::records::started(record));
            course.reaches(length.seconds());
        }
        self.sketch.course = course.view().clone();
        self.sealed = record.is_sealed();
        Ok(())
    }
}

/// The first line of a sketch's file; the grains' bytes follow.
#[derive(Serialize, Deserialize)]
struct Head {
    /// The hash of the record's seal: another record has another sketch.
    seal: String,
    course: CourseView,
}

/// Makes the sketch of a sealed record, from which plots of it are drawn, and keeps it in the
/// record's folder.
///
/// # Errors
/// What is wrong with the record, that it is not sealed, or what the disk says, in a sentence.
pub fn keep_sketch(folder: &Path) -> Result<(), String> {
    let record = Record::open(folder).map_err(|error| error.to_string())?;
    let mut making = Making::new(&record);
    making.go_on(&record).map_err(|error| error.to_string())?;
    keep(&record, &making.sketch)
}

fn keep(record: &Record, sketch: &Sketch) -> Result<(), String> {
    let seal = record.seal().map_err(|error| error.to_string())?;
    let Some(seal) = seal else {
        return Err("the record is not sealed".to_owned());
    };
    let head = Head {
        seal: seal.hash,
        course: sketch.course.clone(),
    };
    let mut bytes = serde_json::to_vec(&head).map_err(|error| error.to_string())?;
    bytes.push(b'\n');
    let all: Vec<Grain> = sketch.all().copied().collect();
    bytes.extend_from_slice(&Grains::bytes_of(&all));
    let path = record.folder().join(FILE);
    let unfinished = record.folder().join(format!("{FILE}.part"));
    fs::write(&unfinished, bytes)
        .and_then(|()| fs::rename(&unfinished, &path))
        .map_err(|error| format!("writing {}: {error}", path.display()))
}

/// The sketch kept beside a sealed record, if it is the record's own and whole.
fn kept(record: &Record) -> Option<Sketch> {
    let seal = record.seal().ok()??;
    let bytes = fs::read(record.folder().join(FILE)).ok()?;
    let end = bytes.iter().position(|&byte| byte == b'\n')?;
    let (head, rest) = bytes.split_at_checked(end)?;
    let head: Head = serde_json::from_slice(head).ok()?;
    if head.seal != seal.hash {
        return None;
    }
    Some(Sketch {
        complete: Grains::from_bytes(rest.get(1..)?)?,
        growing: Vec::new(),
        course: head.course,
    })
}

/// The sketches of the records that were looked at last.
#[derive(Debug, Default)]
pub(crate) struct Sketches {
    held: Mutex<VecDeque<(String, Arc<Mutex<Making>>)>>,
}

impl Sketches {
    /// A stretch of a record as it is now, in at most so many points; its beginning and its end
    /// are those of the record unless said. Not for a thread that answers others.
    pub(crate) fn look(
        &self,
        record: &Record,
        stretch: &Range<Option<HostTime>>,
        points: u32,
    ) -> Result<Look, JournalError> {
        self.with(record, |making| making.look(record, stretch, points))?
    }

    /// Reads a stretch of a record, so that a look at it finds it read. What is wrong with it the
    /// look will say.
    pub(crate) fn read_ahead(&self, record: &Record, stretch: &Range<HostTime>) {
        let read = self.with(record, |making| making.near.thin(record, stretch, 1));
        if let Err(why) = read.and_then(|read| read) {
            tracing::debug!("nothing was read ahead: {why}");
        }
    }

    /// How a record went, as it is now. Not for a thread that answers others.
    pub(crate) fn course(&self, record: &Record) -> Result<CourseView, JournalError> {
        self.with(record, |making| making.sketch.course.clone())
    }

    fn with<T>(
        &self,
        record: &Record,
        work: impl FnOnce(&mut Making) -> T,
    ) -> Result<T, JournalError> {
        let one = self.one(record);
        // Whoever else wants this record waits for its sketch instead of making another.
        let mut making = lock(&one);
        if making.segments == 0 && !making.sealed && record.is_sealed() {
            if let Some(sketch) = kept(record) {
                making.sketch = sketch;
                making.sealed = true;
            } else {
                making.go_on(record)?;
                if let Err(why) = keep(record, &making.sketch) {
                    tracing::debug!("no sketch is kept: {why}");
                }
            }
        } else {
            making.go_on(record)?;
        }
        let result = work(&mut making);
        drop(making);
        self.bound();
        Ok(result)
    }

    fn one(&self, record: &Record) -> Arc<Mutex<Making>> {
        let id = &record.manifest().record;
        let mut held = lock(&self.held);
        let found = held.iter().position(|(known, _)| known == id);
        let one = found
            .and_then(|place| held.remove(place))
            .unwrap_or_else(|| (id.clone(), Arc::new(Mutex::new(Making::new(record)))));
        let making = Arc::clone(&one.1);
        held.push_front(one);
        making
    }

    /// Lets go of the records that were looked at longest ago.
    fn bound(&self) {
        let mut held = lock(&self.held);
        held.truncate(RECORDS_MAX);
        let (mut grains, mut points) = (0, 0);
        let mut first = true;
        held.retain(|(_, making)| {
            let is_first = std::mem::take(&mut first);
            // One that is being made is in use and is counted the next time.
            if let Ok(mut making) = making.try_lock() {
                grains += making.sketch.all().count();
                points += making.near.points();
                if points > POINTS_MAX && !is_first {
                    points -= making.near.points();
                    making.near.clear();
                }
            }
            is_first || grains <= GRAINS_MAX
        });
    }
}

fn lock<T>(mutex: &Mutex<T>) -> MutexGuard<'_, T> {
    // Sketches are derived: one that was left half made is made on.
    mutex.lock().unwrap_or_else(PoisonError::into_inner)
}
