//! The runs that have ended since the daemon started.
//!
//! Runs in progress are in their sinks' views; when one ends, its last view comes here. Bounded:
//! the oldest leave first. The records on disk are the truth about any of them.

use std::collections::VecDeque;
use std::sync::{Mutex, MutexGuard, PoisonError};

use uuid::Uuid;

use crate::view::RunView;

/// Ended runs that are remembered.
const ENDED_MAX: usize = 500;

/// The runs that have ended since the daemon started.
#[derive(Debug, Default)]
pub(crate) struct EndedRuns {
    /// The latest first.
    runs: Mutex<VecDeque<RunView>>,
}

impl EndedRuns {
    fn lock(&self) -> MutexGuard<'_, VecDeque<RunView>> {
        self.runs.lock().unwrap_or_else(PoisonError::into_inner)
    }

    /// Takes the last view of a run.
    pub(crate) fn push(&self, run: RunView) {
        let mut runs = self.lock();
        runs.truncate(ENDED_MAX - 1);
        runs.push_front(run);
    }

    /// Notes that a run's record is under its seal.
    pub(crate) fn sealed(&self, id: Uuid) {
        let mut runs = self.lock();
        if let Some(run) = runs.iter_mut().find(|run| run.id == id) {
            run.sealed = true;
        }
    }

    /// The run of an id.
    pub(crate) fn get(&self, id: Uuid) -> Option<RunView> {
        self.lock().iter().find(|run| run.id == id).cloned()
    }

    /// All, the latest first.
    pub(crate) fn all(&self) -> Vec<RunView> {
        self.lock().iter().cloned().collect()
    }
}
