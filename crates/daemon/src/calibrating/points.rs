//! The points of a calibration, as they are taken.

use quantity::{Current, Span, Text};
use sink::calibration::{CurrentPoint, Spread, VoltagePoint};
use wire::Reading;

use crate::view::MeterReading;

/// The points taken so far.
#[derive(Debug, Clone, Default)]
pub(super) struct Points {
    taken: usize,
    pub(super) current: Vec<CurrentPoint>,
    pub(super) voltage: Vec<VoltagePoint>,
}

impl Points {
    /// How many setpoints have been dealt with.
    pub(super) const fn taken(&self) -> usize {
        self.taken
    }

    /// Enters what the meters read beside what the sink read at a nominal setpoint, by a
    /// converter with this tick.
    pub(super) fn take(
        &mut self,
        setpoint: Current,
        read: &MeterReading,
        latest: &[Reading],
        tick: Span,
    ) {
        let samples = samples(latest, tick);
        if !read.current.is_empty() {
            let readback = latest.iter().map(|reading| Text(reading.values.current));
            let currents = latest.iter().map(|reading| &reading.values);
            let currents = currents.map(|values| (values.current_min, values.current_max));
            self.current.push(CurrentPoint {
                setpoint,
                reference: read.current.clone(),
                readback: readback.collect(),
                spread: Spread::of(currents, samples),
            });
        }
        if !read.voltage.is_empty() {
            let readback = latest.iter().map(|reading| Text(reading.values.voltage));
            let voltages = latest.iter().map(|reading| &reading.values);
            let voltages = voltages.map(|values| (values.voltage_min, values.voltage_max));
            self.voltage.push(VoltagePoint {
                reference: read.voltage.clone(),
                readback: readback.collect(),
                spread: Spread::of(voltages, samples),
            });
        }
        self.taken += 1;
    }
}

/// How many samples a readback is the mean of: the ticks between one and the next, the largest
/// number where they differ. From one lost between two it comes out too large, and the noise told
/// from it a little too small: the converter's step then counts for more, not for less. 0 of
/// fewer than two readbacks.
fn samples(latest: &[Reading], tick: Span) -> u32 {
    let between = latest.windows(2).filter_map(|pair| match pair {
        [one, next] => Some(next.time.saturating_since(one.time)),
        _ => None,
    });
    let ticks = between.map(|span| span.micros() / tick.micros().max(1));
    ticks
        .max()
        .and_then(|ticks| ticks.try_into().ok())
        .unwrap_or(0)
}
