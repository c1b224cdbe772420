//! From bytes to messages: an incremental decoder with named errors.
//!
//! Contract: push every byte that arrives; each line end yields one message or one error, and
//! an empty line nothing. An error never leaves a part of a message behind, and the next line
//! is judged on its own. The caller counts the errors.

use core::fmt;
use core::marker::PhantomData;

use thiserror::Error;

use crate::LINE_BYTES_MAX;
use crate::field::Field;
use crate::fields::Fields;
use crate::line::{CHECKSUM_BYTES, checksum, hex_value};
use crate::message::{HostLine, SinkLine};
use crate::parse;

/// The longest line without its line end.
const CONTENT_BYTES_MAX: usize = LINE_BYTES_MAX - 1;

/// Why a line is no message.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Error)]
pub enum LineError {
    /// Longer than the protocol allows.
    #[error("line exceeds {LINE_BYTES_MAX} bytes with its line end")]
    TooLong,
    /// A byte that is no printable ASCII.
    #[error("line holds byte 0x{byte:02X}, only printable ASCII is allowed")]
    NotPrintable {
        /// The first such byte.
        byte: u8,
    },
    /// No checksum at the end.
    #[error(
        "line does not end in a space and four upper-case hexadecimal digits, after at least a word"
    )]
    ChecksumMissing,
    /// The checksum does not fit the line.
    #[error("line has checksum {found:04X}, its bytes give {expected:04X}")]
    Checksum {
        /// Worked out from the line's bytes.
        expected: u16,
        /// Read at its end.
        found: u16,
    },
    /// The first word is none of this direction's kinds.
    #[error("line is of a kind that this protocol version does not have in this direction")]
    UnknownKind,
    /// Too few or too many fields for the kind.
    #[error("line has a wrong number of fields for its kind")]
    Fields,
    /// A field that should be an integer is none, or is written in another way.
    #[error("field {field} is no decimal integer without sign `+` and leading zeros")]
    Number {
        /// Name of the field.
        field: &'static str,
    },
    /// An integer outside its field's range.
    #[error("field {} is {value}, the protocol carries {} to {}", .field.name, .field.least, .field.most)]
    Range {
        /// The field.
        field: Field,
        /// What was read.
        value: i64,
    },
    /// A word that its list does not have.
    #[error("field {field} is none of the words it may be")]
    Word {
        /// Name of the field.
        field: &'static str,
    },
}

impl LineError {
    /// A stable short name, for counters and for the frozen vectors.
    pub const fn name(&self) -> &'static str {
        match self {
            Self::TooLong => "too-long",
            Self::NotPrintable { .. } => "not-printable",
            Self::ChecksumMissing => "checksum-missing",
            Self::Checksum { .. } => "checksum",
            Self::UnknownKind => "unknown-kind",
            Self::Fields => "fields",
            Self::Number { .. } => "number",
            Self::Range { .. } => "range",
            Self::Word { .. } => "word",
        }
    }

    /// Whether the line arrived as it was sent: its checksum was right and what it says is
    /// wrong. Such an error is the sender's, not the link's.
    pub const fn arrived_whole(&self) -> bool {
        match self {
            Self::TooLong
            | Self::NotPrintable { .. }
            | Self::ChecksumMissing
            | Self::Checksum { .. } => false,
            Self::UnknownKind
            | Self::Fields
            | Self::Number { .. }
            | Self::Range { .. }
            | Self::Word { .. } => true,
        }
    }
}

mod sealed {
    pub trait Sealed: Sized {
        /// Reads the body of a line whose checksum is right: what precedes the checksum's space.
        fn from_body(body: &[u8]) -> Result<Self, super::LineError>;
    }
}

/// A direction of the protocol: what a [`Decoder`] yields.
pub trait Line: sealed::Sealed {
    /// Reads one line, given without its line end.
    ///
    /// # Errors
    ///
    /// [`LineError`] if the line breaks any rule of the protocol.
    fn decode(line: &[u8]) -> Result<Self, LineError> {
        if line.len() > CONTENT_BYTES_MAX {
            return Err(LineError::TooLong);
        }
        match line.iter().copied().find(|byte| !printable(*byte)) {
            Some(byte) => Err(LineError::NotPrintable { byte }),
            None => decode_printable(line),
        }
    }
}

impl sealed::Sealed for HostLine {
    fn from_body(body: &[u8]) -> Result<Self, LineError> {
        parse::host_line(Fields::new(body))
    }
}

impl sealed::Sealed for SinkLine {
    fn from_body(body: &[u8]) -> Result<Self, LineError> {
        parse::sink_line(Fields::new(body))
    }
}

