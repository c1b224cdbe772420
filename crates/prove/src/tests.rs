//! The checks against the reference firmware in virtual time, and against the same firmware with
//! its lines tampered with on the way.

mod bench;
mod document;
mod faults;
mod sound;
