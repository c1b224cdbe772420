//! What was said on the port, line by line.

use quantity::Span;
use serde::Serialize;

/// Who said it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Direction {
    /// The host.
    Sent,
    /// The sink.
    Received,
}

/// One line on the port.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Exchange {
    /// When, since the run began, by the host's clock, in microseconds.
    pub at: Span,
    /// Who said it.
    pub direction: Direction,
    /// The line without its line end; bytes that are not printable are written as `\xNN`.
    pub line: String,
    /// What is wrong with a line from the sink; nothing for a sound one.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub fault: Option<String>,
}

/// Bytes as text that a terminal shows.
pub(crate) fn readable(bytes: &[u8]) -> String {
    bytes.escape_ascii().to_string()
}
