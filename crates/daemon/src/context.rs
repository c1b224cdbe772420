//! What all parts of a daemon share.

use std::sync::{Mutex, PoisonError};
use std::thread::JoinHandle;

use crate::events::EventLog;
use crate::metrics::Metrics;
use crate::notify::Notifier;
use crate::runs::EndedRuns;
use crate::view::{EventBody, RunEvent, RunNews};

/// What all parts of a daemon share.
#[derive(Debug)]
pub(crate) struct Context {
    /// The event log.
    pub(crate) events: EventLog,
    /// Runs that have ended.
    pub(crate) ended: EndedRuns,
    /// The metrics.
    pub(crate) metrics: Metrics,
    /// The way to a person.
    pub(crate) notifier: Notifier,
    finishing: Mutex<Vec<JoinHandle<()>>>,
}

impl Context {
    /// With nothing in it, at so many seconds after 1970.
    pub(crate) fn new(started_s: u64, notifier: Notifier) -> Self {
        Self {
            events: EventLog::new(started_s),
            ended: EndedRuns::default(),
            metrics: Metrics::new(),
            notifier,
            finishing: Mutex::default(),
        }
    }

    /// Tells everyone of an event of a run; a person too, where it ends one or calls for one.
    pub(crate) fn tell(&self, event: RunEvent) {
        let is_ending = matches!(event.news, RunNews::Ended(_));
        if event.calls_for_person || is_ending {
            self.notifier.tell(&event);
        }
        tracing::info!(run = %event.run, sink = event.sink, "{}", event.message);
        self.events.push(&EventBody::Run(Box::new(event)));
    }

    /// Keeps the thread that completes a record.
    pub(crate) fn finishing(&self, thread: JoinHandle<()>) {
        let mut threads = self.threads();
        threads.retain(|thread| !thread.is_finished());
        threads.push(thread);
    }

    /// Whether records are still being completed.
    pub(crate) fn is_finishing(&self) -> bool {
        self.threads().iter().any(|thread| !thread.is_finished())
    }

    fn threads(&self) -> std::sync::MutexGuard<'_, Vec<JoinHandle<()>>> {
        self.finishing
            .lock()
            .unwrap_or_else(PoisonError::into_inner)
    }
}
