//! What the sink has counted: charge, energy and the time they were counted over.
//!
//! The sink's counters are nominal and run since its power-up; the account adds up their
//! increments since the run's first reading, over sessions and restarts, and corrects sums, not
//! increments, so that no rounding accumulates.
//!
//! What is counted across an edge is shared out by the charge expected on either side of it. A
//! pair whose counters were lost adds nothing; the next one brings it all.

use quantity::{Charge, Energy, Quantity, SinkTime, Span, Voltage};
use sink::correction::Correction;
use wire::Counters;

use crate::observation::Observation;

/// A nominal sum, or the difference of two.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub(crate) struct Counted {
    charge: Charge,
    energy: Energy,
    time: Span,
    /// Mean nominal voltage times time, in uV us.
    voltage_time: i128,
}

impl Counted {
    /// The sum that has been counted since `earlier`.
    pub(crate) fn since(self, earlier: Self) -> Self {
        Self {
            charge: self.charge.saturating_sub(earlier.charge),
            energy: self.energy.saturating_sub(earlier.energy),
            time: self.time.saturating_sub(earlier.time),
            voltage_time: self.voltage_time.saturating_sub(earlier.voltage_time),
        }
    }

    fn plus(self, more: Self) -> Self {
        Self {
            charge: self.charge.saturating_add(more.charge),
            energy: self.energy.saturating_add(more.energy),
            time: self.time.saturating_add(more.time),
            voltage_time: self.voltage_time.saturating_add(more.voltage_time),
        }
    }

    /// The part `share` of it, by charge and energy, and `time` of its time.
    fn part(self, share: Share, time: Span) -> Self {
        let scale = |value: i128| match share.whole {
            0 => 0,
            whole => value.saturating_mul(share.part) / whole,
        };
        let scale_i64 = |value: i128| i64::try_from(scale(value)).unwrap_or(0);
        let span = i128::from(self.time.micros()).max(1);
        Self {
            charge: Charge::from_microcoulombs(scale_i64(self.charge.base_units())),
            energy: Energy::from_microjoules(scale_i64(self.energy.base_units())),
            time,
            voltage_time: self.voltage_time.saturating_mul(i128::from(time.micros())) / span,
        }
    }

    /// The true charge.
    pub(crate) fn charge(self, correction: &Correction) -> Charge {
        correction.charge_from_counter(self.charge, self.time)
    }

    /// The true energy.
    pub(crate) fn energy(self, correction: &Correction) -> Energy {
        let span = i128::from(self.time.micros()).max(1);
        let mean = i64::try_from(self.voltage_time / span).unwrap_or(i64::MAX);
        correction.energy_from_counter(
            self.energy,
            self.charge,
            Voltage::from_microvolts(mean),
            self.time,
        )
    }
}

/// How much of an interval's charge is expected before an edge.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Share {
    pub(crate) part: i128,
    pub(crate) whole: i128,
}

/// What the latest counters added.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Increment {
    /// Sink time of the counters before.
    pub(crate) from: SinkTime,
    /// The sum before it.
    before: Counted,
    added: Counted,
}

impl Increment {
    /// The sum as it stood at an edge within the increment.
    pub(crate) fn at_edge(&self, edge: SinkTime, share: Share) -> Counted {
        let time = edge.saturating_since(self.from).min(self.added.time);
        self.before.plus(self.added.part(share, time))
    }

    /// Nothing added since `from`.
    pub(crate) fn nothing(from: SinkTime, sum: Counted) -> Self {
        Self {
            from,
            before: sum,
            added: Counted::default(),
        }
    }

    /// The nominal charge that was added.
    pub(crate) fn charge(&self) -> Charge {
        self.added.charge
    }
}

/// Adds up what the sink counts.
#[derive(Debug, Clone, Default)]
pub(crate) struct Account {
    sum: Counted,
    last: Option<Counters>,
}

impl Account {
    /// Takes the observation's counters in.
    ///
    /// `None` for the first ones, and when they were lost. The mean voltage of the reading is
    /// taken for the whole time since the counters before: only the voltage offset of the energy
    /// depends on it.
    pub(crate) fn take(&mut self, observation: &Observation) -> Option<Increment> {
        let now = observation.counters?;
        let before = self.last.replace(now)?;
        let time = now.time.saturating_since(before.time);
        let added = Counted {
            charge: now.charge.saturating_sub(before.charge),
            energy: now.energy.saturating_sub(before.energy),
            time,
            voltage_time: observation.voltage_nominal.base_units() * i128::from(time.micros()),
        };
        let increment = Increment {
            from: before.time,
            before: self.sum,
            added,
        };
        self.sum = self.sum.plus(added);
        Some(increment)
    }

    /// The sink has started anew: its counters begin at zero.
    pub(crate) fn restart(&mut self) {
        self.last = None;
    }

    /// What has been counted since the run's first reading.
    pub(crate) fn sum(&self) -> Counted {
        self.sum
    }
}
