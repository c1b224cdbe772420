//! The host's side of the line protocol as a state machine without I/O.
//!
//! # Contract
//!
//! After every call that takes `now`:
//! 1. drain [`Session::poll_heard`] until it yields `None`;
//! 2. send what [`Session::take_transmit`] hands out, honouring its [`Urgency`];
//! 3. wait for bytes, for something to do, or until [`Session::deadline`], whichever is first.
//!
//! A new session greets its sink at the first [`Session::tick`]. Time is an input: a `now`
//! earlier than one seen before counts as that one. Nothing here fails: what a device does
//! wrong is heard as data, what we do wrong panics.
//!
//! # Invariants
//!
//! - An order is executed at most once by the sink, and leaves by exactly one of
//!   `Acknowledged`, `Refused`, `Withdrawn`, `Abandoned`: none is lost silently.
//! - Orders are executed in the order in which they were given.
//! - `off` needs no session. It goes before every byte not yet sent, is repeated until it is
//!   acknowledged, and no order is sent in between. A step that was given before it cannot
//!   begin after it: an unanswered step is sent again as a harmless `clear` under its number.
//! - A sink that is not the one expected, or that no longer knows the session, gets nothing but
//!   `off`.
//! - A host line goes out at least every third of the sink's deadman while the session stands.
//! - Work and memory per call are bounded by the bytes given and the link's rate; a reading
//!   allocates nothing.
//!
//! # What it relies on
//!
//! A link may lose, damage, delay or repeat bytes, but does not reorder lines: what was heard
//! before a line was sent before it. Serial ports and TCP hold that.
//!
//! # What it deliberately does not do
//!
//! It does not restart by itself when the sink has rebooted, judge a reading, or know what an
//! order is for.

mod asks;
mod budget;
mod clock_watch;
mod config;
mod greeting;
mod heard;
mod hearing;
mod outbox;
mod pairing;
mod steps;
mod timer;
mod window;

use std::collections::VecDeque;

use quantity::{HostTime, SinkTime, Span};
use serde::{Deserialize, Serialize};
use wire::{Decoder, Description, HostLine, Order, OrderId, ReasonRefused, SinkLine, Token};

pub use config::{Expected, Mismatch, SessionConfig};
pub use heard::{Heard, RebootEvidence, Side};
pub use outbox::Urgency;

use asks::ClockAsks;
use budget::Budget;
use clock_watch::ClockWatch;
use config::DEADMAN_UNTOLD;
use greeting::Greeting;
use outbox::Outbox;
use pairing::Pairing;
use steps::Steps;
use timer::Timer;
use window::Window;

use crate::clock::ClockEstimate;

/// Orders that may wait for room in the window; beyond, they are abandoned at once.
const WAITING_MAX: usize = 4096;

/// Reports of damaged lines and floods come at most this often.
const REPORT_INTERVAL: Span = Span::from_secs(1);

/// The longest time between attempts to have an order answered, in multiples of the first.
const BACK_OFF_MAX: u32 = 8;

/// Why a session wants to be called at its deadline.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum DeadlineReason {
    /// `off` has not been acknowledged: repeat it.
    RepeatOff,
    /// The sink has not described itself: greet it (again).
    Greet,
    /// Orders have not been answered: send them again.
    Retransmit,
    /// Keep the deadman quiet.
    KeepAlive,
    /// Ask the sink's clock.
    AskClock,
    /// Report damaged lines.
    Report,
}

