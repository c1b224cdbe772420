//! The compact form of a readback: one JSON array, its columns named in the segment's first line.
//!
//! Readbacks are nearly all of a record, so they get a form of their own: short to store, and
//! simple enough to be read by hand-written code at the speed of the disk. Values are integers
//! in the units of the line protocol. Extremes are written as distances from the mean, since
//! that is short; a reading that this form cannot hold exactly is refused by [`encode`] and
//! takes the general form instead, so nothing is ever rounded.

use quantity::{Charge, Current, Energy, HostTime, SinkTime, Temperature, Voltage};
use wire::{Cause, Counters, OrderNumber, Readback, Reading, SinkState, TemperatureReading};

/// The columns of the array, in order, as each segment's first line names them.
pub(crate) const COLUMN_NAMES: [&str; 19] = [
    "number",
    "at_us_since_segment",
    "readback",
    "sink_time_us",
    "current_ua",
    "current_below_mean_ua",
    "current_above_mean_ua",
    "voltage_uv",
    "voltage_below_mean_uv",
    "voltage_above_mean_uv",
    "temperature_mdegc",
    "state",
    "lost",
    "charge_uc",
    "energy_uj",
    "step",
    "queued",
    "damaged",
    "crc",
];

/// What the sink can be doing, by the number in the `state` column.
pub(crate) const STATES: [(SinkState, &str); 12] = [
    (SinkState::Off, "off"),
    (SinkState::On, "on"),
    (SinkState::Saturated, "saturated"),
    (SinkState::Latched(Cause::Current), "latched_current"),
    (SinkState::Latched(Cause::Power), "latched_power"),
    (
        SinkState::Latched(Cause::VoltageHigh),
        "latched_voltage_high",
    ),
    (SinkState::Latched(Cause::VoltageLow), "latched_voltage_low"),
    (
        SinkState::Latched(Cause::Temperature),
        "latched_temperature",
    ),
    (SinkState::Latched(Cause::Excess), "latched_excess"),
    (SinkState::Latched(Cause::Sensor), "latched_sensor"),
    (SinkState::Latched(Cause::Deadman), "latched_deadman"),
    (SinkState::Latched(Cause::Watchdog), "latched_watchdog"),
];

/// The name of a state, as the records and exports write it.
pub(crate) fn state_name(state: SinkState) -> &'static str {
    STATES
        .iter()
        .find(|(known, _)| *known == state)
        .map_or("unknown", |(_, name)| name)
}

/// Appends `[number,...,damaged` without the closing checksum. Returns false, with nothing
/// appended, if the reading cannot be held exactly.
pub(crate) fn encode(
    line: &mut Vec<u8>,
    base: HostTime,
    number: u64,
    at: HostTime,
    reading: &Reading,
) -> bool {
    let values = &reading.values;
    let spread =
        |mean: i64, low: i64, high: i64| Some((mean.checked_sub(low)?, high.checked_sub(mean)?));
    let (Some(at), Some(current), Some(voltage)) = (
        at.micros().checked_sub(base.micros()),
        spread(
            values.current.microamperes(),
            values.current_min.microamperes(),
            values.current_max.microamperes(),
        ),
        spread(
            values.voltage.microvolts(),
            values.voltage_min.microvolts(),
            values.voltage_max.microvolts(),
        ),
    ) else {
        return false;
    };
    let Some(state) = STATES.iter().position(|(known, _)| *known == values.state) else {
        return false;
    };
    if reading
        .counters
        .is_some_and(|counters| counters.time != reading.time)
    {
        return false;
    }

    let mut row = Row {
        line,
        digits: itoa::Buffer::new(),
    };
    row.first(number);
    row.next(at);
    row.next(reading.readback);
    row.next(reading.time.micros());
    row.next(values.current.microamperes());
    row.next(current.0);
    row.next(current.1);
    row.next(values.voltage.microvolts());
    row.next(voltage.0);
    row.next(voltage.1);
    match values.temperature {
        TemperatureReading::Value(temperature) => row.next(temperature.millidegrees_celsius()),
        TemperatureReading::Open => row.word(b",\"open\""),
        TemperatureReading::Short => row.word(b",\"short\""),
    }
    row.next(state);
    row.next(reading.lost);
    match reading.counters {
        Some(counters) => {
            row.next(counters.charge.microcoulombs());
            row.next(counters.energy.microjoules());
            row.next(counters.step.0);
            row.next(counters.queued);
            row.next(counters.damaged);
        }
        None => row.word(b",null,null,null,null,null"),
    }
    true
}

struct Row<'a> {
    line: &'a mut Vec<u8>,
    digits: itoa::Buffer,
}

