//! One small function a guarantee. Each begins a session of its own, so that their order does not
//! matter, but for the very first.

#![expect(
    clippy::wildcard_enum_match_arm,
    reason = "a check picks its lines out of all kinds and passes the others over"
)]

pub(crate) mod abilities;
pub(crate) mod contact;
pub(crate) mod counting;
pub(crate) mod deadman;
pub(crate) mod limits;
pub(crate) mod lines;
pub(crate) mod orders;
pub(crate) mod source;
pub(crate) mod stepping;

use quantity::Span;

/// Long enough for a step to begin or a line to be acted upon, if it were to.
pub(crate) const A_WHILE: Span = Span::from_millis(150);

/// Longer than any check.
pub(crate) const LONG: Span = Span::from_secs(60);
