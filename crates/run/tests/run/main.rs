//! Runs through the whole stack in virtual time: sequence text, plan, sequencer, session, line
//! protocol, the firmware's own logic, front end, source.

mod bench;
mod overnight;
