//! Printing: a readable unit, and never a digit lost.
//!
//! The unit is chosen for the eye (`500 mA`, `2.75 V`, `3.2 Ah`, `1.5 h`); the
//! number is the exact decimal in that unit, so that `FromStr` reads back the
//! very same value.

use core::fmt;

use crate::unit::{Dimension, Unit};
use crate::{
    Area, Charge, Current, Energy, Length, Power, Quantity, Ratio, Resistance, Span,
    SquareLawFactor, Temperature, TemperatureCoefficient, ThermalResistance, Voltage,
};

/// The units tried in turn: the first whose rule holds is used.
struct Choice {
    spelling: &'static str,
    /// Smallest magnitude for this unit, in base units.
    at_least: u128,
    /// The magnitude must be a multiple of this, in base units.
    multiple_of: u128,
}

const fn choice(spelling: &'static str, at_least: u128, multiple_of: u128) -> Choice {
    Choice {
        spelling,
        at_least,
        multiple_of,
    }
}

const CURRENT: &[Choice] = &[
    choice("A", 1_000_000, 1),
    choice("mA", 1_000, 1),
    choice("uA", 1, 1),
];
const VOLTAGE: &[Choice] = &[
    choice("V", 1_000_000, 1),
    choice("mV", 1_000, 1),
    choice("uV", 1, 1),
];
const POWER: &[Choice] = &[
    choice("W", 1_000_000, 1),
    choice("mW", 1_000, 1),
    choice("uW", 1, 1),
];
const RESISTANCE: &[Choice] = &[
    choice("Mohm", 1_000_000_000_000, 1_000_000_000),
    choice("kohm", 1_000_000_000, 1_000_000),
    choice("ohm", 1_000_000, 1),
    choice("mohm", 1_000, 1),
    choice("uohm", 1, 1),
];
// The trade counts charge in ampere-hours; coulombs stand where ampere-hours
// would need more than a few decimals, or have none that end.
const CHARGE: &[Choice] = &[
    choice("Ah", 3_600_000_000, 3_600_000),
    choice("mAh", 3_600_000, 360_000),
    choice("C", 1_000_000, 1),
    choice("mC", 1_000, 1),
    choice("uC", 1, 1),
];
const ENERGY: &[Choice] = &[
    choice("Wh", 3_600_000_000, 3_600_000),
    choice("mWh", 3_600_000, 360_000),
    choice("J", 1_000_000, 1),
    choice("mJ", 1_000, 1),
    choice("uJ", 1, 1),
];
const TEMPERATURE: &[Choice] = &[choice("degC", 0, 1)];
const TIME: &[Choice] = &[
    choice("d", 172_800_000_000, 86_400_000_000),
    choice("h", 3_600_000_000, 900_000_000),
    choice("min", 60_000_000, 30_000_000),
    choice("s", 1_000_000, 1),
    choice("ms", 1_000, 1),
    choice("us", 1, 1),
];
const THERMAL_RESISTANCE: &[Choice] = &[choice("K/W", 0, 1)];
const RATIO: &[Choice] = &[choice("%", 100, 100), choice("ppm", 0, 1)];
const TEMPERATURE_COEFFICIENT: &[Choice] = &[choice("ppm/K", 0, 1)];
const SQUARE_LAW_FACTOR: &[Choice] = &[choice("A/V2", 1_000_000, 1), choice("mA/V2", 0, 1)];
const LENGTH: &[Choice] = &[choice("m", 1_000_000, 1), choice("mm", 0, 1)];
const AREA: &[Choice] = &[choice("mm2", 0, 1)];

const fn choices(dimension: Dimension) -> &'static [Choice] {
    match dimension {
        Dimension::Current => CURRENT,
        Dimension::Voltage => VOLTAGE,
        Dimension::Power => POWER,
        Dimension::Resistance => RESISTANCE,
        Dimension::Charge => CHARGE,
        Dimension::Energy => ENERGY,
        Dimension::Temperature => TEMPERATURE,
        Dimension::Time => TIME,
        Dimension::ThermalResistance => THERMAL_RESISTANCE,
        Dimension::Ratio => RATIO,
        Dimension::TemperatureCoefficient => TEMPERATURE_COEFFICIENT,
        Dimension::SquareLawFactor => SQUARE_LAW_FACTOR,
        Dimension::Length => LENGTH,
        Dimension::Area => AREA,
    }
}

/// The unit for zero: the one without a prefix.
const fn zero_unit(dimension: Dimension) -> &'static str {
    match dimension {
        Dimension::Current => "A",
        Dimension::Voltage => "V",
        Dimension::Power => "W",
        Dimension::Resistance => "ohm",
        Dimension::Charge => "Ah",
        Dimension::Energy => "Wh",
        Dimension::Temperature => "degC",
        Dimension::Time => "s",
        Dimension::ThermalResistance => "K/W",
        Dimension::Ratio => "%",
        Dimension::TemperatureCoefficient => "ppm/K",
        Dimension::SquareLawFactor => "A/V2",
        Dimension::Length => "m",
        Dimension::Area => "mm2",
    }
}

fn unit_for(dimension: Dimension, magnitude: u128) -> Option<(&'static str, &'static Unit)> {
    let spelling = choices(dimension)
        .iter()
        .find(|choice| magnitude >= choice.at_least && magnitude.is_multiple_of(choice.multiple_of))
        .filter(|_| magnitude > 0)
        .map_or_else(|| zero_unit(dimension), |choice| choice.spelling);
    dimension.unit_spelt(spelling).map(|unit| (spelling, unit))
}

/// Writes `magnitude / divisor` as an exact decimal. The divisor's factors
/// other than two and five must divide the magnitude; the tables see to that.
pub(crate) fn write_decimal(
    f: &mut fmt::Formatter<'_>,
    magnitude: u128,
    divisor: u128,
) -> fmt::Result {
    write!(f, "{}", magnitude / divisor)?;
    let mut remainder = magnitude % divisor;
    if remainder > 0 {
        f.write_str(".")?;
    }
    while remainder > 0 {
        remainder *= 10;
        write!(f, "{}", remainder / divisor)?;
        remainder %= divisor;
    }
    Ok(())
}

fn print<Q: Quantity>(quantity: Q, f: &mut fmt::Formatter<'_>) -> fmt::Result {
    let value = quantity.base_units();
    let magnitude = value.unsigned_abs();
    let Some((spelling, unit)) = unit_for(Q::DIMENSION, magnitude) else {
        // The tables name only units that exist; a test goes through them all.
        return Err(fmt::Error);
    };
    if value < 0 {
        f.write_str("-")?;
    }
    write_decimal(f, magnitude, unit.factor.unsigned_abs())?;
    write!(f, " {spelling}")
}

macro_rules! display {
    ($($name:ident)*) => {
        $(
            /// The exact value in a readable unit; `FromStr` reads it back.
            /// A width given to the formatter pads the whole text.
            impl fmt::Display for $name {
                fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                    if f.width().is_none() {
                        return print(*self, f);
                    }
                    f.pad(&alloc::format!("{self}"))
                }
            }
        )*
    };
}

display!(Current Voltage Power Resistance Charge Energy Temperature Span);
display!(ThermalResistance Ratio TemperatureCoefficient SquareLawFactor Length Area);
