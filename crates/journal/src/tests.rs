//! Tests of the whole record, and what they share: an invented run of an invented bench.

mod altering;
mod crash;
pub(crate) mod fixture;
mod reading;
mod writing;
