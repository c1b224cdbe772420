//! Ports, the acknowledged session over them, clock alignment, reconnecting.
//!
//! Three layers, each usable without the one below it:
//! - [`session`]: the line protocol's host side as a pure state machine. Bytes and time in,
//!   bytes and what was heard out. The same code runs a real sink and a night's rehearsal.
//! - [`clock`]: where the sink's clock stands against the host's, with an uncertainty.
//! - [`port`]: serial, TCP and in-process links behind one blocking inbox. Only this layer
//!   reads a clock, starts a thread or touches the operating system.
//!
//! [`rates`] says what readback rate a port can carry.
//!
//! What it deliberately does not do: it knows no sequence, no interlock and no record. What a
//! reading means, and whether an order may be sent, is decided above.

pub mod clock;
pub mod port;
pub mod rates;
pub mod session;

pub use clock::{ClockAlignment, ClockBounds, ClockEstimate, ClockFault};
pub use rates::fastest_readback;
pub use session::{
    DeadlineReason, Expected, Heard, Mismatch, RebootEvidence, Session, SessionConfig,
    SessionCounts, Side, Urgency,
};
