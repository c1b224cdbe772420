//! A long record in a few points, extremes kept.
//!
//! What a plot wants: a stretch of time cut into equal buckets, each with the least, the mean
//! and the largest of every quantity over all readbacks in it, so that a 40 ms dip in twelve
//! hours still shows. Segments outside the stretch are not read; those inside stream by.

use std::ops::Range;

use quantity::{Current, HostTime, SinkTime, Temperature, Voltage};
use sink::correction::Correction;
use wire::{Reading, TemperatureReading};

use crate::{JournalError, Record, layout, segment};

/// All readbacks of a stretch of time in one.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Bucket {
    /// Host time of the first readback in it.
    pub first_at: HostTime,
    /// Host time of the last readback in it.
    pub last_at: HostTime,
    /// Sink time of the first readback in it.
    pub first_time: SinkTime,
    /// Sink time of the last readback in it.
    pub last_time: SinkTime,
    /// How many readbacks.
    pub count: u64,
    /// Current, true.
    pub current: Extremes<Current>,
    /// Voltage, true.
    pub voltage: Extremes<Voltage>,
    /// Heat sink temperature; `None` where its sensor gave none.
    pub temperature: Option<Extremes<Temperature>>,
}

/// Least, mean and largest.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Extremes<T> {
    /// Least: the least minimum of the readbacks.
    pub min: T,
    /// Mean of the readbacks' means.
    pub mean: T,
    /// Largest: the largest maximum of the readbacks.
    pub max: T,
}

impl<T: Ord + Copy> Extremes<T> {
    /// Takes further extremes in; the mean stays.
    pub(crate) fn widen(&mut self, other: &Self) {
        self.min = self.min.min(other.min);
        self.max = self.max.max(other.max);
    }
}

/// Thins the readbacks that arrived in a stretch of host time (its end not in it) to at most so
/// many buckets; empty ones are left out. True values, by the record's own correction.
///
/// # Errors
/// What is wrong with the record. A torn end of an unsealed record is no error.
pub fn thin(
    record: &Record,
    stretch: Range<HostTime>,
    buckets_max: u32,
) -> Result<Vec<Bucket>, JournalError> {
    let Some(mut thinning) = Thinning::new(&stretch, buckets_max) else {
        return Ok(Vec::new());
    };
    let correction = record.manifest().plan.correction;
    let begins: Vec<Option<HostTime>> = (0..record.segments().len())
        .map(|segment| begins(record, segment))
        .collect::<Result<_, _>>()?;
    for chunk in record.chunks_of(touched(&begins, &stretch))? {
        let readings = chunk?.readings;
        for (index, &at) in readings.at.iter().enumerate() {
            if stretch.contains(&at)
                && let Some(reading) = readings.get(index)
            {
                thinning.add(&Point::new(at, &reading, &correction));
            }
        }
    }
    Ok(thinning.finish())
}

/// The readbacks of one segment, counted from 0, as points.
pub(crate) fn points_of(record: &Record, segment: usize) -> Result<Vec<Point>, JournalError> {
    let correction = record.manifest().plan.correction;
    let mut points = Vec::new();
    for chunk in record.chunks_of(segment..segment + 1)? {
        let readings = chunk?.readings;
        points.reserve(readings.len());
        for (index, &at) in readings.at.iter().enumerate() {
            if let Some(reading) = readings.get(index) {
                points.push(Point::new(at, &reading, &correction));
            }
        }
    }
    Ok(points)
}

/// When a segment begins, by its first line. One that cannot be read ends nothing: the reader
/// will say what is wrong.
pub(crate) fn begins(record: &Record, segment: usize) -> Result<Option<HostTime>, JournalError> {
    let Some(&number) = record.segments().get(segment) else {
        return Ok(None);
    };
    let header = segment::peek(&layout::journal(record.folder()), number)?;
    Ok(header.map(|header| header.at))
}

/// The segments that can hold something of the stretch, by when each begins.
pub(crate) fn touched(begins: &[Option<HostTime>], stretch: &Range<HostTime>) -> Range<usize> {
    let mut range = 0..0;
    for (index, begins) in begins.iter().enumerate() {
        let begins = begins.unwrap_or(stretch.start);
        if begins <= stretch.start {
            range.start = index;
        }
        if begins < stretch.end {
            range.end = index + 1;
        }
    }
    range
}

/// Points that come in order, cut into equal buckets.
pub(crate) struct Thinning<'a> {
    stretch: &'a Range<HostTime>,
    /// Microseconds of a bucket.
    width: u64,
    full: Vec<Bucket>,
    filling: Option<(u64, Filling)>,
}

