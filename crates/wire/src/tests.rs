//! What must hold of every line of the protocol.

mod any;
mod checksum;
mod decoder;
mod round_trip;
