//! One run end to end, without I/O of its own.
//!
//! A [`Keeper`] keeps one sink: it owns the session with it, and for the length of a run the
//! sequencer and the way to the record as well. The daemon drives a keeper in real time or in
//! time-lapse; [`rehearse`](mod@rehearse) drives the very same keeper in virtual time against
//! the simulator. Nothing here knows the difference.
//!
//! # Contract
//!
//! Every call of a method that takes `now` must be followed by draining
//! [`Keeper::poll_effect`] until it yields `None`, then sending what
//! [`Keeper::take_transmit`] hands out, then waiting no longer than [`Keeper::deadline`].
//!
//! # Invariants
//!
//! - An order is handed to the session only when the entry that records it has been reported
//!   durable. `off` alone is handed over at once and recorded right after.
//! - What the sequencer hears is recorded before what it answers, in the order it happened, so
//!   that the record replays.
//! - After `off` no order from before it reaches the sink.
//! - A record that cannot be written ends the run; a failing disk never delays `off`.
//! - No order outlives its session: one that still waits for the disk when a new session begins
//!   is not sent in it.
//! - A closed record says of every order what became of it: acknowledged, refused, or in a note
//!   that it was not sent, overtaken by `off`, or left without an answer.
//! - A sink that is not the one described gets nothing but `off`, and a run on it trips.
//!
//! What it deliberately does not do: open files or ports, read a clock, decide an interlock.

mod active;
mod expect;
pub mod keeper;
mod notes;
pub mod recording;
pub mod rehearse;

pub use keeper::{Effect, Keeper, KeeperConfig};