impl<'a> Thinning<'a> {
    /// `None` where there is nothing to fill.
    pub(crate) fn new(stretch: &'a Range<HostTime>, buckets_max: u32) -> Option<Self> {
        let length = stretch.end.checked_since(stretch.start)?.micros();
        (length > 0 && buckets_max > 0).then(|| Self {
            stretch,
            width: length.div_ceil(u64::from(buckets_max)),
            full: Vec::new(),
            filling: None,
        })
    }

    /// Takes those points that arrived in the stretch.
    pub(crate) fn take(&mut self, points: &[Point]) {
        for point in points {
            if self.stretch.contains(&point.at) {
                self.add(point);
            }
        }
    }

    /// Takes a point that arrived in the stretch.
    fn add(&mut self, point: &Point) {
        let place = point.at.saturating_since(self.stretch.start).micros() / self.width;
        match &mut self.filling {
            Some((open, bucket)) if *open == place => bucket.take(point),
            _ => {
                let full = self.filling.replace((place, Filling::new(point)));
                self.full.extend(full.map(|(_, full)| full.bucket()));
            }
        }
    }

    pub(crate) fn finish(mut self) -> Vec<Bucket> {
        self.full
            .extend(self.filling.map(|(_, last)| last.bucket()));
        self.full
    }
}

/// One readback, true: least, mean and largest, in micro-units (thousandths for temperature).
#[derive(Debug, Clone)]
pub(crate) struct Point {
    at: HostTime,
    time: SinkTime,
    current: [i64; 3],
    voltage: [i64; 3],
    temperature: Option<i64>,
}

impl Point {
    pub(crate) fn new(at: HostTime, reading: &Reading, correction: &Correction) -> Self {
        let values = &reading.values;
        Self {
            at,
            time: reading.time,
            current: [values.current_min, values.current, values.current_max]
                .map(|nominal| correction.current_from_readback(nominal).microamperes()),
            voltage: [
                (values.voltage_min, values.current_min),
                (values.voltage, values.current),
                (values.voltage_max, values.current_max),
            ]
            .map(|(voltage, current)| {
                correction
                    .voltage_from_readback(voltage, current)
                    .microvolts()
            }),
            temperature: match values.temperature {
                TemperatureReading::Value(value) => Some(value.millidegrees_celsius()),
                TemperatureReading::Open | TemperatureReading::Short => None,
            },
        }
    }
}

/// A bucket that is being filled.
#[derive(Debug, Clone)]
pub(crate) struct Filling {
    first: (HostTime, SinkTime),
    last: (HostTime, SinkTime),
    current: Sum,
    voltage: Sum,
    temperature: Option<Sum>,
}

impl Filling {
    pub(crate) fn new(point: &Point) -> Self {
        Self {
            first: (point.at, point.time),
            last: (point.at, point.time),
            current: Sum::new(point.current),
            voltage: Sum::new(point.voltage),
            temperature: point.temperature.map(|value| Sum::new([value; 3])),
        }
    }

    pub(crate) fn take(&mut self, point: &Point) {
        self.last = (point.at, point.time);
        self.current.add(point.current);
        self.voltage.add(point.voltage);
        match (&mut self.temperature, point.temperature) {
            (Some(sum), Some(value)) => sum.add([value; 3]),
            (None, Some(value)) => self.temperature = Some(Sum::new([value; 3])),
            (_, None) => {}
        }
    }

    pub(crate) fn count(&self) -> u64 {
        self.current.count
    }

    pub(crate) fn bucket(&self) -> Bucket {
        Bucket {
            first_at: self.first.0,
            last_at: self.last.0,
            first_time: self.first.1,
            last_time: self.last.1,
            count: self.current.count,
            current: self.current.extremes(Current::from_microamperes),
            voltage: self.voltage.extremes(Voltage::from_microvolts),
            temperature: self
                .temperature
                .as_ref()
                .map(|sum| sum.extremes(Temperature::from_millidegrees_celsius)),
        }
    }
}

/// Extremes and an exact sum.
#[derive(Debug, Clone)]
struct Sum {
    min: i64,
    max: i64,
    total: i128,
    count: u64,
}

impl Sum {
    fn new([min, mean, max]: [i64; 3]) -> Self {
        Self {
            min,
            max,
            total: i128::from(mean),
            count: 1,
        }
    }

    fn add(&mut self, [min, mean, max]: [i64; 3]) {
        self.min = self.min.min(min);
        self.max = self.max.max(max);
        self.total += i128::from(mean);
        self.count += 1;
    }

    fn extremes<T>(&self, unit: fn(i64) -> T) -> Extremes<T> {
        let mean = self.total.div_euclid(i128::from(self.count));
        Extremes {
            min: unit(self.min),
            mean: unit(i64::try_from(mean).unwrap_or(self.max)),
            max: unit(self.max),
        }
    }
}