/// What a session has counted since it was made.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
pub struct SessionCounts {
    /// Readings heard.
    pub readings: u64,
    /// Readback pairs lost on the way.
    pub readbacks_lost: u64,
    /// Event lines lost on the way.
    pub events_lost: u64,
    /// Lines from the sink that arrived damaged.
    pub damaged_here: u64,
    /// Lines that the sink says arrived damaged there.
    pub damaged_there: u64,
    /// Orders sent again.
    pub retransmitted: u64,
    /// Answers and lines of another session, or come twice.
    pub stale: u64,
    /// Bytes not listened to.
    pub flooded_bytes: u64,
    /// The latest round trip of a `clock` ask.
    pub round_trip: Span,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Phase {
    /// Waiting for the description.
    Greeting,
    /// The session stands.
    Open,
    /// The sink is not the one expected.
    Mismatched,
    /// The sink no longer knows the session.
    Lost,
}

/// The host's side of one link. The module's documentation states the contract.
#[derive(Debug)]
pub struct Session {
    config: SessionConfig,
    phase: Phase,
    link_up: bool,
    now: HostTime,
    decoder: Decoder<SinkLine>,
    budget: Budget,
    outbox: Outbox,
    heard: VecDeque<Heard>,
    counts: SessionCounts,
    token: Token,
    greeting: Greeting,
    description: Option<Description>,
    window: Window,
    /// Whether an order of this session has been answered.
    answered_any: bool,
    retransmit: Timer,
    attempt: u32,
    /// The token of an `off` that has not been acknowledged.
    off: Option<Token>,
    repeat_off: Timer,
    keep_alive: Timer,
    keep_alive_interval: Span,
    ask_clock: Timer,
    asks: ClockAsks,
    resuming: bool,
    clock: ClockWatch,
    steps: Steps,
    pairing: Pairing,
    event_last: Option<u16>,
    /// The latest sink time heard.
    time_last: SinkTime,
    report: Timer,
    damaged_unreported: [u32; 2],
    flooded_unreported: u64,
}

impl Session {
    /// A session that will greet its sink with `session_number` (1 or more; a number that the
    /// sink has not met before).
    pub fn new(config: SessionConfig, session_number: u32) -> Self {
        Self {
            phase: Phase::Greeting,
            link_up: true,
            now: HostTime::MIN,
            decoder: Decoder::new(),
            budget: Budget::new(config.bytes_per_second),
            outbox: Outbox::default(),
            heard: VecDeque::with_capacity(64),
            counts: SessionCounts::default(),
            token: first_token(session_number),
            greeting: Greeting::new(session_number.max(1)),
            description: None,
            window: Window::new(config.window_len()),
            answered_any: false,
            retransmit: Timer::IDLE,
            attempt: 0,
            off: None,
            repeat_off: Timer::IDLE,
            keep_alive: Timer::IDLE,
            keep_alive_interval: third(DEADMAN_UNTOLD),
            ask_clock: Timer::IDLE,
            asks: ClockAsks::default(),
            resuming: false,
            clock: ClockWatch::new(config.clock),
            steps: Steps::default(),
            pairing: Pairing::default(),
            event_last: None,
            time_last: SinkTime::ZERO,
            report: Timer::IDLE,
            damaged_unreported: [0; 2],
            flooded_unreported: 0,
            config,
        }
    }

    /// Takes bytes from the link.
    pub fn receive(&mut self, bytes: &[u8], now: HostTime) {
        let now = self.see(now);
        if !self.link_up {
            return;
        }
        let granted = self.budget.take(bytes.len(), now);
        let mut decoder = std::mem::take(&mut self.decoder);
        for line in decoder.feed(bytes.get(..granted).unwrap_or(bytes)) {
            match line {
                Ok(line) => self.hear(&line, now),
                Err(_) => self.damaged(Side::Host, 1),
            }
        }
        self.decoder = decoder;
        let flooded = bytes.len().saturating_sub(granted) as u64;
        if flooded > 0 {
            self.decoder.clear();
            self.counts.flooded_bytes += flooded;
            self.flooded_unreported += flooded;
        }
        self.report_troubles(now);
        self.fill_window(now);
    }

    /// Gives an order. Orders are numbered and sent as the session stands and the window has
    /// room; until then they wait.
    pub fn order(&mut self, id: OrderId, order: Order, now: HostTime) {
        let now = self.see(now);
        let hopeless = matches!(self.phase, Phase::Lost | Phase::Mismatched);
        if hopeless || self.window.waiting() >= WAITING_MAX {
            self.heard.push_back(Heard::Abandoned { order: id });
            return;
        }
        self.window.push(id, order);
        self.fill_window(now);
    }

    /// Turns the sink off, whatever the session is doing: sent before all else, repeated until
    /// acknowledged. Steps given before and not yet answered are withdrawn.
    pub fn off(&mut self, now: HostTime) {
        let now = self.see(now);
        let heard = &mut self.heard;
        self.window
            .withdraw_steps(|order| heard.push_back(Heard::Withdrawn { order }));
        let token = self.next_token();
        self.off = Some(token);
        self.retransmit.stop();
        self.send_off(now);
    }

