//! The record's events once more through a fresh sequencer.
//!
//! Gives how near each interlock came, and whether this version decides as the record says.
//! After a first difference the events go on being fed, and the page says that the margins are
//! those of another course.

use std::collections::VecDeque;

use journal::Entry;
use sequence::plan::Plan;
use sequencer::event::Output;
use sequencer::{Margin, Sequencer};

/// A replay under way.
pub(crate) struct Replay {
    sequencer: Result<Box<Sequencer>, String>,
    due: VecDeque<Output>,
    outputs: u64,
    difference: Option<u64>,
}

/// What a replay gave.
#[derive(Debug)]
pub(crate) struct Replayed {
    /// How near each judged interlock came, in the table's order; or why that is unknown.
    pub(crate) margins: Result<Vec<Margin>, String>,
    /// Outputs that were compared and are the recorded ones.
    pub(crate) outputs: u64,
    /// The first entry at which the sequencer gave something else.
    pub(crate) difference: Option<u64>,
}

impl Replay {
    pub(super) fn new(plan: &Plan) -> Self {
        Self {
            sequencer: Sequencer::new(plan.clone())
                .map(Box::new)
                .map_err(|error| error.to_string()),
            due: VecDeque::new(),
            outputs: 0,
            difference: None,
        }
    }

    pub(super) fn take(&mut self, entry: &Entry) {
        let Ok(sequencer) = &mut self.sequencer else {
            return;
        };
        if let Some(event) = entry.event() {
            if !self.due.is_empty() {
                self.difference.get_or_insert(entry.number);
                self.due.clear();
            }
            sequencer.handle(&event);
            self.due
                .extend(std::iter::from_fn(|| sequencer.poll_output()));
        } else if let Some(found) = entry.output() {
            if self.due.pop_front().as_ref() == Some(&found) {
                self.outputs += 1;
            } else {
                self.difference.get_or_insert(entry.number);
            }
        }
    }

    pub(super) fn finish(self) -> Replayed {
        Replayed {
            margins: self
                .sequencer
                .map(|sequencer| sequencer.margins().collect()),
            outputs: self.outputs,
            difference: self.difference,
        }
    }
}
