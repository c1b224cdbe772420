//! The daemon as its clients have it: real sockets, real files, the simulated bench.

mod desk;
mod events;
mod guard;
mod off;
mod records;
mod recovery;
mod runs;
mod sequences;
mod state;
