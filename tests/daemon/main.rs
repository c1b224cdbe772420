//! A real daemon process and a sink on a real pseudo-terminal.
#![expect(
    clippy::unwrap_used,
    clippy::indexing_slicing,
    reason = "a test that meets what it does not expect has failed"
)]

mod death;
mod disk;
mod port;
