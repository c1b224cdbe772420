//! `clock` asks under way: which answer belongs to which ask.

use std::collections::VecDeque;

use quantity::{HostTime, Span};
use wire::Token;

/// Asks remembered at most; older ones are taken for lost.
const ASKS_MAX: usize = 8;

/// The first asks follow quickly, so that the clocks are aligned soon.
const BRISK: u8 = 8;
const BRISK_PAUSE: Span = Span::from_millis(100);

/// Afterwards the clock is asked this often, beside the asks that keep the deadman quiet.
const STEADY_PAUSE: Span = Span::from_secs(2);

/// Asks that have not been answered.
#[derive(Debug, Default)]
pub(super) struct ClockAsks {
    pending: VecDeque<(Token, HostTime)>,
    sent: u8,
}

impl ClockAsks {
    /// Notes an ask. Returns how long to wait before the next, given how often the deadman
    /// wants to hear something.
    pub(super) fn sent(&mut self, token: Token, now: HostTime, keep_alive: Span) -> Span {
        if self.pending.len() >= ASKS_MAX {
            self.pending.pop_front();
        }
        self.pending.push_back((token, now));
        if self.sent < BRISK {
            self.sent += 1;
            BRISK_PAUSE.min(keep_alive)
        } else {
            STEADY_PAUSE
        }
    }

    /// When the ask was sent that this token answers. Asks before it are taken for lost.
    pub(super) fn answered(&mut self, token: Token) -> Option<HostTime> {
        let place = self.pending.iter().position(|(own, _)| *own == token)?;
        self.pending.drain(..=place).next_back().map(|(_, at)| at)
    }

    pub(super) fn clear(&mut self) {
        self.pending.clear();
        self.sent = 0;
    }
}
