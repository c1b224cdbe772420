//! Gathers the five lines of a description.
//!
//! Invariants: a description comes out only if all five lines came, in order, under the token
//! and for the session that were asked; a line that is out of place ends the attempt, and
//! nothing of it is kept.
//!
//! What it deliberately does not do: judge whether the sink is the one the bench file describes.

use quantity::SinkTime;
use thiserror::Error;

use crate::PROTOCOL_VERSION;
use crate::message::{Description, SinkLine, Token};

/// Why lines do not make up a description.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Error)]
pub enum DescriptionError {
    /// The sink speaks another version.
    #[error("sink speaks protocol {found}, this host {PROTOCOL_VERSION}; use matching versions")]
    Protocol {
        /// The version the sink states.
        found: u16,
    },
    /// A line answers another `hello`.
    #[error("description line `{kind}` bears token {found}, asked under {expected}; ask again")]
    Token {
        /// First word of the line.
        kind: &'static str,
        /// The token of the ask.
        expected: Token,
        /// The token of the line.
        found: Token,
    },
    /// A line of the five is missing or came twice.
    #[error("description line `{found}` came where `{expected}` was due; ask again")]
    OutOfOrder {
        /// First word of the line that was due.
        expected: &'static str,
        /// First word of the line that came.
        found: &'static str,
    },
    /// The sink began another session than was asked.
    #[error("sink began session {found}, asked was {expected}; ask again")]
    Session {
        /// The session of the ask.
        expected: u32,
        /// The session of the line.
        found: u32,
    },
}

/// The five lines, in their order.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Part {
    About,
    Front,
    Drive,
    Sense,
    Ready,
}

impl Part {
    /// The part a line is, with its token; `None` for any other line.
    #[expect(
        clippy::wildcard_enum_match_arm,
        reason = "all other lines are passed over alike"
    )]
    const fn of(line: &SinkLine) -> Option<(Self, Token)> {
        match *line {
            SinkLine::About { token, .. } => Some((Self::About, token)),
            SinkLine::Front { token, .. } => Some((Self::Front, token)),
            SinkLine::Drive { token, .. } => Some((Self::Drive, token)),
            SinkLine::Sense { token, .. } => Some((Self::Sense, token)),
            SinkLine::Ready { token, .. } => Some((Self::Ready, token)),
            _ => None,
        }
    }

    const fn kind(self) -> &'static str {
        match self {
            Self::About => "about",
            Self::Front => "front",
            Self::Drive => "drive",
            Self::Sense => "sense",
            Self::Ready => "ready",
        }
    }

    const fn next(self) -> Self {
        match self {
            Self::About => Self::Front,
            Self::Front => Self::Drive,
            Self::Drive => Self::Sense,
            Self::Sense => Self::Ready,
            Self::Ready => Self::About,
        }
    }
}

/// Gathers the answer to one `hello`.
#[derive(Debug, Clone)]
pub struct DescriptionBuilder {
    token: Token,
    session: u32,
    due: Part,
    gathered: Description,
}

impl DescriptionBuilder {
    /// Awaits the answer to `hello TOKEN SESSION`.
    pub const fn new(token: Token, session: u32) -> Self {
        Self {
            token,
            session,
            due: Part::About,
            gathered: Description::BLANK,
        }
    }

    /// Takes a line; the last of the five yields the description and the sink's time.
    ///
    /// Lines that are no part of a description are passed over. An `about` under the right
    /// token always begins anew, since a repeated `hello` is answered anew.
    ///
    /// # Errors
    ///
    /// [`DescriptionError`] if the line is out of place; the builder then waits for `about`.
    pub fn push(
        &mut self,
        line: &SinkLine,
    ) -> Result<Option<(Description, SinkTime)>, DescriptionError> {
        let Some((part, token)) = Part::of(line) else {
            return Ok(None);
        };
        let result = self.take(part, token, line);
        if result.is_err() {
            self.due = Part::About;
        }
        result
    }

    fn take(
        &mut self,
        part: Part,
        token: Token,
        line: &SinkLine,
    ) -> Result<Option<(Description, SinkTime)>, DescriptionError> {
        if token != self.token {
            return Err(DescriptionError::Token {
                kind: part.kind(),
                expected: self.token,
                found: token,
            });
        }
        if part != self.due && part != Part::About {
            return Err(DescriptionError::OutOfOrder {
                expected: self.due.kind(),
                found: part.kind(),
            });
        }
        self.due = part.next();
        self.keep(line)
    }

    #[expect(
        clippy::wildcard_enum_match_arm,
        reason = "only the five parts come this far"
    )]
    fn keep(
        &mut self,
        line: &SinkLine,
    ) -> Result<Option<(Description, SinkTime)>, DescriptionError> {
        let kept = &mut self.gathered;
        match *line {
            SinkLine::About {
                protocol,
                firmware,
                serial,
                reset,
                ..
            } => {
                if protocol != PROTOCOL_VERSION {
                    return Err(DescriptionError::Protocol { found: protocol });
                }
                *kept = Description {
                    protocol,
                    firmware,
                    serial,
                    reset,
                    ..Description::BLANK
                };
            }
            SinkLine::Front {
                tick,
                queue,
                fastest,
                burst,
                abilities,
                ..
            } => {
                kept.tick = tick;
                kept.queue = queue;
                kept.fastest_readback = fastest;
                kept.burst = burst;
                kept.abilities = abilities;
            }
            SinkLine::Drive {
                bits,
                full_scale,
                span,
                sense,
                ..
            } => {
                kept.drive_bits = bits;
                kept.drive_full_scale = full_scale;
                kept.drive_spans_full_scale = span == 1;
                kept.sense_resistor = sense;
            }
            SinkLine::Sense {
                bits,
                current,
                voltage,
                ..
            } => {
                kept.sense_bits = bits;
                kept.sense_current = current;
                kept.sense_voltage = voltage;
            }
            SinkLine::Ready { session, time, .. } => {
                if session != self.session {
                    return Err(DescriptionError::Session {
                        expected: self.session,
                        found: session,
                    });
                }
                return Ok(Some((*kept, time)));
            }
            _ => {}
        }
        Ok(None)
    }
}
