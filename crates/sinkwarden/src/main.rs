//! The command line of Sinkwarden: a thin face on the crates and on the daemon's HTTP interface.
//!
//! ```text
//!   flags ─► arguments ─► one validated value a command ─► commands ─► print ─► stdout
//!                                                             │
//!                         bench, envelope, check, rehearse, …─┤ the crates, no daemon
//!                         prove ──────────────────────────────┤ a port, no daemon
//!                         run, off, reset, watch, status ─────┘ client ─► the daemon
//! ```
//!
//! Invariants:
//! - What was asked for goes to stdout, everything else to stderr; `--json` changes the form of
//!   the first and nothing more.
//! - Every way to end has its own exit code ([`exit::Exit`]).
//! - Nothing is coloured; progress is drawn only where stderr is a terminal.
//!
//! What it deliberately does not do: decide anything about a run, compute a figure, or reach a
//! sink other than through the daemon; but `prove` opens the port itself.

mod arguments;
mod bench_file;
mod client;
mod commands;
mod exit;
mod output;
mod picture;
mod print;
mod progress;
mod record_folder;
mod sequence_file;
mod source;

use std::process::ExitCode;

use clap::Parser as _;

use crate::arguments::Arguments;
use crate::output::Output;

fn main() -> ExitCode {
    let arguments = Arguments::parse();
    let output = Output::new(arguments.json);
    match commands::carry_out(arguments.command, output) {
        Ok(exit) => exit.into(),
        Err(error) => exit::report(&error).into(),
    }
}
