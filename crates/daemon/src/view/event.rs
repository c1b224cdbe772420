//! Events of the event stream.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;
use uuid::Uuid;

use super::{CrossingView, EndingView, LinkState, SinkView};

/// One event, as the stream's `id`, `event` and `data` fields have it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Event {
    /// Its number; ascending, not without gaps.
    pub id: u64,
    /// What happened.
    pub body: EventBody,
}

/// What happened, by the name of the event.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(tag = "event", content = "data", rename_all = "snake_case")]
pub enum EventBody {
    /// A sink's state and latest readback; at most some five a second for each sink.
    Sink(Box<SinkView>),
    /// Something about a run.
    Run(Box<RunEvent>),
    /// Something about a link.
    Link(LinkEvent),
    /// Events after the one asked for are no longer held.
    Gone(GoneEvent),
}

impl EventBody {
    /// The name in the stream's `event` field.
    pub const fn name(&self) -> &'static str {
        match self {
            Self::Sink(_) => "sink",
            Self::Run(_) => "run",
            Self::Link(_) => "link",
            Self::Gone(_) => "gone",
        }
    }
}

/// Something about a run.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct RunEvent {
    /// The run.
    #[schema(value_type = String, format = "uuid")]
    pub run: Uuid,
    /// Its sink.
    pub sink: String,
    /// Its device under test.
    pub dut: String,
    /// When (RFC 3339, on the link's clock).
    pub at: String,
    /// What, for people.
    pub message: String,
    /// Whether someone should go and look now.
    pub calls_for_person: bool,
    /// What.
    pub news: RunNews,
}

/// What is new about a run.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum RunNews {
    /// It has begun.
    Began,
    /// It was taken up again after the host had died.
    Resumed,
    /// A step began. Where steps follow each other fast, some are left out; the record has all.
    Step {
        /// Its place in the plan.
        op: u32,
        /// Its label.
        label: Option<String>,
    },
    /// An interlock crossed.
    Crossed(CrossingView),
    /// It is held.
    Held,
    /// It goes on.
    Continued,
    /// Something else that stands on the record.
    Finding,
    /// It has ended.
    Ended(EndingView),
    /// Its record is complete: sealed, or the message says why not.
    Recorded {
        /// Whether it is under its seal.
        sealed: bool,
        /// The record's hash.
        hash: Option<String>,
    },
}

/// Something about a link.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub struct LinkEvent {
    /// The sink.
    pub sink: String,
    /// When (RFC 3339, on the link's clock).
    pub at: String,
    /// How it stands.
    pub state: LinkState,
    /// Why, where it is lost or refused.
    pub reason: Option<String>,
}

/// Events that were asked for are no longer held.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub struct GoneEvent {
    /// The last event the client had.
    pub after: u64,
    /// The oldest from which on nothing is missing.
    pub oldest: u64,
}
