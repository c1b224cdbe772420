//! The plan: a checked sequence, compiled for one sink.
//!
//! A plan is a small program. The sequencer walks it with a cursor, and may walk ahead of what
//! is running, since every step has a duration: a fixed one, or its `at_most`. All values are
//! true (calibrated) values; [`Plan::correction`] is what turns them into nominal ones, in the
//! one place that does (crate `sink`).
//!
//! Invariants, checked when a plan is made or read back:
//! - every index points inside `ops`, every loop's begin and end match, loops nest;
//! - every step has a duration above zero, every loop either a number of times or a condition
//!   or an `at_most`;
//! - every interlock that can be judged from the host has a threshold.

mod estimate;
mod forecast;
mod foresight;
mod validate;

use quantity::{Charge, Current, Energy, Power, Resistance, Span, Temperature, Voltage};
use serde::{Deserialize, Serialize};
use sink::correction::Correction;

pub use forecast::{Band, Forecast, Outline, OutlinePoint};
pub use foresight::{Foresight, Peak};
pub use validate::PlanError;

/// A place in [`Plan::ops`].
pub type OpIndex = u32;

/// A checked sequence, compiled for one sink.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Plan {
    /// The sequence's title.
    pub title: String,
    /// The sink it was compiled for.
    pub sink: String,
    /// What is to be discharged or loaded.
    pub dut: Dut,
    /// The program.
    pub ops: Vec<Op>,
    /// The labels that steps refer to by index.
    pub labels: Vec<String>,
    /// What must stop the run.
    pub interlocks: Interlocks,
    /// How long the sink may hear nothing before it turns itself off.
    pub deadman: Span,
    /// Readback interval of steps that do not name their own.
    pub readback: Span,
    /// What to do with the run after the host or the link came back.
    pub on_interruption: OnInterruption,
    /// What the sink's converters can show at most; a reading there is impossible, not large.
    pub ranges: Ranges,
    /// The sink's sampling period: edges fall on it.
    pub tick: Span,
    /// Steps the sink's queue holds.
    pub queue: u16,
    /// The sink has an isolator relay, which must be closed before the first step.
    #[serde(default)]
    pub isolator: bool,
    /// The run is driven by hand: its one step is set anew by commands, and whoever gives them
    /// must go on doing so.
    #[serde(default, skip_serializing_if = "std::ops::Not::not")]
    pub by_hand: bool,
    /// Nominal from true values and back.
    pub correction: Correction,
}

/// The device under test, as its maker's data sheet has it.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Dut {
    /// What is written on it, such as `K-01`.
    pub label: String,
    /// What kind of thing it is.
    pub kind: DutKind,
    /// Rated capacity; needed where currents are written in It.
    pub rated_capacity: Option<Charge>,
    /// Least voltage the maker allows.
    pub voltage_min: Voltage,
    /// Largest voltage the maker allows.
    pub voltage_max: Voltage,
    /// Largest discharge current the maker allows.
    pub current_max: Current,
    /// Cells in series.
    pub series: u16,
    /// Strings in parallel.
    pub parallel: u16,
}

/// What kind of thing the device under test is.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum DutKind {
    /// One cell.
    Cell,
    /// Cells in series or parallel.
    Pack,
    /// A supply.
    Supply,
}

/// One instruction of a plan.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Op {
    /// Something the sink does for a while.
    Step(PlanStep),
    /// The head of a loop; its body follows.
    LoopBegin(LoopHead),
    /// The foot of the loop whose head is at `begin`.
    LoopEnd {
        /// Where the head is.
        begin: OpIndex,
    },
}

/// The head of a loop.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct LoopHead {
    /// How often the body runs at most; `None`: until a condition or `at_most`.
    pub times: Option<u64>,
    /// Conditions that end the loop at once, at any place in its body.
    pub until: Vec<Until>,
    /// Longest time the loop may take.
    pub at_most: Option<Span>,
    /// Where its foot is.
    pub end: OpIndex,
    /// Its label.
    pub label: Option<u32>,
    /// Where it stands in the sequence file (JSON pointer).
    pub pointer: String,
}

/// Something the sink does for a while.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct PlanStep {
    /// What is held.
    pub action: Action,
    /// How long: exactly, if `until` is empty; else at most.
    pub duration: Span,
    /// Conditions that end the step before that; the first to hold does.
    pub until: Vec<Until>,
    /// What to do when the duration is over.
    pub then: Next,
    /// Readback interval during the step; `None`: the plan's.
    pub readback: Option<Span>,
    /// The source is expected to give up: not following ends the step, and is no trip.
    pub may_give_up: bool,
    /// Samples to capture around the step's beginning.
    pub burst: Option<BurstRequest>,
    /// Its label, an index into [`Plan::labels`].
    pub label: Option<u32>,
    /// Where it stands in the sequence file (JSON pointer).
    pub pointer: String,
}

