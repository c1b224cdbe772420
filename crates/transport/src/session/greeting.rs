//! Greeting a sink: asking until the whole description has come.

use quantity::{HostTime, SinkTime, Span};
use wire::{Description, DescriptionBuilder, DescriptionError, SinkLine, Token};

use super::timer::Timer;

/// The first pause before the greeting is repeated, and the longest.
const PAUSE_FIRST: Span = Span::from_millis(250);
const PAUSE_LAST: Span = Span::from_secs(2);

/// What a line of the description came to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Gathered {
    /// Not for us.
    Stale,
    /// Kept; more is to come.
    Kept,
    /// The description is whole, and the session has begun at this time.
    Whole(Description, SinkTime),
    /// The session has begun but lines of the description were lost.
    Holed,
    /// The sink speaks another version of the protocol.
    Foreign {
        /// Its version.
        protocol: u16,
    },
}

/// The greeting of one session.
#[derive(Debug)]
pub(super) struct Greeting {
    session: u32,
    /// Token of the first greeting sent, and how far the latest is from it, counted from 1.
    first: Token,
    sent: u16,
    pub(super) repeat: Timer,
    pause: Span,
    gathering: Option<(Token, DescriptionBuilder)>,
}

impl Greeting {
    pub(super) fn new(session: u32) -> Self {
        Self {
            session,
            first: 0,
            sent: 0,
            repeat: Timer::AT_ONCE,
            pause: PAUSE_FIRST,
            gathering: None,
        }
    }

    /// The session's number.
    pub(super) fn session(&self) -> u32 {
        self.session
    }

    /// Notes that a greeting goes out with this token, and when to repeat it.
    pub(super) fn sending(&mut self, token: Token, now: HostTime) {
        if self.sent == 0 {
            self.first = token;
        }
        // Tokens of other asks may lie between; what counts is the latest greeting's.
        self.sent = token.wrapping_sub(self.first).wrapping_add(1);
        self.repeat.start(now, self.pause);
        self.pause = Span::from_micros((self.pause.micros() * 2).min(PAUSE_LAST.micros()));
    }

    /// Greets at once and briskly again, as when the link has come back.
    pub(super) fn hurry(&mut self) {
        self.pause = PAUSE_FIRST;
        self.repeat = Timer::AT_ONCE;
    }

    /// The token of the latest greeting.
    #[cfg(test)]
    pub(super) fn last_token(&self) -> Token {
        self.first.wrapping_add(self.sent).wrapping_sub(1)
    }

    /// Whether the token is of a greeting of this session.
    pub(super) fn is_ours(&self, token: Token) -> bool {
        let place = token.wrapping_sub(self.first).wrapping_add(1);
        place >= 1 && place <= self.sent
    }

    /// Takes a line of the description while the session has not begun.
    pub(super) fn gather(&mut self, token: Token, line: &SinkLine) -> Gathered {
        if !self.is_ours(token) {
            return Gathered::Stale;
        }
        let session = self.session;
        let fresh = (token, DescriptionBuilder::new(token, session));
        let (under, builder) = self.gathering.get_or_insert(fresh.clone());
        if *under != token {
            (*under, *builder) = fresh;
        }
        let last = matches!(line, SinkLine::Ready { .. });
        match builder.push(line) {
            Ok(Some((description, time))) => {
                self.gathering = None;
                self.repeat.stop();
                Gathered::Whole(description, time)
            }
            Err(DescriptionError::Protocol { found }) => Gathered::Foreign { protocol: found },
            // Only the last line shows that no more will come.
            Err(DescriptionError::OutOfOrder { .. }) if last => Gathered::Holed,
            Ok(None) | Err(DescriptionError::OutOfOrder { .. }) => Gathered::Kept,
            Err(DescriptionError::Token { .. } | DescriptionError::Session { .. }) => {
                Gathered::Stale
            }
        }
    }

    pub(super) fn forget_lines(&mut self) {
        self.gathering = None;
    }
}
