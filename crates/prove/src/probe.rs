//! What a check holds in its hands: lines out, lines in, sound or not, and all of it kept.
//!
//! Invariants:
//! - Every line is kept with its time, in both directions.
//! - No wait lasts beyond the check's deadline.
//! - Unless told to be silent, waiting keeps the sink's deadman quiet.

#![expect(
    clippy::wildcard_enum_match_arm,
    reason = "a wait picks its line out of all kinds and passes the others over"
)]

mod bench;
mod unanswered;

use quantity::{HostTime, SinkTime, Span};
use wire::{Description, LINE_BYTES_MAX, Line as _, ReasonRefused, SinkLine, Token, checksum};

use crate::evidence::{Direction, Exchange, readable};
use crate::port::{Port, PortError};
use crate::run::Options;

pub(crate) use bench::{Edge, Pair, Trip, cannot};
use unanswered::Unanswered;

/// How often a waiting host says something: well within the shortest untold deadman.
const KEEP_QUIET: Span = Span::from_millis(400);

/// Lines kept of one check; a sink that floods the port must not fill the memory.
const EVIDENCE_MAX: usize = 4_000;

/// Why a check ends early.
#[derive(Debug)]
pub(crate) enum Stop {
    /// The guarantee does not hold.
    Fails(String),
    /// This run cannot tell.
    NotShown(String),
    /// The check's time is over.
    OutOfTime,
    /// The port is gone.
    Port(PortError),
}

impl From<PortError> for Stop {
    fn from(error: PortError) -> Self {
        Self::Port(error)
    }
}

/// What a check yields: what was measured, or why it stopped.
pub(crate) type Outcome = Result<String, Stop>;

/// Fails the check with these words unless the condition is met.
macro_rules! ensure {
    ($condition:expr, $($words:tt)+) => {
        if !$condition {
            return Err($crate::probe::Stop::Fails(format!($($words)+)));
        }
    };
}
pub(crate) use ensure;

/// A place in what was heard.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Mark(usize);

/// What an order was answered.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Answer {
    /// `ok`
    Done,
    /// `no` with its reason
    Refused(ReasonRefused),
    /// `no ... gap` with the number expected
    Gap(u16),
}

impl std::fmt::Display for Answer {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Done => f.write_str("ok"),
            Self::Refused(reason) => write!(f, "no {}", reason.word()),
            Self::Gap(expected) => write!(f, "no gap {expected}"),
        }
    }
}

/// The host's end of a check.
pub(crate) struct Probe<'p> {
    port: &'p mut dyn Port,
    options: Options,
    began: HostTime,
    deadline: HostTime,
    partial: Vec<u8>,
    heard: Vec<SinkLine>,
    evidence: Vec<Exchange>,
    damage: bool,
    unanswered: Unanswered,
    held_up: Span,
    session: u32,
    token: Token,
    number: u16,
    silent: bool,
    said_at: HostTime,
    description: Option<Description>,
}

impl<'p> Probe<'p> {
    pub(crate) fn new(port: &'p mut dyn Port, options: Options) -> Self {
        let now = port.now();
        // Numbers of other runs lie elsewhere; any start is as good as another.
        let seconds = now.micros() / 1_000_000;
        let session = u32::try_from(seconds.rem_euclid(1 << 22)).unwrap_or(0) << 9;
        Self {
            port,
            options,
            began: now,
            deadline: now,
            partial: Vec::new(),
            heard: Vec::new(),
            evidence: Vec::new(),
            damage: false,
            unanswered: Unanswered::default(),
            held_up: Span::ZERO,
            session,
            token: 0,
            number: 1,
            silent: false,
            said_at: now,
            description: None,
        }
    }

    /// A new check, that may last so long.
    pub(crate) fn begin(&mut self, longest: Span) {
        self.deadline = self.port.now().saturating_add(longest);
        self.heard.clear();
        self.damage = false;
        self.unanswered = Unanswered::default();
        self.held_up = Span::ZERO;
        self.silent = false;
    }

    pub(crate) fn elapsed(&self) -> Span {
        self.port.now().saturating_since(self.began)
    }

    pub(crate) const fn options(&self) -> &Options {
        &self.options
    }

    pub(crate) const fn description(&self) -> Option<&Description> {
        self.description.as_ref()
    }

    /// Whether a line from the sink arrived damaged in this check.
    pub(crate) const fn heard_damage(&self) -> bool {
        self.damage
    }

    /// The longest time in this check from a line to its answer.
    pub(crate) const fn held_up(&self) -> Span {
        self.held_up
    }

    pub(crate) fn take_evidence(&mut self) -> Vec<Exchange> {
        std::mem::take(&mut self.evidence)
    }

    /// Whether the sink has not yet been greeted: nothing can have been turned on.
    pub(crate) const fn untouched(&self) -> bool {
        self.description.is_none()
    }

    /// From here on nothing is said unasked.
    pub(crate) const fn fall_silent(&mut self) {
        self.silent = true;
    }

    pub(crate) const fn speak_again(&mut self) {
        self.silent = false;
    }

