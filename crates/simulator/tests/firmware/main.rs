//! The firmware core held to `firmware-protocol/PROTOCOL.md`, guarantee by guarantee, in virtual
//! time. "Section" in these tests means a section of that text.

mod bench;
mod burst;
mod counters;
mod limits;
mod random;
mod refusals;
mod same;
mod session;
mod steps;
mod transmit;
