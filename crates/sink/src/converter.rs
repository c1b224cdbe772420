//! Codes and nominal currents of the converter that sets.
//!
//! `I = code * V_full_scale / (D * R_sense)`, with D = 2^N or 2^N - 1 as the
//! bench file says. The code for a wanted current is computed here, exactly,
//! and never guessed: a code is easily taken for a current, and a sink set by
//! hand to code 16 "for 2 mA" draws 10 mA without anything being broken.
//!
//! What it deliberately does not do: it knows nominal values only; what really
//! flows is the correction's business.

use std::fmt;

use quantity::{Current, Quantity, Resistance, Voltage};

use crate::bench::{Codes, Dac, FrontEnd};

/// A converter over a sense resistor.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Converter {
    dac: Dac,
    sense: Resistance,
}

/// A wanted current that no code gives.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub enum CodeError {
    /// Above the last code.
    #[error("{wanted} is above the converter's last code, {top}; draw {top} or less")]
    AboveTop {
        /// The wanted current.
        wanted: Current,
        /// The last code's current.
        top: Current,
    },
    /// Below what the converter's output and the op-amp's offset let through.
    #[error("{wanted} is below the sink's floor of {floor}; draw {floor} or more, or rest")]
    BelowFloor {
        /// The wanted current.
        wanted: Current,
        /// The floor.
        floor: Current,
    },
}

impl Converter {
    /// The converter of a sink's front end.
    pub const fn of(front_end: &FrontEnd) -> Self {
        Self {
            dac: front_end.dac,
            sense: front_end.sense_resistor.resistance,
        }
    }

    /// A converter over a sense resistor; `None` for a full scale or resistor
    /// that is not above zero, or bits outside 1 to 24.
    pub fn new(dac: Dac, sense: Resistance) -> Option<Self> {
        let sound = dac.full_scale > Voltage::ZERO
            && sense > Resistance::ZERO
            && (1..=24).contains(&dac.bits);
        sound.then_some(Self { dac, sense })
    }

    /// The last code.
    pub const fn last_code(&self) -> u32 {
        (1 << self.dac.bits) - 1
    }

    /// The number of steps in the full scale: 2^N or 2^N - 1.
    fn divisor(&self) -> i128 {
        match self.dac.codes {
            Codes::PowerOfTwo => i128::from(self.last_code()) + 1,
            Codes::PowerOfTwoLessOne => i128::from(self.last_code()),
        }
    }

    /// Numerator and denominator of one step in microamperes.
    fn step_ratio(&self) -> (i128, i128) {
        (
            self.dac.full_scale.base_units() * 1_000_000,
            self.divisor() * self.sense.base_units(),
        )
    }

    /// The nominal current of a code, to the nearest microampere.
    pub fn current_of(&self, code: u32) -> Current {
        let (numerator, denominator) = self.step_ratio();
        microamperes(round_half_up(i128::from(code) * numerator, denominator))
    }

    /// The code whose nominal current is nearest; beyond the ends the last and
    /// the first. What a sink's firmware does with a setpoint.
    pub fn nearest_code(&self, wanted: Current) -> u32 {
        let (numerator, denominator) = self.step_ratio();
        let code = round_half_up(wanted.base_units().max(0) * denominator, numerator);
        u32::try_from(code).map_or(self.last_code(), |code| code.min(self.last_code()))
    }

    /// The code for a wanted nominal current.
    ///
    /// # Errors
    /// [`CodeError`] above the last code (by more than half a step) or below
    /// the floor.
    pub fn code_for(&self, wanted: Current) -> Result<u32, CodeError> {
        let floor = self.floor();
        if wanted < floor {
            return Err(CodeError::BelowFloor { wanted, floor });
        }
        let top = self.top();
        if wanted > top.saturating_add(self.step()) {
            return Err(CodeError::AboveTop { wanted, top });
        }
        Ok(self.nearest_code(wanted))
    }

    /// The change of nominal current from one code to the next, rounded up to a
    /// whole microampere.
    pub fn step(&self) -> Current {
        let (numerator, denominator) = self.step_ratio();
        microamperes((numerator + denominator - 1) / denominator)
    }

    /// The nominal current of the last code.
    pub fn top(&self) -> Current {
        self.current_of(self.last_code())
    }

    /// The smallest current that can be set: the converter's lowest output and
    /// the op-amp's offset, over the sense resistor; never below zero. A
    /// calibration finds what it really is.
    pub fn floor(&self) -> Current {
        self.dac
            .minimum
            .saturating_add(self.dac.offset)
            .over(self.sense)
            .unwrap_or(Current::MAX)
            .max(Current::ZERO)
    }

    /// What is wrong with a code that someone took for a current; `None` if it
    /// is the right one.
    pub fn slip(&self, code: u32, meant: Current) -> Option<Slip> {
        let right_code = self.nearest_code(meant);
        (code != right_code).then(|| Slip {
            code,
            current: self.current_of(code),
            meant,
            right_code,
        })
    }
}

/// An arithmetic slip: a code that is not the one for the current meant.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Slip {
    /// The code as set.
    pub code: u32,
    /// Its nominal current.
    pub current: Current,
    /// The current that was meant.
    pub meant: Current,
    /// The code for that.
    pub right_code: u32,
}

impl fmt::Display for Slip {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(
            f,
            "code {} is {} and not {}; the code for {} is {}: an arithmetic slip, not an error of \
             the circuit",
            self.code, self.current, self.meant, self.meant, self.right_code
        )
    }
}

/// The quotient to the nearest whole number, halves up; both not negative.
const fn round_half_up(numerator: i128, denominator: i128) -> i128 {
    (2 * numerator + denominator) / (2 * denominator)
}

fn microamperes(value: i128) -> Current {
    Current::from_base_units(value).unwrap_or(Current::MAX)
}

#[cfg(test)]
mod tests;
