//! The run as a pure state machine: plan, readings and time in; orders and findings out.
//!
//! # Contract
//!
//! - Feed [`Sequencer::handle`] one [`Event`](event::Event) at a time, in the order in which the
//!   host learned of them. After each, take [`Sequencer::poll_output`] until it gives `None`, and
//!   carry the outputs out in that order.
//! - After draining, ask [`Sequencer::deadline`]. If nothing else happens before that host time,
//!   feed [`Happening::TimePassed`](event::Happening::TimePassed) then. Feeding it early or more
//!   often is harmless.
//! - An order is recorded before it is sent. [`Output::Off`](event::Output::Off) waits for
//!   nothing: turn off, drop every order that has not reached the sink, then record.
//! - After [`Output::Ended`](event::Output::Ended) nothing but `Off` comes out. Go on feeding
//!   readings until the sink has said that it is off: if one still shows it on, `Off` is asked
//!   for again. Resetting the latch of an ended run is not the sequencer's.
//! - Errors are for plans that cannot be run ([`PlanError`]). What a sink, a link or a person
//!   does is never an error: it is an event, and the worst of them ends in `Off`. A panic means
//!   a broken invariant of this crate.
//!
//! # Invariants
//!
//! - The run is a fold over its record: the same plan and the same events give the same outputs,
//!   bit for bit. No clock is read, no float decides, nothing is unordered. [`replay`] proves a
//!   record by this; a crashed host resumes by it: feed the record's events into a fresh
//!   sequencer, then `LinkLost`, then `Connected`.
//! - A trip is `Off` first, then every crossing in the table's order, then the end.
//! - No step leaves here that is above the sink's own limits, and none before all limits have
//!   been acknowledged and a reading has shown that nothing crosses.
//! - Steps follow each other by the schedule, in the sink's time: nothing accumulates.
//!
//! # What it deliberately does not do
//!
//! It knows no transport, no firmware, no journal, and not whether time is real. It computes no
//! figures: charge and energy are accounted only as far as a decision or the live page needs.

mod account;
mod alignment;
mod condition;
mod course;
pub mod event;
mod expectation;
mod guard;
mod observation;
mod orders;
mod phase;
mod program;
pub mod replay;
mod sequencer;
mod settled;
pub mod status;

pub use guard::Margin;
pub use program::PlanError;
pub use sequencer::{DeadlineReason, Sequencer};

#[cfg(test)]
mod tests;
