//! What readback rate a port can carry.
//!
//! Pure arithmetic over the longest lines of the protocol, so that the answer is safe for any
//! values: a readback pair is reckoned as two lines of the full length.

use quantity::Span;
use wire::LINE_BYTES_MAX;

/// The largest readback pair, line ends included.
const PAIR_BYTES: u64 = 2 * LINE_BYTES_MAX as u64;

/// The share of a port's capacity that readbacks may take, as numerator and denominator: the
/// rest is for answers, events and bursts (chapter 7 of the protocol).
const SHARE: (u64, u64) = (2, 3);

/// A rate no bench port exceeds; keeps the arithmetic in range.
const BYTES_PER_SECOND_MAX: u64 = 1_000_000_000;

/// Bytes a second that a serial port carries in one direction at `baud`, 8N1: each byte takes a
/// start bit, eight data bits and a stop bit.
pub const fn bytes_per_second(baud: u32) -> u32 {
    baud / 10
}

/// The shortest readback interval that leaves orders and answers room on a port that carries
/// `bytes_per_second` in the sink's direction. `None` for a port that carries nothing.
///
/// The interval is that at which two of the longest lines take two thirds of the port, rounded
/// up to a whole microsecond.
pub const fn fastest_readback(bytes_per_second: u32) -> Option<Span> {
    let rate = bytes_per_second as u64;
    if rate == 0 || rate > BYTES_PER_SECOND_MAX {
        return None;
    }
    let micros = (PAIR_BYTES * 1_000_000 * SHARE.1).div_ceil(rate * SHARE.0);
    Some(Span::from_micros(micros))
}

#[cfg(test)]
mod tests;
