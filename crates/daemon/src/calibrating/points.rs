//! The points of a calibration, as they are taken.

use quantity::{Current, Text};
use sink::calibration::{CurrentPoint, VoltagePoint};
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

    /// Enters what the meters read beside what the sink read at a nominal setpoint.
    pub(super) fn take(&mut self, setpoint: Current, read: &MeterReading, latest: &[Reading]) {
        if !read.current.is_empty() {
            let readback = latest.iter().map(|reading| Text(reading.values.current));
            self.current.push(CurrentPoint {
                setpoint,
                reference: read.current.clone(),
                readback: readback.collect(),
            });
        }
        if !read.voltage.is_empty() {
            let readback = latest.iter().map(|reading| Text(reading.values.voltage));
            self.voltage.push(VoltagePoint {
                reference: read.voltage.clone(),
                readback: readback.collect(),
            });
        }
        self.taken += 1;
    }
}
