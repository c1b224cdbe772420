//! Splits a checked line into its fields, one at a time.
//!
//! Invariants: single spaces only (an empty field is an error where it stands); integers have
//! no `+`, no leading zero and no `-0`; every field is taken and none is left over.

use quantity::{Current, SinkTime, Span, Voltage};

use crate::decode::LineError;
use crate::field::{self, Field};
use crate::message::OrderNumber;
use crate::word::Word;

/// The fields not yet taken.
#[derive(Clone, Copy)]
pub(crate) struct Fields<'a> {
    /// `None` once the last one is taken.
    rest: Option<&'a [u8]>,
}

impl<'a> Fields<'a> {
    pub(crate) const fn new(line: &'a [u8]) -> Self {
        Self { rest: Some(line) }
    }

    /// Whether another field follows.
    pub(crate) const fn more(&self) -> bool {
        self.rest.is_some()
    }

    /// The next field, whatever it is.
    pub(crate) fn text(&mut self) -> Result<&'a [u8], LineError> {
        let rest = self.rest.ok_or(LineError::Fields)?;
        let end = rest.iter().position(|byte| *byte == b' ');
        let (text, rest) = match end.and_then(|at| rest.split_at_checked(at)) {
            Some((text, rest)) => (text, rest.get(1..)),
            None => (rest, None),
        };
        self.rest = rest;
        Ok(text)
    }

    /// The next field as a word of a list.
    pub(crate) fn word<W: Word>(&mut self, name: &'static str) -> Result<W, LineError> {
        W::from_word(self.text()?).ok_or(LineError::Word { field: name })
    }

    /// The next field as an integer within its range.
    pub(crate) fn integer(&mut self, field: Field) -> Result<i64, LineError> {
        let rest = self.rest.ok_or(LineError::Fields)?;
        let (value, rest) = leading_integer(rest).ok_or(LineError::Number { field: field.name })?;
        self.rest = rest;
        if field.holds(value) {
            Ok(value)
        } else {
            Err(LineError::Range { field, value })
        }
    }

    /// The next field as an integer of a narrower type, which its range must fit.
    pub(crate) fn number<T: TryFrom<i64>>(&mut self, field: Field) -> Result<T, LineError> {
        let value = self.integer(field)?;
        T::try_from(value).map_err(|_| LineError::Range { field, value })
    }

    pub(crate) fn order_number(&mut self, field: Field) -> Result<OrderNumber, LineError> {
        self.number(field).map(OrderNumber)
    }

    pub(crate) fn span(&mut self, field: Field) -> Result<Span, LineError> {
        self.number(field).map(Span::from_micros)
    }

    pub(crate) fn time(&mut self, field: Field) -> Result<SinkTime, LineError> {
        self.number(field).map(SinkTime::from_micros)
    }

    pub(crate) fn current(&mut self, field: Field) -> Result<Current, LineError> {
        self.integer(field).map(Current::from_microamperes)
    }

    pub(crate) fn voltage(&mut self, field: Field) -> Result<Voltage, LineError> {
        self.integer(field).map(Voltage::from_microvolts)
    }

    /// A burst sample: current, then voltage.
    pub(crate) fn sample(&mut self) -> Result<(Current, Voltage), LineError> {
        Ok((self.current(field::CURRENT)?, self.voltage(field::VOLTAGE)?))
    }

    /// Ends the line: nothing may be left.
    pub(crate) fn end(&self) -> Result<(), LineError> {
        if self.more() {
            Err(LineError::Fields)
        } else {
            Ok(())
        }
    }
}

/// Reads an integer and holds it against the field's range.
pub(crate) fn in_range(field: Field, text: &[u8]) -> Result<i64, LineError> {
    Fields::new(text).integer(field)
}

/// Reads a decimal integer of at most 64 signed bits, written in the one way there is, up to a
/// space or the end; also gives what follows the space.
fn leading_integer(text: &[u8]) -> Option<(i64, Option<&[u8]>)> {
    let (negative, digits) = match text.split_first() {
        Some((b'-', digits)) => (true, digits),
        _ => (false, text),
    };
    let mut magnitude = 0_u64;
    let mut len = 0;
    let mut ended = false;
    for byte in digits {
        let digit = byte.wrapping_sub(b'0');
        if digit > 9 {
            ended = true;
            break;
        }
        // Nineteen digits cannot overflow 64 unsigned bits; more are refused below.
        magnitude = magnitude.wrapping_mul(10).wrapping_add(u64::from(digit));
        len += 1;
    }
    let rest = match (ended, digits.get(len..)) {
        (false, _) => None,
        (true, Some([b' ', rest @ ..])) => Some(rest),
        (true, _) => return None,
    };
    let zero_leads = digits.first() == Some(&b'0') && (negative || len > 1);
    if len == 0 || len > 19 || zero_leads {
        return None;
    }
    let value = if negative {
        0_i64.checked_sub_unsigned(magnitude)?
    } else {
        i64::try_from(magnitude).ok()?
    };
    Some((value, rest))
}
