//! What goes into the sequencer and what comes out of it.
//!
//! Both are data and both are in the record, so that a run is a fold over its record: the same
//! plan and the same events give the same outputs, bit for bit. All electrical values in events
//! and orders are nominal, as on the wire; the sequencer converts with the plan's correction.

use quantity::{Current, HostTime, SinkTime, Span};
use serde::{Deserialize, Serialize};
use wire::{Cause, Order, OrderId, Reading, ReasonRefused};

/// Something that happened, with the host time at which the host learned of it.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Event {
    /// When the host learned of it.
    pub at: HostTime,
    /// What happened.
    pub what: Happening,
}

/// What can happen to a run.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Happening {
    /// A session stands, the sink is the one described; its clock shows `time`.
    Connected {
        /// Sink time at `Event::at`.
        time: SinkTime,
    },
    /// A readback pair.
    Reading(Reading),
    /// A step began on the sink.
    Edge {
        /// When, by the sink's clock.
        time: SinkTime,
        /// The order that queued it.
        order: OrderId,
    },
    /// The last step's hold ran out: the sink turned off.
    HoldExpired {
        /// When, by the sink's clock.
        time: SinkTime,
    },
    /// The sink turned itself off and latched.
    SinkTripped {
        /// When, by the sink's clock.
        time: SinkTime,
        /// Why.
        cause: Cause,
        /// The value that crossed, in the cause's unit.
        value: i64,
    },
    /// The sink executed an order.
    Acknowledged {
        /// Which.
        order: OrderId,
    },
    /// The sink refused an order.
    Refused {
        /// Which.
        order: OrderId,
        /// Why.
        reason: ReasonRefused,
    },
    /// The sink acknowledged `off`.
    OffAcknowledged,
    /// The link to the sink is gone.
    LinkLost,
    /// The sink has started anew: its queue, limits and counters are gone.
    SinkRebooted,
    /// The sink's clock is out of bounds against the host's.
    ClockOff {
        /// By how much.
        by: Span,
    },
    /// The sink on the link is not the one described: it is never driven.
    AnotherSink,
    /// The record cannot be written, or the disk runs out.
    RecordFailed,
    /// A person or a script asks for something.
    Command(Command),
    /// Time has passed: a deadline the sequencer had named.
    TimePassed,
}

/// What a person or a script can ask of a run.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Command {
    /// End the run: stopped.
    Stop,
    /// Off for now; time and charge go on being accounted. Before the first step and while the
    /// link is gone: nothing begins until `Continue`.
    Hold,
    /// Go on after a hold.
    Continue,
    /// In a run by hand: hold this current from now on, but no longer than the interval unless
    /// asked again. Nothing in any other run.
    Setpoint {
        /// The current, true.
        setpoint: Current,
        /// How long it holds without being asked for again.
        interval: Span,
    },
}

/// What the sequencer asks to be done.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Output {
    /// Record this order, then send it.
    Order {
        /// Its number in this run.
        id: OrderId,
        /// The order, nominal.
        order: Order,
    },
    /// Turn off now; record it right after.
    Off,
    /// Something worth recording and showing.
    Finding(Finding),
    /// The run has ended; nothing but `Off` comes after.
    Ended(Ending),
}

/// Something the sequencer found, worth recording and showing.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Finding {
    /// A step of the plan began.
    StepBegan {
        /// Its place in the plan.
        op: u32,
        /// When, by the sink's clock.
        time: SinkTime,
    },
    /// A step of the plan ended.
    StepEnded {
        /// Its place in the plan.
        op: u32,
        /// When, by the sink's clock.
        time: SinkTime,
        /// Why.
        by: StepEnd,
    },
    /// An interlock crossed; the first of these in an event names the trip.
    Crossed(Crossing),
    /// The run is held.
    Held,
    /// The run goes on after a hold or an interruption.
    Continued,
    /// Readbacks were lost: their detail is missing, their charge is not.
    ReadbacksLost {
        /// How many.
        count: u16,
    },
    /// The queue could not be kept filled in time (a link or a disk that stalled): the schedule
    /// from this step on is later by so much.
    Rescheduled {
        /// The step that begins later; its place in the plan.
        op: u32,
        /// By how much.
        by: Span,
    },
    /// The samples around a step's beginning were not captured.
    BurstMissed {
        /// The step; its place in the plan.
        op: u32,
    },
}

/// Why a step ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum StepEnd {
    /// Its duration was over.
    Duration,
    /// Its `until` at this index held.
    Until(u16),
    /// The source gave up, as the step had allowed.
    GaveUp,
    /// A loop around it ended.
    Loop,
    /// The run ended.
    Run,
}

/// An interlock that crossed, with the value and the threshold in the interlock's micro-unit.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Crossing {
    /// Which.
    pub interlock: Interlock,
    /// The value seen, true (calibrated), in the interlock's unit.
    pub value: i64,
    /// What it must not cross.
    pub threshold: i64,
    /// Whether the sink's own copy acted first.
    pub by_sink: bool,
}

/// Every interlock, in the table's order: the first that crosses names the trip.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Interlock {
    /// Heat sink too hot (m°C).
    OverTemperature,
    /// Too much power in the sink (uW).
    OverPower,
    /// Voltage too low (uV).
    Undervoltage,
    /// Voltage too high (uV).
    OverVoltage,
    /// Voltage below zero (uV).
    ReversedPolarity,
    /// Current too large (uA).
    OverCurrent,
    /// Readback short of the setpoint (uA short).
    NotFollowing,
    /// Readback above the setpoint (uA above): cut the circuit by hand.
    NotReleasing,
    /// Sensor open or shorted, reading frozen or impossible.
    SensorFault,
    /// No valid readback (us).
    Silence,
    /// More charge than allowed (uC).
    Charge,
    /// More energy than allowed (uJ).
    Energy,
    /// Longer than allowed (us).
    Time,
    /// The record cannot be written.
    Record,
    /// The sink's clock jumped or drifted (us), or the sink started anew.
    Clock,
    /// The sink refused an order or is not the one described, or the sequencer found itself
    /// wrong.
    Refusal,
}

impl Interlock {
    /// Every interlock, in the table's order.
    pub const ALL: [Self; 16] = [
        Self::OverTemperature,
        Self::OverPower,
        Self::Undervoltage,
        Self::OverVoltage,
        Self::ReversedPolarity,
        Self::OverCurrent,
        Self::NotFollowing,
        Self::NotReleasing,
        Self::SensorFault,
        Self::Silence,
        Self::Charge,
        Self::Energy,
        Self::Time,
        Self::Record,
        Self::Clock,
        Self::Refusal,
    ];

    /// Its place in the table, from 0.
    pub(crate) fn index(self) -> usize {
        self as usize
    }
}

/// How a run ended. Three kinds are kept apart everywhere; the fourth is a host that died.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Ending {
    /// The sequence came to its end.
    Finished,
    /// A person or a script stopped it.
    Stopped,
    /// An interlock tripped; latched until reset.
    Tripped(Interlock),
    /// The host or the link died and the plan says to end then.
    Interrupted,
}