    /// Time has passed.
    pub fn tick(&mut self, now: HostTime) {
        let now = self.see(now);
        self.report_troubles(now);
        if !self.link_up {
            return;
        }
        if self.repeat_off.expired(now) {
            self.send_off(now);
        }
        if self.phase == Phase::Greeting && self.greeting.repeat.expired(now) {
            self.greet(now);
        }
        if self.retransmit.expired(now) {
            self.window.forget_gap();
            self.go_back(now);
        }
        if self.ask_clock.expired(now) || self.keep_alive.expired(now) {
            self.ask_clock(now);
        }
        self.fill_window(now);
    }

    /// The link is gone: nothing is sent until it is back.
    pub fn link_lost(&mut self, now: HostTime) {
        self.see(now);
        self.link_up = false;
        self.decoder.clear();
        self.outbox.clear();
        self.greeting.forget_lines();
        self.pairing.interrupt();
        self.asks.clear();
        for timer in [
            &mut self.repeat_off,
            &mut self.retransmit,
            &mut self.keep_alive,
            &mut self.ask_clock,
        ] {
            timer.stop();
        }
    }

    /// The link is back. A session that stood goes on: what went unanswered is sent again, and
    /// [`Heard::Resumed`] tells when the sink has answered within it. Call
    /// [`Session::restart`] as well to begin a new one instead.
    pub fn link_back(&mut self, now: HostTime) {
        let now = self.see(now);
        if self.link_up {
            return;
        }
        self.link_up = true;
        self.outbox.push_empty();
        if self.off.is_some() {
            self.send_off(now);
        }
        match self.phase {
            Phase::Greeting => {
                self.greeting.hurry();
                self.greet(now);
            }
            Phase::Open => {
                self.resuming = true;
                self.ask_clock(now);
                if self.off.is_none() && self.window.has_unanswered() {
                    self.window.forget_gap();
                    self.go_back(now);
                }
            }
            Phase::Mismatched | Phase::Lost => {}
        }
        self.fill_window(now);
    }

    /// Begins a new session with a new number: the sink turns off and forgets what it was told.
    /// Orders not yet answered are abandoned; an `off` not yet acknowledged stays due.
    pub fn restart(&mut self, session_number: u32, now: HostTime) {
        let now = self.see(now);
        self.leave();
        self.phase = Phase::Greeting;
        self.greeting = Greeting::new(session_number.max(1));
        self.outbox.clear();
        if self.link_up {
            if self.off.is_some() {
                self.send_off(now);
            }
            self.greet(now);
        }
    }

    /// Moves the bytes to be sent into `bytes`, behind what it holds, `off` before all else.
    pub fn take_transmit(&mut self, bytes: &mut Vec<u8>) -> Urgency {
        self.outbox.take(bytes)
    }

    /// What was heard, oldest first.
    pub fn poll_heard(&mut self) -> Option<Heard> {
        self.heard.pop_front()
    }

    /// When [`Session::tick`] must be called at the latest, and why.
    pub fn deadline(&self) -> Option<(HostTime, DeadlineReason)> {
        let greet = if self.phase == Phase::Greeting && self.link_up {
            self.greeting.repeat
        } else {
            Timer::IDLE
        };
        [
            (self.repeat_off, DeadlineReason::RepeatOff),
            (greet, DeadlineReason::Greet),
            (self.retransmit, DeadlineReason::Retransmit),
            (self.keep_alive, DeadlineReason::KeepAlive),
            (self.ask_clock, DeadlineReason::AskClock),
            (self.report, DeadlineReason::Report),
        ]
        .into_iter()
        .filter_map(|(timer, reason)| timer.due().map(|due| (due, reason)))
        .min()
    }

    /// The sink's description, while the session stands.
    pub const fn description(&self) -> Option<&Description> {
        self.description.as_ref()
    }

    /// Where the sink's clock stands, once that is known.
    pub const fn clock(&self) -> Option<ClockEstimate> {
        self.clock.estimate()
    }

    /// What has been counted.
    pub const fn counts(&self) -> SessionCounts {
        self.counts
    }

    /// Time does not go back here, whatever the caller's clock does.
    fn see(&mut self, now: HostTime) -> HostTime {
        self.now = self.now.max(now);
        self.now
    }

    fn next_token(&mut self) -> Token {
        self.token = self.token.wrapping_add(1);
        self.token
    }

    fn greet(&mut self, now: HostTime) {
        let token = self.next_token();
        self.greeting.sending(token, now);
        self.outbox.push_empty();
        self.outbox.push(&HostLine::Hello {
            token,
            session: self.greeting.session(),
        });
    }