    /// Where what was heard ends now.
    pub(crate) const fn mark(&self) -> Mark {
        Mark(self.heard.len())
    }

    /// All lines heard since a mark.
    pub(crate) fn since(&self, mark: Mark) -> impl Iterator<Item = &SinkLine> {
        self.heard.iter().skip(mark.0)
    }

    pub(crate) const fn next_token(&mut self) -> Token {
        self.token = self.token.wrapping_add(1);
        self.token
    }

    // ---- saying ----

    /// Sends bytes as they are.
    pub(crate) fn say_bytes(&mut self, bytes: &[u8]) -> Result<(), Stop> {
        let line = bytes.strip_suffix(b"\n").unwrap_or(bytes);
        self.keep(Direction::Sent, line, None);
        self.said_at = self.port.now();
        Ok(self.port.send(bytes)?)
    }

    /// Sends a line with its checksum.
    pub(crate) fn say(&mut self, text: &str) -> Result<(), Stop> {
        self.unanswered.said(text, self.port.now());
        self.say_bytes(&sound_line(text))
    }

    /// Sends several lines in one piece.
    pub(crate) fn say_at_once(&mut self, texts: &[String]) -> Result<(), Stop> {
        let mut bytes = Vec::new();
        for text in texts {
            let line = sound_line(text);
            self.keep(Direction::Sent, line.trim_ascii_end(), None);
            bytes.extend_from_slice(&line);
        }
        self.said_at = self.port.now();
        Ok(self.port.send(&bytes)?)
    }

    // ---- hearing ----

    /// The first line since a mark that is what is wanted; waits for it so long.
    pub(crate) fn hear<T>(
        &mut self,
        from: Mark,
        within: Span,
        wanted: impl Fn(&SinkLine) -> Option<T>,
    ) -> Result<Option<T>, Stop> {
        let until = self.port.now().saturating_add(within);
        let mut at = from.0;
        loop {
            while let Some(line) = self.heard.get(at) {
                at += 1;
                if let Some(found) = wanted(line) {
                    return Ok(Some(found));
                }
            }
            if self.port.now() >= until {
                return Ok(None);
            }
            self.take(until)?;
        }
    }

    /// Lets time pass and listens.
    pub(crate) fn listen(&mut self, span: Span) -> Result<(), Stop> {
        let mark = self.mark();
        self.hear(mark, span, |_| None::<()>).map(|_| ())
    }

    /// Asks the sink's time. All that it has to say about what was sent before is heard then.
    pub(crate) fn fence(&mut self) -> Result<SinkTime, Stop> {
        let (token, mark) = (self.next_token(), self.mark());
        self.say(&format!("clock {token}"))?;
        let patience = self.options.patience;
        let answer = self.hear(mark, patience, |line| match line {
            SinkLine::Clock { token: of, time } if *of == token => Some(*time),
            _ => None,
        })?;
        answer.ok_or_else(|| {
            Stop::Fails(format!(
                "no answer to `clock {token}` within {patience}: an ask may be sent at any time \
                 and is answered at once (chapter 3)"
            ))
        })
    }

    fn take(&mut self, until: HostTime) -> Result<(), Stop> {
        let now = self.port.now();
        if now >= self.deadline {
            return Err(Stop::OutOfTime);
        }
        let mut until = until.min(self.deadline);
        if !self.silent {
            let due = self.said_at.saturating_add(KEEP_QUIET);
            if now >= due {
                let token = self.next_token();
                self.say(&format!("clock {token}"))?;
            }
            until = until.min(self.said_at.saturating_add(KEEP_QUIET));
        }
        let mut bytes = Vec::new();
        self.port.read(until, &mut bytes)?;
        for byte in bytes {
            if byte == b'\n' {
                self.take_line();
            } else if self.partial.len() <= 2 * LINE_BYTES_MAX {
                self.partial.push(byte);
            }
        }
        Ok(())
    }

    fn take_line(&mut self) {
        let whole = std::mem::take(&mut self.partial);
        let line = whole.strip_suffix(b"\r").unwrap_or(&whole);
        if line.is_empty() {
            return;
        }
        match SinkLine::decode(line) {
            Ok(sound) => {
                self.keep(Direction::Received, line, None);
                if let Some(said_at) = self.unanswered.answered(&sound) {
                    let took = self.port.now().saturating_since(said_at);
                    self.held_up = self.held_up.max(took);
                }
                self.heard.push(sound);
            }
            Err(error) => {
                self.damage = true;
                self.keep(Direction::Received, line, Some(error.to_string()));
            }
        }
    }

    fn keep(&mut self, direction: Direction, line: &[u8], fault: Option<String>) {
        if self.evidence.len() < EVIDENCE_MAX {
            self.evidence.push(Exchange {
                at: self.elapsed(),
                direction,
                line: readable(line),
                fault,
            });
        }
    }
}

/// A line with its checksum and line end.
pub(crate) fn sound_line(text: &str) -> Vec<u8> {
    format!("{text} {:04X}\n", checksum(text.as_bytes())).into_bytes()
}
