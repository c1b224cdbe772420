//! What a session has heard, as data.

use quantity::{Current, SinkTime, Span, Voltage};
use serde::{Deserialize, Serialize};
use wire::{Cause, Description, OrderId, Reading, ReasonRefused};

use super::config::Mismatch;
use crate::clock::{ClockEstimate, ClockFault};

/// Something the session heard or found out. Times are the sink's own.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Heard {
    /// The session has begun and the sink is the one expected.
    Connected {
        /// What it says of itself.
        description: Description,
        /// Its clock when it began the session.
        sink_time: SinkTime,
    },
    /// The sink on the port is not the one expected: it gets no order, only `off`.
    DescriptionRefused {
        /// Every field that is not as expected.
        mismatches: Vec<Mismatch>,
    },
    /// The link was lost and is back, and the session has outlived it.
    Resumed {
        /// The sink's clock at its first answer.
        sink_time: SinkTime,
    },
    /// A readback pair, or its second line alone.
    Reading(Reading),
    /// A step began.
    Edge {
        /// When.
        time: SinkTime,
        /// The order that queued it.
        order: OrderId,
    },
    /// The counters show that a step runs or has run whose `edge` line was lost.
    StepSeen {
        /// When it was seen; it began no later.
        time: SinkTime,
        /// The order that queued it.
        order: OrderId,
    },
    /// The last step's hold ran out: the sink turned off.
    HoldExpired {
        /// When.
        time: SinkTime,
    },
    /// The sink turned itself off and latched.
    SinkTripped {
        /// When.
        time: SinkTime,
        /// Why.
        cause: Cause,
        /// What was measured, in the cause's unit.
        value: i64,
    },
    /// Event lines were lost (an edge, an end or a trip); the readings show the state.
    EventsLost {
        /// How many.
        count: u16,
    },
    /// The sink executed the order.
    Acknowledged {
        /// Which.
        order: OrderId,
    },
    /// The sink refused the order; or the session did in its place, with `Range`, because no
    /// line can carry its values.
    Refused {
        /// Which.
        order: OrderId,
        /// Why.
        reason: ReasonRefused,
    },
    /// `off` overtook the step before its answer came: it will not begin any more.
    Withdrawn {
        /// Which.
        order: OrderId,
    },
    /// The session ended, or never stood, with the order unanswered. Whether the sink executed
    /// it is unknown; its effect ended with the session.
    Abandoned {
        /// Which.
        order: OrderId,
    },
    /// The sink is off, and was told so after the latest call of `off`.
    OffAcknowledged,
    /// The sink no longer knows the session: it has started anew, or another host has taken it.
    /// Nothing is sent but `off` until `restart`.
    SinkRebooted {
        /// What shows it.
        evidence: RebootEvidence,
    },
    /// The clock estimate has changed materially.
    ClockEstimate(ClockEstimate),
    /// The sink's clock is out of bounds.
    ClockOff {
        /// By how much.
        by: Span,
        /// How.
        fault: ClockFault,
    },
    /// Orders went unanswered and were sent again.
    Retransmitted {
        /// How many.
        orders: u16,
        /// How often in a row, 1 at first.
        attempt: u32,
    },
    /// Lines arrived damaged since the last report; reports come at most once a second.
    Damaged {
        /// Where.
        by: Side,
        /// How many lines.
        lines: u32,
    },
    /// More bytes came than the link can carry, and were not listened to.
    Flood {
        /// How many since the last report.
        bytes: u64,
    },
    /// Burst samples.
    BurstSamples {
        /// The capture's number on the wire.
        burst: u16,
        /// Index of the first sample.
        index: u16,
        /// How many of `samples` are filled.
        len: u8,
        /// Current and voltage, nominal.
        samples: [(Current, Voltage); 4],
    },
    /// All samples of a capture have been sent.
    BurstDone {
        /// The capture's number on the wire.
        burst: u16,
    },
}

/// Who found a line damaged.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Side {
    /// The host: lines from the sink.
    Host,
    /// The sink: lines from the host.
    Sink,
}

/// What shows that the sink no longer knows the session.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum RebootEvidence {
    /// It answered an order with `session`.
    NoSession,
    /// It described itself unasked, or began the session anew.
    UnaskedDescription,
    /// Its clock went back.
    ClockWentBack {
        /// The latest time heard before.
        from: SinkTime,
        /// The time heard now.
        to: SinkTime,
    },
    /// It expects an order number that this session is past, or has not reached.
    NumbersMoved {
        /// The number it expects.
        expected: u16,
    },
    /// Its charge counter moved by more than its full scale allows.
    CountersMoved,
}
