//! Reading a quantity from text: a decimal number and its unit.
//!
//! `[sign] digits [. digits] [spaces] unit`, in exact decimal arithmetic, no
//! float on the way. A bare number is refused, since a forgotten unit on a
//! bench is a fire; so is a value finer than the base unit, since rounding it
//! in silence would change what was asked. No exponents, no thousands marks.

use alloc::string::{String, ToString};
use core::fmt;
use core::str::FromStr;

use crate::unit::Dimension;
use crate::{
    Area, Charge, Current, Energy, Length, Power, Quantity, Ratio, Resistance, Span,
    SquareLawFactor, Temperature, TemperatureCoefficient, ThermalResistance, Voltage,
};

/// Why a text is no quantity.
#[derive(Clone, Debug, PartialEq, Eq)]
#[non_exhaustive]
pub enum ParseErrorKind {
    /// Nothing but white space.
    Empty,
    /// No digit where the number should begin.
    NumberMissing,
    /// A comma where a decimal point should be.
    DecimalComma,
    /// A decimal point without a digit behind it.
    DigitsMissing,
    /// A number without a unit.
    UnitMissing,
    /// A unit that is in no table.
    UnknownUnit {
        /// The unit as written.
        unit: String,
    },
    /// A known unit of another dimension.
    WrongDimension {
        /// The unit as written.
        unit: String,
        /// What that unit measures.
        found: Dimension,
    },
    /// Finer than the base unit of the dimension.
    TooFine,
    /// Beyond the range that can be held.
    OutOfRange,
    /// Below zero where only zero and above make sense.
    Negative,
}

/// A text that is no quantity, with the place of the fault in it.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ParseError {
    /// What is wrong.
    pub kind: ParseErrorKind,
    /// Where, as a byte offset into the text.
    pub offset: usize,
    /// The dimension that was wanted.
    pub wanted: Dimension,
    /// The whole text as given.
    pub text: String,
}

impl ParseError {
    pub(crate) fn new(kind: ParseErrorKind, offset: usize, wanted: Dimension, text: &str) -> Self {
        Self {
            kind,
            offset,
            wanted,
            text: text.to_string(),
        }
    }

    /// How to mend it, as the end of a sentence.
    pub fn hint(&self) -> String {
        let example = self.wanted.example();
        match &self.kind {
            ParseErrorKind::Empty
            | ParseErrorKind::NumberMissing
            | ParseErrorKind::DigitsMissing => {
                alloc::format!("write a decimal number and a unit, for example `{example}`")
            }
            ParseErrorKind::DecimalComma => alloc::format!(
                "write a decimal point: `{}`",
                self.text.trim().replacen(',', ".", 1)
            ),
            ParseErrorKind::UnitMissing => alloc::format!(
                "write the unit after the number, for example `{example}` (units of {}: {})",
                self.wanted.with_article(),
                Units(self.wanted)
            ),
            ParseErrorKind::UnknownUnit { unit } => self.unit_hint(unit),
            ParseErrorKind::WrongDimension { unit, .. } => self.dimension_hint(unit),
            ParseErrorKind::TooFine => {
                alloc::format!(
                    "round it to whole multiples of one {}",
                    self.wanted.base_unit()
                )
            }
            ParseErrorKind::OutOfRange => {
                alloc::format!("check the number and its unit, for example `{example}`")
            }
            ParseErrorKind::Negative => "write it without the minus sign".to_string(),
        }
    }

    fn unit_hint(&self, unit: &str) -> String {
        let units = Units(self.wanted);
        if unit.starts_with(['e', 'E']) && unit.get(1..2).is_some_and(starts_exponent) {
            return alloc::format!(
                "write the number without an exponent, for example `{}`",
                self.wanted.example()
            );
        }
        // Two units that differ in case only differ a billionfold (mohm, Mohm),
        // so the right spelling is offered and never assumed.
        let near = self
            .wanted
            .unit_names()
            .find(|name| name.eq_ignore_ascii_case(unit));
        match near {
            Some(name) => alloc::format!("write `{name}`: upper and lower case differ in units"),
            None => alloc::format!("units of {}: {units}", self.wanted.with_article()),
        }
    }

