//! Links to sinks: serial ports, TCP, and simulated sinks in the same process.
//!
//! One worker thread per sink blocks in one place, [`Link::wait`], for bytes, for commands and
//! for its session's deadline. What blocks in the operating system does so in threads of the
//! link's own, so that a hanging write stops neither the worker nor any other sink:
//!
//! ```text
//!   operating system ── reader thread ──►┐
//!                                        ├─► mailbox ──► worker: wait, session, send
//!   whoever commands ── Commands ───────►┘                              │
//!   operating system ◄── writer thread ◄── outbound queue ◄─────────────┘
//! ```
//!
//! Invariants:
//! - Every queue is bounded. A command never waits behind bytes.
//! - Bytes that overtake ([`Urgency::Overtakes`]) replace whatever has not been written.
//! - A lost link is opened again by itself, under the same name, with growing pauses.
//! - Clocks are read in this module and nowhere else in the crate.
//!
//! What it deliberately does not do: it knows no line of the protocol.

mod connection;
mod host_clock;
mod in_process;
mod mailbox;
mod outbound;
mod serial;
mod tcp;

use quantity::HostTime;
use thiserror::Error;

pub use connection::PortLink;
pub use host_clock::HostClock;
pub use in_process::{Pace, VirtualDevice, VirtualLink};
pub use mailbox::{CommandRefused, Commands};
pub use serial::{BAUD_DEFAULT, SerialConfig, serial};
pub use tcp::tcp;

use crate::session::Urgency;

/// What a worker waits for.
#[derive(Debug)]
pub enum Inbox<C> {
    /// Someone wants something. Commands come before all else that waits.
    Command(C),
    /// Bytes from the sink.
    Bytes(Vec<u8>),
    /// The link is open.
    LinkBack,
    /// The link is gone, or could not be opened; told once for each reason.
    LinkLost(LinkError),
}

/// Why a link is not open.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
pub enum LinkError {
    /// There is nothing under this name.
    #[error("no port {name}; plug the sink in, or correct its `path` in the bench file")]
    Absent {
        /// The name as given.
        name: String,
    },
    /// Another program has it.
    #[error("port {name} is in use by another program; end that program: {reason}")]
    InUse {
        /// The name as given.
        name: String,
        /// What the operating system says.
        reason: String,
    },
    /// The user may not open it.
    #[error(
        "no permission for port {name}; add the daemon's user to the port's group (on many Linux systems `dialout`)"
    )]
    Denied {
        /// The name as given.
        name: String,
    },
    /// It could not be opened for another reason.
    #[error("port {name} cannot be opened: {reason}")]
    Open {
        /// The name as given.
        name: String,
        /// What the operating system says.
        reason: String,
    },
    /// It was open, and is gone.
    #[error("port {name} is gone: {reason}")]
    Gone {
        /// The name as given.
        name: String,
        /// What the operating system says.
        reason: String,
    },
}

/// A link as its worker sees it.
pub trait Link<C> {
    /// The time on this link: the host's clock, or virtual time.
    fn now(&self) -> HostTime;

    /// Waits for something to happen, but not beyond `until`. `None` may come early: look at
    /// [`Link::now`].
    fn wait(&mut self, until: HostTime) -> Option<Inbox<C>>;

    /// Hands bytes over to be sent. Never blocks. Bytes for which there is no room, or no link,
    /// are thrown away whole: a session notices and sends again.
    fn send(&mut self, bytes: &[u8], urgency: Urgency);

    /// While `held`, the worker waits for the disk: virtual time does not pass. A real link
    /// takes no notice.
    fn hold_time(&mut self, held: bool);
}

#[cfg(test)]
mod tests;
