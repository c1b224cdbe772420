//! The daemon: one worker per sink, HTTP/JSON, event stream, metrics, supervision.
//!
//! ```text
//!   HTTP (tokio) ── Ask ──► worker thread of a sink ──► keeper, session, link
//!        ▲                      │            │
//!        │                      │            └── entries ──► journal thread ── news ──┐
//!        └── view, events ◄─────┘◄──────────────────────────────────────────────────┘
//! ```
//!
//! Invariants:
//! - A sink is driven by its worker and by nothing else; the worker never waits for a client, a
//!   disk or another sink.
//! - `off` over HTTP goes straight into the worker's mailbox, before all else that waits there.
//! - What viewers see is a snapshot; how many look on changes nothing.
//! - Every run has a record; a record that was left open is dealt with before anything starts.
//!
//! What it deliberately does not do: decide anything about a run (the sequencer does), or
//! compute a figure from its own memory.

mod app;
mod by_hand;
mod calibrating;
mod calibration;
mod certificates;
mod config;
mod context;
mod error;
mod events;
mod figures_file;
mod http;
mod keys;
mod latches;
mod metrics;
mod notify;
mod records;
mod recovery;
mod rehearsing;
mod runs;
mod sinks;
mod sketch;
mod starting;
mod supervise;
pub mod view;
mod worker;

pub use certificates::{Certificates, CertificatesError};
pub use config::{Config, Scope, Tokens, TokensError};
pub use error::DaemonError;
pub use sketch::keep_sketch;
pub use supervise::{Daemon, host_name, serve};
