//! Proves a sink's firmware: every guarantee of the line protocol, tested on whatever is on a
//! port.
//!
//! ```text
//!   guarantees: the table ──► checks: one small function each ──► probe: raw lines, evidence
//!                                                                   │
//!   report ◄── verdict: holds, fails, not shown                     ▼
//!                                                                 port: bytes and time
//! ```
//!
//! The checks speak raw lines and not through `transport`'s session, since a session never sends
//! what a firmware must be seen to refuse: damaged, repeated, stale and hostile lines.
//!
//! Invariants:
//! - Without a source that was allowed ([`Options::source`]) no step asks for a current: every
//!   step is a rest. What needs a current is then not shown, and says so.
//! - Each check leaves the sink off, whatever came of it, and ends within the time it states.
//! - A verdict other than "holds" says why, and every line sent and received is kept with its
//!   time.
//! - Judged is by the sink's own times wherever a line carries one, so that a slow host does not
//!   fail a sound sink.
//!
//! What it deliberately does not do: say anything about the gate, the fuse or the wiring. A
//! firmware that holds all of this may still sit behind a MOSFET that failed shorted.

mod checks;
mod evidence;
mod guarantees;
mod port;
mod print;
mod probe;
mod report;
mod run;

pub use evidence::{Direction, Exchange};
pub use guarantees::{Guarantee, Needs, guarantees};
pub use port::{LinkPort, Port, PortError, open};
pub use report::{Report, Shown, Verdict};
pub use run::{Options, Progress, run, time_at_most};

#[cfg(test)]
mod tests;