impl Row<'_> {
    fn first(&mut self, value: u64) {
        self.line.push(b'[');
        self.line
            .extend_from_slice(self.digits.format(value).as_bytes());
    }

    fn next<I: itoa::Integer>(&mut self, value: I) {
        self.line.push(b',');
        self.line
            .extend_from_slice(self.digits.format(value).as_bytes());
    }

    fn word(&mut self, word: &[u8]) {
        self.line.extend_from_slice(word);
    }
}

/// Reads what [`encode`] wrote. `None`: the array is not of this form.
pub(crate) fn decode(array: &[u8], base: HostTime) -> Option<(u64, HostTime, Reading)> {
    let mut row = Fields {
        rest: array.strip_prefix(b"[")?,
    };
    let number = row.unsigned()?;
    let at = row.next_signed()?.checked_add(base.micros())?;
    let readback = row.next_u16()?;
    let time = SinkTime::from_micros(row.next_unsigned()?);
    let (current, current_min, current_max) = row.spread()?;
    let (voltage, voltage_min, voltage_max) = row.spread()?;
    let temperature = if row.word(b",\"open\"") {
        TemperatureReading::Open
    } else if row.word(b",\"short\"") {
        TemperatureReading::Short
    } else {
        TemperatureReading::Value(Temperature::from_millidegrees_celsius(row.next_signed()?))
    };
    let state = usize::try_from(row.next_unsigned()?).ok()?;
    let (state, _) = *STATES.get(state)?;
    let lost = row.next_u16()?;
    let counters = if row.word(b",null,null,null,null,null") {
        None
    } else {
        Some(Counters {
            time,
            charge: Charge::from_microcoulombs(row.next_signed()?),
            energy: Energy::from_microjoules(row.next_signed()?),
            step: OrderNumber(row.next_u16()?),
            queued: row.next_u16()?,
            damaged: row.next_u16()?,
        })
    };
    if !row.rest.is_empty() {
        return None;
    }
    let values = Readback {
        current: Current::from_microamperes(current),
        current_min: Current::from_microamperes(current_min),
        current_max: Current::from_microamperes(current_max),
        voltage: Voltage::from_microvolts(voltage),
        voltage_min: Voltage::from_microvolts(voltage_min),
        voltage_max: Voltage::from_microvolts(voltage_max),
        temperature,
        state,
    };
    Some((
        number,
        HostTime::from_micros(at),
        Reading {
            readback,
            time,
            values,
            counters,
            lost,
        },
    ))
}

/// What is left to read of an array.
struct Fields<'a> {
    rest: &'a [u8],
}

impl Fields<'_> {
    /// Digits without sign, at least one, at most nineteen: those always fit.
    #[inline]
    fn unsigned(&mut self) -> Option<u64> {
        let mut value = 0_u64;
        let mut length = 0_usize;
        for byte in self.rest {
            let digit = byte.wrapping_sub(b'0');
            if digit > 9 {
                break;
            }
            value = value.wrapping_mul(10).wrapping_add(u64::from(digit));
            length += 1;
        }
        if length == 0 {
            return None;
        }
        let (digits, rest) = self.rest.split_at_checked(length)?;
        self.rest = rest;
        if length <= 19 {
            Some(value)
        } else {
            std::str::from_utf8(digits).ok()?.parse().ok()
        }
    }

    #[inline]
    fn next_unsigned(&mut self) -> Option<u64> {
        self.rest = self.rest.strip_prefix(b",")?;
        self.unsigned()
    }

    #[inline]
    fn next_signed(&mut self) -> Option<i64> {
        self.rest = self.rest.strip_prefix(b",")?;
        if let Some(rest) = self.rest.strip_prefix(b"-") {
            self.rest = rest;
            0_i64.checked_sub_unsigned(self.unsigned()?)
        } else {
            i64::try_from(self.unsigned()?).ok()
        }
    }

    #[inline]
    fn next_u16(&mut self) -> Option<u16> {
        u16::try_from(self.next_unsigned()?).ok()
    }

    /// A mean with its distances to the least and the largest value.
    #[inline]
    fn spread(&mut self) -> Option<(i64, i64, i64)> {
        let mean = self.next_signed()?;
        let below = self.next_signed()?;
        let above = self.next_signed()?;
        Some((mean, mean.checked_sub(below)?, mean.checked_add(above)?))
    }

    #[inline]
    fn word(&mut self, word: &[u8]) -> bool {
        match self.rest.strip_prefix(word) {
            Some(rest) => {
                self.rest = rest;
                true
            }
            None => false,
        }
    }
}

#[cfg(test)]
mod tests;
