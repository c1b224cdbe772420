//! A run as it is shown.

use sequencer::event::{Crossing, Ending, Interlock};
use serde::{Deserialize, Serialize};
use utoipa::ToSchema;
use uuid::Uuid;

use super::margin::{scaled, unit_of};
use super::{MarginView, ReadingView};

/// Where a run stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum RunState {
    /// The sink is being set up.
    Starting,
    /// A step is in progress.
    Running,
    /// Off until continued.
    Held,
    /// The link is gone, or the sink has started anew.
    Interrupted,
    /// It has ended; the sink's word that it is off and the last counters are awaited.
    Ending,
    /// Over.
    Ended,
}

/// In which of the ways a run ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum EndingWord {
    /// The sequence came to its end.
    Finished,
    /// A person or a script stopped it.
    Stopped,
    /// An interlock tripped.
    Tripped,
    /// The host or the link died.
    Interrupted,
}

impl EndingWord {
    /// The word of an ending.
    pub fn of(ending: &Ending) -> Self {
        match ending {
            Ending::Finished => Self::Finished,
            Ending::Stopped => Self::Stopped,
            Ending::Tripped(_) => Self::Tripped,
            Ending::Interrupted => Self::Interrupted,
        }
    }

    /// The word as it stands in JSON.
    pub const fn text(self) -> &'static str {
        match self {
            Self::Finished => "finished",
            Self::Stopped => "stopped",
            Self::Tripped => "tripped",
            Self::Interrupted => "interrupted",
        }
    }
}

/// Whose time a run is on.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum ClockWord {
    /// A real sink's.
    Real,
    /// A simulated sink's, which may run faster than the calendar.
    TimeLapse,
    /// A simulated sink's, as fast as it can.
    Virtual,
}

impl From<journal::ClockKind> for ClockWord {
    fn from(kind: journal::ClockKind) -> Self {
        match kind {
            journal::ClockKind::Real => Self::Real,
            journal::ClockKind::TimeLapse => Self::TimeLapse,
            journal::ClockKind::Virtual => Self::Virtual,
        }
    }
}

/// An interlock that crossed.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct CrossingView {
    /// Which interlock.
    #[schema(value_type = String)]
    pub interlock: Interlock,
    /// The unit of both values.
    pub unit: String,
    /// The value seen.
    pub value: f64,
    /// What it must not cross.
    pub threshold: f64,
    /// Whether the sink's own copy acted first.
    pub by_sink: bool,
}

impl CrossingView {
    /// A crossing with its unit.
    pub fn new(crossing: &Crossing) -> Self {
        let (unit, per_unit) = unit_of(crossing.interlock);
        Self {
            interlock: crossing.interlock,
            unit: unit.to_owned(),
            value: scaled(crossing.value, per_unit),
            threshold: scaled(crossing.threshold, per_unit),
            by_sink: crossing.by_sink,
        }
    }
}

/// How a run ended.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct EndingView {
    /// In which of the ways.
    pub how: EndingWord,
    /// The interlock that tripped, if one did.
    #[schema(value_type = Option<String>)]
    pub interlock: Option<Interlock>,
    /// When (RFC 3339).
    pub at: String,
    /// What a person should know, in a sentence.
    pub reason: Option<String>,
}

/// The step that is in progress.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct StepView {
    /// Its place in the plan.
    pub op: u32,
    /// Its label.
    pub label: Option<String>,
    /// When it began, by the sink's clock.
    pub since_s: f64,
    /// Charge since it began.
    pub charge_ah: Option<f64>,
}

/// A repeat that is in progress.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub struct LoopView {
    /// Its label.
    pub label: Option<String>,
    /// The round, from 1.
    pub round: u64,
    /// How many rounds at most; absent: until a condition.
    pub times: Option<u64>,
}

/// What is set by hand.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct HandView {
    /// The current that was asked for last.
    pub setpoint_a: f64,
    /// How long it holds unless it is asked for again.
    pub interval_s: f64,
}

/// A run.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct RunView {
    /// Its identity, and that of its record.
    #[schema(value_type = String, format = "uuid")]
    pub id: Uuid,
    /// The sink's name.
    pub sink: String,
    /// What is written on the device under test.
    pub dut: String,
    /// The sequence's title.
    pub title: String,
    /// Where it stands.
    pub state: RunState,
    /// Whose time it is on.
    pub clock: ClockWord,
    /// When it was started (RFC 3339).
    pub started: String,
    /// Time under way, holds included, interruptions not.
    pub elapsed_s: f64,
    /// How long the whole run will probably take.
    pub expected_s: f64,
    /// Time until the end at most; absent if nothing bounds it.
    pub left_at_most_s: Option<f64>,
    /// The step in progress.
    pub step: Option<StepView>,
    /// The repeats around it, the outermost first.
    pub repeats: Vec<LoopView>,
    /// The current asked for now.
    pub setpoint_a: Option<f64>,
    /// Charge delivered.
    pub charge_ah: f64,
    /// Energy delivered.
    pub energy_wh: f64,
    /// The latest readback.
    pub reading: Option<ReadingView>,
    /// How near each interlock is, the nearest first.
    pub margins: Vec<MarginView>,
    /// Interlocks that crossed.
    pub crossings: Vec<CrossingView>,
    /// What is set by hand, if it is a run by hand.
    #[serde(default)]
    pub by_hand: Option<HandView>,
    /// How it ended, if it has.
    pub ending: Option<EndingView>,
    /// The record's folder in the records folder.
    pub record: String,
    /// Whether the record is complete and under its seal.
    pub sealed: bool,
}

/// Runs.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct RunList {
    /// Those in progress, then those that have ended, the latest first.
    pub runs: Vec<RunView>,
}