    fn dimension_hint(&self, unit: &str) -> String {
        if self.wanted == Dimension::Temperature && unit == "C" {
            return "write `degC` for degrees Celsius; `C` is the coulomb".to_string();
        }
        if self.wanted == Dimension::Current && unit == "C" {
            return "for a multiple of the rated capacity write `It`, for example `0.2 It`; \
                    otherwise a unit of current, for example `500 mA`"
                .to_string();
        }
        alloc::format!(
            "units of {}: {}",
            self.wanted.with_article(),
            Units(self.wanted)
        )
    }
}

fn starts_exponent(text: &str) -> bool {
    text.starts_with(|c: char| c.is_ascii_digit() || c == '-' || c == '+')
}

struct Units(Dimension);

impl fmt::Display for Units {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (index, name) in self.0.unit_names().enumerate() {
            if index > 0 {
                f.write_str(", ")?;
            }
            f.write_str(name)?;
        }
        Ok(())
    }
}

impl fmt::Display for ParseError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let (text, wanted) = (&self.text, self.wanted);
        match &self.kind {
            ParseErrorKind::Empty => write!(f, "an empty text is no {wanted}"),
            ParseErrorKind::NumberMissing => {
                write!(f, "`{text}` has no number at byte {}", self.offset)
            }
            ParseErrorKind::DecimalComma => {
                write!(f, "`{text}` has a comma at byte {}", self.offset)
            }
            ParseErrorKind::DigitsMissing => write!(
                f,
                "`{text}` has no digit after the point at byte {}",
                self.offset
            ),
            ParseErrorKind::UnitMissing => write!(f, "`{text}` has no unit"),
            ParseErrorKind::UnknownUnit { unit } => write!(
                f,
                "`{text}` has an unknown unit `{unit}` at byte {}",
                self.offset
            ),
            ParseErrorKind::WrongDimension { unit, found } => write!(
                f,
                "`{text}` is {} (unit `{unit}` at byte {}), but {} is wanted",
                found.with_article(),
                self.offset,
                wanted.with_article()
            ),
            ParseErrorKind::TooFine => {
                write!(f, "`{text}` is finer than one {}", self.wanted.base_unit())
            }
            ParseErrorKind::OutOfRange => {
                write!(
                    f,
                    "`{text}` is beyond the range of {}",
                    wanted.with_article()
                )
            }
            ParseErrorKind::Negative => write!(f, "`{text}` is below zero, which no {wanted} is"),
        }?;
        write!(f, "; {}", self.hint())
    }
}

impl core::error::Error for ParseError {}

/// A decimal number as written: `whole.fraction` with a sign, digits only.
pub(crate) struct Decimal<'a> {
    negative: bool,
    whole: &'a str,
    fraction: &'a str,
}

/// The number, the unit's spelling and the unit's offset.
pub(crate) struct Parts<'a> {
    pub(crate) number: Decimal<'a>,
    pub(crate) number_offset: usize,
    pub(crate) unit: &'a str,
    pub(crate) unit_offset: usize,
}

fn split_digits(text: &str) -> (&str, &str) {
    let end = text
        .find(|c: char| !c.is_ascii_digit())
        .unwrap_or(text.len());
    text.split_at(end)
}

