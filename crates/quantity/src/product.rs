//! The products and quotients between quantities that a sink needs.
//!
//! All go through `i128`, so the intermediate never overflows, and round to
//! the nearest base unit, half away from zero: symmetric about zero, so that a
//! figure does not change when a sign convention does. Products hold at the end
//! of the range; quotients answer `None` for a divisor of zero or a result that
//! does not fit.

use crate::{Charge, Current, Energy, Power, Resistance, Span, Voltage};

const MICRO: i128 = 1_000_000;

/// `numerator / denominator` to the nearest whole number, half away from zero.
/// The denominator must not be zero.
pub(crate) const fn divide_rounded(numerator: i128, denominator: i128) -> i128 {
    let quotient = numerator / denominator;
    let remainder = (numerator % denominator).unsigned_abs();
    let divisor = denominator.unsigned_abs();
    // Not `2 * remainder`: that could overflow where this cannot.
    if remainder >= divisor - remainder {
        if (numerator < 0) == (denominator < 0) {
            quotient + 1
        } else {
            quotient - 1
        }
    } else {
        quotient
    }
}

#[expect(
    clippy::cast_possible_truncation,
    reason = "both ends are clamped to the range of i64 first"
)]
const fn saturated(value: i128) -> i64 {
    if value > i64::MAX as i128 {
        i64::MAX
    } else if value < i64::MIN as i128 {
        i64::MIN
    } else {
        value as i64
    }
}

const fn product(left: i64, right: i128) -> i64 {
    saturated(divide_rounded(left as i128 * right, MICRO))
}

fn quotient(numerator: i64, denominator: i128) -> Option<i64> {
    if denominator == 0 {
        return None;
    }
    i64::try_from(divide_rounded(i128::from(numerator) * MICRO, denominator)).ok()
}

impl Current {
    /// The charge that this current moves in a span (µA µs = pC, rounded to
    /// µC, half away from zero; held at the end of the range).
    pub const fn times(self, span: Span) -> Charge {
        Charge::from_microcoulombs(product(self.microamperes(), span.micros() as i128))
    }

    /// The drop of this current over a resistance (Ohm's law; rounded to µV,
    /// half away from zero; held at the end of the range).
    pub const fn times_resistance(self, resistance: Resistance) -> Voltage {
        Voltage::from_microvolts(product(self.microamperes(), resistance.microohms() as i128))
    }
}

impl Voltage {
    /// The power of a current at this voltage (rounded to µW, half away from
    /// zero; held at the end of the range).
    pub const fn times(self, current: Current) -> Power {
        Power::from_microwatts(product(self.microvolts(), current.microamperes() as i128))
    }

    /// The current through a resistance at this voltage (Ohm's law; rounded to
    /// µA, half away from zero); `None` for 0 Ω or beyond the range.
    pub fn over(self, resistance: Resistance) -> Option<Current> {
        quotient(self.microvolts(), i128::from(resistance.microohms()))
            .map(Current::from_microamperes)
    }

    /// The resistance that drops this voltage at a current (Ohm's law; rounded
    /// to µΩ, half away from zero); `None` for 0 A or beyond the range.
    pub fn over_current(self, current: Current) -> Option<Resistance> {
        quotient(self.microvolts(), i128::from(current.microamperes()))
            .map(Resistance::from_microohms)
    }
}

impl Power {
    /// The energy of this power over a span (rounded to µJ, half away from
    /// zero; held at the end of the range).
    pub const fn times(self, span: Span) -> Energy {
        Energy::from_microjoules(product(self.microwatts(), span.micros() as i128))
    }

    /// The current that draws this power at a voltage (rounded to µA, half
    /// away from zero); `None` for 0 V or beyond the range.
    pub fn over(self, voltage: Voltage) -> Option<Current> {
        quotient(self.microwatts(), i128::from(voltage.microvolts()))
            .map(Current::from_microamperes)
    }
}

impl Charge {
    /// The energy of this charge at a constant voltage (rounded to µJ, half
    /// away from zero; held at the end of the range).
    pub const fn times(self, voltage: Voltage) -> Energy {
        Energy::from_microjoules(product(self.microcoulombs(), voltage.microvolts() as i128))
    }

    /// The mean current that moves this charge in a span (rounded to µA, half
    /// away from zero); `None` for a span of zero or beyond the range.
    pub fn over(self, span: Span) -> Option<Current> {
        quotient(self.microcoulombs(), i128::from(span.micros())).map(Current::from_microamperes)
    }

    /// How long a current needs to move this charge (rounded to µs, half away
    /// from zero); `None` for 0 A, opposite signs or beyond the range.
    pub fn over_current(self, current: Current) -> Option<Span> {
        if current == Current::ZERO {
            return None;
        }
        let micros = divide_rounded(
            i128::from(self.microcoulombs()) * MICRO,
            i128::from(current.microamperes()),
        );
        u64::try_from(micros).ok().map(Span::from_micros)
    }
}

impl Energy {
    /// The mean power of this energy over a span (rounded to µW, half away
    /// from zero); `None` for a span of zero or beyond the range.
    pub fn over(self, span: Span) -> Option<Power> {
        quotient(self.microjoules(), i128::from(span.micros())).map(Power::from_microwatts)
    }
}
