//! One walk over the readbacks: what each stage delivered, without keeping the readbacks.
//!
//! The counters are cumulative and exact; a stage's share is the difference of two of them, at
//! its beginning and at its end. An edge rarely falls on a readback: the counter at the edge is
//! carried forward from the readback before with the mean current of the interval before, and
//! held between the two counters around it.

mod delivered;

use std::ops::Range;

use journal::Chunk;
use quantity::{Charge, Current, Energy, SinkTime, Span, Voltage};
use wire::{Counters, TemperatureReading};

pub(crate) use delivered::{Around, DELAYS, Delivered};

/// The counters at an instant, nominal.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Mark {
    pub(crate) time: SinkTime,
    pub(crate) charge: Charge,
    pub(crate) energy: Energy,
}

impl From<Counters> for Mark {
    fn from(counters: Counters) -> Self {
        Self {
            time: counters.time,
            charge: counters.charge,
            energy: counters.energy,
        }
    }
}

/// A readback as figures want it, nominal.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Sample {
    /// The entry's number.
    pub(crate) row: u64,
    /// Beginning of the interval it speaks for.
    pub(crate) from: SinkTime,
    /// End of the interval.
    pub(crate) time: SinkTime,
    pub(crate) current: Current,
    pub(crate) voltage: Voltage,
    /// Smallest of its samples.
    pub(crate) current_min: Current,
    pub(crate) voltage_min: Voltage,
    /// Largest of its samples.
    pub(crate) current_max: Current,
    pub(crate) voltage_max: Voltage,
}

impl Sample {
    /// The middle of the interval, which its means stand for.
    pub(crate) fn middle(&self) -> SinkTime {
        let length = self.time.saturating_since(self.from).micros();
        self.from.saturating_add(Span::from_micros(length / 2))
    }
}

/// How closely to look at a stretch.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub(crate) struct Look {
    /// At [`DELAYS`] after its beginning.
    pub(crate) around: bool,
    /// At every readback for so long.
    pub(crate) curve: Option<Span>,
    /// At the temperature.
    pub(crate) heat: bool,
    /// At voltage and current, in means.
    pub(crate) discharge: bool,
}

/// Readbacks kept for curves, all stretches together: beyond that a curve breaks off.
const KEPT_MAX: usize = 2_000_000;

/// A stretch of sink time to look at, and a voltage to watch in it.
#[derive(Debug, Clone)]
pub(crate) struct Stretch {
    pub(crate) time: Range<SinkTime>,
    pub(crate) below: Option<Voltage>,
    pub(crate) look: Look,
}

/// The walk: give it the chunks in order, then take what the stretches delivered.
pub(crate) struct Walk {
    stretches: Vec<Stretch>,
    delivered: Vec<Delivered>,
    /// Stretches before this one have ended.
    first_open: usize,
    previous: Option<Previous>,
    /// How many more readbacks may be kept.
    keep: usize,
}

#[derive(Clone, Copy)]
struct Previous {
    mark: Option<Mark>,
    /// The mean current of the interval before, microamperes.
    current: Current,
    voltage: Voltage,
    time: SinkTime,
    sample: Sample,
}

impl Walk {
    /// Stretches in the order of their beginnings.
    pub(crate) fn new(stretches: Vec<Stretch>) -> Self {
        let delivered = stretches.iter().map(Delivered::looking).collect();
        Self {
            keep: KEPT_MAX,
            stretches,
            delivered,
            first_open: 0,
            previous: None,
        }
    }

    /// What the stretches delivered, in their order.
    pub(crate) fn finish(self) -> Vec<Delivered> {
        self.delivered
    }

    /// Takes the next chunk.
    pub(crate) fn take(&mut self, chunk: &Chunk) {
        for index in 0..chunk.readings.len() {
            let (Some(reading), Some(row)) =
                (chunk.readings.get(index), chunk.readings.number.get(index))
            else {
                return;
            };
            // A sink that started anew counts from zero: what was before is another walk.
            if self
                .previous
                .is_some_and(|previous| reading.time < previous.time)
            {
                self.previous = None;
            }
            let sample = Sample {
                row: *row,
                from: self.previous.map_or(reading.time, |previous| previous.time),
                time: reading.time,
                current: reading.values.current,
                voltage: reading.values.voltage,
                current_min: reading.values.current_min,
                voltage_min: reading.values.voltage_min,
                current_max: reading.values.current_max,
                voltage_max: reading.values.voltage_max,
            };
            let mark = reading.counters.map(Mark::from);
            self.sample(&sample, mark, reading.values.temperature);
            self.previous = Some(Previous {
                mark: mark.or_else(|| self.previous.and_then(|previous| previous.mark)),
                current: sample.current,
                voltage: sample.voltage,
                time: sample.time,
                sample,
            });
        }
    }

    fn sample(&mut self, sample: &Sample, mark: Option<Mark>, temperature: TemperatureReading) {
        let previous = self.previous;
        let stretches = self
            .stretches
            .iter()
            .zip(&mut self.delivered)
            .skip(self.first_open);
        let mut ended = 0;
        for (stretch, delivered) in stretches {
            if stretch.time.start > sample.time {
                break;
            }
            if let Some(mark) = mark {
                delivered.reach(stretch, previous, mark);
            }
            if sample.time > stretch.time.start && sample.from < stretch.time.end {
                delivered.cover(stretch, previous, sample, temperature);
                delivered.look(stretch, sample, temperature, &mut self.keep);
            }
            if stretch.time.end <= sample.time && delivered.end.is_some() {
                ended += 1;
            } else {
                ended = 0;
            }
        }
        // Only a run of ended stretches at the front may be left behind.
        self.first_open += self.ended_at_front(sample.time).min(ended);
    }

    fn ended_at_front(&self, time: SinkTime) -> usize {
        self.stretches
            .iter()
            .zip(&self.delivered)
            .skip(self.first_open)
            .take_while(|(stretch, delivered)| stretch.time.end <= time && delivered.end.is_some())
            .count()
    }
}
