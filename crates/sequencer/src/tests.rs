//! The sequencer against a scripted bench: what it orders, and what it makes of what comes back.

mod bench;
mod course;
mod interlock;
mod pause;
mod plans;
mod property;
mod structure;
mod until;