/// What a step holds.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Action {
    /// No current.
    Rest,
    /// A constant current, reached over `ramp` from where the step before left off.
    Current {
        /// The current.
        target: Current,
        /// Time to reach it; zero is an edge.
        ramp: Span,
    },
    /// A constant power.
    Power {
        /// The power.
        target: Power,
    },
    /// A constant resistance.
    Resistance {
        /// The resistance.
        target: Resistance,
    },
}

/// Samples to capture around a step's beginning.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct BurstRequest {
    /// Time before the edge.
    pub before: Span,
    /// Time after the edge.
    pub after: Span,
}

impl BurstRequest {
    /// Time that a capture's samples take on their way, for each sample: an 80-byte line of four
    /// at 115 200 baud is 7 ms, and other lines share the port.
    const SAMPLE: Span = Span::from_millis(4);

    /// Samples before the edge and from it on, at a sink's tick; held at what the wire can ask for.
    pub fn samples(&self, tick: Span) -> (u16, u16) {
        let tick = tick.micros().max(1);
        let samples = |span: Span| u16::try_from(span.micros() / tick).unwrap_or(u16::MAX);
        (samples(self.before), samples(self.after))
    }

    /// How long after the edge the sink has sent all of it and can be asked for the next.
    pub fn busy(&self, tick: Span) -> Span {
        let (before, after) = self.samples(tick);
        let count = u64::from(before) + u64::from(after);
        let sending = Span::from_micros(Self::SAMPLE.micros() * count);
        self.after.saturating_add(sending)
    }
}

/// A condition, how long it must hold, and what follows.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Until {
    /// What must hold.
    pub condition: Condition,
    /// For how long; zero: met by an extreme.
    pub persistence: Span,
    /// What follows.
    pub then: Next,
}

/// What can end a step or a loop. Charge and energy count from its beginning.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Condition {
    /// Voltage below.
    VoltageBelow(Voltage),
    /// Voltage above.
    VoltageAbove(Voltage),
    /// Current below (under a regulated step, or when the source gives up).
    CurrentBelow(Current),
    /// Current above.
    CurrentAbove(Current),
    /// Charge delivered since the step or loop began.
    Charge(Charge),
    /// Energy delivered since the step or loop began.
    Energy(Energy),
    /// Heat sink temperature above.
    TemperatureAbove(Temperature),
    /// Heat sink temperature below.
    TemperatureBelow(Temperature),
    /// Voltage has moved less than `change` over the last `window`.
    VoltageSettled {
        /// Largest change.
        change: Voltage,
        /// Over this time.
        window: Span,
    },
    /// Temperature has moved less than `change` over the last `window`.
    TemperatureSettled {
        /// Largest change.
        change: Temperature,
        /// Over this time.
        window: Span,
    },
}

impl Condition {
    /// The voltage whose falling below meets it; `None` if it watches something else.
    pub const fn cut_off(&self) -> Option<Voltage> {
        if let Self::VoltageBelow(voltage) = self {
            Some(*voltage)
        } else {
            None
        }
    }
}

/// What follows a step that has ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Next {
    /// The next instruction.
    GoOn,
    /// The instruction at this place (leaving the loops it is not in).
    SkipTo(OpIndex),
    /// The run has finished.
    End,
}

/// What to do with a run after the host or the link came back.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum OnInterruption {
    /// End the run as interrupted.
    #[default]
    End,
    /// Go on where the record stands, after checking temperature and voltage.
    Resume,
}

/// What the sink's converters can show at most, nominal.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Ranges {
    /// Current at full scale.
    pub current: Current,
    /// Voltage at full scale.
    pub voltage: Voltage,
}

/// A threshold and how long it must be crossed.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Armed<T> {
    /// The value that must not be crossed.
    pub threshold: T,
    /// For how long it must be crossed to trip; zero: at once.
    pub persistence: Span,
}

/// Every interlock, in the table's order; the first that crosses names the trip.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Interlocks {
    /// Hottest heat sink.
    pub over_temperature: Armed<Temperature>,
    /// Most power in the sink.
    pub over_power: Armed<Power>,
    /// Least voltage of the device under test.
    pub undervoltage: Armed<Voltage>,
    /// Largest voltage.
    pub over_voltage: Armed<Voltage>,
    /// Voltage below this (at or under zero) means reversed leads.
    pub reversed_polarity: Armed<Voltage>,
    /// Largest current.
    pub over_current: Armed<Current>,
    /// Largest shortfall of the readback against the setpoint.
    pub not_following: Armed<Current>,
    /// Largest excess of the readback over the setpoint.
    pub not_releasing: Armed<Current>,
    /// How long a sensor may be faulty, or a reading frozen or impossible.
    pub sensor_fault: Span,
    /// How long without a valid readback.
    pub silence: Span,
    /// Most charge of the whole run.
    pub charge: Option<Charge>,
    /// Most energy of the whole run.
    pub energy: Option<Energy>,
    /// Longest run.
    pub time: Option<Span>,
    /// Largest jump of the sink's clock against the host's.
    pub clock: Span,
}