/// Splits a text into number and unit; judges neither the unit nor the range.
pub(crate) fn split(text: &str, wanted: Dimension) -> Result<Parts<'_>, ParseError> {
    let fault = |kind, rest: &str| {
        // `rest` is always a tail of `text`, so the difference is its offset.
        Err(ParseError::new(kind, text.len() - rest.len(), wanted, text))
    };
    let start = text.trim_start();
    if start.is_empty() {
        return fault(ParseErrorKind::Empty, start);
    }
    let (negative, unsigned) = match start.strip_prefix('-') {
        Some(rest) => (true, rest),
        None => (false, start.strip_prefix('+').unwrap_or(start)),
    };
    let (whole, rest) = split_digits(unsigned);
    if whole.is_empty() {
        return fault(ParseErrorKind::NumberMissing, unsigned);
    }
    let (fraction, rest) = match rest.strip_prefix('.') {
        Some(behind) => {
            let (fraction, tail) = split_digits(behind);
            if fraction.is_empty() {
                return fault(ParseErrorKind::DigitsMissing, behind);
            }
            (fraction, tail)
        }
        None => ("", rest),
    };
    if rest.starts_with(',') {
        return fault(ParseErrorKind::DecimalComma, rest);
    }
    let tail = rest.trim_start();
    let unit = tail.trim_end();
    if unit.is_empty() {
        return fault(ParseErrorKind::UnitMissing, rest);
    }
    Ok(Parts {
        number: Decimal {
            negative,
            whole,
            fraction,
        },
        number_offset: text.len() - start.len(),
        unit,
        unit_offset: text.len() - tail.len(),
    })
}

/// The number times a factor, exactly; the kind of error says which end it
/// fell off. A magnitude above `u64::MAX` is out of range for every type here.
pub(crate) fn scale(number: &Decimal<'_>, factor: i128) -> Result<i128, ParseErrorKind> {
    let limit = i128::from(u64::MAX);
    let whole = number.whole.trim_start_matches('0');
    let fraction = number.fraction.trim_end_matches('0');
    // No factor of the table has more than 13 powers of two or of five, so a
    // longer fraction that does not end in zero is never a whole base unit.
    if fraction.len() > 18 {
        return Err(ParseErrorKind::TooFine);
    }
    let digits = |text: &str| {
        text.bytes()
            .fold(0_i128, |value, digit| value * 10 + i128::from(digit - b'0'))
    };
    if whole.len() > 20 {
        return Err(ParseErrorKind::OutOfRange);
    }
    let whole_units = digits(whole) * factor;
    if whole_units > limit {
        return Err(ParseErrorKind::OutOfRange);
    }
    let power = fraction.bytes().fold(1_i128, |power, _| power * 10);
    let fraction_units = digits(fraction) * factor;
    if fraction_units % power != 0 {
        return Err(ParseErrorKind::TooFine);
    }
    let magnitude = whole_units + fraction_units / power;
    Ok(if number.negative {
        -magnitude
    } else {
        magnitude
    })
}

pub(crate) fn parse<Q: Quantity>(text: &str) -> Result<Q, ParseError> {
    let wanted = Q::DIMENSION;
    let parts = split(text, wanted)?;
    let Some(unit) = wanted.unit_spelt(parts.unit) else {
        let other = Dimension::ALL
            .into_iter()
            .find(|dimension| dimension.unit_spelt(parts.unit).is_some());
        let unit = parts.unit.to_string();
        let kind = match other {
            Some(found) => ParseErrorKind::WrongDimension { unit, found },
            None => ParseErrorKind::UnknownUnit { unit },
        };
        return Err(ParseError::new(kind, parts.unit_offset, wanted, text));
    };
    let fault = |kind| ParseError::new(kind, parts.number_offset, wanted, text);
    let units = scale(&parts.number, unit.factor).map_err(fault)?;
    if units < 0 && Q::SMALLEST == 0 {
        return Err(fault(ParseErrorKind::Negative));
    }
    Q::from_base_units(units).ok_or_else(|| fault(ParseErrorKind::OutOfRange))
}

macro_rules! from_str {
    ($($name:ident)*) => {
        $(
            impl FromStr for $name {
                type Err = ParseError;

                fn from_str(text: &str) -> Result<Self, ParseError> {
                    parse(text)
                }
            }
        )*
    };
}

from_str!(Current Voltage Power Resistance Charge Energy Temperature Span);
from_str!(ThermalResistance Ratio TemperatureCoefficient SquareLawFactor Length Area);
