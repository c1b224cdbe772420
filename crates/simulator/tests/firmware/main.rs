//! The firmware core held to `firmware-protocol/PROTOCOL.md`, guarantee by guarantee, in virtual
//! time. "Section" in these tests means a section of that text.

#![expect(
    clippy::unwrap_used,
    clippy::indexing_slicing,
    reason = "helpers of tests stand outside `#[test]`: a failure there is a failed test"
)]

mod bench;
mod branches;
mod burst;
mod counters;
mod limits;
#[cfg(unix)]
mod posix;
mod random;
mod refusals;
mod same;
mod session;
mod steps;
mod transmit;
mod vectors;
