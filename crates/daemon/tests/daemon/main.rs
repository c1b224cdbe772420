//! The daemon as its clients have it: real sockets, real files, the simulated bench.

#![expect(
    clippy::unwrap_used,
    clippy::indexing_slicing,
    clippy::disallowed_methods,
    reason = "a test that does not get what it waits for within a time is to fail"
)]

mod calibrations;
mod desk;
mod events;
mod examples;
mod guard;
mod hand;
mod notify;
mod off;
mod page;
mod records;
mod recovery;
mod runs;
mod sequences;
mod sketch;
mod state;
