//! The line protocol between a bench host and a current sink, version 1.
//!
//! The text that binds both sides is `firmware-protocol/PROTOCOL.md`; this crate is its Rust
//! half: messages as types, encoding, checksum, an incremental decoder. The C half is the
//! reference firmware. Both run the vectors in `firmware-protocol/vectors`.
//!
//! Invariants:
//! - Nothing here allocates, panics on input, reads a clock or knows a port.
//! - A line that fails any rule yields a named error and no message: never half a message.
//! - All values are nominal, as the sink sees them.
//!
//! What it deliberately does not do: numbering, retransmission and time are the session's
//! (`transport`); meaning is the sequencer's.
#![no_std]

#[cfg(test)]
extern crate std;

mod decode;
mod description;
mod encode;
mod field;
mod fields;
mod human;
mod line;
mod message;
mod parse;
mod reading;
mod word;

pub use decode::{Decoder, Line, LineError};
pub use description::{DescriptionBuilder, DescriptionError};
pub use field::Field;
pub use line::{EncodeError, LineBuffer, checksum};
pub use message::{
    Abilities, Cause, Counters, Description, HostLine, LimitKind, Mode, Order, OrderNumber,
    Readback, ReasonRefused, Reset, SinkLine, SinkState, Step, TemperatureReading, Token,
};
pub use reading::{OrderId, Reading};

/// The longest line in bytes, line end included.
pub const LINE_BYTES_MAX: usize = 96;

/// The version of the protocol this crate speaks.
pub const PROTOCOL_VERSION: u16 = 1;

#[cfg(test)]
mod tests;
