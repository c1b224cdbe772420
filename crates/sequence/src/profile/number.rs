//! Decimal numbers to whole base units, exactly and fast.
//!
//! A measured profile has millions of numbers, and a sleep current of some nanoamperes must not
//! be lost to the binary fractions of a float: a decimal text times a unit is worked out in whole
//! numbers and rounded once, to the nearest, halves away from zero.

/// Digits that surely fit 64 bits.
const DIGITS_FAST: usize = 18;
/// Digits that surely fit 128 bits with a unit of up to ten digits more.
const DIGITS_MOST: usize = 28;

/// A unit: how many base units one of it is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Scale {
    base_units: u64,
    /// Base units of the last digit for so many decimals; 0 where that is no whole number.
    by_decimals: [u64; DIGITS_FAST + 1],
}

/// What is wrong with a number.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum BadNumber {
    /// It is none.
    NotANumber,
    /// It is one, but not finite or too large.
    OutOfRange,
}

impl Scale {
    /// Of a unit that is so many base units.
    pub(crate) fn new(base_units: u64) -> Self {
        let mut by_decimals = [0; DIGITS_FAST + 1];
        let mut divisor = 1_u64;
        for slot in &mut by_decimals {
            if base_units.is_multiple_of(divisor) {
                *slot = base_units / divisor;
            }
            divisor = divisor.saturating_mul(10);
        }
        Self {
            base_units,
            by_decimals,
        }
    }

    /// A decimal number of this unit in base units.
    pub(crate) fn read(&self, text: &[u8]) -> Result<i64, BadNumber> {
        let (negative, digits) = match text.split_first() {
            Some((b'-', rest)) => (true, rest),
            Some((b'+', rest)) => (false, rest),
            Some(_) | None => (false, text),
        };
        let magnitude = match self.read_plain(digits) {
            Some(magnitude) => magnitude,
            None => self.read_any(digits)?,
        };
        Ok(if negative { -magnitude } else { magnitude })
    }

    /// Digits with a point among them, as nearly every number is; `None` for any other form.
    fn read_plain(&self, digits: &[u8]) -> Option<i64> {
        if digits.len() > DIGITS_FAST || digits.is_empty() {
            return None;
        }
        let mut mantissa = 0_u64;
        let mut point = None;
        for (at, &byte) in digits.iter().enumerate() {
            let digit = byte.wrapping_sub(b'0');
            if digit < 10 {
                mantissa = mantissa * 10 + u64::from(digit);
            } else if byte == b'.' && point.is_none() && digits.len() > 1 {
                point = Some(at);
            } else {
                return None;
            }
        }
        let decimals = point.map_or(0, |at| digits.len() - 1 - at);
        let last_digit = *self.by_decimals.get(decimals)?;
        if last_digit == 0 {
            return None;
        }
        i64::try_from(mantissa.checked_mul(last_digit)?).ok()
    }

    /// Any decimal number, with an exponent if it likes.
    fn read_any(&self, text: &[u8]) -> Result<i64, BadNumber> {
        let not_finite = [&b"nan"[..], b"inf", b"infinity"];
        if not_finite
            .iter()
            .any(|word| text.eq_ignore_ascii_case(word))
        {
            return Err(BadNumber::OutOfRange);
        }
        let mut parts = text.splitn(2, |byte| matches!(byte, b'e' | b'E'));
        let number = parts.next().unwrap_or_default();
        let exponent = parts.next().map_or(Some(0), exponent);
        let exponent = exponent.ok_or(BadNumber::NotANumber)?;
        let mut mantissa = 0_u128;
        let (mut digits, mut decimals, mut seen_point, mut seen_digit) = (0, 0_i32, false, false);
        for &byte in number {
            let digit = byte.wrapping_sub(b'0');
            if byte == b'.' && !seen_point {
                seen_point = true;
                continue;
            }
            if digit >= 10 {
                return Err(BadNumber::NotANumber);
            }
            seen_digit = true;
            if digits >= DIGITS_MOST {
                // Beyond any base unit behind the point, beyond any range before it.
                if seen_point {
                    continue;
                }
                return Err(BadNumber::OutOfRange);
            }
            mantissa = mantissa * 10 + u128::from(digit);
            digits += usize::from(mantissa > 0);
            decimals += i32::from(seen_point);
        }
        if !seen_digit {
            return Err(BadNumber::NotANumber);
        }
        let scaled = mantissa
            .checked_mul(u128::from(self.base_units))
            .ok_or(BadNumber::OutOfRange)?;
        shifted(scaled, exponent.saturating_sub(decimals)).ok_or(BadNumber::OutOfRange)
    }
}

/// A decimal exponent, held where nothing is left of a number anyhow.
fn exponent(text: &[u8]) -> Option<i32> {
    let text = std::str::from_utf8(text).ok()?;
    let value: i64 = text.parse().ok()?;
    i32::try_from(value.clamp(-1_000, 1_000)).ok()
}

/// A whole number times a power of ten, to the nearest; `None` beyond the range.
fn shifted(value: u128, power: i32) -> Option<i64> {
    if value == 0 {
        return Some(0);
    }
    let factor = 10_u128.checked_pow(power.unsigned_abs());
    let value = match (power >= 0, factor) {
        (true, Some(factor)) => value.checked_mul(factor)?,
        (true, None) => return None,
        (false, Some(factor)) => value / factor + u128::from(value % factor >= factor.div_ceil(2)),
        (false, None) => 0,
    };
    i64::try_from(value).ok()
}

#[cfg(test)]
mod tests;
