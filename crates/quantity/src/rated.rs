//! A current in a sequence: amperes, or a multiple of the rated capacity.
//!
//! IEC 61960-3 and its relatives write a discharge current as a multiple of the
//! reference test current `It`: 1 It in amperes is the rated capacity in
//! ampere-hours over one hour. (From memory of the standard's definition
//! I_t = C_5 Ah / 1 h.)

use core::fmt;
use core::str::FromStr;

use crate::parse::{ParseError, ParseErrorKind, parse, scale, split};
use crate::print::write_decimal;
use crate::product::divide_rounded;
use crate::unit::Dimension;
use crate::{Charge, Current, Quantity};

/// Seconds in an hour times parts in a million.
const HOUR_TIMES_MILLION: i128 = 3_600 * 1_000_000;

/// A current as a sequence may write it: `500 mA` or `0.2 It`.
#[derive(Copy, Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum CurrentSpec {
    /// A current in its own right.
    Absolute(Current),
    /// A multiple of the rated capacity over one hour.
    RatedMultiple {
        /// The multiple in millionths: 0.2 It is 200 000.
        parts_per_million: u64,
    },
}

impl CurrentSpec {
    /// The current in microamperes, the multiple rounded to the nearest one,
    /// half away from zero; `None` beyond the range.
    pub fn resolve(self, rated_capacity: Charge) -> Option<Current> {
        match self {
            Self::Absolute(current) => Some(current),
            Self::RatedMultiple { parts_per_million } => {
                let product = i128::from(parts_per_million)
                    .checked_mul(i128::from(rated_capacity.microcoulombs()))?;
                Current::from_base_units(divide_rounded(product, HOUR_TIMES_MILLION))
            }
        }
    }

    /// Whether the rated capacity is needed to know the current.
    pub const fn needs_rated_capacity(self) -> bool {
        matches!(self, Self::RatedMultiple { .. })
    }
}

impl From<Current> for CurrentSpec {
    fn from(current: Current) -> Self {
        Self::Absolute(current)
    }
}

impl FromStr for CurrentSpec {
    type Err = ParseError;

    fn from_str(text: &str) -> Result<Self, ParseError> {
        let wanted = Dimension::Current;
        let parts = split(text, wanted)?;
        if parts.unit != "It" {
            return parse(text).map(Self::Absolute);
        }
        let fault = |kind| ParseError::new(kind, parts.number_offset, wanted, text);
        let millionths = scale(&parts.number, 1_000_000).map_err(fault)?;
        if millionths < 0 {
            return Err(fault(ParseErrorKind::Negative));
        }
        u64::try_from(millionths)
            .map(|parts_per_million| Self::RatedMultiple { parts_per_million })
            .map_err(|_| fault(ParseErrorKind::OutOfRange))
    }
}

impl fmt::Display for CurrentSpec {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::Absolute(current) => current.fmt(f),
            Self::RatedMultiple { parts_per_million } => {
                write_decimal(f, u128::from(parts_per_million), 1_000_000)?;
                f.write_str(" It")
            }
        }
    }
}