impl Line for HostLine {}
impl Line for SinkLine {}

fn decode_printable<T: Line>(line: &[u8]) -> Result<T, LineError> {
    let split = line
        .len()
        .checked_sub(CHECKSUM_BYTES)
        .and_then(|at| line.split_at_checked(at));
    let (body, found) = match split {
        // A checksum of nothing is no line.
        Some((body, [b' ', digits @ ..])) if !body.is_empty() => (body, hex_value(digits)),
        _ => (line, None),
    };
    let found = found.ok_or(LineError::ChecksumMissing)?;
    let expected = checksum(body);
    if expected != found {
        return Err(LineError::Checksum { expected, found });
    }
    T::from_body(body)
}

const fn printable(byte: u8) -> bool {
    matches!(byte, b' '..=b'~')
}

/// Gathers bytes into lines and lines into messages, for one direction.
#[derive(Clone)]
pub struct Decoder<T> {
    bytes: [u8; CONTENT_BYTES_MAX],
    len: usize,
    /// The first fault of the line under way; its further bytes are discarded.
    fault: Option<LineError>,
    /// A carriage return came last; it is ignored if the line end follows.
    returned: bool,
    direction: PhantomData<fn() -> T>,
}

impl<T: Line> Decoder<T> {
    /// A decoder that waits for the beginning of a line.
    pub const fn new() -> Self {
        Self {
            bytes: [0; CONTENT_BYTES_MAX],
            len: 0,
            fault: None,
            returned: false,
            direction: PhantomData,
        }
    }

    /// Takes one byte; a line end yields what the line was, unless it was empty.
    pub fn push(&mut self, byte: u8) -> Option<Result<T, LineError>> {
        match byte {
            b'\n' => self.finish(),
            b'\r' if !self.returned => {
                self.returned = true;
                None
            }
            _ => {
                self.gather(byte);
                None
            }
        }
    }

    /// Takes bytes lazily, as the messages and errors they complete are asked for.
    ///
    /// Run the iterator to its end, or the rest of the bytes is lost.
    pub fn feed<'a>(&'a mut self, bytes: &'a [u8]) -> impl Iterator<Item = Result<T, LineError>> {
        let mut rest = bytes;
        core::iter::from_fn(move || {
            while let Some(end) = rest.iter().position(|byte| *byte == b'\n') {
                let (line, after) = rest.split_at_checked(end)?;
                rest = after.get(1..)?;
                if let Some(result) = self.take_line(line) {
                    return Some(result);
                }
            }
            for byte in core::mem::take(&mut rest) {
                self.push(*byte);
            }
            None
        })
    }

    /// Takes the rest of a line up to its end; a whole sound one is read where it lies.
    fn take_line(&mut self, line: &[u8]) -> Option<Result<T, LineError>> {
        let begun = self.len > 0 || self.fault.is_some() || self.returned;
        // Without a branch, so that many bytes are judged at once.
        let sound = line
            .iter()
            .fold(true, |sound, byte| sound & printable(*byte));
        if !begun && sound && (1..=CONTENT_BYTES_MAX).contains(&line.len()) {
            return Some(decode_printable(line));
        }
        for byte in line {
            self.push(*byte);
        }
        self.finish()
    }

    /// Forgets the line under way, as after reopening a port.
    pub fn clear(&mut self) {
        self.len = 0;
        self.fault = None;
        self.returned = false;
    }

    fn gather(&mut self, byte: u8) {
        let fault = if self.returned {
            // The return before this byte was not part of a line end.
            Some(LineError::NotPrintable { byte: b'\r' })
        } else if !printable(byte) {
            Some(LineError::NotPrintable { byte })
        } else if let Some(place) = self.bytes.get_mut(self.len) {
            *place = byte;
            self.len += 1;
            None
        } else {
            Some(LineError::TooLong)
        };
        self.returned = false;
        if self.fault.is_none() {
            self.fault = fault;
        }
    }

    fn finish(&mut self) -> Option<Result<T, LineError>> {
        let line = self.bytes.get(..self.len).unwrap_or_default();
        let result = match self.fault {
            Some(fault) => Some(Err(fault)),
            None if line.is_empty() => None,
            None => Some(decode_printable(line)),
        };
        self.clear();
        result
    }
}

impl<T: Line> Default for Decoder<T> {
    fn default() -> Self {
        Self::new()
    }
}

impl<T> fmt::Debug for Decoder<T> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_struct("Decoder")
            .field("len", &self.len)
            .field("fault", &self.fault)
            .finish_non_exhaustive()
    }
}