    fn send_off(&mut self, now: HostTime) {
        let Some(token) = self.off else {
            self.repeat_off.stop();
            return;
        };
        if self.link_up {
            self.outbox.overtake(&HostLine::Off { token });
            self.repeat_off.start(now, self.config.retransmit);
            self.line_sent(now);
        }
    }

    fn ask_clock(&mut self, now: HostTime) {
        if self.phase != Phase::Open || !self.link_up {
            self.ask_clock.stop();
            self.keep_alive.stop();
            return;
        }
        let token = self.next_token();
        self.outbox.push(&HostLine::Clock { token });
        let pause = self.asks.sent(token, now, self.keep_alive_interval);
        self.ask_clock.start(now, pause);
        self.line_sent(now);
    }

    /// Every line that is sent keeps the deadman quiet.
    fn line_sent(&mut self, now: HostTime) {
        if self.phase == Phase::Open {
            self.keep_alive.start(now, self.keep_alive_interval);
        }
    }

    /// Numbers and sends orders while there is room, and none while `off` is unanswered.
    fn fill_window(&mut self, now: HostTime) {
        if self.phase != Phase::Open || !self.link_up || self.off.is_some() {
            return;
        }
        while let Some((id, order)) = self.window.next_waiting() {
            let line = HostLine::Order {
                number: self.window.next_number(),
                order,
            };
            if !self.outbox.push(&line) {
                // No line can carry it, so the sink would refuse it: its number stays free.
                self.window.discard_waiting();
                self.heard.push_back(Heard::Refused {
                    order: id,
                    reason: ReasonRefused::Range,
                });
                continue;
            }
            let place = self.window.number_waiting();
            self.note_sent(place, id, order);
            self.line_sent(now);
            if self.retransmit.is_idle() {
                self.retransmit.start(now, self.config.retransmit);
            }
        }
    }

    fn note_sent(&mut self, place: u64, id: OrderId, order: Order) {
        match order {
            Order::Step(_) => self.steps.push(place, id),
            // A shorter deadman must be kept quiet before its acknowledgement is here.
            Order::Deadman { interval } => {
                self.keep_alive_interval = self.keep_alive_interval.min(third(interval));
            }
            Order::Limit { .. }
            | Order::Readback { .. }
            | Order::Clear { .. }
            | Order::Reset
            | Order::Isolator { .. }
            | Order::Burst { .. } => {}
        }
    }

    /// Sends every unanswered order again, oldest first.
    fn go_back(&mut self, now: HostTime) {
        if self.off.is_some() || self.phase != Phase::Open || !self.window.has_unanswered() {
            self.retransmit.stop();
            return;
        }
        let mut orders = 0;
        for line in self.window.unanswered() {
            self.outbox.push(&line);
            orders += 1;
        }
        self.attempt += 1;
        self.counts.retransmitted += u64::from(orders);
        self.heard.push_back(Heard::Retransmitted {
            orders,
            attempt: self.attempt,
        });
        let factor = 1_u32
            .checked_shl(self.attempt)
            .unwrap_or(BACK_OFF_MAX)
            .min(BACK_OFF_MAX);
        let pause = self.config.retransmit.micros() * u64::from(factor);
        self.retransmit.start(now, Span::from_micros(pause));
        self.line_sent(now);
    }

    /// Ends the session on this side: what was not answered is abandoned.
    fn leave(&mut self) {
        let heard = &mut self.heard;
        self.window
            .abandon(|order| heard.push_back(Heard::Abandoned { order }));
        self.description = None;
        self.answered_any = false;
        self.attempt = 0;
        self.retransmit.stop();
        self.keep_alive.stop();
        self.keep_alive_interval = third(DEADMAN_UNTOLD);
        self.ask_clock.stop();
        self.asks.clear();
        self.resuming = false;
        self.clock.clear();
        self.steps.clear();
        self.pairing = Pairing::default();
        self.event_last = None;
        self.time_last = SinkTime::ZERO;
    }
}

/// Tokens begin at another place in each session, so that answers of the one before are told
/// apart.
fn first_token(session_number: u32) -> Token {
    let [a, b, c, d] = session_number.to_be_bytes();
    Token::from_be_bytes([a, b]) ^ Token::from_be_bytes([c, d]).rotate_left(7)
}

fn third(interval: Span) -> Span {
    Span::from_micros((interval.micros() / 3).max(1))
}

#[cfg(test)]
mod tests;
