//! Bytes on their way out: `off` before all else.

use wire::{HostLine, LineBuffer};

/// Whether bytes may be sent in turn or overtake what has not been sent yet.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Urgency {
    /// In turn.
    InTurn,
    /// They hold `off`: whatever waits unsent below must be thrown away, for an order sent
    /// after `off` could turn the current on again. The session sends again what is needed.
    Overtakes,
}

/// What waits to be sent.
#[derive(Debug, Default)]
pub(super) struct Outbox {
    urgent: Vec<u8>,
    in_turn: Vec<u8>,
    line: LineBuffer,
}

impl Outbox {
    /// Queues a line. False if no line can carry it; nothing is queued then.
    pub(super) fn push(&mut self, line: &HostLine) -> bool {
        if line.encode(&mut self.line).is_err() {
            return false;
        }
        self.in_turn.extend_from_slice(self.line.as_bytes());
        true
    }

    /// Ends whatever half line stands in the sink.
    pub(super) fn push_empty(&mut self) {
        self.in_turn.push(b'\n');
    }

    /// Queues `off` in front of everything, and throws away all that waits.
    pub(super) fn overtake(&mut self, line: &HostLine) {
        self.urgent.clear();
        self.in_turn.clear();
        if line.encode(&mut self.line).is_ok() {
            // A line that was being sent may have been cut: end it first.
            self.urgent.push(b'\n');
            self.urgent.extend_from_slice(self.line.as_bytes());
        }
    }

    pub(super) fn clear(&mut self) {
        self.urgent.clear();
        self.in_turn.clear();
    }

    /// Moves everything into `bytes`, behind what it holds.
    pub(super) fn take(&mut self, bytes: &mut Vec<u8>) -> Urgency {
        let urgency = if self.urgent.is_empty() {
            Urgency::InTurn
        } else {
            Urgency::Overtakes
        };
        bytes.append(&mut self.urgent);
        bytes.append(&mut self.in_turn);
        urgency
    }
}
