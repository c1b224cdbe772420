//! Charge delivered against host time, for the axis of a plot.
//!
//! Invariant: memory is bounded whatever the length of the record; when there are too many
//! points every second one is dropped, and the charge between two is taken on a straight line.
//!
//! What it deliberately does not do: claim to be a figure. The capacity in the tables comes from
//! `figures`, with its cut-off and its uncertainty.

use quantity::{Charge, HostTime};
use sink::correction::Correction;
use wire::{Counters, Reading};

/// Points kept at most; half as many at least once a record is long.
const POINTS_MAX: usize = 8192;

/// True charge since the first readback, against host time.
#[derive(Debug)]
pub(crate) struct ChargeCurve {
    correction: Correction,
    /// Counters from which charge counts on, and the charge until then.
    base: Option<(Counters, Charge)>,
    latest: Charge,
    points: Vec<(HostTime, f64)>,
    /// One reading in so many is kept.
    stride: u64,
    seen: u64,
}

impl ChargeCurve {
    pub(super) const fn new(correction: Correction) -> Self {
        Self {
            correction,
            base: None,
            latest: Charge::ZERO,
            points: Vec::new(),
            stride: 1,
            seen: 0,
        }
    }

    pub(super) fn take(&mut self, at: HostTime, reading: &Reading) {
        let Some(counters) = reading.counters else {
            return;
        };
        let (base, before) = match self.base {
            // A sink that started anew counts from zero.
            Some((base, before)) if base.time <= counters.time => (base, before),
            Some(_) | None => (counters, self.latest),
        };
        self.base = Some((base, before));
        let span = counters.time.saturating_since(base.time);
        let nominal = counters.charge.saturating_sub(base.charge);
        self.latest = before.saturating_add(self.correction.charge_from_counter(nominal, span));
        if self.seen.is_multiple_of(self.stride) {
            self.keep(at);
        }
        self.seen += 1;
    }

    fn keep(&mut self, at: HostTime) {
        if self.points.len() >= POINTS_MAX {
            let mut index = 0;
            self.points.retain(|_| {
                index += 1;
                index % 2 == 1
            });
            self.stride = self.stride.saturating_mul(2);
        }
        self.points.push((at, self.latest.ampere_hours()));
    }

    /// All of it, in ampere hours.
    pub(crate) fn total_ah(&self) -> f64 {
        self.latest.ampere_hours()
    }

    /// Ampere hours delivered by a host time.
    pub(crate) fn at(&self, at: HostTime) -> f64 {
        let after = self.points.partition_point(|(time, _)| *time <= at);
        let before = after
            .checked_sub(1)
            .and_then(|index| self.points.get(index));
        match (before, self.points.get(after)) {
            (Some((from, low)), Some((to, high))) => {
                let whole = to.saturating_since(*from).seconds();
                let part = at.saturating_since(*from).seconds();
                let share = if whole > 0.0 { part / whole } else { 0.0 };
                low + (high - low) * share
            }
            (Some(_), None) => self.total_ah(),
            (None, _) => 0.0,
        }
    }
}
