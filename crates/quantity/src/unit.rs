//! Dimensions and the units each may be written in.
//!
//! One table for parsing, printing, hints and the JSON Schema. Units are the
//! SI's and those accepted with it (The International System of Units, 9th
//! edition, tables 4, 7 and 8), with ASCII spellings where a keyboard lacks the
//! sign: `u` for µ (U+00B5 and U+03BC), `ohm` for Ω, `degC` for °C. A dimension's first spelling
//! per unit is the one that is printed.

use core::fmt;

/// What a quantity measures.
#[derive(Copy, Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Dimension {
    /// Electric current, base unit µA.
    Current,
    /// Voltage, base unit µV.
    Voltage,
    /// Power, base unit µW.
    Power,
    /// Resistance, base unit µΩ.
    Resistance,
    /// Electric charge, base unit µC.
    Charge,
    /// Energy, base unit µJ.
    Energy,
    /// Celsius temperature, base unit m°C.
    Temperature,
    /// A length of time, base unit µs.
    Time,
    /// Thermal resistance, base unit µK/W.
    ThermalResistance,
    /// A ratio, base unit one part in a million.
    Ratio,
    /// Relative change per kelvin, base unit one part in 10^9 per kelvin.
    TemperatureCoefficient,
    /// Square-law factor of a MOSFET, base unit µA/V².
    SquareLawFactor,
    /// Length, base unit µm.
    Length,
    /// Area, base unit µm².
    Area,
}

/// A unit: how it is written and how many base units it is.
#[derive(Copy, Clone, Debug, PartialEq, Eq)]
pub(crate) struct Unit {
    /// Every accepted spelling; the first is printed.
    pub(crate) spellings: &'static [&'static str],
    /// Base units of the dimension in one of this unit.
    pub(crate) factor: i128,
}

const fn unit(spellings: &'static [&'static str], factor: i128) -> Unit {
    Unit { spellings, factor }
}

const CURRENT: &[Unit] = &[
    unit(&["A"], 1_000_000),
    unit(&["mA"], 1_000),
    unit(&["uA", "\u{b5}A", "\u{3bc}A"], 1),
    unit(&["kA"], 1_000_000_000),
];
const VOLTAGE: &[Unit] = &[
    unit(&["V"], 1_000_000),
    unit(&["mV"], 1_000),
    unit(&["uV", "\u{b5}V", "\u{3bc}V"], 1),
    unit(&["kV"], 1_000_000_000),
];
const POWER: &[Unit] = &[
    unit(&["W"], 1_000_000),
    unit(&["mW"], 1_000),
    unit(&["uW", "\u{b5}W", "\u{3bc}W"], 1),
    unit(&["kW"], 1_000_000_000),
];
// Both the Greek letter (U+03A9) and the compatibility ohm sign (U+2126) are
// typed in practice, and look the same.
const RESISTANCE: &[Unit] = &[
    unit(&["ohm", "\u{3a9}", "\u{2126}"], 1_000_000),
    unit(&["mohm", "m\u{3a9}", "m\u{2126}"], 1_000),
    unit(
        &[
            "uohm",
            "\u{b5}ohm",
            "\u{3bc}ohm",
            "u\u{3a9}",
            "\u{b5}\u{3a9}",
            "\u{3bc}\u{3a9}",
            "u\u{2126}",
            "\u{b5}\u{2126}",
            "\u{3bc}\u{2126}",
        ],
        1,
    ),
    unit(&["kohm", "k\u{3a9}", "k\u{2126}"], 1_000_000_000),
    unit(&["Mohm", "M\u{3a9}", "M\u{2126}"], 1_000_000_000_000),
];
const CHARGE: &[Unit] = &[
    unit(&["Ah"], 3_600_000_000),
    unit(&["mAh"], 3_600_000),
    unit(&["uAh", "\u{b5}Ah", "\u{3bc}Ah"], 3_600),
    unit(&["C"], 1_000_000),
    unit(&["mC"], 1_000),
    unit(&["uC", "\u{b5}C", "\u{3bc}C"], 1),
];
const ENERGY: &[Unit] = &[
    unit(&["Wh"], 3_600_000_000),
    unit(&["mWh"], 3_600_000),
    unit(&["uWh", "\u{b5}Wh", "\u{3bc}Wh"], 3_600),
    unit(&["kWh"], 3_600_000_000_000),
    unit(&["J"], 1_000_000),
    unit(&["mJ"], 1_000),
    unit(&["uJ", "\u{b5}J", "\u{3bc}J"], 1),
    unit(&["kJ"], 1_000_000_000),
];
const TEMPERATURE: &[Unit] = &[unit(&["degC", "°C"], 1_000)];
const TIME: &[Unit] = &[
    unit(&["s"], 1_000_000),
    unit(&["ms"], 1_000),
    unit(&["us", "\u{b5}s", "\u{3bc}s"], 1),
    unit(&["min"], 60_000_000),
    unit(&["h"], 3_600_000_000),
    unit(&["d"], 86_400_000_000),
];
const THERMAL_RESISTANCE: &[Unit] = &[
    unit(&["K/W", "degC/W", "°C/W"], 1_000_000),
    unit(&["mK/W"], 1_000),
];
const RATIO: &[Unit] = &[unit(&["%"], 10_000), unit(&["ppm"], 1)];
const TEMPERATURE_COEFFICIENT: &[Unit] = &[
    unit(&["ppm/K", "ppm/degC", "ppm/°C"], 1_000),
    unit(&["%/K", "%/degC", "%/°C"], 10_000_000),
];
const SQUARE_LAW_FACTOR: &[Unit] = &[
    unit(&["A/V2", "A/V^2", "A/V²"], 1_000_000),
    unit(&["mA/V2", "mA/V^2", "mA/V²"], 1_000),
];
const LENGTH: &[Unit] = &[
    unit(&["m"], 1_000_000),
    unit(&["cm"], 10_000),
    unit(&["mm"], 1_000),
];
const AREA: &[Unit] = &[unit(&["mm2", "mm^2", "mm²"], 1_000_000)];

