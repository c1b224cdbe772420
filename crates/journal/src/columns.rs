//! The columns of an export: one table for every format.
//!
//! Each column has its unit in its name, one sentence of meaning, and how its cell is made from
//! a row. Values are true ones (the record's correction applied) unless the name says nominal.
//! Cells are exact: whole numbers of a decimal fraction of the unit, never floats, so an export
//! loses nothing.

use quantity::{Charge, Energy, HostTime, Span};
use sink::correction::Correction;
use wire::{Reading, TemperatureReading};

use crate::compact::state_name;

/// A readback with all that an export says about it.
#[derive(Debug, Clone, Copy)]
pub struct Row<'a> {
    /// The entry's number.
    pub number: u64,
    /// Host time at which it arrived.
    pub at: HostTime,
    /// Time since the first readback: by the sink's clock, a restart of it bridged by the
    /// host's.
    pub elapsed: Span,
    /// The readback, nominal.
    pub reading: &'a Reading,
    /// True charge since the first readback.
    pub charge: Option<Charge>,
    /// True energy since the first readback.
    pub energy: Option<Energy>,
    /// Label of the step.
    pub label: &'a str,
    /// The record's correction.
    pub correction: &'a Correction,
}

/// One value of a row.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Cell<'a> {
    /// Nothing is known.
    Empty,
    /// A whole number.
    Whole(i64),
    /// A number with this many decimals, as a whole number of the last.
    Decimal {
        /// The value times ten to the power of `decimals`.
        scaled: i64,
        /// Decimals.
        decimals: u8,
    },
    /// Words.
    Text(&'a str),
}

/// What the cells of a column are, where they are not empty.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    /// [`Cell::Decimal`].
    Decimal,
    /// [`Cell::Whole`].
    Whole,
    /// [`Cell::Text`].
    Text,
}

/// A column of an export.
#[derive(Debug, Clone, Copy)]
pub struct Column {
    /// Its name; it ends in the unit, if there is one.
    pub name: &'static str,
    /// What it holds.
    pub meaning: &'static str,
    /// What its cells are, where they are not empty.
    pub kind: Kind,
    /// Makes its cell.
    pub cell: for<'a> fn(&Row<'a>) -> Cell<'a>,
}

const fn column(
    kind: Kind,
    name: &'static str,
    cell: for<'a> fn(&Row<'a>) -> Cell<'a>,
    meaning: &'static str,
) -> Column {
    Column {
        name,
        meaning,
        kind,
        cell,
    }
}

