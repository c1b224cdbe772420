//! What stands in a journal: one numbered entry after the other.
//!
//! Three kinds of thing are entered: what went into the sequencer, what came out of it, and
//! notes about what it does not see. The first two are enough to replay the run; the notes are
//! what a person needs to defend it. Nothing here knows how an entry is written.

use quantity::{Current, HostTime, SinkTime, Span, Voltage};
use sequencer::event::{Ending, Event, Finding, Happening, Output};
use serde::{Deserialize, Serialize};
use wire::{Description, Order, OrderId, Reading};

/// One entry of a journal.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Entry {
    /// Its running number: 1, 2, 3, ...
    pub number: u64,
    /// Host time at which it was entered; for an event, at which the host learned of it.
    pub at: HostTime,
    /// What is entered.
    pub body: Body,
}

/// What an entry says.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Body {
    /// Something that went into the sequencer.
    Event(Happening),
    /// An order that came out of it; on stable storage before it is sent.
    Order {
        /// Its number in the run.
        id: OrderId,
        /// The order, nominal.
        order: Order,
    },
    /// `off` was sent; entered right after.
    Off,
    /// Something the sequencer found.
    Finding(Finding),
    /// The run has ended.
    Ended(Ending),
    /// Something the sequencer does not see.
    Note(Note),
}

/// What is entered beside the sequencer's own inputs and outputs.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Note {
    /// The sink described itself.
    Described(Description),
    /// A session with the sink began.
    SessionBegun {
        /// Its number.
        session: u32,
    },
    /// The sink's clock was aligned with the host's.
    ClockAligned(ClockAlignment),
    /// Orders went unanswered and were sent again, under the same numbers.
    Retransmitted {
        /// How many.
        orders: u16,
        /// How often in a row, 1 at first.
        attempt: u32,
    },
    /// Lines arrived damaged and were ignored.
    DamagedLines {
        /// Who found them damaged.
        seen_by: Side,
        /// How many since the last such note.
        lines: u32,
    },
    /// The link was lost.
    LinkLost {
        /// What the port said.
        reason: String,
    },
    /// The link is back.
    LinkBack,
    /// The run was taken up again after the host had died.
    Resumed {
        /// Time between the last entry before and this one.
        gap: Span,
        /// The last number that had survived.
        last_number: u64,
    },
    /// Samples of a capture around an edge.
    Burst {
        /// The capture's number on the wire.
        capture: u16,
        /// The place of the first sample in the capture.
        index: u16,
        /// Current and voltage, nominal (uA, uV).
        samples: Vec<(Current, Voltage)>,
    },
    /// All samples of a capture have been entered.
    BurstDone {
        /// The capture's number on the wire.
        capture: u16,
    },
    /// Anything else worth keeping, in words.
    Text(String),
}

/// One end of the link.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Side {
    /// The host.
    Host,
    /// The sink.
    Sink,
}

/// How the sink's clock stood against the host's.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ClockAlignment {
    /// An instant on the sink's clock.
    pub sink: SinkTime,
    /// The same instant on the host's clock.
    pub host: HostTime,
    /// How much faster the sink's clock runs, in parts per thousand million.
    pub rate_ppb: i64,
    /// Bound of the error at that instant.
    pub uncertainty: Span,
    /// Bound of the error of the rate, in parts per thousand million.
    pub rate_uncertainty_ppb: u64,
}

impl Entry {
    /// The entry of an event.
    pub fn of_event(number: u64, event: Event) -> Self {
        Self {
            number,
            at: event.at,
            body: Body::Event(event.what),
        }
    }

    /// The entry of an output, with the time of the event that caused it.
    pub fn of_output(number: u64, at: HostTime, output: Output) -> Self {
        Self {
            number,
            at,
            body: Body::from(output),
        }
    }

    /// The reading, if the entry is one.
    pub fn reading(&self) -> Option<&Reading> {
        match &self.body {
            Body::Event(Happening::Reading(reading)) => Some(reading),
            Body::Event(_)
            | Body::Order { .. }
            | Body::Off
            | Body::Finding(_)
            | Body::Ended(_)
            | Body::Note(_) => None,
        }
    }

    /// The event for the sequencer, if the entry is one.
    pub fn event(&self) -> Option<Event> {
        match &self.body {
            Body::Event(what) => Some(Event {
                at: self.at,
                what: what.clone(),
            }),
            Body::Order { .. } | Body::Off | Body::Finding(_) | Body::Ended(_) | Body::Note(_) => {
                None
            }
        }
    }

    /// The sequencer's output, if the entry is one.
    pub fn output(&self) -> Option<Output> {
        match &self.body {
            Body::Order { id, order } => Some(Output::Order {
                id: *id,
                order: *order,
            }),
            Body::Off => Some(Output::Off),
            Body::Finding(finding) => Some(Output::Finding(finding.clone())),
            Body::Ended(ending) => Some(Output::Ended(ending.clone())),
            Body::Event(_) | Body::Note(_) => None,
        }
    }
}

impl From<Output> for Body {
    fn from(output: Output) -> Self {
        match output {
            Output::Order { id, order } => Self::Order { id, order },
            Output::Off => Self::Off,
            Output::Finding(finding) => Self::Finding(finding),
            Output::Ended(ending) => Self::Ended(ending),
        }
    }
}