impl Dimension {
    pub(crate) const ALL: [Self; 14] = [
        Self::Current,
        Self::Voltage,
        Self::Power,
        Self::Resistance,
        Self::Charge,
        Self::Energy,
        Self::Temperature,
        Self::Time,
        Self::ThermalResistance,
        Self::Ratio,
        Self::TemperatureCoefficient,
        Self::SquareLawFactor,
        Self::Length,
        Self::Area,
    ];

    /// Its name in a sentence: "current", "length of time"...
    pub const fn name(self) -> &'static str {
        match self {
            Self::Current => "current",
            Self::Voltage => "voltage",
            Self::Power => "power",
            Self::Resistance => "resistance",
            Self::Charge => "charge",
            Self::Energy => "energy",
            Self::Temperature => "temperature",
            Self::Time => "length of time",
            Self::ThermalResistance => "thermal resistance",
            Self::Ratio => "ratio",
            Self::TemperatureCoefficient => "temperature coefficient",
            Self::SquareLawFactor => "square-law factor",
            Self::Length => "length",
            Self::Area => "area",
        }
    }

    /// Its name with the article: "a current", "an energy".
    pub const fn with_article(self) -> &'static str {
        match self {
            Self::Current => "a current",
            Self::Voltage => "a voltage",
            Self::Power => "a power",
            Self::Resistance => "a resistance",
            Self::Charge => "a charge",
            Self::Energy => "an energy",
            Self::Temperature => "a temperature",
            Self::Time => "a length of time",
            Self::ThermalResistance => "a thermal resistance",
            Self::Ratio => "a ratio",
            Self::TemperatureCoefficient => "a temperature coefficient",
            Self::SquareLawFactor => "a square-law factor",
            Self::Length => "a length",
            Self::Area => "an area",
        }
    }

    /// The base unit that a value must be a whole number of.
    pub const fn base_unit(self) -> &'static str {
        match self {
            Self::Current => "uA",
            Self::Voltage => "uV",
            Self::Power => "uW",
            Self::Resistance => "uohm",
            Self::Charge => "uC",
            Self::Energy => "uJ",
            Self::Temperature => "thousandth of a degC",
            Self::Time => "us",
            Self::ThermalResistance => "uK/W",
            Self::Ratio => "ppm",
            Self::TemperatureCoefficient => "part in 10^9 per kelvin",
            Self::SquareLawFactor => "uA/V2",
            Self::Length => "um",
            Self::Area => "square micrometre",
        }
    }

    /// A well-formed example, used in hints and in the JSON Schema.
    pub const fn example(self) -> &'static str {
        match self {
            Self::Current => "500 mA",
            Self::Voltage => "2.75 V",
            Self::Power => "1.5 W",
            Self::Resistance => "0.1 ohm",
            Self::Charge => "3.2 Ah",
            Self::Energy => "1.2 Wh",
            Self::Temperature => "40 degC",
            Self::Time => "10 min",
            Self::ThermalResistance => "1.5 K/W",
            Self::Ratio => "1 %",
            Self::TemperatureCoefficient => "50 ppm/K",
            Self::SquareLawFactor => "4 A/V2",
            Self::Length => "1.2 m",
            Self::Area => "1.5 mm2",
        }
    }

    pub(crate) const fn units(self) -> &'static [Unit] {
        match self {
            Self::Current => CURRENT,
            Self::Voltage => VOLTAGE,
            Self::Power => POWER,
            Self::Resistance => RESISTANCE,
            Self::Charge => CHARGE,
            Self::Energy => ENERGY,
            Self::Temperature => TEMPERATURE,
            Self::Time => TIME,
            Self::ThermalResistance => THERMAL_RESISTANCE,
            Self::Ratio => RATIO,
            Self::TemperatureCoefficient => TEMPERATURE_COEFFICIENT,
            Self::SquareLawFactor => SQUARE_LAW_FACTOR,
            Self::Length => LENGTH,
            Self::Area => AREA,
        }
    }

    /// The printed spellings of all its units, in the table's order.
    pub fn unit_names(self) -> impl Iterator<Item = &'static str> {
        self.units()
            .iter()
            .filter_map(|unit| unit.spellings.first().copied())
    }

    /// The unit of this dimension that is spelt so.
    pub(crate) fn unit_spelt(self, spelling: &str) -> Option<&'static Unit> {
        self.units()
            .iter()
            .find(|unit| unit.spellings.contains(&spelling))
    }
}

impl fmt::Display for Dimension {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.name())
    }
}
