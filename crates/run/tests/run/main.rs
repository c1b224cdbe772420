//! Runs through the whole stack in virtual time: sequence text, plan, sequencer, session, line
//! protocol, the firmware's own logic, front end, source.

mod bench;
mod crash;
mod edges;
mod history;
mod interlocks;
mod overnight;
mod random;
mod ready;
mod schedules;
mod stack;
mod tapped;
