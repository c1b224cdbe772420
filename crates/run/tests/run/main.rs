//! Runs through the whole stack in virtual time: sequence text, plan, sequencer, session, line
//! protocol, the firmware's own logic, front end, source.

#![expect(
    clippy::unwrap_used,
    clippy::indexing_slicing,
    clippy::wildcard_enum_match_arm,
    reason = "a test fails by panicking, and looks only for the kinds it asks about"
)]

mod bench;
mod calibrated;
mod crash;
mod edges;
mod history;
mod interlocks;
mod keeping;
mod overnight;
mod random;
mod ready;
mod schedules;
mod stack;
mod tapped;
