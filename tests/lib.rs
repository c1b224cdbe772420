//! What whole-system tests stand on: a sink on a real pseudo-terminal, a real daemon process.
//!
//! Nothing here is a double of a part of ours: the sink is the firmware's own logic behind a
//! terminal that any program can open, the daemon is the program as it is installed.

pub mod bridge;
pub mod daemon_process;
pub mod pty;
pub mod pty_sink;
pub mod sequences;
