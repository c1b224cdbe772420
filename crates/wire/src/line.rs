//! One line as bytes: a fixed buffer, the checksum, and the writer the encoders share.
//!
//! Invariants: a buffer holds either nothing or one whole line with its checksum and line end;
//! an encoder that fails leaves it empty, so no half-written line can be sent.

use core::fmt;

use crc::{CRC_16_IBM_3740, Crc, Table};
use thiserror::Error;

use crate::LINE_BYTES_MAX;
use crate::field::Field;

/// Width 16, polynomial 0x1021, initial value 0xFFFF, not reflected, no final xor. The table
/// takes 16 bytes a round: a night's rehearsal checks some 70 megabytes of lines.
const CHECKSUM: Crc<u16, Table<16>> = Crc::<u16, Table<16>>::new(&CRC_16_IBM_3740);

/// The digits of the checksum: upper case, and nothing else is accepted.
const HEX: [u8; 16] = *b"0123456789ABCDEF";

/// A space and four digits.
pub(crate) const CHECKSUM_BYTES: usize = 5;

/// The checksum of a line: CRC-16/IBM-3740 over every byte before the space that precedes it.
pub fn checksum(bytes: &[u8]) -> u16 {
    CHECKSUM.checksum(bytes)
}

/// Why a message has no line.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Error)]
pub enum EncodeError {
    /// A value the field cannot take.
    #[error(
        "field {} of `{kind}` is {value}, the protocol carries {} to {}",
        .field.name, .field.least, .field.most
    )]
    Range {
        /// First word of the line.
        kind: &'static str,
        /// The field.
        field: Field,
        /// The value, in the field's unit on the wire; a value beyond 64 signed bits as their
        /// largest.
        value: i64,
    },
    /// More burst samples than fit in one line.
    #[error("`{kind}` would exceed {LINE_BYTES_MAX} bytes with its line end; send fewer samples")]
    TooLong {
        /// First word of the line.
        kind: &'static str,
    },
    /// A number of burst samples that no line can carry.
    #[error("`b` carries 1 to 4 samples a line, not {len}")]
    Samples {
        /// The number asked for.
        len: u8,
    },
}

/// A line ready to be sent, line end included.
#[derive(Clone, Copy)]
pub struct LineBuffer {
    bytes: [u8; LINE_BYTES_MAX],
    len: usize,
}

impl LineBuffer {
    /// An empty buffer.
    pub const fn new() -> Self {
        Self {
            bytes: [0; LINE_BYTES_MAX],
            len: 0,
        }
    }

    /// The line with its checksum and line end; nothing if nothing was encoded.
    pub fn as_bytes(&self) -> &[u8] {
        self.bytes.get(..self.len).unwrap_or_default()
    }

    /// The line without its line end, as text for a log.
    pub fn as_str(&self) -> &str {
        core::str::from_utf8(self.as_bytes())
            .unwrap_or_default()
            .trim_end_matches('\n')
    }

    fn clear(&mut self) {
        self.len = 0;
    }

    /// Appends a byte; false when the buffer is full.
    fn push(&mut self, byte: u8) -> bool {
        match self.bytes.get_mut(self.len) {
            Some(place) => {
                *place = byte;
                self.len += 1;
                true
            }
            None => false,
        }
    }
}

impl Default for LineBuffer {
    fn default() -> Self {
        Self::new()
    }
}

impl fmt::Debug for LineBuffer {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_tuple("LineBuffer").field(&self.as_str()).finish()
    }
}

/// Writes fields one after the other; the first fault sticks and empties the buffer at the end.
pub(crate) struct Writer<'a> {
    line: &'a mut LineBuffer,
    kind: &'static str,
    fault: Option<EncodeError>,
}

impl<'a> Writer<'a> {
    /// Begins a line with its kind.
    pub(crate) fn new(line: &'a mut LineBuffer, kind: &'static str) -> Self {
        line.clear();
        let mut writer = Self {
            line,
            kind,
            fault: None,
        };
        writer.bytes(kind.as_bytes());
        writer
    }

    /// Appends a word of one of the protocol's lists.
    pub(crate) fn word(&mut self, word: &'static str) -> &mut Self {
        self.byte(b' ');
        self.bytes(word.as_bytes());
        self
    }

    /// Appends a number, if the field may take it.
    pub(crate) fn number(&mut self, field: Field, value: impl Into<i64>) -> &mut Self {
        self.value(field, value.into())
    }

    /// Appends a time or a span in microseconds, if it fits 63 bits and the field may take it.
    pub(crate) fn micros(&mut self, field: Field, micros: u64) -> &mut Self {
        match i64::try_from(micros) {
            Ok(value) => self.value(field, value),
            Err(_) => self.fail(EncodeError::Range {
                kind: self.kind,
                field,
                value: i64::MAX,
            }),
        }
    }

    /// Records a fault, unless one stands already.
    pub(crate) fn fail(&mut self, fault: EncodeError) -> &mut Self {
        self.fault.get_or_insert(fault);
        self
    }

    /// Ends the line with its checksum.
    ///
    /// # Errors
    ///
    /// The first fault, if there was one; the buffer is then empty.
    pub(crate) fn finish(&mut self) -> Result<(), EncodeError> {
        let sum = checksum(self.line.as_bytes());
        self.byte(b' ');
        for digit in hex_digits(sum) {
            self.byte(digit);
        }
        self.byte(b'\n');
        match self.fault {
            None => Ok(()),
            Some(fault) => {
                self.line.clear();
                Err(fault)
            }
        }
    }

    fn value(&mut self, field: Field, value: i64) -> &mut Self {
        if !field.holds(value) {
            return self.fail(EncodeError::Range {
                kind: self.kind,
                field,
                value,
            });
        }
        self.byte(b' ');
        if value < 0 {
            self.byte(b'-');
        }
        self.digits(value.unsigned_abs());
        self
    }

    fn digits(&mut self, value: u64) {
        // Twenty digits hold every 64-bit value; they come lowest first.
        let mut digits = [0_u8; 20];
        let mut rest = value;
        let mut used = 0;
        for digit in &mut digits {
            // A remainder of ten is always a digit.
            *digit = b'0' + u8::try_from(rest % 10).unwrap_or_default();
            rest /= 10;
            used += 1;
            if rest == 0 {
                break;
            }
        }
        for digit in digits.iter().take(used).rev() {
            self.byte(*digit);
        }
    }

    fn bytes(&mut self, bytes: &[u8]) {
        for byte in bytes {
            self.byte(*byte);
        }
    }

    fn byte(&mut self, byte: u8) {
        if !self.line.push(byte) {
            let fault = EncodeError::TooLong { kind: self.kind };
            self.fail(fault);
        }
    }
}

/// The four digits of a checksum, highest first.
fn hex_digits(sum: u16) -> [u8; 4] {
    [12, 8, 4, 0].map(|shift| {
        let nibble = usize::from((sum >> shift) & 0xF);
        HEX.get(nibble).copied().unwrap_or_default()
    })
}

/// Reads four upper-case hexadecimal digits.
pub(crate) fn hex_value(digits: &[u8]) -> Option<u16> {
    if digits.len() != 4 {
        return None;
    }
    digits.iter().try_fold(0_u16, |value, digit| {
        let nibble = match digit {
            b'0'..=b'9' => digit - b'0',
            b'A'..=b'F' => digit - b'A' + 10,
            _ => return None,
        };
        Some((value << 4) | u16::from(nibble))
    })
}
