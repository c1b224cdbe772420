//! A reading turned into true values, with the interval that it speaks for.
//!
//! The first reading of a session covers a time before the session, so its extremes are nobody's:
//! its means stand in for them.

use quantity::{Current, HostTime, SinkTime, Span, Voltage};
use sequence::plan::Plan;
use sink::correction::Correction;
use wire::{Counters, Reading, SinkState, TemperatureReading};

/// Mean and extremes over the interval.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Spread<T> {
    pub(crate) mean: T,
    pub(crate) min: T,
    pub(crate) max: T,
}

/// How much of an interval its extremes are of.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Cover {
    /// All of it.
    Whole,
    /// Perhaps only its end: pairs were lost, or the sink was told another readback interval and
    /// began its window anew.
    End,
}

/// A reading in true values.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Observation {
    /// When the host learned of it.
    pub(crate) at: HostTime,
    /// End of the previous interval; equals `time` for the first reading of a session.
    pub(crate) from: SinkTime,
    /// End of this interval.
    pub(crate) time: SinkTime,
    pub(crate) current: Spread<Current>,
    pub(crate) voltage: Spread<Voltage>,
    pub(crate) temperature: TemperatureReading,
    pub(crate) state: SinkState,
    pub(crate) counters: Option<Counters>,
    /// Mean nominal voltage, which the energy's correction wants.
    pub(crate) voltage_nominal: Voltage,
    /// Mean nominal current, which the counters count: an offset that the correction adds is not
    /// in them.
    pub(crate) current_nominal: Current,
    /// Pairs lost since the previous one: the extremes do not cover the whole interval.
    pub(crate) lost: u16,
    /// How much of the interval the extremes are of.
    pub(crate) cover: Cover,
    /// The first reading of a session.
    pub(crate) first: bool,
    /// A value that no working converter shows: at its stop, or out of order.
    pub(crate) impossible: bool,
    /// The largest current is at its converter's stop: what flows is that or more.
    pub(crate) current_at_stop: bool,
}

impl Observation {
    /// Turns a reading into true values; `previous` is the sink time of the one before, `anew`
    /// whether the sink may have begun its window anew since.
    pub(crate) fn new(
        plan: &Plan,
        reading: &Reading,
        at: HostTime,
        previous: Option<SinkTime>,
        anew: bool,
    ) -> Self {
        let values = reading.values;
        let first = previous.is_none();
        let current = Spread {
            mean: values.current,
            min: if first {
                values.current
            } else {
                values.current_min
            },
            max: if first {
                values.current
            } else {
                values.current_max
            },
        };
        let voltage = Spread {
            mean: values.voltage,
            min: if first {
                values.voltage
            } else {
                values.voltage_min
            },
            max: if first {
                values.voltage
            } else {
                values.voltage_max
            },
        };
        let current_at_stop =
            current.max.microamperes() >= stop(plan.ranges.current.microamperes());
        Self {
            at,
            from: previous.unwrap_or(reading.time),
            time: reading.time,
            current: true_current(&plan.correction, current),
            voltage: true_voltage(&plan.correction, voltage, current),
            temperature: values.temperature,
            state: values.state,
            counters: reading.counters,
            voltage_nominal: values.voltage,
            current_nominal: values.current,
            lost: reading.lost,
            cover: if anew || reading.lost > 0 {
                Cover::End
            } else {
                Cover::Whole
            },
            first,
            current_at_stop,
            impossible: current_at_stop
                || voltage.max.microvolts() >= stop(plan.ranges.voltage.microvolts())
                || out_of_order(current)
                || out_of_order(voltage),
        }
    }

    /// How long the interval is.
    pub(crate) fn interval(&self) -> Span {
        self.time.saturating_since(self.from)
    }

    /// Whether a step is in progress on the sink.
    pub(crate) fn on(&self) -> bool {
        match self.state {
            SinkState::On | SinkState::Saturated => true,
            SinkState::Off | SinkState::Latched(_) => false,
        }
    }
}

fn true_current(correction: &Correction, nominal: Spread<Current>) -> Spread<Current> {
    Spread {
        mean: correction.current_from_readback(nominal.mean),
        min: correction.current_from_readback(nominal.min),
        max: correction.current_from_readback(nominal.max),
    }
}

/// At the device under test. Over two wires the extremes are bounds: the least voltage comes with
/// the largest current, but its drop is not counted on.
fn true_voltage(
    correction: &Correction,
    nominal: Spread<Voltage>,
    current: Spread<Current>,
) -> Spread<Voltage> {
    Spread {
        mean: correction.voltage_from_readback(nominal.mean, current.mean),
        min: correction.voltage_from_readback(nominal.min, current.min),
        max: correction.voltage_from_readback(nominal.max, current.max),
    }
}

/// The highest code of a converter with ten bits or more lies within a thousandth of its full
/// scale: what shows there is not large but beyond what the converter can tell.
const fn stop(full_scale: i64) -> i64 {
    full_scale.saturating_sub(full_scale / 1000)
}

fn out_of_order<T: PartialOrd + Copy>(spread: Spread<T>) -> bool {
    spread.min > spread.mean || spread.mean > spread.max
}