/// Every column, in the order of an export.
pub const COLUMNS: &[Column] = &[
    column(
        Kind::Decimal,
        "time_s",
        |row| micro(whole(row.elapsed.micros())),
        "Time since the first readback, by the sink's clock.",
    ),
    column(
        Kind::Decimal,
        "current_a",
        |row| current(row, |r| r.values.current),
        "Mean current.",
    ),
    column(
        Kind::Decimal,
        "current_min_a",
        |row| current(row, |r| r.values.current_min),
        "Least current.",
    ),
    column(
        Kind::Decimal,
        "current_max_a",
        |row| current(row, |r| r.values.current_max),
        "Largest current.",
    ),
    column(
        Kind::Decimal,
        "voltage_v",
        |row| voltage(row, |r| (r.values.voltage, r.values.current)),
        "Mean voltage.",
    ),
    column(
        Kind::Decimal,
        "voltage_min_v",
        |row| voltage(row, |r| (r.values.voltage_min, r.values.current_min)),
        "Least voltage.",
    ),
    column(
        Kind::Decimal,
        "voltage_max_v",
        |row| voltage(row, |r| (r.values.voltage_max, r.values.current_max)),
        "Largest voltage.",
    ),
    column(
        Kind::Decimal,
        "temperature_degc",
        temperature,
        "Heat sink temperature; empty if its sensor fails.",
    ),
    column(
        Kind::Decimal,
        "charge_ah",
        |row| {
            row.charge
                .map_or(Cell::Empty, |charge| per_hour(charge.microcoulombs()))
        },
        "Charge since the first readback, from the sink's counter.",
    ),
    column(
        Kind::Decimal,
        "energy_wh",
        |row| {
            row.energy
                .map_or(Cell::Empty, |energy| per_hour(energy.microjoules()))
        },
        "Energy since the first readback, from the sink's counter.",
    ),
    column(
        Kind::Text,
        "label",
        |row| Cell::Text(row.label),
        "Label of the step.",
    ),
    column(
        Kind::Text,
        "state",
        |row| Cell::Text(state_name(row.reading.values.state)),
        "The sink's state.",
    ),
    column(
        Kind::Text,
        "sensor_fault",
        sensor_fault,
        "What is wrong with the temperature sensor, if anything.",
    ),
    column(
        Kind::Decimal,
        "current_nominal_a",
        |row| micro(row.reading.values.current.microamperes()),
        "Mean current as the sink gave it.",
    ),
    column(
        Kind::Decimal,
        "current_min_nominal_a",
        |row| micro(row.reading.values.current_min.microamperes()),
        "Least current as the sink gave it.",
    ),
    column(
        Kind::Decimal,
        "current_max_nominal_a",
        |row| micro(row.reading.values.current_max.microamperes()),
        "Largest current as the sink gave it.",
    ),
    column(
        Kind::Decimal,
        "voltage_nominal_v",
        |row| micro(row.reading.values.voltage.microvolts()),
        "Mean voltage as the sink gave it.",
    ),
    column(
        Kind::Decimal,
        "voltage_min_nominal_v",
        |row| micro(row.reading.values.voltage_min.microvolts()),
        "Least voltage as the sink gave it.",
    ),
    column(
        Kind::Decimal,
        "voltage_max_nominal_v",
        |row| micro(row.reading.values.voltage_max.microvolts()),
        "Largest voltage as the sink gave it.",
    ),
    column(
        Kind::Decimal,
        "charge_nominal_c",
        |row| {
            row.reading
                .counters
                .map_or(Cell::Empty, |all| micro(all.charge.microcoulombs()))
        },
        "The sink's own charge counter.",
    ),
    column(
        Kind::Decimal,
        "energy_nominal_j",
        |row| {
            row.reading
                .counters
                .map_or(Cell::Empty, |all| micro(all.energy.microjoules()))
        },
        "The sink's own energy counter.",
    ),
    column(
        Kind::Whole,
        "sink_time_us",
        |row| Cell::Whole(whole(row.reading.time.micros())),
        "The sink's own clock.",
    ),
    column(
        Kind::Whole,
        "host_time_us",
        |row| Cell::Whole(row.at.micros()),
        "When it arrived: microseconds since 1970-01-01T00:00:00Z.",
    ),
    column(
        Kind::Whole,
        "lost",
        |row| Cell::Whole(i64::from(row.reading.lost)),
        "Readbacks lost just before this one.",
    ),
    column(
        Kind::Whole,
        "entry",
        |row| Cell::Whole(whole(row.number)),
        "The entry's number in the journal.",
    ),
];

/// Numbers beyond 292 000 years of microseconds do not occur; they are held there.
fn whole(value: u64) -> i64 {
    i64::try_from(value).unwrap_or(i64::MAX)
}

fn micro(scaled: i64) -> Cell<'static> {
    Cell::Decimal {
        scaled,
        decimals: 6,
    }
}

/// Micro-units times seconds as thousand-millionths of units times hours: divided by 3.6, to
/// the nearest, half away from zero.
fn per_hour(micro: i64) -> Cell<'static> {
    let scaled = i128::from(micro) * 10;
    let rounded = (scaled.abs() + 18) / 36 * scaled.signum();
    let held = i64::try_from(rounded).unwrap_or(if micro < 0 { i64::MIN } else { i64::MAX });
    Cell::Decimal {
        scaled: held,
        decimals: 9,
    }
}

fn current(row: &Row<'_>, which: fn(&Reading) -> quantity::Current) -> Cell<'static> {
    micro(
        row.correction
            .current_from_readback(which(row.reading))
            .microamperes(),
    )
}

fn voltage(
    row: &Row<'_>,
    which: fn(&Reading) -> (quantity::Voltage, quantity::Current),
) -> Cell<'static> {
    let (voltage, current) = which(row.reading);
    micro(
        row.correction
            .voltage_from_readback(voltage, current)
            .microvolts(),
    )
}

fn temperature<'a>(row: &Row<'a>) -> Cell<'a> {
    match row.reading.values.temperature {
        TemperatureReading::Value(value) => Cell::Decimal {
            scaled: value.millidegrees_celsius(),
            decimals: 3,
        },
        TemperatureReading::Open | TemperatureReading::Short => Cell::Empty,
    }
}

fn sensor_fault<'a>(row: &Row<'a>) -> Cell<'a> {
    match row.reading.values.temperature {
        TemperatureReading::Value(_) => Cell::Empty,
        TemperatureReading::Open => Cell::Text("open"),
        TemperatureReading::Short => Cell::Text("short"),
    }
}
