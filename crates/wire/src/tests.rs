//! What must hold of every line of the protocol.

mod any;
mod checksum;
mod decoder;
mod description;
mod limits;
mod round_trip;
mod vectors;
mod words;
