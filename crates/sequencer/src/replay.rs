//! Replaying a record: the same plan and the same events must give the same outputs.
//!
//! What is compared is every output, bit for bit and in its order among the events. The record
//! of a host that died in the middle of an event lacks the outputs that had not been recorded:
//! outputs left over at the very end are counted, not called a difference.

use std::collections::VecDeque;
use std::sync::Arc;

use sequence::plan::Plan;
use serde::{Deserialize, Serialize};

use crate::event::{Ending, Event, Output};
use crate::program::PlanError;
use crate::sequencer::Sequencer;

/// One entry of a record, as far as a replay needs it.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Recorded {
    /// What went into the sequencer.
    Event(Event),
    /// What came out of it.
    Output(Output),
}

/// What a replay without a difference has seen.
#[derive(Debug, Clone, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ReplaySummary {
    /// Events fed.
    pub events: u64,
    /// Outputs compared.
    pub outputs: u64,
    /// Outputs that the sequencer gave after the last one recorded.
    pub unrecorded: u64,
    /// How the run ended, if it did.
    pub ending: Option<Ending>,
}

/// Why a replay stopped.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum ReplayError {
    /// The plan itself cannot be run.
    #[error("the recorded plan cannot be run: {0}")]
    Plan(#[from] PlanError),
    /// The record and the sequencer differ.
    #[error(transparent)]
    Difference(#[from] Box<FirstDifference>),
}

/// The first place where the record and the sequencer differ.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error(
    "entry {entry} of the record differs: the sequencer gives {}, the record has {}",
    shown(expected.as_ref()),
    shown(found.as_ref())
)]
pub struct FirstDifference {
    /// The record's entry, counted from 1 over events and outputs.
    pub entry: u64,
    /// What the sequencer gives there; `None`: nothing more.
    pub expected: Option<Output>,
    /// What the record has there; `None`: an event, where an output was due.
    pub found: Option<Output>,
}

fn shown(output: Option<&Output>) -> String {
    output.map_or_else(|| "no output".to_owned(), |output| format!("{output:?}"))
}

/// Feeds the events to a fresh sequencer and compares every output.
///
/// # Errors
/// [`ReplayError::Plan`] if the plan cannot be run, [`ReplayError::Difference`] for the first
/// output that is not the recorded one.
pub fn replay(
    plan: impl Into<Arc<Plan>>,
    entries: impl IntoIterator<Item = Recorded>,
) -> Result<ReplaySummary, ReplayError> {
    let mut sequencer = Sequencer::new(plan)?;
    let mut due: VecDeque<Output> = VecDeque::new();
    let mut summary = ReplaySummary::default();
    for (entry, recorded) in (1_u64..).zip(entries) {
        match recorded {
            Recorded::Event(event) => {
                if let Some(expected) = due.pop_front() {
                    let difference = FirstDifference {
                        entry,
                        expected: Some(expected),
                        found: None,
                    };
                    return Err(Box::new(difference).into());
                }
                sequencer.handle(&event);
                due.extend(std::iter::from_fn(|| sequencer.poll_output()));
                summary.events += 1;
            }
            Recorded::Output(found) => {
                let expected = due.pop_front();
                if expected.as_ref() != Some(&found) {
                    let difference = FirstDifference {
                        entry,
                        expected,
                        found: Some(found),
                    };
                    return Err(Box::new(difference).into());
                }
                summary.outputs += 1;
            }
        }
    }
    summary.unrecorded = u64::try_from(due.len()).unwrap_or(u64::MAX);
    summary.ending = sequencer.ending().cloned();
    Ok(summary)
}
